"""What tilt does to a circle: against a pinhole camera worked out here."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from detect.dish import Dish, Ellipse
from detect.rings import RAY_DIRECTIONS, SHAPES, Frame
from detect.scale import scale_from_dish
from detect.tilt import RADII_AWAY, far_centre, onto_circle, sine_of_tilt

RADIUS_MM = 43.0
MIDDLE = np.array([700.0, 500.0])


def seen(points_mm: np.ndarray, height_mm: float, tilt: float, towards: float) -> np.ndarray:
    """Pixels of points on a level plane, from RADII_AWAY radii, with the lens on the origin."""
    away = RADII_AWAY * RADIUS_MM
    lean = np.array([math.cos(towards), math.sin(towards)])
    x = points_mm @ lean
    across = points_mm @ np.array([-lean[1], lean[0]])
    along = x * math.cos(tilt) - height_mm * math.sin(tilt)
    depth = away - x * math.sin(tilt) - height_mm * math.cos(tilt)
    flat = np.outer(along / depth, lean) + np.outer(across / depth, [-lean[1], lean[0]])
    return np.asarray(MIDDLE + 9.0 * away * flat)


def ellipse_through(points: np.ndarray) -> Frame:
    start = Frame(points.mean(0), np.eye(2) * 387.0)
    for _ in range(6):  # rays of the frame are not the circle's, so come nearer by turns
        back = (points - start.centre) @ np.linalg.inv(start.matrix).T
        turn = np.argsort(np.arctan2(back[:, 1], back[:, 0]))
        angles = np.arctan2(*back[turn].T[::-1])
        distances = np.interp(
            np.arctan2(*RAY_DIRECTIONS.T[::-1]), angles, np.hypot(*back[turn].T), period=2 * np.pi
        )
        shape = np.linalg.lstsq(SHAPES, distances, rcond=None)[0]
        start = start.around(shape)
    return start


def circle(radius_mm: float) -> np.ndarray:
    turn = np.linspace(0, 2 * np.pi, 2000, endpoint=False)
    return radius_mm * np.column_stack([np.cos(turn), np.sin(turn)])


@given(x=st.floats(-0.6, 0.6), y=st.floats(-0.6, 0.6))
def test_the_circle_stays_and_the_far_point_becomes_its_centre(x: float, y: float) -> None:
    matrix = onto_circle((x, y))

    def mapped(points: np.ndarray) -> np.ndarray:
        out = np.column_stack([points, np.ones(len(points))]) @ matrix.T
        return out[:, :2] / out[:, 2:]

    np.testing.assert_allclose(np.hypot(*mapped(circle(1.0)).T), 1.0, rtol=1e-9)
    np.testing.assert_allclose(mapped(np.array([[x, y]])), 0.0, atol=1e-9)
    assert np.linalg.det(matrix) > 0


@pytest.mark.parametrize("tilt_deg", [4.0, 10.0, 20.0])
@pytest.mark.parametrize("towards_deg", [30.0, 200.0])
def test_distances_on_a_tilted_dish_are_right(tilt_deg: float, towards_deg: float) -> None:
    tilt, towards = math.radians(tilt_deg), math.radians(towards_deg)
    inner = ellipse_through(seen(circle(RADIUS_MM), 0.0, tilt, towards))
    rim = ellipse_through(seen(circle(45.0), 10.0, tilt, towards))
    assert math.degrees(math.asin(sine_of_tilt(inner))) == pytest.approx(tilt_deg, abs=0.4)
    far = far_centre(inner, rim, MIDDLE)
    (short, long), axes = np.linalg.eigh(inner.matrix)
    angle = math.degrees(math.atan2(axes[1, 1], axes[0, 1]))
    dish = Dish(Ellipse(*inner.centre, long, short, angle), None, 1.0, far=far, tilt_deg=tilt_deg)
    scale = scale_from_dish(dish, 2 * RADIUS_MM)
    true = np.random.default_rng(2).uniform(-29, 29, (300, 2))
    found = scale.to_mm(seen(true, 0.0, tilt, towards))
    apart = np.hypot(*(true[1:] - true[:-1]).T)
    off = np.hypot(*(found[1:] - found[:-1]).T) / apart - 1
    assert np.abs(off).max() < 0.004
    flat = scale_from_dish(Dish(dish.inner, None, 1.0), 2 * RADIUS_MM)
    found = flat.to_mm(seen(true, 0.0, tilt, towards))
    without = np.hypot(*(found[1:] - found[:-1]).T) / apart - 1
    assert np.abs(without).max() > 3 * np.abs(off).max()


def test_a_rim_that_is_not_shifted_makes_no_tilt() -> None:
    level = Frame(MIDDLE, np.diag([300.0, 299.0]))
    assert far_centre(level, Frame(MIDDLE, np.eye(2) * 320.0), MIDDLE) == (0.0, 0.0)
