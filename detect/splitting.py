"""Where touching objects part: cuts between the peaks of a relief, along a power diagram."""

from __future__ import annotations

import cv2
import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from detect.contrast import Map
from detect.regions import Column, Labels

# Only so many nearest peaks are kin to a peak; on noise there would be thousands within reach.
_NEAREST = 16


def split_regions(
    labels: Labels,
    count: int,
    *,
    distance: Map,
    relief: Map,
    smallest_px: float,
    largest_px: float,
    together: float = 0.95,
) -> tuple[Labels, int, Column] | None:
    """Cut each region between the peaks of a relief.

    Parameters
    ----------
    labels : ndarray of shape (height, width), int32
        0 for ground, 1..count - 1 for regions.
    count : int
        One more than the highest label.
    distance : ndarray of shape (height, width), float32
        Distance to the ground, smoothed; its value at a peak is that piece's radius.
    relief : ndarray of shape (height, width), float32
        Peaks of this map are the seeds: the distance itself, or distance and contrast combined.
    smallest_px, largest_px : float
        Range of object diameters in pixels.
    together : float
        Two peaks stay one when the relief between them stays above this share of the lower one.

    Returns
    -------
    (labels, count, neck) or None
        The pieces of the regions that fall apart, and for each label the width of the neck that
        joins it to its nearest kin over its own width; None when no region falls apart.

    Notes
    -----
    A pixel goes to the seed with least (distance^2 - radius^2), which is the power diagram [1]_:
    for overlapping discs it cuts along the line through the two points where they cross.

    References
    ----------
    .. [1] Aurenhammer F (1987). Power diagrams: properties, algorithms and applications. SIAM
       Journal on Computing 16, 78-96.
    """
    x, y, peak, owner = _peaks(relief, labels, distance, 0.2 * smallest_px)
    group = _joined(x, y, peak, owner, relief, 1.2 * largest_px, together)
    keep = _highest_of_each(group, peak)
    x, y, owner = x[keep], y[keep], owner[keep]
    several = np.bincount(owner, minlength=count) > 1
    if not several.any():
        return None
    radius = distance[y.astype(np.intp), x.astype(np.intp)].astype(np.float64)
    i, j, width = _saddles(x, y, owner, distance, 1.2 * largest_px)
    neck = np.zeros(x.size + 1)
    share = width / np.maximum(np.minimum(radius[i], radius[j]), 1e-6)
    np.maximum.at(neck, np.r_[i, j] + 1, np.r_[share, share])
    pieces = _power_pieces(labels, count, several, np.column_stack([x, y]), radius, owner)
    return *pieces, neck


def _peaks(
    relief: Map, labels: Labels, distance: Map, lowest: float
) -> tuple[Column, Column, Column, NDArray[np.intp]]:
    """Local maxima of the relief, far enough inside: x, y, height and the region of each."""
    top = cv2.dilate(relief, np.ones((3, 3), np.uint8))
    x, y = _middles((relief >= top) & (distance > lowest) & (labels > 0))
    inside = labels[y, x] > 0
    x, y = x[inside], y[inside]
    height = relief[y, x].astype(np.float64)
    return x.astype(np.float64), y.astype(np.float64), height, labels[y, x].astype(np.intp)


