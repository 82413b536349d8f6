"""Dispersion against the side of quadrats: equal to the slow way, and true to units and places."""

from __future__ import annotations

import math

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry.base import BaseGeometry

from analyse.dispersion import clipped_dispersion
from analyse.errors import GridWrong
from analyse.grid_options import GridOptions
from analyse.nulls import random_points
from analyse.quadrats import count_in_quadrats, lay_grid
from analyse.scales import FEWEST_QUADRATS, FINE, Sides
from detect.lengths import Length
from tests.analyse.areas import AREAS, RAGGED


@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
@pytest.mark.parametrize("n", [10, 60, 700])
def test_all_sides_at_once_equal_one_grid_after_the_other(area: BaseGeometry, n: int) -> None:
    sides, rng = Sides.of(area, n), np.random.default_rng(n)
    points = random_points(area, n, rng)
    points[: n // 2] = np.round(points[: n // 2] / 10) * 10  # on edges of cells, and tied
    points = points[shapely.intersects_xy(area, points[:, 0], points[:, 1])]
    together = sides.counts(points), sides.vmr(points)
    for k, side in enumerate(sides.x):
        grid = lay_grid(area, n, GridOptions(side=Length(float(side), "mm")))
        counts = count_in_quadrats(points, grid)
        assert together[0][k].tolist() == counts.tolist()
        assert together[1][k] == pytest.approx(clipped_dispersion(counts, grid.area).vmr, rel=1e-9)
        assert sides.quadrats[k] == len(grid) >= FEWEST_QUADRATS


@given(st.integers(1, 400), st.integers(0, 2**32), st.sampled_from(sorted(AREAS)))
@settings(max_examples=25, deadline=None)
def test_any_points_are_counted_as_in_one_grid(n: int, seed: int, name: str) -> None:
    points = random_points(AREAS[name], n, np.random.default_rng(seed))
    sides = Sides.of(AREAS[name], 100)
    k = seed % len(sides)
    grid = lay_grid(AREAS[name], 9, GridOptions(side=Length(float(sides.x[k]), "mm")))
    assert sides.counts(points)[k].tolist() == count_in_quadrats(points, grid).tolist()


def test_a_point_of_the_very_edge_is_lost_at_no_side() -> None:
    """The lowest corner of a tilted square lies in cells that hold none of it."""
    area = shapely.Polygon([(0, 0), (50, 50.01), (0, 100), (-50, 50.01)])
    sides = Sides.of(area, 40)
    corners = [*area.exterior.coords[:-1], (0, 50)]
    assert all(counts.sum() == 5 for counts in sides.counts(corners))
    assert np.isfinite(sides.vmr(corners)).all()


def test_pieces_of_many_points_add_up(monkeypatch: pytest.MonkeyPatch) -> None:
    points = random_points(RAGGED, 900, np.random.default_rng(3))
    sides = Sides.of(RAGGED, 900)
    whole = sides.vmr(points).tolist()
    monkeypatch.setattr("analyse.scales._INDICES_AT_ONCE", 1000)
    assert sides.vmr(points).tolist() == whole


@pytest.mark.parametrize("n", [10, 20, 100, 1000, 20_000])
def test_the_rule_for_the_sides(n: int) -> None:
    """From half a point a quadrat to six quadrats, round, of area and number alone."""
    sides = Sides.of(AREAS["square"], n)
    assert (np.diff(sides.x) > 0).all()
    assert 4 <= len(sides) <= FINE
    assert sides.x[0] >= math.sqrt(10_000 / (2 * n)) * (1 - 1e-9)
    assert sides.x[0] <= 1.3 * math.sqrt(10_000 / (2 * n))
    assert 28 < sides.x[-1] <= math.sqrt(10_000 / 6)
    assert all(float(f"{side:.3g}") == side for side in sides.x)


@pytest.mark.parametrize("factor", [0.1, 10.0, 1000.0])
def test_other_units_give_the_same_ratios(factor: float) -> None:
    points = random_points(RAGGED, 200, np.random.default_rng(4))
    plain = Sides.of(RAGGED, 200)
    scaled = Sides.of(shapely.transform(RAGGED, lambda xy: xy * factor), 200)
    assert scaled.x == pytest.approx(plain.x * factor, rel=1e-9)
    assert scaled.vmr(points * factor) == pytest.approx(plain.vmr(points), rel=1e-9)


@given(st.floats(-1e4, 1e4), st.floats(-1e4, 1e4), st.integers(0, 2**32))
@settings(max_examples=15, deadline=None)
def test_moving_points_with_their_area_and_their_order_change_nothing(
    dx: float, dy: float, seed: int
) -> None:
    rng, by = np.random.default_rng(seed), np.array([dx, dy])
    points = random_points(RAGGED, 60, rng)
    moved = Sides.of(shapely.transform(RAGGED, lambda xy: xy + by), 60)
    ratios = Sides.of(RAGGED, 60).vmr(points)
    assert moved.vmr(rng.permutation(points) + by) == pytest.approx(ratios, rel=1e-6)


def test_a_lattice_is_even_and_clumps_are_not() -> None:
    lattice = np.stack(np.meshgrid(range(5, 100, 10), range(5, 100, 10)), axis=-1).reshape(-1, 2)
    sides = Sides.of(AREAS["square"], 100)
    assert sides.vmr(lattice).max() < 1
    clumps = np.repeat(random_points(AREAS["square"], 10, np.random.default_rng(5)), 10, axis=0)
    assert (sides.vmr(clumps) > 3).all()


def test_what_cannot_be_laid_is_said() -> None:
    assert np.isnan(Sides.of(RAGGED, 20).vmr(np.empty((0, 2)))).all()
    with pytest.raises(GridWrong, match="No side of quadrats leaves 6 of them for 2 points here"):
        Sides.of(AREAS["square"], 2)
    assert repr(Sides.of(AREAS["square"], 100)).startswith("<Sides: ")
