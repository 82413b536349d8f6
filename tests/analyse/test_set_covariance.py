"""The set covariance: closed forms and masks against polygons cut by polygons."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry.base import BaseGeometry

from analyse.coverage import covered
from analyse.set_covariance import (
    DiscCovariance,
    MaskCovariance,
    RectangleCovariance,
    dish_circle,
    longest_useful,
    mask_covariance,
    rectangle_sides,
    set_covariance,
    shared_with,
)
from tests.analyse.shapes import AREAS, DISH, LEAF, OBLONG, PARTS, SQUARE, ragged


def steps(area: BaseGeometry, seed: int, longest: float) -> np.ndarray:
    """Random steps of up to a share of sqrt(A), long and very short ones."""
    rng = np.random.default_rng(seed)
    long = rng.uniform(-1, 1, (40, 2)) * longest * math.sqrt(area.area)
    return np.concatenate([long, 0.02 * long, 0.003 * long, [[0.0, 0.0]]])


def test_each_shape_has_its_form() -> None:
    assert set_covariance(SQUARE) == RectangleCovariance(10, 10)
    assert set_covariance(OBLONG) == RectangleCovariance(12, 4)
    assert isinstance(set_covariance(DISH), DiscCovariance)
    assert set_covariance(DISH).radius == pytest.approx(43, rel=1e-4)
    for area in (LEAF, PARTS, shapely.affinity.rotate(OBLONG, 10)):
        assert isinstance(set_covariance(area), MaskCovariance)


def test_what_is_a_dish() -> None:
    """Enough sides, round to 0.2 % of the radius, in one piece, without holes."""
    circle = shapely.Point(3, 4).buffer(5, quad_segs=16)
    x, y, radius = dish_circle(circle)
    assert (x, y) == pytest.approx((3, 4))
    assert math.pi * radius**2 == pytest.approx(circle.area)
    assert dish_circle(shapely.Point(3, 4).buffer(5, quad_segs=8)) is None
    assert dish_circle(shapely.affinity.scale(DISH, 1.0, 1.01)) is None
    assert dish_circle(DISH - shapely.Point(43, 41).buffer(1)) is None
    assert dish_circle(DISH - shapely.box(40, 0, 46, 20)) is None
    assert dish_circle(shapely.MultiPolygon([circle, shapely.box(20, 20, 21, 21)])) is None
    assert rectangle_sides(circle) is None
    assert rectangle_sides(shapely.affinity.rotate(OBLONG, 10)) is None


@pytest.mark.parametrize("area", [SQUARE, OBLONG], ids=["square", "oblong"])
def test_rectangles_are_exact(area: BaseGeometry) -> None:
    h = steps(area, 1, 1.5)
    found = set_covariance(area).at(h[:, 0], h[:, 1])
    assert found == pytest.approx(shared_with(area, h), rel=1e-12, abs=1e-12)


def test_a_disc_is_the_lens_of_two_circles() -> None:
    """Closed form: gamma(0) = pi R^2, gamma(R) = R^2 (2 pi/3 - sqrt(3)/2), gamma(2R) = 0."""
    disc = DiscCovariance(2.0)
    found = disc.along(np.array([0.0, 2.0, 4.0, 9.0]))
    wanted = [4 * math.pi, 4 * (2 * math.pi / 3 - math.sqrt(3) / 2), 0.0, 0.0]
    assert found == pytest.approx(wanted, abs=1e-12)


def test_dishes_agree_with_polygons_and_with_their_mask() -> None:
    """As polygons of 360 and of 64 sides: within 0.0001 % and 0.1 % of the area; mask 0.05 %."""
    for sides, most in ((90, 1e-6), (16, 1e-3)):
        area = shapely.Point(7, 4).buffer(2.2, quad_segs=sides)
        h = steps(area, 2, 1.0)
        exact = shared_with(area, h)
        found = set_covariance(area).at(h[:, 0], h[:, 1])
        assert np.abs(found - exact).max() < most * area.area
        mask = mask_covariance(area).at(h[:, 0], h[:, 1])
        assert np.abs(mask - exact).max() < 1e-3 * area.area
        assert np.abs(mask[:40] - exact[:40]).max() < 3e-4 * area.area


@pytest.mark.parametrize("name", AREAS)
def test_masks_agree_with_polygons_cut_by_polygons(name: str) -> None:
    """0.05 % of the area, 0.15 % at steps of a cell or two; holes and several parts included."""
    area = AREAS[name]
    h = steps(area, 3, 0.7)
    off = np.abs(mask_covariance(area).at(h[:, 0], h[:, 1]) - shared_with(area, h)) / area.area
    assert off[:40].max() < 6e-4
    assert off.max() < 1.5e-3
    assert off[-1] < 1e-12  # at no step, the area itself


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 100_000))
def test_masks_agree_in_ragged_areas(seed: int) -> None:
    area = ragged(seed)
    h = steps(area, seed, 0.7)
    off = np.abs(mask_covariance(area).at(h[:, 0], h[:, 1]) - shared_with(area, h)) / area.area
    assert off.max() < 3e-3


def test_a_step_and_its_opposite_share_as_much() -> None:
    h = steps(LEAF, 4, 0.7)
    gamma = set_covariance(LEAF)
    assert np.array_equal(gamma.at(*h.T), gamma.at(*-h.T))


def test_the_integral_is_the_square_of_the_area() -> None:
    """Matheron (1975): the covariogram's integral over all steps is A^2."""
    for area in (LEAF, PARTS):
        found = mask_covariance(area)
        both = 2 * found.table[1:].sum() + found.table[0].sum()
        assert both * found.cell**2 == pytest.approx(area.area**2, rel=1e-4)


