"""Which leaves make one plant: each leaf is given to the one centre that explains it best.

A plant is imagined as leaves around a centre: their axes point to it, they lie at about one
distance from it, and they share its green. Many such plants are imagined, from every two leaves
near each other; the few that together explain the leaves best are kept.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from detect.leaves import Blades
from detect.regions import Column

_Rows = NDArray[np.intp]

# Spread of the angle between a leaf's axis and its ray in radians (for a leaf twice as long as
# wide), of its distance as a share of the plant's ring, and of its hue in a* and b*; a misfit of so
# many spreads makes a leaf a stranger.
_ANGLE, _RING, _HUE, _STRANGE = 1.23, 0.4, 5.2, 2.0
# A leaf begins at most so many of its half lengths off the centre, and reaches little beyond it.
_GAP, _BEYOND, _GAP_COST = 0.8, -0.2, 0.36
# Leaves nearer to the centre than this share of the ring are young ones; what those cost.
_YOUNG, _YOUNG_COST = 0.5, 0.6
# A plant must explain more than so many whole leaves.
_LEAST_LEAVES = 1.45
# A leaf counts in full from this share of the smallest plant's disc, larger for larger rings by
# this power of the ring's size.
_FULL, _FULL_GROWTH = 0.3, 0.5
# One leaf alone may be a plant from this multiple of the smallest disc; what it then explains
# beyond the least.
_ALONE, _ALONE_GAIN = 1.3, 0.03
# Rings of round leaves lie between these multiples of the range; of slim ones further off, by
# their half length over the radius of equal area, up to so much.
_BELOW, _ABOVE, _SLIMMEST = 0.5, 0.95, 2.0
# Half angles between two leaves for which a centre is imagined.
_HALF_ANGLES = np.radians([90.0, 65.0, 45.0])
# Leaves below this share of the smallest disc suggest no plant; leaves so many half lengths off a
# centre are not its; only so many nearest leaves are paired.
_SIZED, _FAR, _NEAREST = 0.06, 3.5, 24
# Centres are told apart by this share of the smallest diameter, rings by this step of their log;
# leaves are looked for up to this multiple of a ring.
_GRID, _RING_STEP, _REACH = 0.09, 0.16, 1.7
# More plants than so many in one clump are not tried against others: that would take too long.
_ROUNDS, _STARTS, _TRIED = 3, (1, 2, 4), 200
# A clump of more leaves, or of more pairs of near leaves, than so many is ground or a closed canopy:
# no plants are told in it. Neither in clumps of more leaves that plants could still share.
_CANOPY, _CANOPY_PAIRS, _SHARED = 300, 2000, 600


@dataclass(frozen=True, slots=True, eq=False)
class Gathered:
    """Plants, and the leaves each owns.

    Parameters
    ----------
    x, y : ndarray of shape (n,)
        Centroids of the owned leaves, in pixels of the map.
    radius : ndarray of shape (n,)
        Radius of the circle of equal leaf area.
    explained : ndarray of shape (n,)
        How many whole leaves each plant explains better than any other does.
    owner : ndarray of int, shape (m,)
        The plant of each leaf; -1 where none.
    """

    x: Column
    y: Column
    radius: Column
    explained: Column
    owner: _Rows

    def __len__(self) -> int:
        return int(self.x.size)


def gather(blades: Blades, smallest_px: float, largest_px: float) -> Gathered:
    """Give each leaf to a plant, or to none.

    Parameters
    ----------
    blades : Blades
    smallest_px, largest_px : float
        Range of the plants' diameters (circles of equal leaf area) in pixels of the map.

    Returns
    -------
    Gathered

    Notes
    -----
    Each pair (plant, leaf) has a saving from 0 to 1 by how well the leaf fits; a set of plants is
    worth the sum over leaves of the best saving, less `_LEAST_LEAVES` for each plant. That is the
    uncapacitated facility location problem, solved greedily [1]_ with interchanges [2]_; taking a
    plant removes the votes of its leaves for all others [3]_.

    References
    ----------
    .. [1] Cornuejols G, Fisher ML, Nemhauser GL (1977). Location of bank accounts to optimize
       float. Management Science 23(8), 789-810.
    .. [2] Teitz MB, Bart P (1968). Heuristic methods for estimating the generalized vertex median
       of a weighted graph. Operations Research 16(5), 955-961.
    .. [3] Barinova O, Lempitsky V, Kohli P (2012). On detection of multiple object instances using
       Hough transforms. IEEE Transactions on Pattern Analysis and Machine Intelligence 34(9),
       1773-1784.
    """
    told = np.flatnonzero(~_in_canopy(blades, smallest_px, largest_px))
    owner, best = np.full(len(blades), -1), np.zeros(len(blades))
    owner[told], best[told] = _given(_only(blades, told), smallest_px, largest_px)
    return _gathered(blades, owner, best)


def _only(blades: Blades, rows: _Rows) -> Blades:
    names = ("x", "y", "area", "long", "short", "cosine", "sine", "hue")
    return replace(blades, **{name: getattr(blades, name)[rows] for name in names})


def _in_canopy(blades: Blades, smallest_px: float, largest_px: float) -> NDArray[np.bool_]:
    """Leaves of clumps, joined by pairs of near leaves, that are too large to tell plants in."""
    i, j = _near(blades, smallest_px, largest_px)
    size = (len(blades), len(blades))
    clump = connected_components(coo_array((np.ones(i.size), (i, j)), shape=size), directed=False)[
        1
    ]
    leaves, pairs = np.bincount(clump), np.bincount(clump[i], minlength=len(blades))
    return np.asarray((leaves[clump] > _CANOPY) | (pairs[clump] > _CANOPY_PAIRS))


def _given(blades: Blades, smallest_px: float, largest_px: float) -> tuple[_Rows, Column]:
    """Plant of each leaf (-1: none) and what of it is explained."""
    imagined = _imagined(blades, smallest_px, largest_px)
    plant, leaf, saving = _savings(blades, imagined, smallest_px)
    disc = np.pi / 4 * np.array([smallest_px, largest_px]) ** 2
    alone = np.flatnonzero((blades.area >= _ALONE * disc[0]) & (blades.area <= 1.2 * disc[1]))
    plant = np.r_[plant, len(imagined) + np.arange(alone.size)]
    leaf = np.r_[leaf, alone]
    saving = np.r_[saving, np.full(alone.size, _LEAST_LEAVES + _ALONE_GAIN)]
    owner, best = np.full(len(blades), -1), np.zeros(len(blades))
    for rows in _clumps(plant, leaf, len(imagined) + alone.size, len(blades)):
        plants, p = np.unique(plant[rows], return_inverse=True)
        leaves, q = np.unique(leaf[rows], return_inverse=True)
        if leaves.size > _SHARED:
            continue
        own, explained = _fewest(p, q, saving[rows])
        owner[leaves] = np.where(own >= 0, plants[own], -1)
        best[leaves] = explained
    return owner, best


def _gathered(blades: Blades, owner: _Rows, best: Column) -> Gathered:
    owned = np.flatnonzero(owner >= 0)
    _, plant = np.unique(owner[owned], return_inverse=True)
    n = int(plant.max()) + 1 if plant.size else 0
    area = blades.area[owned]
    total = np.bincount(plant, area, n)
    x, y = (np.bincount(plant, area * v[owned], n) / total for v in (blades.x, blades.y))
    numbered = np.full(len(blades), -1)
    numbered[owned] = plant
    return Gathered(
        x,
        y,
        np.sqrt(total / np.pi),
        np.asarray(np.bincount(plant, best[owned], n), dtype=np.float64),
        numbered,
    )


def _imagined(blades: Blades, smallest_px: float, largest_px: float) -> NDArray[np.float64]:
    """Centre and ring of the plants that any two leaves suggest, as rows x, y, distance."""
    low, high = _BELOW * smallest_px / 2, _ABOVE * largest_px / 2
    least = _SIZED * np.pi / 4 * smallest_px**2
    i, j = _near(blades, smallest_px, largest_px)
    at = np.column_stack([blades.x, blades.y])
    step = at[j] - at[i]
    apart = np.maximum(np.hypot(*step.T), 1e-6)
    across = np.column_stack([-step[:, 1], step[:, 0]]) / apart[:, None]
    found = [_where_axes_meet(blades, i, j, step)]
    for half in _HALF_ANGLES:
        ring = apart / 2 / np.sin(half)
        for side in (1.0, -1.0) if half < np.pi / 2 - 1e-9 else (1.0,):
            off = (side * ring * np.cos(half))[:, None] * across
            centre = at[i] + 0.5 * step + off
            fits = np.ones(i.size, dtype=bool)
            for k in (i, j):
                fits &= blades.plain[k] * (_turn(blades, k, centre) / _ANGLE) ** 2 < 3.2
            found.append(np.column_stack([centre, ring])[fits])
    rows = np.vstack(found)
    rows = rows[(rows[:, 2] > low) & (rows[:, 2] < high * _SLIMMEST)]
    key = np.rint(rows[:, :2] / max(_GRID * smallest_px, 1.0)).astype(np.int64)
    _, first = np.unique(key, axis=0, return_index=True)
    return _with_rings(blades, rows[np.sort(first), :2], low, high, least)


def _with_rings(
    blades: Blades, centre: NDArray[np.float64], low: float, high: float, least: float
) -> NDArray[np.float64]:
    """Each centre with the distances at which leaves of some size lie around it."""
    sized = np.flatnonzero(blades.area >= least)
    if len(centre) == 0 or sized.size == 0:
        return np.zeros((0, 3))
    tree = cKDTree(np.column_stack([blades.x, blades.y])[sized])
    near: Any = cKDTree(centre).sparse_distance_matrix(
        tree, high * _SLIMMEST, output_type="ndarray"
    )
    of, leaf, distance = near["i"], sized[near["j"]], near["v"]
    slim = np.minimum(blades.slim[leaf], _SLIMMEST)
    usable = (distance > low * slim) & (distance < high * slim)
    usable &= distance < _FAR * blades.long[leaf]
    step = np.rint(np.log(distance[usable]) / _RING_STEP).astype(np.int64)
    rings = np.unique(np.column_stack([of[usable], step]), axis=0)
    return np.column_stack([centre[rings[:, 0]], np.exp(rings[:, 1] * _RING_STEP)])


def _near(blades: Blades, smallest_px: float, largest_px: float) -> tuple[_Rows, _Rows]:
    """Pairs of leaves near enough, for their lengths, to be of one plant."""
    farthest = _ABOVE * largest_px * _SLIMMEST
    sized = np.flatnonzero(blades.area >= _SIZED * np.pi / 4 * smallest_px**2)
    at = np.column_stack([blades.x, blades.y])[sized]
    if len(at) < 2:
        return np.zeros(0, np.intp), np.zeros(0, np.intp)
    k = min(_NEAREST + 1, len(at))
    found = cKDTree(at).query(at, k=[*range(1, k + 1)], distance_upper_bound=farthest)
    distance, other = (np.asarray(part) for part in found)
    first, rank = np.nonzero(np.isfinite(distance))
    second, apart = sized[other[first, rank]], distance[first, rank]
    first = sized[first]
    near = (apart > 0) & (apart < _FAR * (blades.long[first] + blades.long[second]))
    low, high = np.minimum(first, second)[near], np.maximum(first, second)[near]
    pairs = np.unique(np.column_stack([low, high]), axis=0)
    return pairs[:, 0], pairs[:, 1]


def _where_axes_meet(
    blades: Blades, i: _Rows, j: _Rows, step: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Where the axes of two leaves cross, at distances from both that differ little."""
    cosine, sine = blades.cosine, blades.sine
    cross = cosine[i] * sine[j] - sine[i] * cosine[j]
    slanted = np.abs(cross) > 0.3
    along = (step[:, 0] * sine[j] - step[:, 1] * cosine[j]) / np.where(slanted, cross, 1.0)
    x, y = blades.x[i] + along * cosine[i], blades.y[i] + along * sine[i]
    one, other = np.abs(along), np.hypot(x - blades.x[j], y - blades.y[j])
    alike = np.abs(np.log(np.maximum(one, 1e-6) / np.maximum(other, 1e-6))) < 0.5
    return np.column_stack([x, y, 0.5 * (one + other)])[slanted & alike]


