"""The scored picture: three shapes in three colours, each where it belongs, and a legend."""

from __future__ import annotations

from pathlib import Path

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray
from shapely.geometry import box

from detect.area import StudyArea
from detect.compared import Compared, compare_sheet
from detect.photograph import Photograph
from detect.scored_picture import FALSE, HIT, LEAST_SIDE, MISSED, draw_scored, scored_jpeg
from detect.sheet import PhotographIdentity, Sheet
from detect.spots import Spots
from detect.truth import Truth

AREA = StudyArea(box(5, 5, 394, 294), "plot", "")
INKS = {"hit": HIT, "missed": MISSED, "false": FALSE}


def a_photograph(width: int = 400, height: int = 300) -> Photograph:
    return Photograph(Path("a.jpg"), "0", np.full((height, width, 3), 128, np.uint8))


def compared(found: list[list[float]], true: list[list[float]], radius: float = 20.0) -> Compared:
    xy, truth = (np.array(p, float).reshape(-1, 2) for p in (found, true))
    spots = Spots.found_at(xy[:, 0], xy[:, 1], np.full(len(xy), radius))
    identity = PhotographIdentity("a.jpg", "0", 400, 300)
    sheet = Sheet(1, "0", identity, None, AREA, {}, spots)
    return compare_sheet(sheet, Truth(truth, np.full(len(truth), radius)))


def drawn(given: Compared) -> NDArray[np.uint8]:
    """The picture in the photograph's own size."""
    return draw_scored(a_photograph(), AREA, given, least_side=1)


def pixels_of(picture: NDArray[np.uint8], ink: tuple[int, int, int]) -> NDArray[np.float64]:
    near = np.abs(picture[:300].astype(int) - ink).max(axis=2) < 40
    return np.argwhere(near)[:, ::-1].astype(float)


def test_each_mark_is_where_it_belongs_and_nowhere_else() -> None:
    given = compared([[100, 100], [300, 100]], [[100, 100], [200, 200]])
    picture = drawn(given)
    for ink, place in ((HIT, [100, 100]), (FALSE, [300, 100]), (MISSED, [200, 200])):
        marks = pixels_of(picture, ink)
        assert len(marks) > 20
        assert np.hypot(*(marks - place).T).max() < 36


def test_the_three_shapes_differ() -> None:
    centre = [200, 150]
    hit = pixels_of(drawn(compared([centre], [centre])), HIT)
    missed = pixels_of(drawn(compared([], [centre])), MISSED)
    false = pixels_of(drawn(compared([centre], [])), FALSE)
    assert np.hypot(*(hit - centre).T) == pytest.approx(20, abs=2.0)
    # The corners of a square: nothing in the middle of its sides, all of it on its sides.
    along = np.abs(missed - centre)
    assert along.max(axis=1) == pytest.approx(23, abs=2.0)
    assert along.min(axis=1).min() > 6
    # A triangle that points up: as wide at its foot as it is high, and one point at the top.
    top = false[false[:, 1] < 125]
    assert len(top) > 0
    assert np.abs(top[:, 0] - 200).max() < 6
    foot = false[false[:, 1] > 160]
    assert np.ptp(foot[:, 0]) == pytest.approx(2 * 1.6 * 20 * np.sqrt(0.75), abs=4)


def seen(ink: tuple[int, int, int], matrix: list[list[float]] | None) -> NDArray[np.float64]:
    """A colour as L*, a*, b*, as it is or as a dichromat sees it."""
    value = np.array(ink, float) / 255
    linear = np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)
    if matrix is not None:
        linear = np.clip(np.array(matrix) @ linear, 0, 1)
    shown = np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055)
    lab: NDArray[np.float64] = cv2.cvtColor(shown[None, None].astype(np.float32), cv2.COLOR_RGB2Lab)
    return lab[0, 0]


# Machado GM, Oliveira MM, Fernandes LAF (2009), A physiologically-based model for simulation of
# color vision deficiency, IEEE TVCG 15, 1291-1298, severity 1 (values from memory).
DICHROMATS = {
    "all": None,
    "no red": [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ],
    "no green": [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ],
    "no blue": [
        [1.255528, -0.076749, -0.178779],
        [-0.078411, 0.930809, 0.147602],
        [0.004733, 0.691367, 0.303900],
    ],
}


@pytest.mark.parametrize("eyes", DICHROMATS)
@pytest.mark.parametrize(
    ("one", "other"), [("hit", "missed"), ("hit", "false"), ("missed", "false")]
)
def test_the_three_colours_differ_to_every_eye(eyes: str, one: str, other: str) -> None:
    first, second = (seen(INKS[name], DICHROMATS[eyes]) for name in (one, other))
    assert np.hypot.reduce(first - second) > 20


def test_the_legend_stands_below_and_photographs_stay_as_they_are() -> None:
    photograph = a_photograph()
    picture = draw_scored(photograph, AREA, compared([], []), least_side=1)
    assert picture.shape[0] > 300
    assert picture.shape[1:] == (400, 3)
    assert (picture[20:280, 20:380] == 128).all()
    assert (photograph.stored == 128).all()
    strip = picture[300:].astype(int)
    for ink in INKS.values():
        assert (np.abs(strip - ink).max(axis=2) < 40).sum() > 5


def test_a_large_photograph_is_reduced_and_its_marks_with_it() -> None:
    given = compared([[100, 100]], [[100, 100]])
    picture = draw_scored(a_photograph(), AREA, given, longest_side=200, least_side=1)
    assert picture.shape[1] == 200
    marks = pixels_of(picture[:150], HIT)
    assert marks.mean(axis=0) == pytest.approx([49.75, 49.75], abs=0.6)


def test_a_small_photograph_is_enlarged_and_its_marks_with_it() -> None:
    picture = draw_scored(a_photograph(), AREA, compared([[100, 100]], [[100, 100]]))
    assert picture.shape[1] == 1200 >= LEAST_SIDE
    near = np.abs(picture[:900].astype(int) - HIT).max(axis=2) < 40
    marks = np.argwhere(near)[:, ::-1]
    assert marks.mean(axis=0) == pytest.approx([301, 301], abs=0.6)
    assert np.hypot(*(marks - [301, 301]).T) == pytest.approx(60, abs=2.5)


def test_a_scored_picture_is_a_jpeg_of_the_same_bytes_every_time() -> None:
    given = compared([[100, 100]], [[200, 200]])
    data = scored_jpeg(a_photograph(), AREA, given)
    assert data == scored_jpeg(a_photograph(), AREA, given)
    assert cv2.imdecode(np.frombuffer(data, np.uint8), cv2.IMREAD_COLOR) is not None
