"""Straight edges from dark to bright: where they run, to a fraction of a pixel, and how surely."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.photograph import Photograph

Array = NDArray[Any]
Points = NDArray[np.float64]

_CLEAR_OF_CORNERS = 0.14  # of an edge that is left out at either end
# Neighbouring points of an edge err together: worn paint, crumbs, the grain of the picture. Our own
# calibration on drawn plots of the seeds 1200-1259 (tests/benchmarks/scale_marks.py).
_POINTS_ALIKE_PX = 9.0
_FLOOR_PX = 0.03


@dataclass(frozen=True, slots=True, eq=False)
class Edge:
    """A straight edge from dark to bright: two points on it, (2, 2), and how surely it lies there."""

    ends: Points
    uncertainty_px: float
    scatter_px: float
    contrast: float


def linear_patch(photograph: Photograph, points: Points, margin: float) -> tuple[Array, Points]:
    """Return the part of a picture around some points in linear grey, and its corner's place."""
    low = np.maximum(np.floor(points.min(axis=0) - margin), 0).astype(int)
    high = np.ceil(points.max(axis=0) + margin).astype(int) + 1
    right, bottom = min(int(high[0]), photograph.width), min(int(high[1]), photograph.height)
    left, top = min(int(low[0]), right - 1), min(int(low[1]), bottom - 1)
    grey = photograph.pixels(box=(left, top, right, bottom)).mean(axis=2)
    # 2.2 is close to the curve of IEC 61966-2-1 (sRGB), which cameras write by default.
    return grey ** np.float32(2.2), np.array([left, top], dtype=np.float64)


def edge_line(patch: Array, p: Points, q: Points, reach: float) -> Edge | None:
    """Settle the line of an edge that is dark on the right of p -> q (as seen) and bright on its left."""
    length = float(np.hypot(*(q - p)))
    if length < 4:
        return None
    along = (q - p) / length
    outwards = np.array([along[1], -along[0]])
    n = max(6, int(length * (1 - 2 * _CLEAR_OF_CORNERS)))
    t = np.linspace(_CLEAR_OF_CORNERS, 1 - _CLEAR_OF_CORNERS, n) * length
    steps = np.arange(-reach, reach + 0.125, 0.25)
    places = p + t[:, None, None] * along + steps[None, :, None] * outwards
    across = read_at(patch, places.reshape(-1, 2)).reshape(n, len(steps))
    offset, contrast = crossings(across, steps)
    if np.isfinite(offset).sum() < 5:
        return None
    slope, level, scatter, used = _trimmed_line(t[np.isfinite(offset)], offset[np.isfinite(offset)])
    if used < max(5, 0.4 * n):
        return None
    alone = max(2.0, used * (length / n) / _POINTS_ALIKE_PX)
    middle, arm = t.mean(), length * (1 - 2 * _CLEAR_OF_CORNERS) / np.sqrt(12)
    ends = np.array(
        [p + s * along + (level + slope * s) * outwards for s in (middle - arm, middle + arm)]
    )
    return Edge(ends, float(np.hypot(scatter / np.sqrt(alone), _FLOOR_PX)), scatter, contrast)


def crossings(across: Array, steps: Array) -> tuple[Array, float]:
    """Return where each row passes the middle between its dark start and its bright end.

    Parameters
    ----------
    across : ndarray of shape (n, m)
        Brightness across an edge.
    steps : ndarray of shape (m,)
        Distances at which it was read.

    Returns
    -------
    offset : ndarray of shape (n,)
        NaN where a row shows no such edge.
    contrast : float
        Median step from dark to bright.
    """
    quarter = max(1, len(steps) // 4)
    dark, bright = np.median(across[:, :quarter], axis=1), np.median(across[:, -quarter:], axis=1)
    step = bright - dark
    contrast = float(np.median(step))
    middle = 0.5 * (dark + bright)
    above = across >= middle[:, None]
    rising = above[:, 1:] & ~above[:, :-1]
    # Of several crossings the one next to where most rows cross is meant.
    typical = float(np.median(steps[:-1][rising.argmax(axis=1)])) if rising.any() else 0.0
    away = np.where(rising, np.abs(steps[:-1] - typical), np.inf)
    k = away.argmin(axis=1)
    rows = np.arange(len(across))
    low, high = across[rows, k], across[rows, k + 1]
    share = (middle - low) / np.where(high > low, high - low, 1.0)
    offset = steps[k] + share * (steps[1] - steps[0])
    seen = rising.any(axis=1) & (step > 0.5 * contrast) & (contrast > 0.02)
    return np.where(seen, offset, np.nan), contrast


def _trimmed_line(t: Array, offset: Array) -> tuple[float, float, float, int]:
    """Fit offset = level + slope t without what lies far off; return them, the scatter and number."""
    keep = np.abs(offset - np.median(offset)) < 3.0 + 3 * float(
        np.median(np.abs(offset - np.median(offset)))
    )
    slope, level, scatter = 0.0, float(np.median(offset)), 1.0
    for _ in range(4):
        slope, level = np.polyfit(t[keep], offset[keep], 1)
        away = offset - level - slope * t
        scatter = max(1.4826 * float(np.median(np.abs(away[keep]))), 0.02)
        better = np.abs(away) < 3 * scatter
        if better.sum() < 5:
            break
        keep = better
    spread = float(np.sqrt((away[keep] ** 2).sum() / max(keep.sum() - 2, 1)))
    return float(slope), float(level), spread, int(keep.sum())


def read_at(image: Array, points: Points) -> Array:
    """Read an image between its pixels at (n, 2) positions."""
    maps = [np.ascontiguousarray(points[:, k], dtype=np.float32)[:, None] for k in (0, 1)]
    read = cv2.remap(image, maps[0], maps[1], cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
    return np.asarray(read[:, 0], dtype=np.float64)
