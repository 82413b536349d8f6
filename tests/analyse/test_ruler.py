"""The prepared ruler against plain definitions, both ways of measuring pairs, and invariances."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from analyse.boundary import boundary_distance, eroded_area
from analyse.nulls import random_points
from analyse.ruler import CURVES, SCALARS, Ruler
from analyse.second_order import k_translation, l_of
from analyse.set_covariance import set_covariance
from tests.analyse.shapes import AREAS, DISH, LEAF, SQUARE, ragged

Floats = NDArray[np.float64]


def plain_curves(ruler: Ruler, points: Floats) -> dict[str, Floats]:
    """Every curve from its published definition, pair by pair and point by point."""
    area, n = ruler.area, len(points)
    step = points[:, None] - points[None]
    d = np.hypot(step[..., 0], step[..., 1])
    ordered = ~np.eye(n, dtype=bool)
    scale = area.area**2 / (n * (n - 1))
    weight = scale / set_covariance(area).at(step[..., 0], step[..., 1])[ordered]
    r = ruler.x["l_function"]
    k = np.array([weight[d[ordered] <= each].sum() for each in r])
    g = []
    for at, width in zip(ruler.x["pair_correlation"], ruler.pairs.bins.widths, strict=True):
        t = (d[ordered] - at) / width
        kernel = np.where(np.abs(t) < 1, 0.75 / width * (1 - t**2), 0.0)
        g.append((kernel * weight).sum() / (2 * math.pi * at))
    nearest = np.where(ordered, d, np.inf).min(axis=1)
    depth = boundary_distance(points, area)
    known = nearest <= depth
    left = np.array([1 / max(eroded_area(area, each), 1e-300) for each in nearest])
    x = ruler.x["nearest_neighbour"]
    near = np.array([left[known & (nearest <= each)].sum() for each in x])
    tests, edge = ruler.test_points, boundary_distance(ruler.test_points, area)
    empty = np.hypot(*(tests[:, None] - points[None]).transpose(2, 0, 1)).min(axis=1)
    share = np.array([1 / (edge >= each).sum() if (edge >= each).any() else 0 for each in empty])
    free = np.array([share[(empty <= edge) & (empty <= each)].sum() for each in x])
    return {
        "l_function": l_of(k) - r,
        "pair_correlation": np.array(g),
        "nearest_neighbour": near / left[known].sum() if known.any() else np.zeros(len(x)),
        "empty_space": free,
        "mean_nearest": nearest.mean(),
        "hopkins_skellam": (empty**2).mean() / (nearest**2).mean(),
    }


@pytest.mark.parametrize("name", AREAS)
@pytest.mark.parametrize("n", [2, 3, 20, 150])
def test_the_curves_are_what_their_definitions_say(name: str, n: int) -> None:
    area = AREAS[name]
    ruler = Ruler.of(area, n)
    points = random_points(area, n, np.random.default_rng(n))
    found, plain = ruler.split(ruler.curves(points)), plain_curves(ruler, points)
    side = math.sqrt(area.area)
    tight = name in ("square", "oblong", "dish")
    assert found["mean_nearest"] == pytest.approx(plain["mean_nearest"], rel=1e-12)
    assert found["hopkins_skellam"] == pytest.approx(plain["hopkins_skellam"], rel=1e-12)
    off = found["l_function"] - plain["l_function"]
    assert np.abs(off).max() < (1e-6 if tight and name != "dish" else 2e-4) * side
    # Classes of distance are finite, so the kernel is met on average within one.
    off = found["pair_correlation"] - plain["pair_correlation"]
    assert np.abs(off).max() < 0.05 * max(1.0, plain["pair_correlation"].max())
    for curve in ("nearest_neighbour", "empty_space"):
        assert np.abs(found[curve] - plain[curve]).mean() < 0.01


@settings(max_examples=10, deadline=None)
@given(st.integers(0, 10_000), st.integers(2, 60))
def test_the_curves_are_what_their_definitions_say_in_ragged_areas(seed: int, n: int) -> None:
    area = ragged(seed)
    ruler = Ruler.of(area, n)
    points = random_points(area, n, np.random.default_rng(seed))
    found, plain = ruler.split(ruler.curves(points)), plain_curves(ruler, points)
    off = found["l_function"] - plain["l_function"]
    assert np.abs(off).max() < 1e-3 * math.sqrt(area.area)
    assert found["mean_nearest"] == pytest.approx(plain["mean_nearest"], rel=1e-12)
    assert found["hopkins_skellam"] == pytest.approx(plain["hopkins_skellam"], rel=1e-12)


@pytest.mark.parametrize("name", ["oblong", "dish", "leaf"])
def test_pairs_from_counts_in_cells_agree_with_pairs_measured(name: str) -> None:
    """The error is a small part of the chance variation of the curves, and has no direction."""
    area, n = AREAS[name], 1_500
    direct, binned = (Ruler.of(area, n, pairs=way) for way in ("direct", "binned"))
    rng = np.random.default_rng(5)
    patterns = [random_points(area, n, rng) for _ in range(16)]
    seen = direct.split(np.array([direct.curves(points) for points in patterns]))
    fast = binned.split(np.array([binned.curves(points) for points in patterns]))
    for curve, most in (("l_function", 0.45), ("pair_correlation", 0.8)):
        off = fast[curve] - seen[curve]
        spread = seen[curve].std(axis=0, ddof=1)
        assert (off.std(axis=0) / spread).max() < most
        assert np.median(off.std(axis=0) / spread) < most / 2
        assert (np.abs(off.mean(axis=0)) / spread).max() < most / 2
    for curve in ("nearest_neighbour", "empty_space", *SCALARS):
        assert np.array_equal(fast[curve], seen[curve])


@pytest.mark.parametrize("name", ["oblong", "dish", "leaf"])
def test_steps_between_cells_fill_every_ring_exactly(name: str) -> None:
    """With one pair at every step, thinned as the area thins them, a class gets its half ring."""
    pairs = Ruler.of(AREAS[name], 2_000, pairs="binned").pairs
    row, column = np.divmod(pairs.steps, pairs.padded[1])
    column = np.where(column > pairs.padded[1] // 2, column - pairs.padded[1], column)
    thinned = pairs.covariance.at(column * pairs.cell, row * pairs.cell)
    ring = math.pi * np.diff(pairs.bins.edges**2) / (2 * pairs.cell**2)
    assert (pairs.spread @ thinned)[pairs.near :] == pytest.approx(ring[pairs.near :], rel=1e-9)


def test_near_pairs_are_measured_exactly_both_ways() -> None:
    points = random_points(SQUARE, 2_000, np.random.default_rng(2))
    direct, binned = (Ruler.of(SQUARE, 2_000, pairs=way) for way in ("direct", "binned"))
    near = direct.x["l_function"] < 1.3 * math.sqrt(SQUARE.area / 2_000)
    assert near.sum() > 10
    seen, fast = (each.split(each.curves(points))["l_function"] for each in (direct, binned))
    # single precision may put a pair on the other side of one of many distances
    r = direct.x["l_function"]
    one_pair = 3 * SQUARE.area / (2_000 * 1_999) / (2 * math.pi * r)
    assert (np.abs(fast - seen) < one_pair + 1e-5)[near].all()
    exact = l_of(k_translation(points, SQUARE, r))
    assert (np.abs(seen + r - exact) < one_pair + 1e-5).all()
    assert np.median(np.abs(seen + r - exact)) < 1e-6


@pytest.mark.parametrize("name", AREAS)
def test_at_random_the_curves_have_no_bias(name: str) -> None:
    """Mean of 300 random patterns against the Poisson values 0, 1 and 1 - exp(-lambda pi r^2)."""
    area, n, patterns = AREAS[name], 80, 300
    ruler = Ruler.of(area, n)
    rng = np.random.default_rng(3)
    curves = ruler.split(
        np.array([ruler.curves(random_points(area, n, rng)) for _ in range(patterns)])
    )
    r = ruler.x["nearest_neighbour"]
    chance = 1 - np.exp(-n / area.area * math.pi * r**2)
    wanted = {
        "l_function": 0.0,
        "pair_correlation": 1.0,
        "nearest_neighbour": chance,
        "empty_space": chance,
    }
    # L is a root of K and so a little low where few pairs are expected; G is a ratio.
    slack = {"l_function": 0.03 * ruler.x["l_function"] + 0.2 * ruler.x["l_function"][0]}
    for curve, value in wanted.items():
        error = curves[curve].std(axis=0) / math.sqrt(patterns)
        off = np.abs(curves[curve].mean(axis=0) - value)
        assert (off < 4 * error + slack.get(curve, 0.02)).all(), curve


def test_the_distances_are_a_rule_of_the_area_and_the_number_alone() -> None:
    for area in AREAS.values():
        first, again = Ruler.of(area, 50), Ruler.of(area, 50)
        side = math.sqrt(area.area)
        for curve in CURVES:
            assert np.array_equal(first.x[curve], again.x[curve])
            assert (np.diff(first.x[curve]) > 0).all()
            assert first.x[curve][0] > 0
            assert first.x[curve][-1] < side
        assert first.x["l_function"][-1] <= side / 4 + 1e-9
        assert len(first.x["l_function"]) == 300
        assert np.array_equal(first.test_points, again.test_points)
        assert shapely.contains_xy(area, *first.test_points.T).all()


def test_in_a_narrow_area_distances_stay_short() -> None:
    ruler = Ruler.of(shapely.box(0, 0, 400, 1), 100)
    assert ruler.x["l_function"][-1] <= 0.75 + 1e-9
    assert np.isfinite(ruler.curves(random_points(ruler.area, 100, np.random.default_rng(1)))).all()


def moved(area: BaseGeometry, points: Floats, what: str) -> tuple[BaseGeometry, Floats, float]:
    """The same pattern elsewhere, turned by a quarter, in another unit or in another order."""
    change = {
        "shift": lambda xy: xy + np.array([40.0, -7.0]),
        "turn": lambda xy: np.column_stack([-xy[:, 1], xy[:, 0]]),
        "unit": lambda xy: xy * 25.0,
        "order": lambda xy: xy,
    }[what]
    shuffled = points[::-1] if what == "order" else points
    return shapely.transform(area, change), change(shuffled), 25.0 if what == "unit" else 1.0


@pytest.mark.parametrize("what", ["shift", "turn", "unit", "order"])
@pytest.mark.parametrize("name", ["oblong", "dish", "leaf"])
def test_curves_go_along_when_the_pattern_is_moved(name: str, what: str) -> None:
    """The test points are drawn anew in the moved area, so empty space is compared loosely."""
    area = AREAS[name]
    points = random_points(area, 60, np.random.default_rng(4))
    ruler = Ruler.of(area, 60)
    other, there, unit = moved(area, points, what)
    ruler_there = Ruler.of(other, 60)
    seen, then = ruler.split(ruler.curves(points)), ruler_there.split(ruler_there.curves(there))
    side = math.sqrt(area.area)
    assert ruler_there.x["l_function"] == pytest.approx(ruler.x["l_function"] * unit, rel=5e-3)
    assert then["mean_nearest"] == pytest.approx(seen["mean_nearest"] * unit, rel=1e-9)
    assert np.abs(then["l_function"] / unit - seen["l_function"]).mean() < 1e-3 * side
    assert np.abs(then["nearest_neighbour"] - seen["nearest_neighbour"]).max() < 0.05
    assert np.abs(then["empty_space"] - seen["empty_space"]).max() < 0.1


def test_in_scattered_parts_cells_stay_finer_than_near_pairs() -> None:
    """The grid has so many cells at most; where they are coarse, more pairs are measured."""
    parts = shapely.MultiPolygon([shapely.box(0, 0, 1, 1), shapely.box(11, 11, 12, 12)])
    pairs = Ruler.of(parts, 20_000).pairs
    assert math.prod(pairs.shape) < 4.3e6
    assert pairs.bins.edges[pairs.near] >= min(4 * pairs.cell, pairs.bins.reach) - 1e-12


def test_a_ruler_survives_the_way_to_another_process() -> None:
    points = random_points(LEAF, 40, np.random.default_rng(1))
    ruler = Ruler.of(LEAF, 40)
    there = pickle.loads(pickle.dumps(ruler))
    assert np.array_equal(there.curves(points), ruler.curves(points))


@pytest.mark.parametrize("pairs", ["direct", "binned"])
@pytest.mark.parametrize("name", ["square", "dish", "leaf"])
def test_strange_patterns_give_finite_curves(name: str, pairs: str) -> None:
    """Coincident points, points on a line, points on the very edge."""
    area = AREAS[name]
    ruler = Ruler.of(area, 30, pairs=pairs)
    centre = np.array(area.representative_point().coords[0])
    ring = shapely.get_rings(area)[0]
    edge = shapely.get_coordinates(ring.interpolate(np.arange(30) / 30, normalized=True))
    line = centre + np.column_stack([np.linspace(-0.1, 0.1, 30), np.zeros(30)])
    for points in (np.repeat(centre[None], 30, axis=0), line, edge):
        curves = ruler.curves(points)
        assert np.isfinite(curves[:-1]).all()
        assert curves[-1] > 0  # infinite where every point coincides with another
        assert len(curves) == sum(map(len, ruler.x.values())) + len(SCALARS)


@pytest.mark.parametrize("name", AREAS)
def test_where_all_points_have_a_neighbour_the_function_is_exactly_1(name: str) -> None:
    """Rounding must not tell patterns apart that are tied."""
    ruler = Ruler.of(AREAS[name], 50)
    rng = np.random.default_rng(2)
    last = [
        ruler.split(ruler.curves(random_points(AREAS[name], 50, rng)))["nearest_neighbour"][-1]
        for _ in range(60)
    ]
    assert max(last) == 1.0
    assert last.count(1.0) > 20


def test_fewer_than_two_points_are_refused() -> None:
    with pytest.raises(ValueError, match="at least 2 points, not 1"):
        Ruler.of(DISH, 1)
    with pytest.raises(ValueError, match="at least 2 points, not 0"):
        Ruler.of(DISH, 5).curves(np.zeros((0, 2)))


@pytest.mark.parametrize("name", ["oblong", "dish", "leaf"])
def test_crowded_pairs_counted_are_those_listed(name: str) -> None:
    """Weighed by the mean over directions instead of each by its own: within 0.5 %."""
    area = AREAS[name]
    pairs = Ruler.of(area, 3_000, pairs="binned").pairs
    middle = np.array(area.representative_point().coords[0])
    rng = np.random.default_rng(1)
    points = middle + 0.02 * math.sqrt(area.area) * rng.uniform(-1, 1, (3_000, 2))
    points[:40] = points[40:80]  # some coincide
    listed, counted = pairs.measured(points), pairs.counted(points)
    for sums in (listed, counted):
        sums[1] += sums[0]  # the first two classes hold no distance but 0
        sums[0] = 0.0
    assert listed.sum() > 0
    assert counted == pytest.approx(listed, rel=5e-3)


def test_many_points_in_one_place_need_little_memory() -> None:
    """10,000 points in a tenth of the side of the dish: pairs are looked at in pieces."""
    ruler = Ruler.of(DISH, 10_000)
    points = np.random.default_rng(1).uniform((39, 37), (47, 45), (10_000, 2))
    curves = ruler.split(ruler.curves(points))
    assert np.isfinite(curves["l_function"]).all()
    assert curves["l_function"].max() > 20
