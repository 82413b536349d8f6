"""What was found, missed and invented, drawn on the photograph."""

from __future__ import annotations

import math

import cv2
import numpy as np

from detect.area import StudyArea
from detect.compared import Compared
from detect.photograph import Photograph
from detect.strokes import (
    CIRCLE,
    LONGEST_SIDE,
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

LEAST_SIDE = 900
# Three shapes first, for who sees no colour; and three colours that differ in lightness and hue to
# every kind of colour vision (from the set of Okabe and Ito, 2008).
HIT: Ink = (86, 180, 233)
MISSED: Ink = (240, 228, 66)
FALSE: Ink = (255, 120, 40)
_OUTLINE: Ink = (255, 255, 255)
_GROUND: Ink = (28, 34, 40)
_WORDS: Ink = (240, 240, 240)
# The corners of a square about an object that was missed; a triangle about a spot that is none.
_CORNERS = [
    np.array([[a * 1.15, b * 0.45], [a * 1.15, b * 1.15], [a * 0.45, b * 1.15]])
    for a in (-1.0, 1.0)
    for b in (-1.0, 1.0)
]
_TRIANGLE = 1.6 * np.array([[0.0, -1.0], [math.sqrt(0.75), 0.5], [-math.sqrt(0.75), 0.5]])
_FONT = cv2.FONT_HERSHEY_SIMPLEX


def draw_scored(
    photograph: Photograph,
    area: StudyArea,
    compared: Compared,
    *,
    longest_side: int = LONGEST_SIDE,
    least_side: int = LEAST_SIDE,
) -> Picture:
    """Draw what became of every true object and every counted spot.

    Parameters
    ----------
    photograph : Photograph
        The photograph.
    area : StudyArea
        Its outline is drawn white and dashed.
    compared : Compared
        Its true objects that were found are drawn as blue circles, as large as the spot; those that
        were missed as the four corners of a yellow square, as large as the object; spots that are
        no object as orange triangles.
    longest_side : int
        The picture is made smaller so that no side is longer, in pixels.
    least_side : int
        A small picture is enlarged, by a whole number, until its longer side has as many.

    Returns
    -------
    ndarray of shape (height + legend, width, 3), uint8
        Red, green and blue; a legend with the three numbers stands below the photograph.
    """
    longer = max(photograph.width, photograph.height)
    shrink = 1.0 / math.ceil(longer / longest_side)
    picture = in_8_bits(photograph.reduced(shrink=shrink))
    grow = max(1, math.ceil(least_side / max(picture.shape[:2])))
    if grow > 1:
        shrink *= grow
        picture = picture.repeat(grow, axis=0).repeat(grow, axis=1)
    stroke = max(2, round(max(picture.shape[:2]) / 800))
    draw_lines(picture, dashes(area, shrink, 9.0 * stroke), _OUTLINE, stroke, closed=False)
    claims, objects = compared.claims, compared.objects
    missed = ~objects.hit
    # Pixel centres are at whole numbers, so the picture's corner is at -0.5 and stays there.
    for ink, shape, closed, xy, radius in (
        (HIT, [CIRCLE], True, claims.xy[claims.real], claims.radius[claims.real]),
        (FALSE, [_TRIANGLE], True, claims.xy[~claims.real], claims.radius[~claims.real]),
        (MISSED, _CORNERS, False, objects.xy[missed], objects.radius[missed]),
    ):
        places = placed_at(
            shape, (xy + 0.5) * shrink - 0.5, np.maximum(radius * shrink, SMALLEST + stroke)
        )
        draw_lines(picture, places, ink, stroke, closed=closed)
    return np.vstack([picture, _legend(picture.shape[1], compared)])


def scored_jpeg(
    photograph: Photograph,
    area: StudyArea,
    compared: Compared,
    *,
    longest_side: int = LONGEST_SIDE,
) -> bytes:
    """Draw as `draw_scored` does, and return a JPEG file's bytes."""
    return jpeg_bytes(draw_scored(photograph, area, compared, longest_side=longest_side))


def _legend(width: int, compared: Compared) -> Picture:
    """Draw a strip with the three marks, what they mean and how many there are."""
    n_real = int(compared.claims.real.sum())
    entries: list[tuple[Ink, list[Points], bool, str]] = [
        (HIT, [CIRCLE], True, f"{n_real} found"),
        (MISSED, list(_CORNERS), False, f"{int((~compared.objects.hit).sum())} missed"),
        (FALSE, [_TRIANGLE], True, f"{len(compared.claims) - n_real} no object"),
    ]
    size = min(1.0, max(0.35, width / 1400))
    stroke, height = max(1, round(1.6 * size)), round(52 * size)
    strip = np.full((height, width, 3), _GROUND, dtype=np.uint8)
    x = 0.5 * height
    for ink, shape, closed, words in entries:
        places = placed_at(shape, np.array([[x, 0.52 * height]]), np.array([0.22 * height]))
        draw_lines(strip, places, ink, stroke, closed=closed)
        at = (round(x + 0.6 * height), round(0.5 * height + 9 * size))
        cv2.putText(strip, words, at, _FONT, 0.8 * size, _WORDS, stroke, cv2.LINE_AA)
        (length, _), _ = cv2.getTextSize(words, _FONT, 0.8 * size, stroke)
        x = at[0] + length + 0.9 * height
    return strip
