"""Pictures of the spots on the photograph: shape and colour tell how each of them stands."""

from __future__ import annotations

import math
from collections.abc import Sequence

import cv2
import numpy as np
import shapely
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.photograph import Photograph, StoredPixels
from detect.spots import Spots

Picture = NDArray[np.uint8]
Points = NDArray[np.float64]
Ink = tuple[int, int, int]
DOUBTFUL = 0.5  # above this a spot is more likely false than real
LONGEST_SIDE = 2400
_JPEG_QUALITY = 88
_SURE: Ink = (0, 222, 200)
_UNSURE: Ink = (255, 180, 40)
_STRUCK: Ink = (222, 222, 222)
_PLACED: Ink = (206, 146, 255)
_OUTLINE: Ink = (255, 255, 255)
_HALO: Ink = (14, 18, 26)
_SMALLEST = 3.0  # radius of the smallest mark, in pixels of the picture
_SHIFT = 4  # OpenCV draws at sixteenths of a pixel
_TURN = np.linspace(0.0, 2.0 * np.pi, 49)[:-1]
_CIRCLE = np.column_stack([np.cos(_TURN), np.sin(_TURN)])
_DIAMOND = np.array([[0.0, -1.3], [1.3, 0.0], [0.0, 1.3], [-1.3, 0.0]])
_CROSS = (np.array([[-0.8, -0.8], [0.8, 0.8]]), np.array([[-0.8, 0.8], [0.8, -0.8]]))
_SQUARE = np.array([[-1.0, -1.0], [1.0, -1.0], [1.0, 1.0], [-1.0, 1.0]])


def draw_overlay(
    photograph: Photograph, area: StudyArea, spots: Spots, *, longest_side: int = LONGEST_SIDE
) -> Picture:
    """Draw every spot and the study area on the photograph.

    Parameters
    ----------
    photograph : Photograph
        The photograph.
    area : StudyArea
        Its outline is drawn white and dashed.
    spots : Spots
        Counted ones as teal circles of their true radius; doubtful ones (doubt above 0.5) amber,
        with a small square beside them; struck ones as grey crosses; placed ones as violet
        diamonds.
    longest_side : int
        The picture is made a whole number of times smaller so that no side is longer, in pixels.

    Returns
    -------
    ndarray of shape (height, width, 3), uint8
        Red, green and blue.
    """
    # By a whole number, which is several times as fast.
    shrink = 1.0 / math.ceil(max(photograph.width, photograph.height) / longest_side)
    picture = _in_8_bits(photograph.reduced(shrink=shrink))
    stroke = max(1, round(max(picture.shape[:2]) / 1000))
    _draw(picture, _dashes(area, shrink, 9.0 * stroke), _OUTLINE, stroke, closed=False)
    # Pixel centres are at whole numbers, so the picture's corner is at -0.5 and stays there.
    centres = (spots.centres + 0.5) * shrink - 0.5
    radii = np.maximum(spots.radius * shrink, _SMALLEST)
    placed = spots.counted & ~spots.found
    unsure = spots.counted & spots.found & (spots.doubt > DOUBTFUL)
    sure = spots.counted & spots.found & ~unsure
    _draw(picture, _marks([_CIRCLE], centres[sure], radii[sure]), _SURE, stroke)
    _draw(picture, _marks([_DIAMOND], centres[placed], radii[placed]), _PLACED, stroke)
    _draw(picture, _marks([_CIRCLE], centres[unsure], radii[unsure]), _UNSURE, stroke)
    _draw_ticks(picture, centres[unsure], radii[unsure], stroke)
    struck = ~spots.counted
    _draw(picture, _marks(_CROSS, centres[struck], radii[struck]), _STRUCK, stroke, closed=False)
    return picture


def overlay_jpeg(
    photograph: Photograph, area: StudyArea, spots: Spots, *, longest_side: int = LONGEST_SIDE
) -> bytes:
    """Draw every spot and the study area as `draw_overlay` does, and return a JPEG file's bytes."""
    picture = draw_overlay(photograph, area, spots, longest_side=longest_side)
    quality = [cv2.IMWRITE_JPEG_QUALITY, _JPEG_QUALITY]
    done, data = cv2.imencode(".jpg", cv2.cvtColor(picture, cv2.COLOR_RGB2BGR), quality)
    if not done:
        raise RuntimeError("the overlay could not be encoded as JPEG")
    return data.tobytes()


def _in_8_bits(stored: StoredPixels) -> Picture:
    """Copy pixels of any depth to be drawn on."""
    if stored.dtype == np.uint8:
        return np.array(stored, dtype=np.uint8)
    return np.round(stored * np.float32(255.0 / np.iinfo(stored.dtype).max)).astype(np.uint8)


def _draw(
    picture: Picture, lines: Sequence[Points], ink: Ink, stroke: int, *, closed: bool = True
) -> None:
    """Draw lines with a dark halo, all halos before the first stroke."""
    places = [np.round(line * (1 << _SHIFT)).astype(np.int32).reshape(-1, 1, 2) for line in lines]
    for colour, width in ((_HALO, stroke + 2), (ink, stroke)):
        cv2.polylines(picture, places, closed, colour, width, cv2.LINE_AA, _SHIFT)


def _draw_ticks(picture: Picture, centres: Points, radii: Points, stroke: int) -> None:
    """Put a small filled square, always of one size, at the upper right of each circle."""
    half = 2.0 * stroke
    corner = centres + ((radii + 2.0 * half) * np.sqrt(0.5))[:, None] * [1.0, -1.0]
    for colour, size in ((_HALO, half + 1.5), (_UNSURE, half)):
        for square in _marks([_SQUARE], corner, np.full(len(corner), size)):
            place = np.round(square * (1 << _SHIFT)).astype(np.int32)
            cv2.fillConvexPoly(picture, place, colour, cv2.LINE_AA, _SHIFT)


def _marks(shape: Sequence[Points], centres: Points, radii: Points) -> list[Points]:
    """Put a shape of radius 1 at each centre, at its size."""
    return [
        centre + radius * part
        for centre, radius in zip(centres, radii, strict=True)
        for part in shape
    ]


def _dashes(area: StudyArea, shrink: float, dash: float) -> list[Points]:
    """Cut the area's outlines, in pixels of the picture, into dashes."""
    dashes: list[Points] = []
    for part in shapely.get_parts(area.polygon):
        for ring in (part.exterior, *part.interiors):
            outline = (np.asarray(ring.coords)[:, :2] + 0.5) * shrink - 0.5
            dashes += _ring_dashes(outline, dash)
    return dashes


def _ring_dashes(outline: Points, dash: float) -> list[Points]:
    """Cut one closed outline into dashes with gaps two thirds as long."""
    along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(outline, axis=0).T))])
    count = max(1, round(along[-1] / (dash * 5 / 3)))
    period = along[-1] / count
    steps = np.linspace(0.0, 0.6 * period, max(2, int(period / 3.0)))
    at = np.arange(count)[:, None] * period + steps
    x, y = (np.interp(at, along, outline[:, k]) for k in (0, 1))
    return list(np.stack([x, y], axis=-1))
