"""Pictures of the spots on the photograph: shape and colour tell how each of them stands."""

from __future__ import annotations

import math

import cv2
import numpy as np

from detect.area import StudyArea
from detect.photograph import Photograph
from detect.spots import Spots
from detect.strokes import (
    CIRCLE,
    HALO,
    LONGEST_SIDE,
    SHIFT,
    SMALLEST,
    Ink,
    Picture,
    Points,
    dashes,
    draw_lines,
    in_8_bits,
    jpeg_bytes,
    placed_at,
)

DOUBTFUL = 0.5  # above this a spot is more likely false than real
_SURE: Ink = (0, 222, 200)
_UNSURE: Ink = (255, 180, 40)
_STRUCK: Ink = (222, 222, 222)
_PLACED: Ink = (206, 146, 255)
_OUTLINE: Ink = (255, 255, 255)
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
    picture = in_8_bits(photograph.reduced(shrink=shrink, quick=True))
    stroke = max(1, round(max(picture.shape[:2]) / 1000))
    draw_lines(picture, dashes(area, shrink, 9.0 * stroke), _OUTLINE, stroke, closed=False)
    # Pixel centres are at whole numbers, so the picture's corner is at -0.5 and stays there.
    centres = (spots.centres + 0.5) * shrink - 0.5
    radii = np.maximum(spots.radius * shrink, SMALLEST)
    placed = spots.counted & ~spots.found
    unsure = spots.counted & spots.found & (spots.doubt > DOUBTFUL)
    sure = spots.counted & spots.found & ~unsure
    draw_lines(picture, placed_at([CIRCLE], centres[sure], radii[sure]), _SURE, stroke)
    draw_lines(picture, placed_at([_DIAMOND], centres[placed], radii[placed]), _PLACED, stroke)
    draw_lines(picture, placed_at([CIRCLE], centres[unsure], radii[unsure]), _UNSURE, stroke)
    _draw_ticks(picture, centres[unsure], radii[unsure], stroke)
    struck = ~spots.counted
    draw_lines(
        picture, placed_at(_CROSS, centres[struck], radii[struck]), _STRUCK, stroke, closed=False
    )
    return picture


def overlay_jpeg(
    photograph: Photograph, area: StudyArea, spots: Spots, *, longest_side: int = LONGEST_SIDE
) -> bytes:
    """Draw every spot and the study area as `draw_overlay` does, and return a JPEG file's bytes."""
    return jpeg_bytes(draw_overlay(photograph, area, spots, longest_side=longest_side))


def _draw_ticks(picture: Picture, centres: Points, radii: Points, stroke: int) -> None:
    """Put a small filled square, always of one size, at the upper right of each circle."""
    half = 2.0 * stroke
    corner = centres + ((radii + 2.0 * half) * np.sqrt(0.5))[:, None] * [1.0, -1.0]
    for colour, size in ((HALO, half + 1.5), (_UNSURE, half)):
        for square in placed_at([_SQUARE], corner, np.full(len(corner), size)):
            place = np.round(square * (1 << SHIFT)).astype(np.int32)
            cv2.fillConvexPoly(picture, place, colour, cv2.LINE_AA, SHIFT)