def _turn(blades: Blades, leaf: _Rows, centre: NDArray[np.float64]) -> Column:
    """Angle between each leaf's axis and the ray from a centre to it, 0 to a quarter turn."""
    dx, dy = blades.x[leaf] - centre[:, 0], blades.y[leaf] - centre[:, 1]
    along = np.abs(dx * blades.cosine[leaf] + dy * blades.sine[leaf])
    across = np.abs(dy * blades.cosine[leaf] - dx * blades.sine[leaf])
    return np.asarray(np.arctan2(across, along))


def _savings(
    blades: Blades, imagined: NDArray[np.float64], smallest_px: float
) -> tuple[_Rows, _Rows, Column]:
    """Pairs of an imagined plant and a leaf that may be its, and how much of the leaf it explains."""
    if len(imagined) == 0:
        return np.zeros(0, np.intp), np.zeros(0, np.intp), np.zeros(0)
    tree = cKDTree(np.column_stack([blades.x, blades.y]))
    near = tree.query_ball_point(imagined[:, :2], _REACH * imagined[:, 2])
    plant = np.repeat(np.arange(len(near)), [len(leaves) for leaves in near])
    leaf = np.fromiter((k for leaves in near for k in leaves), dtype=np.intp, count=plant.size)
    ring = imagined[plant, 2]
    distance = np.hypot(blades.x[leaf] - imagined[plant, 0], blades.y[leaf] - imagined[plant, 1])
    off = distance / ring
    misfit = blades.plain[leaf] * (_turn(blades, leaf, imagined[plant, :2]) / _ANGLE) ** 2
    misfit += ((off - 1.0) / _RING) ** 2
    gap = distance / blades.long[leaf] - 1.0
    far = np.maximum(gap - _GAP, 0.0) ** 2 + 4.0 * np.maximum(_BEYOND - gap, 0.0) ** 2
    limit = _STRANGE**2
    misfit += limit * _GAP_COST * far
    young = off < _YOUNG
    misfit[young] = np.minimum(misfit, _YOUNG_COST + (off / _YOUNG) ** 2)[young]
    full = _FULL * np.pi / 4 * smallest_px**2 * (2 * ring / smallest_px) ** _FULL_GROWTH
    weight = np.minimum(blades.area[leaf] / full, 1.0)
    misfit += np.minimum(
        _unlike(blades, plant, leaf, weight * np.maximum(limit - misfit, 0.0)), limit
    )
    kept = misfit < limit
    return plant[kept], leaf[kept], (weight * (1.0 - misfit / limit))[kept]


