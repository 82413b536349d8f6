"""How a shape is drawn so that it can be seen on any photograph."""

from __future__ import annotations

from collections.abc import Sequence

import cv2
import numpy as np
import shapely
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.photograph import StoredPixels

Picture = NDArray[np.uint8]
Points = NDArray[np.float64]
Ink = tuple[int, int, int]
LONGEST_SIDE = 2400
HALO: Ink = (14, 18, 26)
SMALLEST = 3.0  # radius of the smallest mark, in pixels of the picture
SHIFT = 4  # OpenCV draws at sixteenths of a pixel
_JPEG_QUALITY = 88
_TURN = np.linspace(0.0, 2.0 * np.pi, 49)[:-1]
CIRCLE = np.column_stack([np.cos(_TURN), np.sin(_TURN)])


def in_8_bits(stored: StoredPixels) -> Picture:
    """Copy pixels of any depth to be drawn on."""
    if stored.dtype == np.uint8:
        return np.array(stored, dtype=np.uint8)
    return np.round(stored * np.float32(255.0 / np.iinfo(stored.dtype).max)).astype(np.uint8)


def draw_lines(
    picture: Picture, lines: Sequence[Points], ink: Ink, stroke: int, *, closed: bool = True
) -> None:
    """Draw lines with a dark halo, all halos before the first stroke."""
    places = [np.round(line * (1 << SHIFT)).astype(np.int32).reshape(-1, 1, 2) for line in lines]
    for colour, width in ((HALO, stroke + 2), (ink, stroke)):
        cv2.polylines(picture, places, closed, colour, width, cv2.LINE_AA, SHIFT)


def placed_at(shape: Sequence[Points], centres: Points, radii: Points) -> list[Points]:
    """Put a shape of radius 1 at each centre, at its size."""
    return [
        centre + radius * part
        for centre, radius in zip(centres, radii, strict=True)
        for part in shape
    ]


def jpeg_bytes(picture: Picture) -> bytes:
    """Return the bytes of a JPEG file of a picture."""
    quality = [cv2.IMWRITE_JPEG_QUALITY, _JPEG_QUALITY]
    done, data = cv2.imencode(".jpg", cv2.cvtColor(picture, cv2.COLOR_RGB2BGR), quality)
    if not done:
        raise RuntimeError("a picture could not be encoded as JPEG")
    return data.tobytes()


def dashes(area: StudyArea, shrink: float, dash: float) -> list[Points]:
    """Cut the area's outlines, in pixels of the picture, into dashes."""
    found: list[Points] = []
    for part in shapely.get_parts(area.polygon):
        for ring in (part.exterior, *part.interiors):
            outline = (np.asarray(ring.coords)[:, :2] + 0.5) * shrink - 0.5
            found += _ring_dashes(outline, dash)
    return found


def _ring_dashes(outline: Points, dash: float) -> list[Points]:
    """Cut one closed outline into dashes with gaps two thirds as long."""
    along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(outline, axis=0).T))])
    count = max(1, round(along[-1] / (dash * 5 / 3)))
    period = along[-1] / count
    steps = np.linspace(0.0, 0.6 * period, max(2, int(period / 3.0)))
    at = np.arange(count)[:, None] * period + steps
    x, y = (np.interp(at, along, outline[:, k]) for k in (0, 1))
    return list(np.stack([x, y], axis=-1))
