"""Distance to regularity: small cases by hand, its two forms against each other, its index."""

from __future__ import annotations

import csv
import math
from itertools import permutations
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linear_sum_assignment
from typer.testing import CliRunner

from analyse.cli import app
from analyse.regularity import distance_to_regularity, regularity
from tests.analyse import published


def by_assignment(grid: list[list[int]]) -> float:
    """Every point assigned to its own seat, the seats as many in each quadrat (whole means only)."""
    x = np.array(grid)
    places = np.array([(r, c) for r in range(x.shape[0]) for c in range(x.shape[1])])
    points = np.repeat(places, x.ravel(), axis=0)
    seats = np.repeat(places, int(x.mean()), axis=0)
    apart = np.hypot(*(points[:, None] - seats[None]).transpose(2, 0, 1))
    return float(apart[linear_sum_assignment(apart)].sum())


@pytest.mark.parametrize(
    ("counts", "distance"),
    [
        ([4, 0, 0, 0], 6.0),
        ([0, 4, 0, 0], 4.0),
        ([[4, 0], [0, 0]], 2 + math.sqrt(2)),
        ([[2, 2], [0, 0]], 2.0),
        ([[3, 3], [3, 3]], 0.0),
        ([1, 0], 0.5),
    ],
)
def test_small_cases_by_hand(counts: object, distance: float) -> None:
    """Analytic: each point to the nearest quadrat that lacks one."""
    assert distance_to_regularity(np.array(counts)) == pytest.approx(distance, rel=1e-12)


def test_index_over_all_arrangements() -> None:
    """Of 4 in one of four quadrats in a line the mean is 5; in 2 x 2 all arrangements are equal."""
    rng = np.random.default_rng(1)
    for counts, expected, index in (
        ([4, 0, 0, 0], 5.0, 1.2),
        ([0, 4, 0, 0], 5.0, 0.8),
        ([[4, 0], [0, 0]], 2 + math.sqrt(2), 1.0),
    ):
        found = regularity(np.array(counts), rng=rng, simulations=99)
        assert (found.expected, found.index) == pytest.approx((expected, index), rel=1e-9)
        assert found.arrangements == 24
    assert regularity([4, 0, 0, 0], rng=rng, simulations=99).p == 0.5
    assert repr(found) == "<Regularity: distance 3.414, index 1, p = 1>"


@settings(deadline=None, max_examples=25)
@given(st.lists(st.integers(0, 4), min_size=6, max_size=6))
def test_transport_is_the_best_assignment(x: list[int]) -> None:
    spare = -sum(x) % 6
    grid = np.array([*x[:5], x[5] + spare]).reshape(2, 3).tolist()
    assert distance_to_regularity(grid) == pytest.approx(by_assignment(grid), abs=1e-9)


@settings(deadline=None, max_examples=25)
@given(st.lists(st.integers(0, 9), min_size=2, max_size=8))
def test_a_line_and_a_grid_of_two_equal_lines(x: list[int]) -> None:
    """Two equal lines side by side have nothing to give each other."""
    assert distance_to_regularity([x, x]) == pytest.approx(2 * distance_to_regularity(x), abs=1e-9)
    assert distance_to_regularity(x[::-1]) == pytest.approx(distance_to_regularity(x), abs=1e-9)


def test_random_arrangements_against_all() -> None:
    x = [6, 1, 0, 3, 3, 5, 0, 2]
    every = np.array([distance_to_regularity(order) for order in set(permutations(x))])
    found = regularity(x, rng=np.random.default_rng(2), simulations=4999)
    assert found.expected == pytest.approx(every.mean(), rel=0.02)
    assert found.p == pytest.approx((every >= found.distance - 1e-9).mean(), abs=0.03)


def test_large_grids() -> None:
    found = regularity(published.student_grid(), rng=np.random.default_rng(1), simulations=99)
    assert found.arrangements == 0
    assert math.isnan(found.index)
    assert found.distance > 100
    with pytest.raises(ValueError, match="a grid of 441 quadrats is above 400"):
        distance_to_regularity(np.ones((21, 21), dtype=int))


def test_through_the_command_line(tmp_path: Path) -> None:
    (tmp_path / "bed.csv").write_text("4,0,0,0\n", encoding="utf-8")
    asked = ["analyse", "--counts", str(tmp_path / "bed.csv"), "--out", str(tmp_path / "out")]
    assert CliRunner().invoke(app, asked).exit_code == 0
    text = (tmp_path / "out" / "tests.csv").read_text(encoding="utf-8")
    rows = {row["statistic"]: row for row in csv.DictReader(text.splitlines())}
    assert float(rows["distance_to_regularity"]["value"]) == 6.0
    assert float(rows["regularity_index"]["value"]) == pytest.approx(1.2)
