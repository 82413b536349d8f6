"""Which points lie near each other: all pairs up to a distance, in pieces of bounded size."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Index = NDArray[np.intp]

_AT_ONCE = 500_000  # candidate pairs held in memory
_MOST_CELLS = 2_000_000_000  # along one side, so that a cell's number fits 64 bits


def near_pairs(
    points: Floats, reach: float, *, at_once: int = _AT_ONCE
) -> Iterator[tuple[Index, Index]]:
    """Yield every pair of points at most `reach` apart, once each.

    Parameters
    ----------
    points : ndarray of shape (n, 2)
        x, y.
    reach : float
        Longest distance wanted, 0 or more.
    at_once : int
        Candidates looked at together (more where one point alone has more).

    Yields
    ------
    tuple of ndarray of int
        First and second member of some of the pairs.

    Notes
    -----
    Points are sorted into square cells of side `reach`, row by row, so that the partners of a
    point fill two stretches of the sorted list: the rest of its own cell with the next one, and
    three cells of the next row.

    Examples
    --------
    >>> import numpy as np
    >>> pairs = near_pairs(np.array([[0.0, 0.0], [3.0, 4.0], [9.0, 0.0]]), 5.0)
    >>> [(i.tolist(), j.tolist()) for i, j in pairs]
    [([0], [1])]
    """
    if len(points) < 2:
        return
    low = points.min(axis=0)
    side = max(reach, float((points.max(axis=0) - low).max()) / _MOST_CELLS) or 1.0
    cell = np.floor((points - low) / side).astype(np.int64) + 1
    width = int(cell[:, 0].max()) + 2
    key = cell[:, 1] * width + cell[:, 0]
    order = np.argsort(key, kind="stable")
    key, xy = key[order], points[order]
    own = np.arange(1, len(xy) + 1)
    first = np.concatenate([own, np.searchsorted(key, key + width - 1, "left")])
    last = np.concatenate(
        [np.searchsorted(key, key + 1, "right"), np.searchsorted(key, key + width + 1, "right")]
    )
    member = np.concatenate([own - 1, own - 1])
    for i, j in _listed(member, first, last - first, at_once):
        step = xy[j] - xy[i]
        near = np.hypot(step[:, 0], step[:, 1]) <= reach
        if near.any():
            yield order[i[near]], order[j[near]]


def pairs_up_to(xy: Floats, distances: Floats) -> Iterator[tuple[Index, Index, Floats]]:
    """Yield all pairs up to the longest distance, once each, with their distances.

    Examples
    --------
    >>> xy = np.array([[0.0, 0.0], [3.0, 4.0], [9.0, 9.0]])
    >>> [(i.tolist(), j.tolist(), d.tolist()) for i, j, d in pairs_up_to(xy, np.array([5.0]))]
    [([0], [1], [5.0])]
    """
    if len(distances):
        for i, j in near_pairs(xy, float(distances.max())):
            step = xy[j] - xy[i]
            yield i, j, np.hypot(step[:, 0], step[:, 1])


def sums_up_to(
    xy: Floats, distances: Floats, weight: Callable[[Floats, Index, Index], Floats]
) -> Floats:
    """Return the summed weight of the pairs up to each distance.

    Examples
    --------
    >>> xy = np.array([[0.0, 0.0], [3.0, 4.0], [3.0, 5.0]])
    >>> sums_up_to(xy, np.array([1.0, 5.0, 9.0]), lambda step, i, j: np.ones(len(i))).tolist()
    [1.0, 2.0, 3.0]
    """
    ordered = np.argsort(distances)
    sums = np.zeros(len(distances) + 1)
    for i, j, d in pairs_up_to(xy, distances):
        at = np.searchsorted(distances[ordered], d, "left")
        sums += np.bincount(at, weight(xy[j] - xy[i], i, j), len(sums))
    found = np.empty(len(distances))
    found[ordered] = np.cumsum(sums)[:-1]
    return found


def ordered_pairs(xy: Floats) -> float:
    """Return the number of ordered pairs, NaN where there is none.

    Examples
    --------
    >>> ordered_pairs(np.zeros((5, 2)))
    20.0
    """
    return float(len(xy) * (len(xy) - 1)) if len(xy) > 1 else math.nan


def _listed(
    member: Index, first: Index, many: Index, at_once: int
) -> Iterator[tuple[Index, Index]]:
    """Yield each member beside each of the `many` places from its `first` on, in pieces."""
    total = np.cumsum(many)
    start = 0
    while start < len(many):
        before = int(total[start - 1]) if start else 0
        end = max(int(np.searchsorted(total, before + at_once, "right")), start + 1)
        some = many[start:end]
        begun = np.cumsum(some) - some
        owner = np.repeat(np.arange(start, end), some)
        place = np.arange(owner.size) - np.repeat(begun, some) + first[owner]
        if owner.size:
            yield member[owner], place
        start = end
