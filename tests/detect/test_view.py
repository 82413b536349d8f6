"""The working grid: where its pixels lie in the photograph, and which of them are in the area."""

from __future__ import annotations

import numpy as np
import pytest
import shapely
from skimage.color import rgb2lab

from detect.area import StudyArea, frame_area
from detect.contrast import to_lab
from detect.errors import AreaWrong
from detect.view import view_of
from tests.scenes import photograph_of, plain_noise


def area_of(polygon: shapely.Polygon) -> StudyArea:
    return StudyArea(polygon, "polygon", "")


def grid(photograph_view: object, height: int, width: int) -> np.ndarray:
    y, x = np.mgrid[:height, :width].astype(np.float64)
    return np.column_stack(photograph_view.to_photograph(x.ravel(), y.ravel()))


@pytest.mark.parametrize("shrink", [1.0, 0.5, 0.37])
def test_working_positions_return_to_the_photograph(shrink: float) -> None:
    y, x = np.mgrid[:300, :400]
    ramps = np.dstack([x / 400, y / 300, np.zeros_like(x)])
    photograph = photograph_of(ramps, bits=16)
    area = area_of(shapely.box(50.2, 40.7, 310.5, 250.1))
    view = view_of(photograph, area, shrink=shrink)
    small = photograph.pixels(shrink=shrink, box=(50, 41, 311, 251))
    height, width = view.lab.shape[:2]
    at = grid(view, height, width)
    assert np.abs(at[:, 0] - 400 * small[..., 0].ravel()).max() < 0.6 / shrink
    assert np.abs(at[:, 1] - 300 * small[..., 1].ravel()).max() < 0.6 / shrink
    assert np.abs((at[:, 0] - 400 * small[..., 0].ravel()).mean()) < 0.02 / shrink
    assert view.shrink == pytest.approx(shrink, rel=0.02)


def test_a_strongly_reduced_view_has_even_sides_and_its_place() -> None:
    """An even number of pixels is averaged several times as fast; the frame may leave an odd one."""
    y, x = np.mgrid[:301, :401]
    photograph = photograph_of(np.dstack([x / 401, y / 301, np.zeros_like(x)]), bits=16)
    view = view_of(photograph, area_of(shapely.box(50.2, 40.7, 310.5, 250.1)), shrink=0.2)
    height, width = view.lab.shape[:2]
    assert (width / view.shrink_x, height / view.shrink_y) == pytest.approx((262, 210))
    small = photograph.pixels(shrink=0.2, box=(50, 41, 312, 251))
    at = grid(view, height, width)
    off = at[:, 0] - 401 * small[..., 0].ravel()
    assert np.abs(off).max() < 0.6 / 0.2
    assert abs(off.mean()) < 0.02 / 0.2
    whole = view_of(photograph, frame_area(401, 301), shrink=0.2)
    assert (whole.lab.shape[1] / whole.shrink_x, whole.left) == pytest.approx((401, 0))


def test_the_mask_is_the_area_with_its_holes() -> None:
    hole = shapely.Point(150, 120).buffer(30)
    outline = shapely.Polygon([(20, 30), (300, 10), (280, 200), (60, 220)]).difference(hole)
    far = shapely.box(310, 150, 390, 240)
    area = area_of(shapely.unary_union([outline, far]))
    view = view_of(plain_noise(), area, shrink=0.5)
    at = grid(view, *view.inside.shape)
    deep = area.contains(at) & (shapely.distance(shapely.points(at), area.polygon.boundary) > 2)
    out = ~area.contains(at) & (shapely.distance(shapely.points(at), area.polygon.boundary) > 2)
    inside = view.inside.ravel()
    assert inside[deep].all()
    assert deep.sum() > 5000
    assert not inside[out].any()


def test_an_area_outside_the_photograph_is_refused() -> None:
    with pytest.raises(AreaWrong) as trouble:
        view_of(plain_noise(), area_of(shapely.box(2000, 10, 2100, 90)), shrink=1.0)
    assert str(trouble.value) == (
        "The study area lies outside the photograph; check its coordinates."
    )


def test_colours_are_those_of_another_library() -> None:
    # skimage.color.rgb2lab, D65 white, is an implementation of its own; OpenCV reads a table.
    rgb = np.random.default_rng(1).uniform(size=(20, 30, 3)).astype(np.float32)
    assert np.abs(to_lab(rgb) - rgb2lab(rgb)).max() < 0.4


def test_the_whole_frame_is_the_whole_grid() -> None:
    photograph = plain_noise()
    view = view_of(photograph, frame_area(photograph.width, photograph.height), shrink=1.0)
    assert view.inside.shape == (photograph.height, photograph.width)
    assert view.inside.all()


def test_the_view_holds_the_pixels_that_the_area_reaches_into_and_no_more() -> None:
    view = view_of(plain_noise(), area_of(shapely.box(50.2, 40.7, 210.5, 150.6)), shrink=1.0)
    assert (view.left, view.top) == (50, 41)
    assert view.inside.shape == (152 - 41, 211 - 50)