def _unlike(blades: Blades, plant: _Rows, leaf: _Rows, weight: Column) -> Column:
    """Squared distance of each leaf's hue from that of its plant's leaves, in spreads."""
    total = np.bincount(plant, weight) + 1e-9
    unlike = np.zeros(leaf.size)
    for k in (0, 1):
        hue = blades.hue[leaf, k]
        unlike += ((hue - (np.bincount(plant, weight * hue) / total)[plant]) / _HUE) ** 2
    return unlike


def _clumps(plant: _Rows, leaf: _Rows, n_plants: int, n_leaves: int) -> list[_Rows]:
    """Positions of the pairs, in groups that share no plant and no leaf."""
    if plant.size == 0:
        return []
    size = n_plants + n_leaves
    graph = coo_array((np.ones(plant.size), (leaf, n_leaves + plant)), shape=(size, size))
    clump = connected_components(graph, directed=False)[1][leaf]
    order = np.lexsort((leaf, plant, clump))
    return list(np.split(order, np.flatnonzero(np.diff(clump[order])) + 1))


def _fewest(plant: _Rows, leaf: _Rows, saving: Column) -> tuple[_Rows, Column]:
    """Owner of each leaf of one clump (-1: none) and what of it is explained.

    `plant` rises; both count from 0. Several starts, of which the later prefer plants that explain
    a few leaves well to those that explain many badly; the one that ends best is taken.
    """
    n_plants, n_leaves = int(plant.max()) + 1, int(leaf.max()) + 1
    start = np.searchsorted(plant, np.arange(n_plants + 1))

    def owned(plants: list[int]) -> tuple[_Rows, Column]:
        own, best = np.full(n_leaves, -1), np.zeros(n_leaves)
        for k in plants:
            take(k, own, best)
        return own, best

    def take(k: int, own: _Rows, best: Column) -> None:
        leaves, offer = leaf[start[k] : start[k + 1]], saving[start[k] : start[k + 1]]
        better = offer > best[leaves]
        best[leaves[better]], own[leaves[better]] = offer[better], k

    def gains(best: Column) -> Column:
        more = np.maximum(saving - best[leaf], 0.0)
        return np.asarray(np.bincount(plant, more, n_plants), dtype=np.float64)

    def well(best: Column, power: int) -> Column:
        more = np.maximum(saving**power - best[leaf] ** power, 0.0)
        return np.asarray(
            np.bincount(plant, more, n_plants) * (gains(best) > _LEAST_LEAVES), dtype=np.float64
        )

    def fill(chosen: list[int], power: int = 1) -> None:
        own, best = owned(chosen)
        while True:
            k = int(well(best, power).argmax())
            if gains(best)[k] <= _LEAST_LEAVES:
                return
            chosen.append(k)
            take(k, own, best)

    def interchanged(chosen: list[int]) -> list[int]:
        for _ in range(_ROUNDS if len(chosen) <= _TRIED else 0):
            before = list(chosen)
            for old in before:
                rest = [k for k in chosen if k != old]
                gain = gains(owned(rest)[1])
                k = int(gain.argmax())
                if gain[k] <= _LEAST_LEAVES:
                    chosen = rest
                elif gain[k] > gain[old] + 1e-9:
                    chosen = [*rest, k]
            if chosen == before:
                break
            fill(chosen)
        return chosen

    def worth(chosen: list[int]) -> float:
        return float(owned(chosen)[1].sum()) - _LEAST_LEAVES * len(chosen)

    ends = []
    for power in _STARTS:
        first: list[int] = []
        fill(first, power)
        ends.append(interchanged(first))
    return owned(max(ends, key=worth))
