"""Where each single leaf lies: pieces of the contrast map, touching leaves parted at their necks."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from detect.contrast import Contrast, Map, Mask
from detect.regions import Column, Labels
from detect.splitting import split_regions

# A pixel is leaf above this multiple of the threshold, and above this share of the contrast around
# it within these shares of the smallest plant: soft shadows between bright leaves are not.
_CUT, _SHARE, _AROUND, _SOFT = 1.5, 0.6, 0.7, 0.15
# Pieces below this share of the smallest plant's disc are crumbs.
_LEAST_AREA = 0.01
# Leaves part where the distance to the ground, and one pixel more as it is known to no better, dips
# below this share of the lower peak; a peak lies at least this share of the smallest diameter
# within; without a touch of smoothing a ridge of equal distances has many peaks.
_TOGETHER, _WHOLE_PX, _DEEP, _TOUCH = 0.9, 1.0, 0.05, 0.018
# Two pieces are one leaf where together they fill this share of an ellipse at least so slim.
_FILLED, _SLIM = 0.9, 2.3


@dataclass(frozen=True, slots=True, eq=False)
class Blades:
    """Single leaves, or pieces of leaves, as columns of one length, in pixels of the map.

    Parameters
    ----------
    labels : ndarray of shape (height, width), int32
        0 for ground, k + 1 for row k.
    x, y : ndarray of shape (n,)
        Centroids.
    area : ndarray of shape (n,)
        Pixels.
    long, short : ndarray of shape (n,)
        Half axes of the ellipse of equal second moments.
    cosine, sine : ndarray of shape (n,)
        Direction of the long axis.
    hue : ndarray of shape (n, 2)
        Mean a* and b*.
    """

    labels: Labels
    x: Column
    y: Column
    area: Column
    long: Column
    short: Column
    cosine: Column
    sine: Column
    hue: NDArray[np.float64]

    def __len__(self) -> int:
        return int(self.x.size)

    @property
    def plain(self) -> Column:
        """How plain the axis is: long over short less 1, at most 3; 0 for a disc."""
        return np.asarray(np.minimum(self.long / self.short - 1.0, 3.0))

    @property
    def slim(self) -> Column:
        """Half length over the radius of the circle of equal area: 1 for a disc."""
        return np.asarray(np.sqrt(self.long / self.short))


def find_blades(contrast: Contrast, lab: Map, inside: Mask, smallest_px: float) -> Blades:
    """Find the single leaves.

    Parameters
    ----------
    contrast : Contrast
        The map before leaves are fused.
    lab : ndarray of shape (height, width, 3), float32
        L*, a* and b* of the same pixels.
    inside : ndarray of bool
        The study area on the same map.
    smallest_px : float
        Smallest plant's diameter in pixels of the map.

    Returns
    -------
    Blades
    """
    disc = np.pi / 4 * smallest_px**2
    labels, count = _components(_leaf_mask(contrast, inside, smallest_px), _LEAST_AREA * disc)
    distance = cv2.distanceTransform((labels > 0).astype(np.uint8), cv2.DIST_L2, 5)
    distance = cv2.GaussianBlur(distance, (0, 0), max(_TOUCH * smallest_px, 0.25))
    pieces = split_regions(
        labels,
        count,
        distance=distance,
        relief=distance + np.float32(_WHOLE_PX),
        smallest_px=5.0 * _DEEP * smallest_px,
        largest_px=smallest_px,
        together=_TOGETHER,
    )
    if pieces is not None:
        labels, count = _with_the_whole_ones(labels, count, *pieces[:2])
    blades = _measured(labels, count, lab)
    same = _cut_across(blades)
    if same is None:
        return blades
    return _measured(np.r_[0, same + 1].astype(np.int32)[labels], int(same.max()) + 2, lab)


def _leaf_mask(contrast: Contrast, inside: Mask, smallest_px: float) -> Mask:
    smooth = cv2.GaussianBlur(contrast.map, (0, 0), max(0.03 * smallest_px, 0.5))
    size = 2 * int(_AROUND * smallest_px / 2) + 1
    disc = cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (size, size))
    around = cv2.GaussianBlur(cv2.dilate(smooth, disc), (0, 0), _SOFT * smallest_px)
    lowest = np.maximum(_SHARE * around, np.float32(_CUT * contrast.threshold))
    return np.asarray((smooth > lowest) & inside)


def _components(mask: Mask, least: float) -> tuple[Labels, int]:
    """Label connected regions of at least so many pixels; give one more than the highest."""
    _, labels, stats, _ = cv2.connectedComponentsWithStats(mask.astype(np.uint8), connectivity=4)
    usable = stats[:, cv2.CC_STAT_AREA] >= least
    usable[0] = False
    new = np.where(usable, np.cumsum(usable), 0).astype(np.int32)
    return new[labels], int(usable.sum()) + 1


def _with_the_whole_ones(
    labels: Labels, count: int, pieces: Labels, pieces_count: int
) -> tuple[Labels, int]:
    """Label the pieces of what falls apart, and what stays whole, from 1 upwards without gaps."""
    both = np.where(pieces > 0, pieces, np.where(labels > 0, labels + pieces_count, 0))
    used = np.bincount(both.ravel(), minlength=count + pieces_count) > 0
    used[0] = False
    new = np.where(used, np.cumsum(used), 0).astype(np.int32)
    return new[both], int(used.sum()) + 1


def _cut_across(blades: Blades) -> NDArray[np.intp] | None:
    """Renumber the leaves so that slim ones cut across are one; None where there are none."""
    up, left = blades.labels[:-1], blades.labels[:, :-1]
    down, right = blades.labels[1:], blades.labels[:, 1:]
    meet = [
        np.column_stack([a[m], b[m]])
        for a, b in ((up, down), (left, right))
        for m in [(a > 0) & (b > 0) & (a != b)]
    ]
    pairs = np.unique(np.sort(np.vstack(meet), axis=1), axis=0).astype(np.intp) - 1
    i, j = pairs.T
    xx, yy, xy = _moments(blades)
    n = blades.area[i] + blades.area[j]
    share = blades.area[i] * blades.area[j] / n**2
    dx, dy = blades.x[j] - blades.x[i], blades.y[j] - blades.y[i]
    joint = [
        (blades.area[i] * m[i] + blades.area[j] * m[j]) / n + share * d
        for m, d in ((xx, dx * dx), (yy, dy * dy), (xy, dx * dy))
    ]
    half = 0.5 * (joint[0] + joint[1])
    root = np.sqrt((0.5 * (joint[0] - joint[1])) ** 2 + joint[2] ** 2)
    long, short = half + root, np.maximum(half - root, 1 / 12)
    one = (n > _FILLED * 4 * np.pi * np.sqrt(long * short)) & (long > _SLIM**2 * short)
    if not one.any():
        return None
    size = (len(blades), len(blades))
    links = coo_array((np.ones(int(one.sum())), (i[one], j[one])), shape=size)
    return np.asarray(connected_components(links, directed=False)[1], dtype=np.intp)


def _moments(blades: Blades) -> tuple[Column, Column, Column]:
    """Central second moments from the half axes: xx, yy, xy."""
    a, b = (blades.long / 2) ** 2, (blades.short / 2) ** 2
    c, s = blades.cosine, blades.sine
    return a * c * c + b * s * s, a * s * s + b * c * c, (a - b) * c * s


def _measured(labels: Labels, count: int, lab: Map) -> Blades:
    at = np.flatnonzero(labels)
    label = labels.ravel()[at]
    y, x = np.divmod(at, labels.shape[1])
    n = np.maximum(np.bincount(label, minlength=count), 1).astype(np.float64)
    mx, my = (np.bincount(label, v, count) / n for v in (x, y))
    dx, dy = x - mx[label], y - my[label]
    sxx, syy, sxy = (np.bincount(label, v, count) / n for v in (dx * dx, dy * dy, dx * dy))
    half = 0.5 * (sxx + syy) + 1 / 12
    root = np.sqrt((0.5 * (sxx - syy)) ** 2 + sxy**2)
    turn = 0.5 * np.arctan2(2 * sxy, sxx - syy)
    hue = [np.bincount(label, lab[..., k].ravel()[at], count) / n for k in (1, 2)]
    long, short = 2 * np.sqrt(half + root), 2 * np.sqrt(np.maximum(half - root, 1 / 12))
    columns = (mx, my, n, long, short, np.cos(turn), np.sin(turn), np.column_stack(hue))
    return Blades(labels, *(column[1:] for column in columns))
