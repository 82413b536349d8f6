"""In which direction of colour things stand out from the ground, and on which side of it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.constants import Mask, pooled
from detect.threshold import otsu

Map = NDArray[np.float32]
Colour = Literal["auto", "grey", "green", "red", "blue", "yellow", "brown", "purple"]
Polarity = Literal["auto", "dark", "bright"]

# Directions in L*, a*, b* along which a named colour stands out from a neutral ground.
NAMED: dict[str, tuple[float, float, float]] = {
    "green": (-0.4, -1.0, 0.2),
    "red": (0.0, 1.0, 0.4),
    "blue": (0.0, 0.0, -1.0),
    "yellow": (0.0, 0.0, 1.0),
    "brown": (-0.8, 0.4, 0.4),
    "purple": (-0.3, 0.8, -0.8),
}


def named_direction(colour: Colour) -> NDArray[np.float64] | None:
    """Return the unit direction of a named colour; None for "auto" and "grey"."""
    if colour not in NAMED:
        return None
    direction = np.array(NAMED[colour])
    return np.asarray(direction / np.linalg.norm(direction))


def principal_axis(sample: Map, calming: float) -> NDArray[np.float64]:
    """Find the direction in which things stand out.

    Parameters
    ----------
    sample : ndarray of shape (n, 3), float32
        Deviations from the ground.
    calming : float
        Power of a channel's spread on the ground by which it is divided.

    Returns
    -------
    ndarray of shape (3,)
        First principal axis about zero of the clear deviations, each capped at their median length
        so that one rare strong colour cannot take it; its sign says nothing.

    References
    ----------
    Pearson K (1901). On lines and planes of closest fit to systems of points in space.
    Philosophical Magazine 2, 559-572.
    """
    spread = 1.4826 * np.median(np.abs(sample), axis=0) + 0.5
    metric = (spread / spread.max()) ** -calming
    sample = sample * metric
    length = np.linalg.norm(sample, axis=1)
    clear = sample[length > 3.0 * np.percentile(length, 30)]
    if len(clear) < 20:
        clear = sample[length >= np.percentile(length, 90)]
    length = np.maximum(np.linalg.norm(clear, axis=1), 1e-6)
    capped = (clear * np.minimum(1.0, np.median(length) / length)[:, None]).astype(np.float64)
    _, vectors = np.linalg.eigh(capped.T @ capped)
    axis = vectors[:, -1] * metric
    return np.asarray(axis / np.linalg.norm(axis))


def evidence(maps: Sequence[Map], insides: Sequence[Mask], largest_px: float) -> float:
    """Weigh whether objects are positive: skewness, and which side falls apart in pieces.

    Parameters
    ----------
    maps : sequence of ndarray of shape (height, width), float32
        Deviations along the direction, on pieces of one picture.
    insides : sequence of ndarray of bool, shape (height, width)
        The study area on each.
    largest_px : float
        Largest diameter in pixels.

    Returns
    -------
    float
        -1.5..1.5; positive when objects are.
    """
    sample = pooled(maps, insides)
    values = sample.astype(np.float64)
    spread = float(np.sqrt((values**2).mean())) or 1.0
    third = float((np.clip(values / spread, -4, 4) ** 3).mean())
    return float(_piecewise(maps, insides, otsu(sample), largest_px) + 0.5 * np.tanh(third))


def _piecewise(
    maps: Sequence[Map], insides: Sequence[Mask], cut: float, largest_px: float
) -> float:
    """-1..1: positive when what lies above the cut falls apart in pieces below largest_px."""
    size = max(3, round(0.5 * largest_px) | 1)
    element = cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (size, size))
    ground = things = 0
    for signed, inside in zip(maps, insides, strict=True):
        upper = (signed > cut) & inside
        rest = (~upper & inside).astype(np.uint8)
        ground += int(cv2.morphologyEx(rest, cv2.MORPH_OPEN, element).sum())
        things += int(cv2.morphologyEx(upper.astype(np.uint8), cv2.MORPH_OPEN, element).sum())
    return float((ground - things) / max(1, ground + things))
