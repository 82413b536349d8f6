"""Random points: uniform in any area, by whichever way they are drawn."""

from __future__ import annotations

import pickle

import numpy as np
import pytest
import shapely
from scipy import stats
from shapely.geometry.base import BaseGeometry

from analyse.nulls import CompleteRandomness, Null, random_points
from analyse.quadrats import count_in_quadrats, lay_grid
from tests.analyse.areas import AREAS, RAGGED


def test_random_points_fall_by_area_in_and_around_a_hole() -> None:
    """Counts of 100,000 points in clipped cells against their areas, by chi-square."""
    points = random_points(RAGGED, 100_000, np.random.default_rng(9))
    assert points.shape == (100_000, 2)
    assert shapely.intersects_xy(RAGGED, points[:, 0], points[:, 1]).all()
    grid = lay_grid(RAGGED, 200)
    counts = count_in_quadrats(points, grid)
    expected = 100_000 * grid.area / RAGGED.area
    assert stats.chisquare(counts, expected).pvalue > 0.001


def test_random_points_in_a_sliver_and_in_parts() -> None:
    sliver = shapely.Polygon([(0, 0), (1000, 1000), (1000, 1000.5)])
    rng = np.random.default_rng(2)
    points = random_points(sliver, 500, rng)
    assert shapely.intersects_xy(sliver, points[:, 0], points[:, 1]).all()
    parts = shapely.MultiPolygon([shapely.box(0, 0, 1, 1), shapely.box(9, 0, 12, 1)])
    points = random_points(parts, 8000, rng)
    assert np.mean(points[:, 0] > 5) == pytest.approx(0.75, abs=0.02)


def test_impossible_random_points_are_refused() -> None:
    with pytest.raises(ValueError, match="must be 0 or more, not -1"):
        random_points(RAGGED, -1, np.random.default_rng(1))
    with pytest.raises(ValueError, match="the area encloses nothing"):
        random_points(shapely.Polygon(), 5, np.random.default_rng(1))
    assert random_points(RAGGED, 0, np.random.default_rng(1)).shape == (0, 2)


@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
def test_complete_randomness_is_uniform(area: BaseGeometry) -> None:
    """Counts of 200,000 points against areas: in clipped cells, and in halves of a fine lattice."""
    n, null = 200_000, CompleteRandomness(area)
    points = null.draw(n, np.random.default_rng(8))
    assert points.shape == (n, 2)
    assert shapely.intersects_xy(area, points[:, 0], points[:, 1]).all()
    grid = lay_grid(area, 400)
    counts = count_in_quadrats(points, grid)
    assert stats.chisquare(counts, n * grid.area / area.area).pvalue > 0.001
    for step in (1.5625, 3.1):  # whatever lattice was used to draw must not show
        part = ((points - area.bounds[:2]) / step % 1 * 4).astype(int)
        share = np.bincount(part[:, 0] * 4 + part[:, 1], minlength=16)
        reference = random_points(area, n, np.random.default_rng(9))
        part = ((reference - area.bounds[:2]) / step % 1 * 4).astype(int)
        other = np.bincount(part[:, 0] * 4 + part[:, 1], minlength=16)
        assert stats.chi2_contingency([share, other]).pvalue > 0.001


def test_points_near_the_outline_are_as_many_as_its_strip_is_wide() -> None:
    """The strip on both sides of outline and hole, where points are tested one by one."""
    strip = RAGGED.buffer(0).boundary.buffer(0.4).intersection(RAGGED)
    points = CompleteRandomness(RAGGED).draw(300_000, np.random.default_rng(10))
    near = int(shapely.contains_xy(strip, points[:, 0], points[:, 1]).sum())
    share = strip.area / RAGGED.area
    assert stats.binomtest(near, 300_000, share).pvalue > 0.001


def test_points_drawn_one_after_another_are_independent() -> None:
    """No point knows the one before it: places of pairs of neighbours in the order of drawing."""
    points = CompleteRandomness(AREAS["circle"]).draw(100_000, np.random.default_rng(11))
    side = (points > 50).astype(int) @ [1, 2]
    table = np.bincount(side[:-1:2] * 4 + side[1::2], minlength=16).reshape(4, 4)
    assert stats.chi2_contingency(table).pvalue > 0.001


def test_a_sliver_and_an_area_in_parts_are_drawn_in() -> None:
    sliver = shapely.Polygon([(0, 0), (1000, 1000), (1000, 1000.5)])
    points = CompleteRandomness(sliver).draw(5000, np.random.default_rng(2))
    assert shapely.intersects_xy(sliver, points[:, 0], points[:, 1]).all()
    # The width grows with x, so the share left of the middle is a quarter.
    assert stats.binomtest(int((points[:, 0] < 500).sum()), 5000, 0.25).pvalue > 0.001
    parts = shapely.MultiPolygon([shapely.box(0, 0, 1, 1), shapely.box(9, 0, 12, 1)])
    points = CompleteRandomness(parts).draw(8000, np.random.default_rng(3))
    assert stats.binomtest(int((points[:, 0] > 5).sum()), 8000, 0.75).pvalue > 0.001


def test_an_outline_of_many_corners_is_cut_up_as_well() -> None:
    turn = np.linspace(0, 2 * np.pi, 20_000, endpoint=False)
    far = 40 + 0.3 * np.sin(900 * turn)
    leaf = shapely.Polygon(np.column_stack([far * np.cos(turn), 0.5 * far * np.sin(turn)]))
    points = CompleteRandomness(leaf).draw(20_000, np.random.default_rng(4))
    assert shapely.intersects_xy(leaf, points[:, 0], points[:, 1]).all()
    core = leaf.buffer(-1)
    inside = int(shapely.contains_xy(core, points[:, 0], points[:, 1]).sum())
    assert stats.binomtest(inside, 20_000, core.area / leaf.area).pvalue > 0.001


def test_a_law_gives_the_same_points_for_the_same_seed_wherever_it_was_made() -> None:
    null: Null = CompleteRandomness(RAGGED)
    drawn = null.draw(50, np.random.default_rng(5)).tolist()
    for other in (CompleteRandomness(RAGGED), pickle.loads(pickle.dumps(null))):
        assert other.draw(50, np.random.default_rng(5)).tolist() == drawn
    assert null.name == "complete spatial randomness"
    assert null.draw(0, np.random.default_rng(5)).shape == (0, 2)


def test_impossible_laws_and_draws_are_refused() -> None:
    with pytest.raises(ValueError, match="the area encloses nothing"):
        CompleteRandomness(shapely.Polygon())
    with pytest.raises(ValueError, match="must be 0 or more, not -1"):
        CompleteRandomness(RAGGED).draw(-1, np.random.default_rng(1))
