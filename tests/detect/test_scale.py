"""Scales: what a known line, dish or rectangle says about millimetres, and how surely."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detect.dish import Dish, Ellipse
from detect.errors import OptionWrong
from detect.scale import (
    DISH_UNCERTAINTY,
    Scale,
    scale_from_corners,
    scale_from_dish,
    scale_from_line,
)

CORNERS = np.array([[110.0, 95.0], [905.0, 120.0], [880.0, 700.0], [140.0, 690.0]])


def plane(tilt_deg: float, towards_deg: float) -> np.ndarray:
    """Map of a level plane in mm to pixels of a pinhole camera, written out from its definition."""
    tilt, towards = math.radians(tilt_deg), math.radians(towards_deg)
    axis = np.array([math.cos(towards), math.sin(towards), 0.0])
    cross = np.array([[0, -axis[2], axis[1]], [axis[2], 0, -axis[0]], [-axis[1], axis[0], 0]])
    turn = np.eye(3) + math.sin(tilt) * cross + (1 - math.cos(tilt)) * cross @ cross
    view = np.column_stack([turn[:, 0], turn[:, 1], [0.0, 0.0, 1500.0]])
    return np.array([[1200.0, 0, 600], [0, 1200.0, 450], [0, 0, 1]]) @ view


def seen(matrix: np.ndarray, points: np.ndarray) -> np.ndarray:
    mapped = np.column_stack([points, np.ones(len(points))]) @ matrix.T
    return mapped[:, :2] / mapped[:, 2:]


def test_a_line_gives_its_length() -> None:
    scale = scale_from_line((100, 100), (400, 500), 50.0)
    assert scale.source == "line"
    a, b = scale.to_mm([[100, 100], [400, 500]])
    assert math.dist(a, b) == pytest.approx(50.0)
    assert scale.mm_per_px([[0, 0], [900, 900]]) == pytest.approx([0.1, 0.1])
    assert scale.note == "a line of 50 mm, 500.0 pixels long"


def test_the_uncertainty_of_a_line_is_what_repeated_reading_shows() -> None:
    rng = np.random.default_rng(3)
    ends = np.array([[50.0, 60.0], [350.0, 460.0]]) + rng.normal(0, 1.5, (4000, 2, 2))
    read = [scale_from_line(p, q, 80.0).mm_per_px([[0, 0]])[0] for p, q in ends]
    stated = scale_from_line((50, 60), (350, 460), 80.0, end_uncertainty_px=1.5)
    assert np.std(read) / np.mean(read) == pytest.approx(stated.relative_uncertainty, rel=0.05)


def test_a_dish_becomes_a_circle_without_turning() -> None:
    inner = Ellipse(500.0, 400.0, 310.0, 300.0, 30.0)
    scale = scale_from_dish(Dish(inner, None, 1.0, 0.3), 86.0)
    outline = scale.to_mm(inner.outline())
    centre = scale.to_mm([[500.0, 400.0]])
    np.testing.assert_allclose(np.hypot(*(outline - centre).T), 43.0, rtol=1e-12)
    linear = scale.matrix[:2, :2]
    np.testing.assert_allclose(linear, linear.T, atol=1e-15)  # symmetric: nothing is turned
    assert (np.linalg.eigvalsh(linear) > 0).all()
    np.testing.assert_allclose(scale.to_mm([[0, 0]]), 0, atol=1e-12)
    assert scale.note == "the dish's inner diameter of 86 mm, 620.0 by 600.0 pixels"


@pytest.mark.parametrize(
    ("scatter", "spread", "expected"),
    [
        (0.0, 0.0, DISH_UNCERTAINTY),
        (3.0, 0.0, math.hypot(DISH_UNCERTAINTY, 0.01)),
        (3.0, 0.004, math.hypot(DISH_UNCERTAINTY, 0.01, 0.004)),
    ],
)
def test_the_uncertainty_of_a_dish_follows_its_edge(
    scatter: float, spread: float, expected: float
) -> None:
    dish = Dish(Ellipse(500, 400, 300.0, 300.0, 0.0), None, 1.0, scatter, spread)
    assert scale_from_dish(dish, 86.0).relative_uncertainty == pytest.approx(expected)


def test_the_note_tells_what_tilt_leaves_open() -> None:
    dish = Dish(Ellipse(500, 400, 300.0, 290.0, 0.0), None, 1.0, tilt_deg=14.8)
    assert scale_from_dish(dish, 86.0).note == (
        "the dish's inner diameter of 86 mm, 600.0 by 580.0 pixels, seen 15 degrees aslant,"
        " so that short lengths near its edge are sure to 2.6 %"
    )


@pytest.mark.parametrize("tilt", [0.0, 6.0, 15.0])
def test_corners_undo_a_camera_s_tilt(tilt: float) -> None:
    matrix = plane(tilt, 40.0)
    corners_mm = np.array([[-500, -375], [500, -375], [500, 375], [-500, 375]], float)
    scale = scale_from_corners(seen(matrix, corners_mm), 1000.0, 750.0)
    points = np.random.default_rng(1).uniform(-370, 370, (40, 2))
    np.testing.assert_allclose(scale.to_mm(seen(matrix, points)) - [500, 375], points, atol=1e-8)
    assert scale.note == "four corners of a rectangle of 1000 x 750 mm"


def test_the_uncertainty_of_corners_bounds_what_repeated_reading_shows() -> None:
    rng = np.random.default_rng(4)
    square = np.array([[100, 100], [700, 100], [700, 700], [100, 700]], float)
    stated = scale_from_corners(square, 600.0, 600.0).relative_uncertainty
    sides = []
    for shifts in rng.normal(0, 1, (2000, 4, 2)):
        a, b = scale_from_corners(square + shifts, 600.0, 600.0).to_mm([[100, 100], [700, 100]])
        sides.append(math.dist(a, b))
    assert stated == pytest.approx(math.sqrt(2) / 600)
    assert np.std(sides) / 600 == pytest.approx(stated, rel=0.1)


@settings(deadline=None)
@given(
    tilt=st.floats(0, 20),
    towards=st.floats(0, 360),
    x=st.floats(0, 1200),
    y=st.floats(0, 900),
)
def test_every_scale_maps_there_and_back(tilt: float, towards: float, x: float, y: float) -> None:
    corners = seen(
        plane(tilt, towards), np.array([[-400, -300], [400, -300], [400, 300], [-400, 300]])
    )
    for scale in (
        scale_from_corners(corners, 800.0, 600.0),
        scale_from_line((3, 4), (60, 90), 12.0),
        scale_from_dish(Dish(Ellipse(600, 450, 400, 380, towards % 180), None, 1.0), 90.0),
    ):
        np.testing.assert_allclose(scale.to_px(scale.to_mm([[x, y]])), [[x, y]], atol=1e-6)
        kept = Scale.from_dict(scale.as_dict())
        np.testing.assert_array_equal(kept.to_mm([[x, y]]), scale.to_mm([[x, y]]))


@settings(deadline=None)
@given(tilt=st.floats(0, 15), towards=st.floats(0, 360), x=st.floats(0, 1200), y=st.floats(0, 900))
def test_the_local_scale_is_that_of_a_small_square(
    tilt: float, towards: float, x: float, y: float
) -> None:
    corners = seen(
        plane(tilt, towards), np.array([[-400, -300], [400, -300], [400, 300], [-400, 300]])
    )
    scale = scale_from_corners(corners, 800.0, 600.0)
    a, b, c = scale.to_mm([[x, y], [x + 0.01, y], [x, y + 0.01]])
    area = abs((b - a)[0] * (c - a)[1] - (b - a)[1] * (c - a)[0])
    assert scale.mm_per_px([[x, y]])[0] == pytest.approx(math.sqrt(area) / 0.01, rel=1e-3)


ORDER = "The corners are in another order than top left, top right, bottom right, bottom left"


@pytest.mark.parametrize(
    ("corners", "message"),
    [
        (CORNERS[[1, 2, 3, 0]], ORDER),
        (CORNERS[[2, 3, 0, 1]], ORDER),
        (CORNERS[[3, 0, 1, 2]], ORDER),
        (CORNERS[[0, 3, 2, 1]], ORDER),
        (CORNERS[[0, 2, 1, 3]], "The corners make an outline that crosses itself or is dented;"),
        ([[0, 0], [100, 0], [20, 20], [0, 100]], "an outline that crosses itself or is dented;"),
        ([[0, 0], [50, 0], [100, 0], [0, 80]], "Three of the corners lie on one line or coincide;"),
        ([[0, 0], [0, 0], [100, 80], [0, 80]], "Three of the corners lie on one line or coincide;"),
        (CORNERS[:3], "The corners must be 4 positions of x and y, not 6 numbers; give them in"),
        (np.where(CORNERS == 95, np.nan, CORNERS), "The corners must be finite numbers, not"),
    ],
)
def test_impossible_corners_are_told(corners: np.ndarray, message: str) -> None:
    with pytest.raises(OptionWrong) as caught:
        scale_from_corners(corners, 1000.0, 750.0)
    assert message in str(caught.value)


@pytest.mark.parametrize("wrong", [0.0, -5.0, math.nan, math.inf])
def test_impossible_lengths_are_told(wrong: float) -> None:
    dish = Dish(Ellipse(500, 400, 300.0, 300.0, 0.0), None, 1.0)
    tail = rf" must be a positive number of millimetres, not {wrong:g}\."
    with pytest.raises(OptionWrong, match="The line's length" + tail):
        scale_from_line((0, 0), (10, 0), wrong)
    with pytest.raises(OptionWrong, match="The dish's inner diameter" + tail):
        scale_from_dish(dish, wrong)
    with pytest.raises(OptionWrong, match="The plot's width" + tail):
        scale_from_corners(CORNERS, wrong, 100.0)
    with pytest.raises(OptionWrong, match="The plot's height" + tail):
        scale_from_corners(CORNERS, 100.0, wrong)
    with pytest.raises(OptionWrong, match=r"Millimetres per pixel must be a positive number, not"):
        Scale.from_mm_per_pixel(wrong)


def test_impossible_ends_are_told() -> None:
    with pytest.raises(OptionWrong, match=r"The line's ends are 0 pixels apart; mark two ends"):
        scale_from_line((7, 7), (7, 7), 10.0)
    with pytest.raises(OptionWrong, match=r"The line's ends must be finite numbers, not .*; give"):
        scale_from_line((7, math.nan), (7, 9), 10.0)
    with pytest.raises(OptionWrong, match=r"The line's ends must be 2 positions of x and y, not 6"):
        scale_from_line((7, 8, 9), (1, 2, 3), 10.0)


@pytest.mark.parametrize(
    "matrix", [np.zeros((3, 3)), np.diag([1.0, -1.0, 1.0]), np.full((3, 3), np.nan)]
)
def test_a_map_of_no_plane_is_told(matrix: np.ndarray) -> None:
    with pytest.raises(
        OptionWrong, match=r"The scale from the line is not a map of a plane; check"
    ):
        Scale(matrix, "line", 0.0, "")