def test_beyond_the_area_nothing_is_shared() -> None:
    far = np.array([100.0, -100.0, 0.0, 0.0]), np.array([0.0, 0.0, 100.0, -100.0])
    for area in (SQUARE, LEAF, PARTS):
        assert (set_covariance(area).at(*far) == 0).all()


def test_steps_stay_short_where_the_area_is_narrow() -> None:
    narrow = shapely.box(0, 0, 100, 1)
    assert longest_useful(narrow, set_covariance(narrow), left=0.25) == pytest.approx(
        0.75, abs=0.05
    )
    assert longest_useful(SQUARE, set_covariance(SQUARE), left=0.25) == pytest.approx(7.07, abs=0.1)


def test_a_covariance_is_read_only_and_travels() -> None:
    gamma = set_covariance(LEAF)
    with pytest.raises(ValueError, match="read-only"):
        gamma.table[0, 0] = 1.0
    there = pickle.loads(pickle.dumps(gamma))
    assert there.at(np.array([1.0]), np.array([1.0])) == gamma.at(np.array([1.0]), np.array([1.0]))
    assert repr(gamma).startswith("MaskCovariance(")


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 100_000), st.integers(3, 40))
def test_cells_are_covered_as_polygons_cut_them(seed: int, cells: int) -> None:
    area = ragged(seed)
    x0, y0, x1, y1 = area.bounds
    cell = max(x1 - x0, y1 - y0) / cells
    shape = (cells + 1, cells + 1)
    found = covered(area, cell=cell, shape=shape)
    i, j = np.indices(shape)
    boxes = shapely.box(x0 + j * cell, y0 + i * cell, x0 + (j + 1) * cell, y0 + (i + 1) * cell)
    exact = shapely.area(shapely.intersection(boxes, area)) / cell**2
    assert found == pytest.approx(exact, abs=1e-9)
    assert found.sum() * cell**2 == pytest.approx(area.area, rel=1e-9)


@pytest.mark.parametrize("name", AREAS)
def test_the_cover_sums_to_the_area(name: str) -> None:
    """Edges along grid lines, holes, several parts."""
    area = AREAS[name]
    x0, y0, x1, y1 = area.bounds
    for cell in (1.0, 0.5, 0.37):
        shape = (math.ceil((y1 - y0) / cell), math.ceil((x1 - x0) / cell))
        assert covered(area, cell=cell, shape=shape).sum() * cell**2 == pytest.approx(area.area)