def _middles(marked: NDArray[np.bool_]) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Middle pixel, x and y, of each connected group (8 neighbours) of a few marked pixels."""
    at = np.flatnonzero(marked)
    y, x = np.divmod(at, marked.shape[1])
    if not at.size:
        return x, y
    links = [np.zeros((2, 0), np.intp)]
    for step in (1, marked.shape[1] - 1, marked.shape[1], marked.shape[1] + 1):
        next_one = np.searchsorted(at, at + step).clip(max=at.size - 1)
        beside = (at[next_one] == at + step) & (np.abs(x[next_one] - x) <= 1)
        beside &= y[next_one] - y <= 1
        links.append(np.stack([np.flatnonzero(beside), next_one[beside]]))
    i, j = np.concatenate(links, axis=1)
    graph = coo_array((np.ones(i.size), (i, j)), shape=(at.size, at.size))
    group = connected_components(graph, directed=False)[1]
    n = np.bincount(group)
    mx, my = (np.rint(np.bincount(group, v) / n).astype(np.intp) for v in (x, y))
    return mx, my


def _joined(
    x: Column,
    y: Column,
    peak: Column,
    owner: NDArray[np.intp],
    relief: Map,
    reach: float,
    together: float,
) -> NDArray[np.intp]:
    """Group peaks of one region between which the relief hardly dips."""
    n = x.size
    i, j, saddle = _saddles(x, y, owner, relief, reach)
    one = saddle > together * np.minimum(peak[i], peak[j])
    links = coo_array((np.ones(one.sum()), (i[one], j[one])), shape=(n, n))
    return np.asarray(connected_components(links, directed=False)[1])


def _saddles(
    x: Column, y: Column, owner: NDArray[np.intp], relief: Map, reach: float
) -> tuple[NDArray[np.intp], NDArray[np.intp], Column]:
    """Pairs of peaks of one region, and the lowest relief on the straight line between them."""
    if x.size < 2:
        return np.zeros(0, np.intp), np.zeros(0, np.intp), np.zeros(0)
    i, j = _near_pairs(np.column_stack([x, y]), reach)
    kin = owner[i] == owner[j]
    i, j = i[kin], j[kin]
    t = np.linspace(0.0, 1.0, 13)[1:-1]
    xs = np.rint(x[i][:, None] * (1 - t) + x[j][:, None] * t).astype(np.intp)
    ys = np.rint(y[i][:, None] * (1 - t) + y[j][:, None] * t).astype(np.intp)
    return i, j, relief[ys, xs].min(axis=1, initial=np.inf).astype(np.float64)


def _near_pairs(
    points: NDArray[np.float64], reach: float
) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Pairs of each point with its nearest others within reach, each pair once."""
    k = min(_NEAREST + 1, len(points))
    found = cKDTree(points).query(points, k=[*range(1, k + 1)], distance_upper_bound=reach)
    distance, other = (np.asarray(part) for part in found)
    first, rank = np.nonzero(np.isfinite(distance))
    second = other[first, rank]
    low, high = np.minimum(first, second), np.maximum(first, second)
    # One number for each pair sorts many times faster than rows of two.
    pair = np.unique((low * len(points) + high)[low < high])
    return np.divmod(pair, len(points))


def _highest_of_each(group: NDArray[np.intp], peak: Column) -> NDArray[np.intp]:
    """Position of the highest peak of each group."""
    order = np.lexsort((-peak, group))
    first = np.r_[True, np.diff(group[order]) > 0] if order.size else np.zeros(0, bool)
    return np.asarray(order[first])


def _power_pieces(
    labels: Labels,
    count: int,
    several: NDArray[np.bool_],
    seed: NDArray[np.float64],
    radius: Column,
    owner: NDArray[np.intp],
) -> tuple[Labels, int]:
    """Give each pixel to the seed with least (distance^2 - radius^2) within its region."""
    width = labels.shape[1]
    at = np.flatnonzero(several[labels])
    of = labels.ravel()[at]
    order = np.argsort(of, kind="stable")
    at, of = at[order], of[order]
    starts = np.searchsorted(of, np.arange(count + 1))
    by_owner = np.argsort(owner, kind="stable")
    seed_starts = np.searchsorted(owner[by_owner], np.arange(count + 1))
    piece = np.zeros(at.size, dtype=np.int32)
    for region in np.flatnonzero(several):
        rows = slice(starts[region], starts[region + 1])
        seeds = by_owner[seed_starts[region] : seed_starts[region + 1]]
        y, x = np.divmod(at[rows], width)
        points = np.column_stack([x, y]).astype(np.float64)
        piece[rows] = seeds[nearest_by_power(points, seed[seeds], radius[seeds])] + 1
    out = np.zeros(labels.size, dtype=np.int32)
    out[at] = piece
    return out.reshape(labels.shape), len(seed) + 1


def nearest_by_power(
    points: NDArray[np.float64], seed: NDArray[np.float64], radius: Column
) -> NDArray[np.intp]:
    """Index of the seed with least (distance^2 - radius^2); a tree of lifted seeds when many.

    Parameters
    ----------
    points : ndarray of shape (n, 2)
        Positions, as x, y.
    seed : ndarray of shape (k, 2)
        Seeds, k at least 1.
    radius : ndarray of shape (k,)
        Radius of each seed, in the unit of the positions.

    Returns
    -------
    ndarray of int, shape (n,)

    References
    ----------
    Aurenhammer F (1987). Power diagrams: properties, algorithms and applications. SIAM Journal on
    Computing 16, 78-96. Its lifting turns power into distance, which a tree can search.
    """
    if len(seed) <= 8:
        power = ((points[:, None, :] - seed[None]) ** 2).sum(axis=2) - radius**2
        return np.asarray(power.argmin(axis=1))
    lift = np.sqrt(np.maximum(radius.max() ** 2 - radius**2, 0.0))
    tree = cKDTree(np.column_stack([seed, lift]))
    return np.asarray(tree.query(np.column_stack([points, np.zeros(len(points))]))[1])
