"""The breaking point against brute force over all ways of being wrong, and its behaviour."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyse.breaking_point import Judge, breaking_point
from analyse.count_chance import SimulatedTest, judged_among, simulated_chi2, simulated_p
from analyse.extremes import (
    bound_after_removals,
    greatest_after_both,
    greatest_after_removals,
    least_after_additions,
    least_after_removals,
)
from analyse.verdict import decide

MOST_ADDED, MOST_EITHER = 7, 4  # how far brute force goes


def judged(counts: np.ndarray, areas: np.ndarray, seed: int = 1) -> tuple[SimulatedTest, str]:
    test = simulated_p(counts, areas, simulations=199, rng=np.random.default_rng(seed))
    return test, decide(int(counts.sum()), counts.size, test)


def shared(points: int, quadrats: int) -> np.ndarray:
    """All ways to share points among quadrats, one a row."""
    bars = itertools.combinations(range(points + quadrats - 1), quadrats - 1)
    at = np.array(list(bars), dtype=np.int64).reshape(-1, quadrats - 1)
    edges = np.column_stack([np.full(len(at), -1), at, np.full(len(at), points + quadrats - 1)])
    return np.diff(edges, axis=1) - 1


def verdicts(ways: np.ndarray, areas: np.ndarray, judge: Judge) -> np.ndarray:
    """The sign of the verdict on each row of counts; 9 for too few. X2 by its plain definition."""
    n = ways.sum(axis=1)
    expected = np.maximum(n, 1)[:, None] * areas / areas.sum()
    chi2 = ((ways - expected) ** 2 / expected).sum(axis=1)
    return np.where(n < 10, 9, judge.signs(chi2, np.maximum(n, 1)))


def brute(
    counts: np.ndarray, areas: np.ndarray, judge: Judge
) -> tuple[int | None, int | None, int | None]:
    """Fewest false, missed and both, by trying all; None beyond what is tried."""
    here = int(verdicts(counts[None], areas, judge)[0])
    kept = np.array(list(itertools.product(*(range(c + 1) for c in counts))))
    other = verdicts(kept, areas, judge) != here
    false = int((counts - kept).sum(axis=1)[other].min()) if other.any() else None
    missed = either = None
    for j in range(1, MOST_ADDED + 1):
        if (verdicts(counts + shared(j, counts.size), areas, judge) != here).any():
            missed = j
            break
    for e in range(1, MOST_EITHER + 1):
        for k in range(e + 1):
            gone = kept[(counts - kept).sum(axis=1) == k]
            ways = (gone[:, None] + shared(e - k, counts.size)[None]).reshape(-1, counts.size)
            if (verdicts(ways, areas, judge) != here).any():
                either = e
                break
        if either is not None:
            break
    return false, missed, either


def check(counts: np.ndarray, areas: np.ndarray, seed: int = 1) -> None:
    test, verdict = judged(counts, areas, seed)
    judge = Judge.of(counts, areas, test)
    assert judge.verdict(counts, areas) == verdict
    point = breaking_point(counts, areas, test, verdict=verdict)
    false, missed, either = brute(counts, areas, judge)
    assert point.exact
    assert point.false == false
    assert point.missed == missed or (missed is None and point.missed > MOST_ADDED)
    assert point.either == either or (either is None and point.either > MOST_EITHER)


def partitions(n: int, parts: int, most: int) -> list[list[int]]:
    if parts == 0:
        return [[]] if n == 0 else []
    return [
        [first, *rest]
        for first in range(min(n, most), -1, -1)
        for rest in partitions(n - first, parts - 1, first)
    ]


@pytest.mark.parametrize("n", [10, 12, 14])
def test_is_what_brute_force_finds_for_all_counts_in_six_equal_quadrats(n):
    for counts in partitions(n, 6, n):
        check(np.array(counts), np.ones(6))


@settings(max_examples=40, deadline=None)
@given(st.data())
def test_is_what_brute_force_finds_in_quadrats_of_any_areas(data):
    q = data.draw(st.integers(6, 9))
    n = data.draw(st.integers(10, 14))
    where = data.draw(st.lists(st.integers(0, q - 1), min_size=n, max_size=n))
    areas = np.array(data.draw(st.lists(st.floats(0.2, 1.0), min_size=q, max_size=q)))
    check(np.bincount(where, minlength=q), areas, data.draw(st.integers(0, 5)))


@settings(max_examples=60, deadline=None)
@given(st.data())
def test_extremes_are_those_of_all_ways(data):
    q = data.draw(st.integers(2, 4))
    counts = np.array(data.draw(st.lists(st.integers(0, 4), min_size=q, max_size=q)))
    spare = np.array([data.draw(st.integers(0, int(c))) for c in counts])
    weights = np.array(data.draw(st.lists(st.floats(1.0, 9.0), min_size=q, max_size=q)))
    kept = np.array(
        list(itertools.product(*(range(c - s, c + 1) for c, s in zip(counts, spare, strict=True))))
    )
    gone, value = (counts - kept).sum(axis=1), (kept * kept) @ weights
    most = int(spare.sum())
    least = least_after_removals(counts, weights, spare, most)
    greatest = greatest_after_removals(counts, weights, spare, most)
    bound = bound_after_removals(counts, weights, spare, most)
    both = greatest_after_both(counts, weights, spare, 3)
    for k in range(most + 1):
        assert least[k] == pytest.approx(value[gone == k].min())
        assert greatest[k] == pytest.approx(value[gone == k].max())
        assert bound[k] >= greatest[k] - 1e-9
    more = least_after_additions(counts, weights, 4)
    for j in range(5):
        ways = counts + shared(j, q)
        assert more[j] == pytest.approx(((ways * ways) @ weights).min())
    for k, j in itertools.product(range(min(most, 3) + 1), range(4)):
        apart = [
            float((y * y) @ weights)
            for row in kept[gone == k]
            for y in row + shared(j, q)
            if not ((row < counts) & (y > row)).any()
        ]
        assert both[k, j] == pytest.approx(max(apart, default=-np.inf))


def test_a_verdict_on_few_spots_or_quadrats():
    counts = np.array([3, 0, 1, 0, 2, 0])
    test, verdict = judged(counts, np.ones(6))
    point = breaking_point(counts, np.ones(6), test, verdict=verdict)
    assert (point.false, point.missed, point.either) == (None, 4, 4)
    assert point.sentence == "The verdict would change if 4 more objects had been missed."
    counts = np.array([30, 0, 1, 9])
    test, verdict = judged(counts, np.ones(4))
    point = breaking_point(counts, np.ones(4), test, verdict=verdict)
    assert point.sentence == (
        "No number of wrong spots would change the verdict: there are too few quadrats."
    )


def test_leaving_too_few_counts_as_a_change_and_is_said():
    counts = np.array([11, 0, 0, 0, 0, 0, 0, 0])
    test, verdict = judged(counts, np.ones(8))
    point = breaking_point(counts, np.ones(8), test, verdict=verdict)
    assert verdict == "clumped"
    assert (point.false, point.too_few) == (2, True)
    assert "2 of the 11 spots were wrong, in the worst case (fewer than 10 would be left)" in (
        point.sentence
    )


@settings(max_examples=60, deadline=None)
@given(st.data())
def test_moving_a_point_to_a_fuller_quadrat_never_makes_a_clumped_verdict_weaker(data):
    """Such a move makes any pattern more clumped (majorisation), with the same total."""
    q = data.draw(st.integers(6, 12))
    counts = np.array(data.draw(st.lists(st.integers(0, 9), min_size=q, max_size=q)))
    if counts.sum() < 12:
        counts[0] += 12
    before = breaking(counts)
    fuller, emptier = np.argmax(counts), np.argmin(np.where(counts > 0, counts, 99))
    if fuller == emptier or before.verdict != "clumped":
        return
    moved = counts.copy()
    moved[fuller] += 1
    moved[emptier] -= 1
    after = breaking(moved)
    assert after.verdict == "clumped"
    for kind in ("false", "missed", "either"):
        assert getattr(after, kind) >= getattr(before, kind)


def breaking(counts: np.ndarray):
    test, verdict = judged(counts, np.ones(counts.size))
    return breaking_point(counts, np.ones(counts.size), test, verdict=verdict)


def test_grows_with_the_strength_of_a_pattern_on_either_side():
    even, clumps = np.full(30, 4), np.array([16, 0, 0, 0, 4] * 6)
    weaker = breaking(np.tile([6, 5, 4, 3, 2], 6))
    assert weaker.verdict in ("evenly spaced", "no departure from random found")
    strength = [
        breaking(np.where(np.arange(30) < k, even, np.tile([6, 2], 15))) for k in (22, 26, 30)
    ]
    assert [point.verdict for point in strength] == ["evenly spaced"] * 3
    assert strength[0].false <= strength[1].false <= strength[2].false
    assert strength[0].missed <= strength[1].missed <= strength[2].missed
    mixed = [breaking(np.where(np.arange(30) < k, clumps, even)) for k in (10, 20, 30)]
    assert [point.verdict for point in mixed] == ["clumped"] * 3
    assert mixed[0].false < mixed[1].false < mixed[2].false


def test_critical_values_moved_to_other_totals_keep_the_level():
    """Against fresh simulations at the other total; 5 % may be off by what 999 simulations leave."""
    areas = np.concatenate([np.ones(30), np.full(10, 0.45)])
    rng = np.random.default_rng(3)
    chi2 = np.concatenate([*simulated_chi2(120, areas, 9999, rng)])
    test = judged_among(60.0, chi2)
    judge = Judge(120, 40, test.low, test.high, float((areas.sum() / areas).sum()))
    for total in (70, 100, 160, 240):
        fresh = np.concatenate([*simulated_chi2(total, areas, 9999, rng)])
        signs = judge.signs(fresh, total)
        assert np.mean(signs == 1) == pytest.approx(0.025, abs=0.006)
        assert np.mean(signs == -1) == pytest.approx(0.025, abs=0.006)
        assert judge.spread(total) == pytest.approx(fresh.std(), rel=0.03)


def test_many_spots_are_done_in_one_sorting_where_exactness_would_take_too_long():
    rng = np.random.default_rng(5)
    counts = 2 + (rng.random(5_000) < 0.3)
    test = simulated_p(counts, np.ones(5_000), simulations=99, rng=rng)
    point = breaking_point(counts, np.ones(5_000), test, verdict="evenly spaced")
    assert point.exact is False
    assert "at least" in point.sentence
    assert repr(point).startswith("<BreakingPoint of")
