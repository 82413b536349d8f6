"""How much the ground varies, and above which contrast a pixel is more likely object than ground."""

from __future__ import annotations

from collections.abc import Sequence

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.constants import Mask, thinned

Map = NDArray[np.float32]


def noise_and_threshold(values: NDArray[np.float32]) -> tuple[float, float]:
    """Estimate the noise from the side no object lies on, and the base threshold.

    Parameters
    ----------
    values : ndarray of shape (n,), float32
        A sample of the contrast map.

    Returns
    -------
    noise, threshold : float
        The threshold is Otsu's, but no more than four times the noise or 0.4 of what is usual above
        that.
    """
    below = values[values < 0]
    noise = 1.4826 * float(np.median(-below)) if below.size else 0.0
    noise = max(noise, 1e-3)
    clear = values[values > 4.0 * noise]
    upper = max(4.0 * noise, 0.4 * float(np.median(clear))) if clear.size else 4.0 * noise
    return noise, max(min(otsu(values), upper), noise)


def otsu(values: NDArray[np.float32]) -> float:
    """Return Otsu's threshold on 256 bins between the 0.1 and 99.9 percentiles.

    References
    ----------
    Otsu N (1979). A threshold selection method from gray-level histograms. IEEE Transactions on
    Systems, Man, and Cybernetics 9, 62-66.
    """
    low, high = np.percentile(values, [0.1, 99.9])
    if not high > low:
        return float(high)
    counts, edges = np.histogram(np.clip(values, low, high), bins=256)
    centres = 0.5 * (edges[:-1] + edges[1:])
    weight = np.cumsum(counts)[:-1].astype(np.float64)
    total = np.cumsum(counts * centres)
    rest = counts.sum() - weight
    mean_low = total[:-1] / np.maximum(weight, 1)
    mean_high = (total[-1] - total[:-1]) / np.maximum(rest, 1)
    between = weight * rest * (mean_low - mean_high) ** 2
    return float(centres[:-1][np.argmax(between)])


def grain_of(maps: Sequence[Map], insides: Sequence[Mask]) -> float:
    """Estimate the noise from pixel to pixel with a mask that sees no slope.

    Parameters
    ----------
    maps : sequence of ndarray of shape (height, width), float32
        One value per pixel, on pieces of one picture.
    insides : sequence of ndarray of bool, shape (height, width)
        The study area on each.

    Returns
    -------
    float
        Robust standard deviation.

    References
    ----------
    Immerkaer J (1996). Fast noise variance estimation. Computer Vision and Image Understanding 64,
    300-302.
    """
    mask = np.array([[1, -2, 1], [-2, 4, -2], [1, -2, 1]], dtype=np.float32) / 6.0
    seen = [
        cv2.filter2D(np.asarray(values), -1, mask, borderType=cv2.BORDER_REFLECT)[inside]
        for values, inside in zip(maps, insides, strict=True)
    ]
    return 1.4826 * float(np.median(np.abs(thinned(seen))))
