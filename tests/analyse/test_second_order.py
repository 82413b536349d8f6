"""K, L and the pair correlation against published maps, an independent program, exact cases."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from analyse.boundary import boundary_distance
from analyse.errors import AreaUnfit
from analyse.isotropic import k_isotropic
from analyse.nulls import random_points
from analyse.second_order import k_border, k_none, k_translation, l_of, pair_correlation
from analyse.set_covariance import shared_with
from tests.analyse import published
from tests.analyse.shapes import AREAS, DISH, LEAF, SQUARE

Floats = NDArray[np.float64]
Estimator = Callable[..., Floats]

# Published maps (Ripley 1977; Strauss 1975), K with the divisor n (n - 1) and distance <= r;
# values computed apart from this project.
K_OF_MAPS = {
    "cells": {
        "r": (0.1, 0.2),
        k_none: (0.001161, 0.108014),
        k_translation: (0.001304, 0.133810),
        k_isotropic: (0.001161, 0.126672),
    },
    "redwood": {
        "r": (0.05, 0.15, 0.25),
        k_none: (0.026441, 0.110524, 0.182443),
        k_translation: (0.027675, 0.123980, 0.219652),
        k_isotropic: (0.026441, 0.116415, 0.206062),
    },
}
WINDOWS = {"cells": published.CELLS_WINDOW, "redwood": published.REDWOOD_WINDOW}
NAMED: list[Estimator] = [k_none, k_translation, k_isotropic, k_border]


@pytest.mark.parametrize("method", [k_none, k_translation, k_isotropic])
@pytest.mark.parametrize("name", WINDOWS)
def test_published_maps(name: str, method: Estimator) -> None:
    found = method(published.points(name), WINDOWS[name], K_OF_MAPS[name]["r"])
    assert found == pytest.approx(K_OF_MAPS[name][method], abs=5.1e-7)


def test_published_maps_on_the_torus() -> None:
    """K of nine copies of a map, seen from the middle one, is that on the torus."""
    for name, r, wanted in (
        ("cells", (0.1, 0.2), (0.002323, 0.123113)),
        ("redwood", (0.05, 0.15, 0.25), (0.026441, 0.111581, 0.202538)),
    ):
        points = published.points(name)
        shifts = [(i, j) for i in (-1, 0, 1) for j in (-1, 0, 1)]
        copies = np.concatenate([points + shift for shift in shifts])
        x0, y0, x1, y1 = WINDOWS[name]
        depth = boundary_distance(points, shapely.box(x0 - 1, y0 - 1, x1 + 1, y1 + 1))
        assert depth.min() >= 0.25
        n = len(points)
        apart = np.hypot(*(points[:, None] - copies).transpose(2, 0, 1))
        found = [((apart <= each).sum() - n) / (n * (n - 1)) for each in r]
        assert found == pytest.approx(wanted, abs=5.1e-7)


# Ripley (1979), JRSS B 41, 368-374: reject at 5 % if max |L(r) - r| > 1.42 sqrt(A)/(n - 1), at 1 %
# if > 1.68 sqrt(A)/(n - 1), r up to a quarter of the side (constants from memory). The maxima were
# computed apart from this project.
@pytest.mark.parametrize(("name", "most"), [("cells", 0.08740), ("redwood", 0.05207)])
def test_ripleys_test_of_the_published_maps(name: str, most: float) -> None:
    points, window = published.points(name), WINDOWS[name]
    n = len(points)
    apart = np.hypot(*(points[:, None] - points).transpose(2, 0, 1))
    jumps = np.unique(apart[(apart > 0) & (apart <= 0.25)])
    r = np.sort(np.concatenate([jumps * (1 - 1e-9), jumps * (1 + 1e-9), [0.25]]))
    isotropic = l_of(k_isotropic(points, window, r)) - r
    translation = l_of(k_translation(points, window, r)) - r
    assert np.abs(isotropic).max() == pytest.approx(most, abs=5.1e-6)
    for off in (isotropic, translation):
        strongest = off[np.abs(off).argmax()]
        assert abs(strongest) > 1.68 / (n - 1) > 1.42 / (n - 1)
        assert (strongest > 0) == (name == "redwood")  # clustered; cells are regular


def test_k_agrees_with_an_independent_program() -> None:
    """astropy.stats.RipleysKEstimator, which counts d < r, on random and published points."""
    from astropy.stats import RipleysKEstimator

    rng = np.random.default_rng(1)
    cases = [(published.points(name), WINDOWS[name]) for name in WINDOWS]
    cases += [(rng.uniform((2, -1), (9, 3), (80, 2)), (2.0, -1.0, 9.0, 3.0))]
    for points, (x0, y0, x1, y1) in cases:
        r = np.linspace(0.01, 0.25, 20) * math.sqrt((x1 - x0) * (y1 - y0))
        r += 1e-7  # no point of these maps lies at such a distance
        other = RipleysKEstimator((x1 - x0) * (y1 - y0), x_max=x1, y_max=y1, x_min=x0, y_min=y0)
        for method, mode in ((k_none, "none"), (k_translation, "translation")):
            wanted = other(data=points, radii=r, mode=mode)
            assert method(points, (x0, y0, x1, y1), r) == pytest.approx(wanted, rel=1e-9, abs=1e-12)


def test_isotropic_agrees_with_the_mean_over_orders_of_an_independent_program() -> None:
    """Its mode `ripley` weighs each pair from one end, so only its mean over orders is exact."""
    from astropy.stats import RipleysKEstimator

    points = published.points("cells")
    other = RipleysKEstimator(1.0, x_max=1.0, y_max=1.0, x_min=0.0, y_min=0.0)
    rng = np.random.default_rng(1)
    orders = [rng.permutation(points) for _ in range(150)]
    orders += [order[::-1] for order in orders]
    mean = np.mean([other(data=each, radii=[0.2], mode="ripley") for each in orders])
    assert k_isotropic(points, WINDOWS["cells"], [0.2])[0] == pytest.approx(mean, abs=1e-3)


def test_a_pair_at_just_r_counts() -> None:
    """<= and not <: on a lattice of unit steps K jumps at 1, not after it."""
    lattice = np.stack(np.meshgrid(range(4), range(4)), axis=-1).reshape(-1, 2)
    pairs = 2 * 24  # ordered pairs side by side
    for r, wanted in ((1.0, pairs), (0.999, 0), (math.sqrt(2), pairs + 2 * 18)):
        assert k_none(lattice, (0, 0, 3, 3), [r])[0] == pytest.approx(9 / (16 * 15) * wanted)


def test_the_divisor_is_n_times_n_minus_one() -> None:
    """Not n^2, which gives (n - 1)/n of it and moves L by about r/2n; nor lambda = (n - 1)/A."""
    points, window = published.points("cells"), WINDOWS["cells"]
    n = len(points)
    apart = np.hypot(*(points[:, None] - points).transpose(2, 0, 1))
    ordered = (apart <= 0.2).sum() - n
    assert k_none(points, window, [0.2])[0] == pytest.approx(ordered / (n * (n - 1)), rel=1e-12)
    squared = ordered / n**2
    assert k_none(points, window, [0.2])[0] == pytest.approx(squared * n / (n - 1), rel=1e-12)
    shift = l_of(k_none(points, window, [0.2]))[0] - math.sqrt(squared / math.pi)
    assert shift == pytest.approx(0.2 / (2 * n), rel=0.1)


def test_the_isotropic_weight_is_of_both_ends_and_its_reciprocal_is_a_share_of_the_circle() -> None:
    """Each ordered pair by its own circle, against the circle cut by the rectangle (shapely)."""
    points, box = np.array([[0.3, 0.4], [1.5, 1.1], [3.8, 1.9]]), shapely.box(0, 0, 4, 2)
    total = 0.0
    for i in range(3):
        for j in range(3):
            if i != j:
                circle = (
                    shapely.Point(points[i])
                    .buffer(math.dist(points[i], points[j]), quad_segs=2000)
                    .exterior
                )
                total += circle.length / circle.intersection(box).length
    found = k_isotropic(points, box, [4.0])[0]
    assert found == pytest.approx(8 / 6 * total, rel=1e-4)


@pytest.mark.parametrize("name", AREAS)
def test_k_and_g_are_right_on_average_at_random(name: str) -> None:
    """Mean over 200 random patterns against pi r^2 and 1, in areas of every kind."""
    area, patterns, n = AREAS[name], 200, 60
    rng = np.random.default_rng(3)
    r = math.sqrt(area.area) * np.array([0.05, 0.1, 0.15])
    seen = [random_points(area, n, rng) for _ in range(patterns)]
    for method, exact in ((k_translation, True), (k_border, False)):
        found = np.array([method(points, area, r) for points in seen]) / (math.pi * r**2)
        error = found.std(axis=0) / math.sqrt(patterns)
        assert (np.abs(found.mean(axis=0) - 1) < 4 * error + (0 if exact else 0.01)).all()
    g = np.array([pair_correlation(points, area, r) for points in seen])
    assert (np.abs(g.mean(axis=0) - 1) < 4 * g.std(axis=0) / math.sqrt(patterns)).all()
    plain = np.mean([k_none(points, area, r) for points in seen], axis=0) / (math.pi * r**2)
    assert (np.diff(plain) < 0).all()  # without correction too small, the more the longer r
    assert plain[-1] < 0.95


some_areas = st.sampled_from(sorted(AREAS))


@settings(max_examples=40, deadline=None)
@given(some_areas, st.integers(2, 12), st.integers(0, 10_000))
def test_each_estimate_is_its_plain_definition(name: str, n: int, seed: int) -> None:
    """Pair by pair, with the areas cut by shapely; gamma from a mask is within 0.2 % of A."""
    area = AREAS[name]
    rng = np.random.default_rng(seed)
    points = random_points(area, n, rng)
    r = np.sort(rng.uniform(0, 0.3, 4)) * math.sqrt(area.area)
    i, j = np.nonzero(~np.eye(n, dtype=bool))
    apart = np.hypot(*(points[j] - points[i]).T)
    close = apart[:, None] <= r
    pairs = n * (n - 1)
    assert k_none(points, area, r) == pytest.approx(area.area / pairs * close.sum(axis=0), rel=1e-9)
    shared = shared_with(area, points[j] - points[i])
    scaled = area.area**2 / pairs / shared
    assert k_translation(points, area, r) == pytest.approx(scaled @ close, rel=5e-3)
    depth = boundary_distance(points, area)
    for k, at in enumerate(r):
        serving = depth >= at
        found = k_border(points, area, r)[k]
        if serving.any():
            near = sum(int((apart[(i == p)] <= at).sum()) for p in np.nonzero(serving)[0])
            wanted = area.area / (n - 1) * near / serving.sum()
            assert found == pytest.approx(wanted, rel=1e-9, abs=1e-12)
        else:
            assert math.isnan(found)
    width = 0.07 * math.sqrt(area.area)
    t = (r[:, None] - apart) / width
    kernel = np.where(np.abs(t) < 1, 0.75 / width * (1 - t**2), 0) @ scaled
    g = pair_correlation(points, area, r, bandwidth=width)
    assert g == pytest.approx(kernel / (2 * math.pi * r), rel=5e-3)


def test_the_order_of_distances_does_not_matter() -> None:
    points = random_points(SQUARE, 40, np.random.default_rng(1))
    r = np.array([2.0, 0.5, 1.0, 0.5])
    for method in NAMED:
        one_by_one = np.concatenate([method(points, SQUARE, [each]) for each in r])
        assert method(points, SQUARE, r) == pytest.approx(one_by_one, rel=1e-12)


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 3), st.floats(0.01, 100), st.integers(0, 10_000))
def test_values_go_along_when_the_pattern_is_moved(turns: int, unit: float, seed: int) -> None:
    rng = np.random.default_rng(seed)
    points = random_points(shapely.box(0, 0, 5, 3), 25, rng)
    shift = rng.uniform(-9, 9, 2)

    def there(xy: Floats) -> Floats:
        for _ in range(turns):
            xy = np.column_stack([-xy[:, 1], xy[:, 0]])
        return xy * unit + shift

    area, moved = shapely.box(0, 0, 5, 3), rng.permutation(there(points))
    other = shapely.transform(area, there)
    r = np.array([0.211, 0.534, 0.977])
    for method in NAMED:
        first, then = method(points, area, r), method(moved, other, r * unit)
        assert then == pytest.approx(first * unit**2, rel=1e-6)
    g, g_then = pair_correlation(points, area, r), pair_correlation(moved, other, r * unit)
    assert g_then == pytest.approx(g, rel=1e-6, abs=1e-9)


def test_the_pair_correlation_of_a_hard_core_is_0_and_of_clumps_is_high() -> None:
    rng = np.random.default_rng(4)
    parents = random_points(DISH, 40, rng)
    clumps = np.concatenate([parents + rng.normal(0, 0.5, (40, 2)) for _ in range(8)])
    clumps = clumps[shapely.contains_xy(DISH, *clumps.T)]
    assert pair_correlation(clumps, DISH, [1.0])[0] > 5
    lattice = np.stack(np.meshgrid(np.arange(5, 82, 4.0), np.arange(3, 80, 4.0)), axis=-1)
    even = lattice.reshape(-1, 2)
    even = even[shapely.contains_xy(DISH, *even.T)]
    assert pair_correlation(even, DISH, [2.0], bandwidth=0.5)[0] == 0.0


@pytest.mark.parametrize("points", [np.zeros((0, 2)), [[5.0, 5.0]]])
def test_fewer_than_two_points_give_nan(points: Floats) -> None:
    for method in NAMED:
        assert np.isnan(method(points, SQUARE, [1.0, 2.0])).all()
    assert np.isnan(pair_correlation(points, SQUARE, [1.0])).all()


def test_points_that_coincide_or_lie_on_a_line_or_the_edge() -> None:
    same = [[5.0, 5.0]] * 4
    line = [[x, 5.0] for x in range(11)]
    edge = [[0.0, 0.0], [10.0, 10.0], [0.0, 10.0], [10.0, 5.0]]
    for points in (same, line, edge):
        for method in (k_none, k_translation, k_isotropic):
            assert np.isfinite(method(points, SQUARE, [0.0, 1.0, 2.5])).all()
        assert np.isfinite(pair_correlation(points, SQUARE, [0.5, 2.5])).all()
    assert k_none(same, SQUARE, [0.0])[0] == 100.0
    assert np.isnan(k_border(edge, SQUARE, [0.1])).all()


def test_translation_ends_where_a_step_leaves_almost_nothing() -> None:
    points = random_points(shapely.box(0, 0, 50, 1), 20, np.random.default_rng(1))
    found = k_translation(points, (0, 0, 50, 1), [0.5, 0.98, 1.5])
    assert np.isfinite(found[:2]).all()
    assert np.isnan(found[2])
    g = pair_correlation(points, (0, 0, 50, 1), [0.3, 1.5])
    assert np.isfinite(g[0])
    assert np.isnan(g[1])


def test_bad_requests_are_refused() -> None:
    points = [[1.0, 1.0], [2.0, 2.0]]
    with pytest.raises(ValueError, match="distances must be finite and 0 or more"):
        k_none(points, SQUARE, [-1.0])
    with pytest.raises(ValueError, match="distances must be finite and above 0"):
        pair_correlation(points, SQUARE, [0.0])
    with pytest.raises(ValueError, match=r"the bandwidth must be above 0, not 0\.0"):
        pair_correlation(points, SQUARE, [1.0], bandwidth=0.0)
    with pytest.raises(ValueError, match="1 of 2 points lie outside the area"):
        k_translation([[1, 1], [50, 50]], SQUARE, [1.0])
    with pytest.raises(
        AreaUnfit, match="for rectangles, not for this Polygon; use the translation"
    ):
        k_isotropic([[5, 0.0], [6, 0.0]], LEAF, [1.0])
