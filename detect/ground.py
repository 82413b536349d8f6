"""What colour the ground has, at each place: the commonest colour, followed across the picture."""

from __future__ import annotations

from collections.abc import Sequence

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.constants import Mask, Settling, pooled, thinned

Map = NDArray[np.float32]
# The ground is followed on a small map, on which the smallest object measures this many pixels.
_SMALL_PX = 4.0
_ROUNDS = 3


def followed_ground(
    labs: Sequence[Map],
    insides: Sequence[Mask],
    settling: Settling,
    *,
    smallest_px: float,
    largest_px: float,
) -> list[Map]:
    """Follow the ground's colour across pieces of one picture.

    Parameters
    ----------
    labs : sequence of ndarray of shape (height, width, 3), float32
        Pieces of one photograph in L*, a*, b*.
    insides : sequence of ndarray of bool, shape (height, width)
        The study area on each piece; pixels outside it have no say.
    settling : Settling
        Settles `commonest`, the picture's commonest colour, and `reaches`, how far from the ground
        a colour may lie to have a say in it, once per round.
    smallest_px, largest_px : float
        Range of object diameters in pixels of the pieces.

    Returns
    -------
    list of ndarray of shape (height, width, 3), float32
        The ground's colour everywhere.

    Notes
    -----
    Local means with redescending weights: pixels far from the ground as it is known so far have
    next to no weight [1]_.

    References
    ----------
    .. [1] Geman S, McClure DE (1987). Statistical methods for tomographic image reconstruction.
       Bulletin of the International Statistical Institute 52(4), 5-21.
    """
    shrink = min(1.0, _SMALL_PX / smallest_px)
    smalls = [_smaller(lab, shrink) for lab in labs]
    usable = [_usable(inside, small) for inside, small in zip(insides, smalls, strict=True)]
    commonest = settling.settle("commonest", lambda: commonest_colour(pooled(smalls, usable)))
    grounds: list[Map] = [np.broadcast_to(commonest, small.shape) for small in smalls]
    reaches: list[float] = []
    for k in range(_ROUNDS):
        away2 = [
            ((small - ground) ** 2).sum(axis=2)
            for small, ground in zip(smalls, grounds, strict=True)
        ]
        reaches.append(
            _reach(away2, usable) if settling.known is None else settling.known.reaches[k]
        )
        weights = [
            (use / (1.0 + away / reaches[k] ** 2) ** 2).astype(np.float32)
            for use, away in zip(usable, away2, strict=True)
        ]
        grounds = [
            _smooth_ratio(small, weight, 1.5 * largest_px * shrink, ground)
            for small, weight, ground in zip(smalls, weights, grounds, strict=True)
        ]
    settling.settle("reaches", lambda: tuple(reaches))
    return [_enlarged(ground, lab) for ground, lab in zip(grounds, labs, strict=True)]


def local_mean(lab: Map, weight: Map, smallest_px: float, largest_px: float, fallback: Map) -> Map:
    """Weighted local mean, computed on a small map and enlarged.

    Parameters
    ----------
    lab : ndarray of shape (height, width, 3), float32
    weight : ndarray of shape (height, width), float32
    smallest_px, largest_px : float
        Range of object diameters in pixels; the mean reaches one and a half times the largest.
    fallback : ndarray of shape (height, width, 3), float32
        Taken where no weight reaches.

    Returns
    -------
    ndarray of shape (height, width, 3), float32
    """
    shrink = min(1.0, _SMALL_PX / smallest_px)
    small = _smaller(lab * weight[..., None], shrink)
    small_weight = cv2.resize(weight, small.shape[1::-1], interpolation=cv2.INTER_AREA)
    small /= np.maximum(small_weight, 1e-6)[..., None]
    small_fallback = cv2.resize(fallback, small.shape[1::-1], interpolation=cv2.INTER_AREA)
    mean = _smooth_ratio(small, small_weight, 1.5 * largest_px * shrink, small_fallback)
    return _enlarged(mean, lab)


def commonest_colour(sample: Map) -> NDArray[np.float32]:
    """Mode of (n, 3) colours: fullest cell of a smoothed coarse histogram, then mean shift."""
    low, high = np.percentile(sample, [0.5, 99.5], axis=0)
    cell = float(np.clip((high - low).max() / 40, 0.25, 6.0))
    bins = np.maximum(1, np.ceil((high - low) / cell).astype(int) + 2)
    index = np.clip(((sample - low) / cell).astype(int) + 1, 0, bins - 1)
    counts = np.bincount(np.ravel_multi_index(tuple(index.T), tuple(bins)), minlength=bins.prod())
    cube = counts.reshape(bins).astype(np.float64)
    for axis in range(3):
        padded = np.pad(cube, [(1, 1) if a == axis else (0, 0) for a in range(3)])
        n = bins[axis]
        parts = [np.take(padded, range(k, k + n), axis=axis) for k in range(3)]
        cube = parts[0] + parts[1] + parts[2]
    fullest = np.array(np.unravel_index(np.argmax(cube), tuple(bins)))
    mode = (fullest - 0.5) * cell + low
    for _ in range(5):
        near = ((sample - mode) ** 2).sum(axis=1) < (2 * cell) ** 2
        if not near.any():
            break
        mode = sample[near].mean(axis=0)
    return np.asarray(mode, dtype=np.float32)


def _smaller(lab: Map, shrink: float) -> Map:
    """Area averages of a piece on the small map."""
    return np.asarray(cv2.resize(lab, None, fx=shrink, fy=shrink, interpolation=cv2.INTER_AREA))


def _enlarged(small: Map, lab: Map) -> Map:
    """Bring a small map to the size of its piece."""
    return np.asarray(cv2.resize(small, lab.shape[1::-1], interpolation=cv2.INTER_LINEAR))


def _usable(inside: Mask, small: Map) -> Mask:
    """Which pixels of the small map lie in the study area."""
    share = cv2.resize(inside.astype(np.float32), small.shape[1::-1], interpolation=cv2.INTER_AREA)
    usable: Mask = share > 0.5
    return usable if usable.any() else share > 0


def _reach(away2: Sequence[Map], usable: Sequence[Mask]) -> float:
    """How far from the ground a colour may lie to have a say, from the nearest tenth."""
    near = thinned([away[use] for away, use in zip(away2, usable, strict=True)])
    return max(1.0, 2.0 * float(np.percentile(np.sqrt(near), 10)))


def _smooth_ratio(values: Map, weight: Map, sigma: float, fallback: Map) -> Map:
    """Gaussian mean of (h, w, 3) values under weights; `fallback` where no weight reaches."""
    top = blur(values * weight[..., None], sigma)
    bottom = blur(weight, sigma)[..., None]
    tiny = 1e-4
    return np.asarray((top + tiny * fallback) / (bottom + tiny), dtype=np.float32)


def blur(values: Map, sigma: float) -> Map:
    """Gaussian blur; wide ones on a reduced map, where they are exact enough and cheap."""
    reduce = int(max(1, min(sigma // 4, min(values.shape[:2]) // 4)))
    if reduce == 1:
        return np.asarray(cv2.GaussianBlur(values, (0, 0), sigma, borderType=cv2.BORDER_REFLECT))
    size = (max(1, values.shape[1] // reduce), max(1, values.shape[0] // reduce))
    small = cv2.resize(values, size, interpolation=cv2.INTER_AREA)
    small = cv2.GaussianBlur(small, (0, 0), sigma / reduce, borderType=cv2.BORDER_REFLECT)
    return np.asarray(cv2.resize(small, values.shape[1::-1], interpolation=cv2.INTER_LINEAR))
