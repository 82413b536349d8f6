"""Choosing among overlapping candidates, against its plain definition."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from detect.choice import choose
from detect.regions import Candidates


def ellipses(n: int, seed: int, *, frame: float = 120.0) -> tuple[Candidates, np.ndarray]:
    """Random ellipses and a doubt for each, some doubts equal."""
    rng = np.random.default_rng(seed)
    long = rng.uniform(3, 25, n)
    short = long * rng.uniform(0.3, 1.0, n)
    turn = rng.uniform(0, np.pi, n)
    c, s = np.cos(turn), np.sin(turn)
    sxx = (long**2 * c**2 + short**2 * s**2) / 4
    syy = (long**2 * s**2 + short**2 * c**2) / 4
    sxy = (long**2 - short**2) * c * s / 4
    rest = [np.ones(n)] * 10
    x, y = rng.uniform(0, frame, (2, n))
    found = Candidates(x, y, np.pi * long * short, sxx, syy, sxy, *rest)
    return found, np.round(rng.uniform(0, 1, n), 2)


def inside_other(found: Candidates, i: int, j: int) -> bool:
    """Whether the centre of one is well inside the other's ellipse (0.8 of the square there)."""
    d = np.array([found.x[i] - found.x[j], found.y[i] - found.y[j]])
    for k in (i, j):
        moments = np.array([[found.sxx[k], found.sxy[k]], [found.sxy[k], found.syy[k]]])
        if d @ np.linalg.solve(moments, d) / 4 < 0.8:
            return True
    return False


def plainly(found: Candidates, doubt: np.ndarray, highest: float) -> list[int]:
    """Least doubtful first, each kept unless it and a kept one lie inside one another."""
    kept: list[int] = []
    for i in sorted(range(len(found)), key=lambda k: (doubt[k], k)):
        if doubt[i] <= highest and not any(inside_other(found, i, j) for j in kept):
            kept.append(i)
    return kept


@settings(deadline=None, max_examples=60, derandomize=True)
@given(st.integers(0, 40), st.integers(0, 2**32 - 1), st.floats(0.05, 1.0))
def test_the_choice_is_the_plain_definition(n: int, seed: int, highest: float) -> None:
    found, doubt = ellipses(n, seed)
    assert choose(found, doubt, highest_doubt=highest).tolist() == plainly(found, doubt, highest)


@settings(deadline=None, max_examples=30, derandomize=True)
@given(st.integers(0, 2**32 - 1))
def test_no_two_kept_lie_inside_one_another(seed: int) -> None:
    found, doubt = ellipses(60, seed, frame=80.0)
    rows = choose(found, doubt, highest_doubt=0.9)
    assert not any(inside_other(found, i, j) for k, i in enumerate(rows) for j in rows[:k])
    assert (np.diff(doubt[rows]) >= 0).all()


def test_the_limit_itself_is_kept() -> None:
    found, _ = ellipses(1, 1)
    assert choose(found, np.array([0.4]), highest_doubt=0.4).tolist() == [0]
    assert choose(found, np.array([0.41]), highest_doubt=0.4).tolist() == []
