"""Nearest neighbours against published maps, exact lattices, simulation, and confused variants."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from analyse.errors import AreaUnfit
from analyse.neighbours import (
    ClarkEvans,
    clark_evans,
    clark_evans_torus,
    donnelly,
    hopkins_skellam,
    mean_nearest,
    nearest_distances,
)
from analyse.nulls import random_points
from detect.errors import AreaWrong
from tests.analyse import published
from tests.analyse.shapes import DISH, LEAF

Floats = NDArray[np.float64]

# Ripley (1977), JRSS B 39, 172-212: biological cells read as regular, redwood seedlings (Strauss
# 1975) as clustered. Values computed apart from this project from the published coordinates:
# mean, R, z; Donnelly's E, R, z; R on the torus; mean and spread of 4,999 random patterns.
MAPS: list[tuple[Any, ...]] = [
    ("cells", published.CELLS_WINDOW, 0.1289729, 1.671680, 8.3276, 0.0826494, 1.560481, 6.3751, 1.595280, 0.08265, 0.00722),
    ("redwood", published.REDWOOD_WINDOW, 0.0392843, 0.618650, -5.7445, 0.0671521, 0.585005, -5.7885, 0.618650, 0.06711, 0.00474),
]  # fmt: skip


@pytest.mark.parametrize("row", MAPS, ids=lambda row: row[0])
def test_published_maps(row: tuple[Any, ...]) -> None:
    name, window, mean, ratio, z, expected, corrected, z_corrected, torus, chance, spread = row
    points = published.points(name)
    plain, edge = clark_evans(points, window), donnelly(points, window)
    assert plain.mean == edge.mean == pytest.approx(mean, abs=5e-8)
    assert plain.ratio == pytest.approx(ratio, abs=5e-7)
    assert plain.z == pytest.approx(z, abs=5e-5)
    assert edge.expected == pytest.approx(expected, abs=5e-8)
    assert edge.ratio == pytest.approx(corrected, abs=5e-7)
    assert edge.z == pytest.approx(z_corrected, abs=5e-5)
    assert clark_evans_torus(points, window).ratio == pytest.approx(torus, abs=5e-7)
    assert edge.expected == pytest.approx(chance, rel=2e-3)
    assert (edge.mean - edge.expected) / edge.z == pytest.approx(spread, rel=0.03)
    clumped = name == "redwood"
    assert (edge.p_clumped < 1e-6) == clumped
    assert (edge.p_even < 1e-6) != clumped
    assert edge.p_two_sided < 1e-6


def square_lattice(side: int) -> Floats:
    """Points in the middle of the squares of a board of unit squares."""
    return np.stack(np.meshgrid(np.arange(side), np.arange(side)), axis=-1).reshape(-1, 2) + 0.5


def hexagonal_lattice(rows: int) -> tuple[Floats, tuple[float, float, float, float]]:
    """A lattice of triangles of side 1 that joins itself at opposite sides (rows even)."""
    height = math.sqrt(3) / 2
    x, y = np.meshgrid(np.arange(rows, dtype=float), np.arange(rows))
    points = np.column_stack([(x + 0.5 * (y % 2)).ravel(), (y * height).ravel()])
    return points, (0.0, 0.0, float(rows), rows * height)


def test_lattices_are_twice_as_even_as_chance_and_a_little_more() -> None:
    """Clark and Evans (1954): 2.0000 for squares, 2.1491 for hexagons, the greatest there is."""
    assert clark_evans_torus(square_lattice(12), (0, 0, 12, 12)).ratio == pytest.approx(
        2, rel=1e-12
    )
    points, window = hexagonal_lattice(12)
    ratio = clark_evans_torus(points, window).ratio
    assert ratio == pytest.approx(2 * math.sqrt(2 / math.sqrt(3)), rel=1e-12)
    assert ratio == pytest.approx(2.149140, abs=5e-7)


def test_hopkins_skellam_of_lattices_is_one_sixth_and_five_thirty_sixths() -> None:
    """Exact: the mean square from a uniform place to the middle of its square, or hexagon."""
    rng = np.random.default_rng(1)
    n = 120
    error = 0.5 / n  # of the mean over n^2 places, and the edge of the board
    found = hopkins_skellam(square_lattice(n), (0, 0, n, n), rng).value
    assert found == pytest.approx(1 / 6, abs=error)
    points, window = hexagonal_lattice(n)
    inner = (window[0], window[1], window[2] - 0.5, (n - 1) * math.sqrt(3) / 2)
    kept = points[(points[:, 0] <= inner[2])]
    assert hopkins_skellam(kept, inner, rng).value == pytest.approx(5 / 36, abs=2 * error)


def test_hopkins_skellam_is_one_at_random() -> None:
    rng = np.random.default_rng(2)
    found = [hopkins_skellam(random_points(LEAF, 300, rng), LEAF, rng).value for _ in range(60)]
    # The edge keeps both kinds of distance from seeing what lies beyond: 1 within a few per cent.
    assert np.mean(found) == pytest.approx(1.0, abs=0.06)


def test_hopkins_skellam_tells_the_published_maps() -> None:
    """Ripley (1977): cells regular, redwood clustered."""
    rng = np.random.default_rng(1)
    assert hopkins_skellam(published.points("cells"), published.CELLS_WINDOW, rng).value < 0.5
    assert hopkins_skellam(published.points("redwood"), published.REDWOOD_WINDOW, rng).value > 3


def test_hopkins_skellam_is_the_same_for_the_same_seed() -> None:
    points = random_points(DISH, 30, np.random.default_rng(1))
    first, again = (hopkins_skellam(points, DISH, np.random.default_rng(8)) for _ in range(2))
    assert first == again


def test_donnelly_holds_for_random_patterns() -> None:
    """Donnelly (1978): mean and spread of the mean distance in an oblong, by simulation."""
    window, n = (0.0, 0.0, 3.0, 1.0), 40
    rng = np.random.default_rng(6)
    area = shapely.box(*window)
    means = np.array([mean_nearest(random_points(area, n, rng)) for _ in range(4_000)])
    seen = donnelly(random_points(area, n, rng), window)
    error = (seen.mean - seen.expected) / seen.z
    assert means.mean() == pytest.approx(seen.expected, rel=0.005)
    assert means.std() == pytest.approx(error, rel=0.05)


def test_confused_variants_are_not_what_is_computed() -> None:
    """The forms that texts and programs confuse, on cells: each differs beyond rounding."""
    points, window = published.points("cells"), published.CELLS_WINDOW
    n, perimeter = len(points), 4.0
    plain, edge = clark_evans(points, window), donnelly(points, window)
    assert plain.expected == pytest.approx(0.5 / math.sqrt(n), rel=1e-12)
    assert plain.expected != pytest.approx(0.5 / math.sqrt(n - 1), rel=1e-3)  # lambda = (n - 1)/A
    error = (plain.mean - plain.expected) / plain.z
    assert error == pytest.approx(0.26136 / n, rel=1e-12)
    assert error == pytest.approx(math.sqrt((4 - math.pi) / (4 * math.pi)) / n, rel=1e-5)
    rounded = 0.5 / math.sqrt(n) + (0.051 + 0.041 / math.sqrt(n)) * perimeter / n
    assert edge.expected != pytest.approx(rounded, rel=1e-5)
    variance = 0.0703 / n**2 + 0.037 * perimeter / n**2.5
    assert edge.z == pytest.approx((edge.mean - edge.expected) / math.sqrt(variance), rel=1e-12)
    again = (edge.mean - edge.expected) / math.sqrt(variance / n)  # dividing the variance again
    assert abs(edge.z) < abs(again) / 6
    smaller = 0.070 / n**2 + 0.035 * perimeter / n**2.5  # as Davis (2002) prints it
    other = (edge.mean - edge.expected) / math.sqrt(smaller)
    assert edge.z != pytest.approx(other, rel=1e-4)
    assert edge.z == pytest.approx(other, rel=0.02)


def test_without_correction_even_patterns_are_found_too_often() -> None:
    """Uncorrected R is too large: its mean z over random patterns is well above 0."""
    rng = np.random.default_rng(3)
    area = shapely.box(0, 0, 1, 1)
    seen = [random_points(area, 40, rng) for _ in range(500)]
    plain = np.mean([clark_evans(points, area).z for points in seen])
    edge = np.mean([donnelly(points, area).z for points in seen])
    torus = np.mean([clark_evans_torus(points, area).z for points in seen])
    assert plain > 0.7
    assert abs(edge) < 0.15
    assert abs(torus) < 0.15


coordinates = st.tuples(st.integers(0, 1000), st.integers(0, 1000))
some_points = st.lists(coordinates, min_size=2, max_size=30)


@settings(max_examples=60, deadline=None)
@given(some_points, st.integers(0, 3), st.floats(0.01, 100), st.integers(0, 10_000))
def test_values_go_along_when_the_pattern_is_moved(
    places: list[tuple[int, int]], turns: int, unit: float, seed: int
) -> None:
    points = np.array(places, dtype=float)
    window = np.array([[0, 0], [1000, 2000]], dtype=float)
    shift = np.random.default_rng(seed).uniform(-500, 500, 2)

    def there(xy: Floats) -> Floats:
        for _ in range(turns):
            xy = np.column_stack([-xy[:, 1], xy[:, 0]])
        return xy * unit + shift

    box = there(window)
    corner = (*box.min(axis=0), *box.max(axis=0))
    shuffled = np.random.default_rng(seed).permutation(there(points))
    shuffled = np.clip(shuffled, corner[:2], corner[2:])  # rounding may put an edge point outside
    for method in (clark_evans, donnelly, clark_evans_torus):
        first, then = method(points, (0, 0, 1000, 2000)), method(shuffled, corner)
        assert then.ratio == pytest.approx(first.ratio, rel=1e-6, abs=1e-9)
        assert then.z == pytest.approx(first.z, rel=1e-6, abs=1e-6)


@settings(max_examples=60, deadline=None)
@given(some_points)
def test_nearest_distances_are_those_of_all_pairs(places: list[tuple[int, int]]) -> None:
    points = np.array(places, dtype=float)
    apart = np.hypot(*(points[:, None] - points).transpose(2, 0, 1))
    np.fill_diagonal(apart, np.inf)
    assert nearest_distances(points) == pytest.approx(apart.min(axis=1), rel=1e-12)
    torus = clark_evans_torus(points, (0, 0, 1001, 1001))
    step = np.abs(points[:, None] - points)
    wrapped = np.hypot(*np.minimum(step, 1001 - step).transpose(2, 0, 1))
    np.fill_diagonal(wrapped, np.inf)
    assert torus.mean == pytest.approx(wrapped.min(axis=1).mean(), rel=1e-9)


@pytest.mark.parametrize("points", [[], [[1.0, 1.0]]])
def test_fewer_than_two_points_give_a_reason(points: list[list[float]]) -> None:
    box = (0, 0, 2, 2)
    for found in (clark_evans(points, box), donnelly(points, box), clark_evans_torus(points, box)):
        assert found.n == len(points)
        assert all(math.isnan(v) for v in (found.mean, found.expected, found.ratio, found.z))
        assert all(math.isnan(v) for v in (found.p_clumped, found.p_even, found.p_two_sided))
        assert found.reason.endswith("at least 2 are needed")
        assert repr(found) == f"<ClarkEvans: {found.reason}>"
    skellam = hopkins_skellam(points, box, np.random.default_rng(1))
    assert math.isnan(skellam.value)
    assert repr(skellam) == f"<HopkinsSkellam: {skellam.reason}>"
    assert math.isnan(mean_nearest(points))


def test_points_that_all_coincide() -> None:
    points = [[1.0, 1.0]] * 6
    found = clark_evans(points, (0, 0, 2, 2))
    assert (found.ratio, found.reason) == (0.0, "")
    assert found.p_clumped < 0.01
    skellam = hopkins_skellam(points, (0, 0, 2, 2), np.random.default_rng(1))
    assert math.isnan(skellam.value)
    assert skellam.reason == "every point coincides with another"


def test_two_points_and_points_on_a_line() -> None:
    two = clark_evans([[0, 0], [2, 0]], (0, 0, 2, 2))
    assert (two.mean, two.ratio) == (2.0, pytest.approx(2 * math.sqrt(2)))
    line = [[x, 1.0] for x in range(11)]
    found = donnelly(line, (0, 0, 10, 2))
    assert found.mean == 1.0
    assert math.isfinite(found.z)


def test_rectangles_alone_have_donnelly_and_the_torus() -> None:
    with pytest.raises(AreaUnfit, match=r"Donnelly's correction is for rectangles .* simulated p"):
        donnelly([[43, 43], [44, 44]], DISH)
    with pytest.raises(AreaUnfit, match="The torus is for rectangles"):
        clark_evans_torus([[43, 43], [44, 44]], DISH)
    assert isinstance(clark_evans([[43, 43], [44, 44]], DISH), ClarkEvans)


def test_bad_requests_are_refused_with_the_value_seen() -> None:
    with pytest.raises(ValueError, match="1 of 2 points lie outside the area"):
        clark_evans([[1, 1], [5, 5]], (0, 0, 2, 2))
    with pytest.raises(ValueError, match="a point is not finite"):
        clark_evans([[1, math.nan], [5, 5]], (0, 0, 2, 2))
    with pytest.raises(ValueError, match=r"rows of x and y, not of shape \(2, 3\)"):
        clark_evans([[1, 1, 1], [5, 5, 5]], (0, 0, 2, 2))
    with pytest.raises(AreaWrong, match="encloses nothing"):
        clark_evans([[1, 1], [5, 5]], (0, 0, 0, 2))
