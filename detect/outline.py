"""Where each spot ends: its outline settled on half the contrast inside."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from detect.contrast import Map
from detect.regions import Candidates

_RAYS = 24
_STEPS = np.linspace(0.4, 1.6, 37)


def settle_outlines(regions: Candidates, contrast: Map) -> NDArray[np.float64]:
    """Factor by which each region's ellipse must grow to end where contrast is halved.

    A region cut at a high level is too small, one cut at a low level too large; the half-height
    outline does not depend on the level.

    Parameters
    ----------
    regions : Candidates
        Chosen regions.
    contrast : ndarray of shape (height, width), float32
        The signed contrast map.

    Returns
    -------
    ndarray of shape (n,)
        Factor on the radius, within 0.7..1.4; 1 where fewer than a third of the rays cross.
    """
    n = len(regions)
    if n == 0:
        return np.zeros(0)
    half = 0.5 * (regions.sxx + regions.syy)
    root = np.sqrt(np.maximum((0.5 * (regions.sxx - regions.syy)) ** 2 + regions.sxy**2, 0.0))
    long = 2.0 * np.sqrt(half + root)
    short = 2.0 * np.sqrt(np.maximum(half - root, 0.05))
    turn = 0.5 * np.arctan2(2 * regions.sxy, regions.sxx - regions.syy)
    # The circle of equal area sets the size, the moments only the shape.
    size = np.sqrt(regions.area / np.pi / (long * short))
    ray = np.arange(_RAYS) * 2 * np.pi / _RAYS
    u, v = np.outer(long * size, np.cos(ray)), np.outer(short * size, np.sin(ray))
    dx = u * np.cos(turn)[:, None] - v * np.sin(turn)[:, None]
    dy = u * np.sin(turn)[:, None] + v * np.cos(turn)[:, None]
    at = np.stack(
        [
            regions.y[:, None, None] + dy[..., None] * _STEPS,
            regions.x[:, None, None] + dx[..., None] * _STEPS,
        ]
    )
    profile = ndimage.map_coordinates(contrast, at, order=1, mode="nearest")
    return _median_crossing(profile, regions.contrast)


def _median_crossing(
    profile: NDArray[np.float32], inside: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Median over the rays of the first step at which contrast falls below half that inside."""
    below = profile < 0.5 * inside[:, None, None]
    # A ring's pale middle is no end: the crossing is looked for from the crest outwards.
    crest = profile[..., : _STEPS.size * 2 // 3].argmax(axis=-1)
    after = np.arange(_STEPS.size) >= crest[..., None]
    hit = below & after
    crossed = hit.any(axis=-1)
    step = np.where(crossed, _STEPS[hit.argmax(axis=-1)], np.nan)
    enough = crossed.sum(axis=1) >= _RAYS / 3
    factor = np.ones(inside.size)
    if enough.any():
        factor[enough] = np.nanmedian(step[enough], axis=1)
    return np.clip(factor, 0.7, 1.4)
