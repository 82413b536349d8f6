"""Which spot is which true object: pairs, each member used once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

_Indices = NDArray[np.intp]


@dataclass(frozen=True, slots=True)
class MatchOptions:
    """How near a spot must lie to a true object to be taken for it.

    Parameters
    ----------
    radii : float
        Reach in radii of the true object.
    least_px : float
        Reach in pixels at least, for small objects.
    """

    radii: float = 0.5
    least_px: float = 3.0


@dataclass(frozen=True, slots=True, eq=False)
class Match:
    """Pairs of spots and true objects, each used once at most.

    Parameters
    ----------
    found, truth : ndarray of int, shape (k,)
        Positions of the members of each pair in the two tables.
    distance : ndarray of shape (k,)
        Distance of each pair, in pixels.
    """

    found: NDArray[np.intp]
    truth: NDArray[np.intp]
    distance: NDArray[np.float64]

    def __len__(self) -> int:
        return self.found.size


def match_spots(
    found_xy: ArrayLike,
    truth_xy: ArrayLike,
    truth_r: ArrayLike,
    *,
    options: MatchOptions | None = None,
) -> Match:
    """Pair spots with true objects one to one: as many pairs as possible, then the nearest.

    Parameters
    ----------
    found_xy : array_like of shape (n, 2)
        Centres of the spots, in pixels.
    truth_xy : array_like of shape (m, 2)
        Centres of the true objects, in pixels.
    truth_r : array_like of shape (m,)
        Their radii, in pixels.
    options : MatchOptions, optional
        How near the members of a pair must lie.

    Returns
    -------
    Match
        Pairs in the order of the true objects.

    Notes
    -----
    A pair is allowed where the distance is at most max(radii * r, least_px). Among all sets of
    allowed pairs that use no spot and no object twice, one with the most pairs is taken, and
    among those one with the least total distance. Groups that share no allowed pair are solved
    one by one as assignment problems [1]_.

    References
    ----------
    .. [1] Kuhn HW (1955). The Hungarian method for the assignment problem. Naval Research
       Logistics Quarterly 2, 83-97.

    Examples
    --------
    >>> match = match_spots([[10, 10], [14, 10]], [[12, 10], [16, 10]], [5, 5])
    >>> match.found.tolist(), match.distance.tolist()
    ([0, 1], [2.0, 2.0])
    """
    options = options or MatchOptions()
    found = np.asarray(found_xy, dtype=np.float64).reshape(-1, 2)
    truth = np.asarray(truth_xy, dtype=np.float64).reshape(-1, 2)
    reach = np.maximum(options.radii * np.asarray(truth_r, dtype=np.float64), options.least_px)
    near, far, distance = _allowed(found, truth, reach)
    pairs: list[tuple[int, int]] = []
    for group in _groups(near, far, len(found), len(truth)):
        pairs += _assign(near[group], far[group], distance[group])
    pairs.sort(key=lambda pair: pair[1])
    rows = np.array([i for i, _ in pairs], dtype=np.intp)
    columns = np.array([j for _, j in pairs], dtype=np.intp)
    return Match(rows, columns, np.hypot(*(found[rows] - truth[columns]).T))


def _allowed(
    found: NDArray[np.float64], truth: NDArray[np.float64], reach: NDArray[np.float64]
) -> tuple[_Indices, _Indices, NDArray[np.float64]]:
    """List all allowed pairs: positions in both tables, and distances."""
    from scipy.spatial import cKDTree

    if not (len(found) and len(truth)):
        return np.empty(0, np.intp), np.empty(0, np.intp), np.empty(0)
    lists = cKDTree(found).query_ball_point(truth, reach)
    near = np.array([i for found_here in lists for i in sorted(found_here)], dtype=np.intp)
    far = np.repeat(np.arange(len(truth)), [len(found_here) for found_here in lists])
    return near, far, np.hypot(*(found[near] - truth[far]).T)


def _groups(near: _Indices, far: _Indices, n: int, m: int) -> list[_Indices]:
    """Split the allowed pairs into groups that share no spot and no object."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    if not near.size:
        return []
    graph = coo_array((np.ones(near.size), (near, n + far)), shape=(n + m, n + m))
    labels = connected_components(graph, directed=False)[1][near]
    order = np.argsort(labels, kind="stable")
    edges = np.flatnonzero(np.diff(labels[order])) + 1
    return np.split(order, edges)


def _assign(near: _Indices, far: _Indices, distance: NDArray[np.float64]) -> list[tuple[int, int]]:
    """Choose the most pairs of one group, then the least total distance."""
    from scipy.optimize import linear_sum_assignment

    rows, row = np.unique(near, return_inverse=True)
    columns, column = np.unique(far, return_inverse=True)
    cost = np.zeros((rows.size, columns.size))
    cost[row, column] = distance - (distance.sum() + 1.0)
    chosen = zip(*linear_sum_assignment(cost), strict=True)
    return [(int(rows[i]), int(columns[j])) for i, j in chosen if cost[i, j] < 0]
