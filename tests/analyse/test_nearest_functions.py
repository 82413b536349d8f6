"""G and F against plain definitions, exact patterns, chance, and published maps."""

from __future__ import annotations

import math

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from analyse.boundary import boundary_distance
from analyse.nearest_functions import f_border, f_function, g_border, g_function
from analyse.nulls import random_points
from tests.analyse import published
from tests.analyse.shapes import AREAS, DISH, LEAF, SQUARE

Floats = NDArray[np.float64]


@pytest.mark.parametrize("name", AREAS)
def test_at_random_both_are_those_of_a_poisson_process(name: str) -> None:
    """1 - exp(-lambda pi r^2), mean over 100 random patterns, by either correction.

    Given n, slightly more neighbours are expected than by a Poisson process; a ratio is slightly
    biased; both within 0.025.
    """
    area, n, patterns = AREAS[name], 60, 100
    rng = np.random.default_rng(1)
    r = math.sqrt(area.area / n) * np.array([0.2, 0.4, 0.6])
    chance = 1 - np.exp(-n / area.area * math.pi * r**2)
    places = random_points(area, 200, rng)
    seen = [random_points(area, n, rng) for _ in range(patterns)]
    for method in (g_function, g_border):
        found = np.array([method(points, area, r) for points in seen])
        error = np.nanstd(found, axis=0) / math.sqrt(patterns)
        assert (np.abs(np.nanmean(found, axis=0) - chance) < 4 * error + 0.025).all()
    for method in (f_function, f_border):
        found = np.array([method(points, area, r, places=places) for points in seen])
        error = found.std(axis=0) / math.sqrt(patterns)
        assert (np.abs(found.mean(axis=0) - chance) < 4 * error + 0.025).all()


def test_without_correction_neighbours_seem_farther_than_they_are() -> None:
    """The border-corrected G of random points lies above the plain share."""
    rng = np.random.default_rng(2)
    r = np.array([1.0])
    seen = [random_points(SQUARE, 30, rng) for _ in range(200)]
    apart = [np.hypot(*(p[:, None] - p).transpose(2, 0, 1)) + 99 * np.eye(30) for p in seen]
    plain = np.mean([(each.min(axis=1) <= 1.0).mean() for each in apart])
    assert np.mean([g_function(points, SQUARE, r)[0] for points in seen]) > plain + 0.015


def test_on_a_lattice_g_is_a_step_and_f_the_share_of_a_disc() -> None:
    """Exact for squares of side 1: G jumps at 1; F(r) = pi r^2 up to r = 1/2."""
    lattice = np.stack(np.meshgrid(range(20), range(20)), axis=-1).reshape(-1, 2) + 0.5
    box = (0, 0, 20, 20)
    for method in (g_function, g_border):
        assert method(lattice, box, [0.5, 0.999, 1.0, 1.4]).tolist() == [0.0, 0.0, 1.0, 1.0]
    r = np.array([0.1, 0.3, 0.5])
    for method in (f_function, f_border):
        assert method(lattice, box, r, places=40_000) == pytest.approx(math.pi * r**2, abs=0.012)


def test_published_maps_read_as_published() -> None:
    """Ripley (1977): cells keep apart, redwood seedlings huddle and leave large gaps."""
    r = [0.05, 0.08]
    for name, window, sign in (
        ("cells", published.CELLS_WINDOW, -1),
        ("redwood", published.REDWOOD_WINDOW, 1),
    ):
        points = published.points(name)
        chance = 1 - np.exp(-len(points) * math.pi * np.array(r) ** 2)
        for method in (g_function, g_border):
            assert (sign * (method(points, window, r) - chance) > 0.1).all()
        for method in (f_function, f_border):
            assert (sign * (chance - method(points, window, r)) > 0).all()


some_areas = st.sampled_from(sorted(AREAS))


