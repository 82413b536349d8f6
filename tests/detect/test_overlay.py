"""The overlay puts each mark where the spot is, and tells standings apart by shape and colour."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray
from shapely.geometry import Point, box

from detect.area import StudyArea
from detect.overlay import draw_overlay, overlay_jpeg
from detect.photograph import Photograph
from detect.spots import Spots

TEAL, AMBER, GREY, VIOLET = (0, 222, 200), (255, 180, 40), (222, 222, 222), (206, 146, 255)
AREA = StudyArea(box(5, 5, 394, 294), "plot", "")


def a_photograph(width: int = 400, height: int = 300, dtype: type = np.uint8) -> Photograph:
    level = np.iinfo(dtype).max // 2
    return Photograph(Path("a.jpg"), "0", np.full((height, width, 3), level, dtype=dtype))


def pixels_of(
    picture: NDArray[np.uint8], colour: tuple[int, int, int], within: int = 40
) -> NDArray[np.float64]:
    """Positions of the pixels of about a colour, as x, y."""
    near = np.abs(picture.astype(int) - colour).max(axis=2) < within
    return np.argwhere(near)[:, ::-1].astype(float)


def one(**change: object) -> Spots:
    return replace(Spots.found_at([200], [150], [30]), **change)  # type: ignore[arg-type]


def test_a_sure_spot_is_a_teal_circle_of_its_true_radius() -> None:
    ring = pixels_of(draw_overlay(a_photograph(), AREA, one()), TEAL)
    assert np.hypot(*(ring - [200, 150]).T) == pytest.approx(30, abs=1.2)
    assert ring.mean(axis=0) == pytest.approx([200, 150], abs=0.1)
    assert len(np.unique(np.round(np.degrees(np.arctan2(*(ring - [200, 150]).T)) / 5))) == 73


def test_a_doubtful_spot_is_amber_with_a_tick_outside() -> None:
    marks = pixels_of(draw_overlay(a_photograph(), AREA, one(doubt=np.array([0.51]))), AMBER)
    distance = np.hypot(*(marks - [200, 150]).T)
    assert (np.abs(distance - 30) < 1.5).sum() > 100
    tick = marks[distance > 32]
    assert len(tick) >= 9
    assert (tick[:, 0] > 215).all()
    assert (tick[:, 1] < 135).all()


def test_half_a_doubt_is_still_sure() -> None:
    picture = draw_overlay(a_photograph(), AREA, one(doubt=np.array([0.5])))
    assert len(pixels_of(picture, AMBER)) == 0
    assert len(pixels_of(picture, TEAL)) > 100


def test_a_placed_spot_is_a_violet_diamond() -> None:
    marks = pixels_of(draw_overlay(a_photograph(), AREA, one(found=np.array([False]))), VIOLET)
    assert np.abs(marks - [200, 150]).sum(axis=1) == pytest.approx(39, abs=2)


def test_a_struck_spot_is_a_grey_cross() -> None:
    picture = draw_overlay(a_photograph(), AREA, one(counted=np.array([False])))
    marks = pixels_of(picture[100:200, 150:250], GREY) - 50.0
    assert len(marks) > 40
    assert np.abs(np.abs(marks[:, 0]) - np.abs(marks[:, 1])).max() <= 1.5


def test_each_stroke_has_a_dark_halo_on_both_sides() -> None:
    white = Photograph(Path("a.jpg"), "0", np.full((300, 400, 3), 255, dtype=np.uint8))
    row = draw_overlay(white, AREA, one())[150, 160:180].astype(int)
    assert np.abs(row[10] - TEAL).max() < 40
    assert row[8:10].sum(axis=1).min() < 250
    assert row[11:13].sum(axis=1).min() < 250


def test_the_area_is_dashed_and_holes_are_outlined() -> None:
    ring = Point(200, 150).buffer(120).difference(Point(200, 150).buffer(40))
    area = StudyArea(ring, "dish", "")
    white = pixels_of(draw_overlay(a_photograph(), area, Spots.none()), (255, 255, 255), 110)
    distance = np.hypot(*(white - [200, 150]).T)
    outer, inner = np.abs(distance - 120) < 1.5, np.abs(distance - 40) < 1.5
    assert outer.sum() + inner.sum() == len(white)
    assert 0.3 < outer.sum() / (2 * np.pi * 120) < 0.9
    assert inner.sum() > 50


def test_a_large_photograph_is_shrunk_and_marks_stay_in_place() -> None:
    spots = Spots.found_at([3001.5], [1501.5], [200])
    picture = draw_overlay(a_photograph(4000, 3000), AREA, spots, longest_side=1000)
    assert picture.shape == (750, 1000, 3)
    drawn = np.argwhere((picture[:, 400:] != 127).any(axis=2))[:, ::-1] + [400, 0]
    assert (drawn.min(axis=0) + drawn.max(axis=0)) / 2 == pytest.approx([750, 375], abs=0.5)
    assert np.ptp(drawn, axis=0) / 2 == pytest.approx([52, 52], abs=1.5)  # with the halo


def test_nothing_is_drawn_where_nothing_is() -> None:
    picture = draw_overlay(a_photograph(), AREA, Spots.none())
    assert (picture[20:280, 20:380] == 127).all()


def test_sixteen_bit_photographs_become_eight_bit_pictures() -> None:
    picture = draw_overlay(a_photograph(dtype=np.uint16), AREA, Spots.none())
    assert picture.dtype == np.uint8
    assert (picture[100, 100] == 127).all()


def test_the_photograph_itself_stays_as_it_is() -> None:
    photograph = a_photograph()
    draw_overlay(photograph, AREA, one())
    assert (photograph.stored == 127).all()


def test_spots_at_the_very_edge_can_be_drawn() -> None:
    spots = Spots.found_at([-0.5, 399.5, 200], [0, 299.5, 299], [1, 50, 3000])
    assert draw_overlay(a_photograph(), AREA, spots).shape == (300, 400, 3)


def test_the_jpeg_is_the_picture_in_true_colours() -> None:
    data = overlay_jpeg(a_photograph(), AREA, one())
    assert data[:2] == b"\xff\xd8"
    assert data == overlay_jpeg(a_photograph(), AREA, one())
    decoded = cv2.imdecode(np.frombuffer(data, np.uint8), cv2.IMREAD_COLOR)[:, :, ::-1]
    drawn = draw_overlay(a_photograph(), AREA, one())
    assert np.abs(decoded.astype(int) - drawn.astype(int)).mean() < 2