@settings(max_examples=40, deadline=None)
@given(some_areas, st.integers(2, 15), st.integers(0, 10_000))
def test_each_estimate_is_its_plain_definition(name: str, n: int, seed: int) -> None:
    area = AREAS[name]
    rng = np.random.default_rng(seed)
    points, places = random_points(area, n, rng), random_points(area, 25, rng)
    r = np.sort(rng.uniform(0, 0.4, 5)) * math.sqrt(area.area)
    apart = np.hypot(*(points[:, None] - points).transpose(2, 0, 1))
    np.fill_diagonal(apart, np.inf)
    nearest, depth = apart.min(axis=1), boundary_distance(points, area)
    empty = np.hypot(*(places[:, None] - points[None]).transpose(2, 0, 1)).min(axis=1)
    edge = boundary_distance(places, area)
    for k, at in enumerate(r):
        weight = [
            1 / area.buffer(-d, quad_segs=64).area if d <= b else 0.0
            for d, b in zip(nearest, depth, strict=True)
        ]
        below = sum(w for w, d in zip(weight, nearest, strict=True) if d <= at)
        found = g_function(points, area, r)[k]
        if sum(weight) > 0:
            assert found == pytest.approx(below / sum(weight), rel=2e-2, abs=1e-9)
        else:
            assert math.isnan(found)
        free = sum(
            1 / (edge >= e).sum() for e, b in zip(empty, edge, strict=True) if e <= min(b, at)
        )
        assert f_function(points, area, r, places=places)[k] == pytest.approx(free, rel=1e-9)
        for found, seen, left in (
            (g_border(points, area, r)[k], nearest, depth),
            (f_border(points, area, r, places=places)[k], empty, edge),
        ):
            if (left >= at).any():
                assert found == pytest.approx((seen[left >= at] <= at).mean(), rel=1e-9)
            else:
                assert math.isnan(found)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 3), st.floats(0.01, 100), st.integers(0, 10_000))
def test_values_go_along_when_the_pattern_is_moved(turns: int, unit: float, seed: int) -> None:
    rng = np.random.default_rng(seed)
    area = shapely.box(0, 0, 5, 3)
    points, places = random_points(area, 25, rng), random_points(area, 40, rng)
    shift = rng.uniform(-9, 9, 2)

    def there(xy: Floats) -> Floats:
        for _ in range(turns):
            xy = np.column_stack([-xy[:, 1], xy[:, 0]])
        return xy * unit + shift

    other, moved = shapely.transform(area, there), rng.permutation(there(points))
    r = np.array([0.211, 0.434, 0.677])
    for method in (g_function, g_border):
        assert method(moved, other, r * unit) == pytest.approx(method(points, area, r), rel=1e-6)
    for method in (f_function, f_border):
        then = method(moved, other, r * unit, places=there(places))
        assert then == pytest.approx(method(points, area, r, places=places), rel=1e-6)


def test_both_never_fall() -> None:
    points = random_points(LEAF, 40, np.random.default_rng(1))
    r = np.linspace(0, 3, 60)
    for found in (g_function(points, LEAF, r), f_function(points, LEAF, r, places=500)):
        assert (np.diff(found) >= 0).all()
        assert found[0] == 0


def test_drawn_places_are_the_same_for_the_same_seed() -> None:
    points = random_points(DISH, 20, np.random.default_rng(1))
    first, again = (f_function(points, DISH, [5.0], places=200, seed=3) for _ in range(2))
    assert first == again
    assert f_function(points, DISH, [5.0], places=200, seed=4) != first


def test_too_few_points_or_none_deep_enough_give_nan() -> None:
    for points in (np.zeros((0, 2)), [[5.0, 5.0]]):
        assert np.isnan(g_function(points, SQUARE, [1.0])).all()
        assert np.isnan(g_border(points, SQUARE, [1.0])).all()
    for method in (f_function, f_border):
        assert np.isnan(method([], SQUARE, [1.0], places=9)).all()
    corners = [[0.0, 0.0], [10.0, 10.0]]
    assert np.isnan(g_function(corners, SQUARE, [1.0])).all()
    assert np.isnan(g_border(corners, SQUARE, [1.0])).all()


def test_points_that_coincide_have_neighbours_at_no_distance() -> None:
    for method in (g_function, g_border):
        assert method([[5.0, 5.0]] * 3, SQUARE, [0.0, 1.0]).tolist() == [1.0, 1.0]


def test_bad_requests_are_refused() -> None:
    with pytest.raises(ValueError, match="needs at least 1 place"):
        f_function([[5.0, 5.0]], SQUARE, [1.0], places=0)
    with pytest.raises(ValueError, match="1 of 1 points lie outside the area"):
        f_function([[5.0, 5.0]], SQUARE, [1.0], places=[[50.0, 5.0]])
    with pytest.raises(ValueError, match="0 or more"):
        g_function([[5.0, 5.0]], SQUARE, [-1.0])
