"""How far so many false or missed points can move the dispersion of counts, at worst.

X2 of counts y with total m, in quadrats of shares p of the area, is sum y^2 / p over m, less m. Given
how many points go and come, the total is fixed, and only T = sum w y^2 with w = 1 / p is left to be made
least or greatest: a sum of one convex function for each quadrat.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Numbers = NDArray[np.float64]
Counts = NDArray[np.int64]


def least_after_removals(counts: Counts, weights: Numbers, removable: Counts, most: int) -> Numbers:
    """Return the least T after 0, 1, ... removals.

    Parameters
    ----------
    counts : ndarray of int, shape (q,)
        Points in each quadrat.
    weights : ndarray of shape (q,)
        One over its share of the area.
    removable : ndarray of int, shape (q,)
        How many of its points may go.
    most : int
        Removals up to which T is wanted; no more than may go.

    Returns
    -------
    ndarray of shape (most + 1,)

    Notes
    -----
    The r-th point to leave a quadrat of x takes w (2 (x - r) + 1) from T. These steps fall within
    each quadrat, so the k greatest of all of them can be taken together, and no k removals take
    more: taking the greatest step each time is exact for a separable convex sum.

    References
    ----------
    Gross, O. (1956). A class of discrete-type minimization problems. RAND Corporation, RM-1644.

    Examples
    --------
    >>> counts = np.array([3, 1])
    >>> least_after_removals(counts, np.array([2.0, 2.0]), counts, 2).tolist()
    [20.0, 10.0, 4.0]
    """
    quadrat = np.repeat(np.arange(counts.size), removable)
    step = weights[quadrat] * (2 * (counts[quadrat] - _rank(removable)) - 1)
    total = float(weights @ (counts.astype(float) ** 2))
    return np.concatenate([[total], total - np.cumsum(np.sort(step)[::-1][:most])])


def least_after_additions(counts: Counts, weights: Numbers, most: int) -> Numbers:
    """Return the least T after 0, 1, ... additions.

    Parameters
    ----------
    counts, weights : ndarray of shape (q,)
        As of `least_after_removals`.
    most : int
        Additions up to which T is wanted.

    Returns
    -------
    ndarray of shape (most + 1,)

    Notes
    -----
    A point that comes to a quadrat of y adds w (2 y + 1). These steps rise within each quadrat, so
    the j smallest of all of them are the best j additions.

    Examples
    --------
    >>> least_after_additions(np.array([3, 1]), np.array([2.0, 2.0]), 2).tolist()
    [20.0, 26.0, 36.0]
    """
    level = _level(counts, weights, most)
    many = np.maximum(0, np.floor((level / weights - 1) / 2).astype(np.int64) - counts + 1)
    quadrat = np.repeat(np.arange(counts.size), many)
    step = np.sort(weights[quadrat] * (2 * (counts[quadrat] + _rank(many)) + 1))[:most]
    total = float(weights @ (counts.astype(float) ** 2))
    return np.concatenate([[total], total + np.cumsum(step)])


def greatest_after_removals(
    counts: Counts, weights: Numbers, removable: Counts, most: int
) -> Numbers:
    """Return the greatest T after 0, 1, ... removals.

    Parameters
    ----------
    counts, weights, removable, most
        As of `least_after_removals`.

    Returns
    -------
    ndarray of shape (most + 1,)

    Notes
    -----
    Taking r of the x points of a quadrat costs w r (2 x - r). The cost is concave in r, so that
    greed fails: what is dear at first may be cheap together. It is made least over all quadrats by
    dynamic programming on the number removed, one quadrat after another, which leaves nothing out.

    References
    ----------
    Bellman, R. (1957). Dynamic Programming. Princeton University Press, chapter 1.

    Examples
    --------
    >>> counts = np.array([3, 1])
    >>> greatest_after_removals(counts, np.array([2.0, 2.0]), counts, 2).tolist()
    [20.0, 18.0, 8.0]
    """
    total = float(weights @ (counts.astype(float) ** 2))
    return np.asarray(total - _costs(counts, weights, removable, most)[-1])


def bound_after_removals(counts: Counts, weights: Numbers, removable: Counts, most: int) -> Numbers:
    """Return what T cannot exceed after 0, 1, ... removals, in one sorting.

    Notes
    -----
    A concave cost lies nowhere below the straight line to its end, so that each of the c points
    that may go costs at least w (2 x - c); the k cheapest of all cost no more than any k removals.

    Examples
    --------
    >>> counts = np.array([3, 1])
    >>> bound_after_removals(counts, np.array([2.0, 2.0]), counts, 2).tolist()
    [20.0, 18.0, 12.0]
    """
    rate = np.sort(np.repeat(weights * (2 * counts - removable), removable))[:most]
    total = float(weights @ (counts.astype(float) ** 2))
    return np.concatenate([[total], total - np.cumsum(rate)])


def greatest_after_additions(counts: Counts, weights: Numbers, most: int) -> Numbers:
    """Return the greatest T after 0, 1, ... additions.

    Notes
    -----
    The gain w (2 x s + s^2) is convex in s, and a convex sum over all ways to share out j points is
    greatest where one quadrat takes all of them.

    Examples
    --------
    >>> greatest_after_additions(np.array([3, 1]), np.array([2.0, 2.0]), 2).tolist()
    [20.0, 34.0, 52.0]
    """
    j = np.arange(most + 1, dtype=np.float64)
    total, best = float(weights @ (counts.astype(float) ** 2)), np.zeros(most + 1)
    for x, w in np.unique(np.column_stack([counts, weights]), axis=0):
        best = np.maximum(best, w * (2 * x * j + j * j))
    return total + best


def greatest_after_both(
    counts: Counts, weights: Numbers, removable: Counts, most: int
) -> NDArray[np.float64]:
    """Return the greatest T after k removals and j additions in other quadrats.

    Returns
    -------
    ndarray of shape (most + 1, most + 1)
        By k and j; -inf where so many cannot go.

    Notes
    -----
    A point that goes and one that comes in the same quadrat undo each other, so a best choice of
    fewest errors has removals and additions in different quadrats. By `greatest_after_additions`
    all additions come to one quadrat then, and the removals are the cheapest among the others:
    cheapest among those before it and those after it, over all ways of sharing k between them.

    Examples
    --------
    >>> counts = np.array([3, 1])
    >>> greatest_after_both(counts, np.array([2.0, 2.0]), counts, 1).tolist()
    [[20.0, 34.0], [18.0, 32.0]]
    """
    order = np.lexsort((removable, weights, counts))
    counts, weights, removable = counts[order], weights[order], removable[order]
    before = _costs(counts, weights, removable, most)
    after = _costs(counts[::-1], weights[::-1], removable[::-1], most)[::-1]
    j = np.arange(most + 1, dtype=np.float64)
    total = float(weights @ (counts.astype(float) ** 2))
    best = np.full((most + 1, most + 1), -np.inf)
    best[:, 0] = -before[-1]
    alike = np.column_stack([counts, weights, removable])
    for i in np.unique(alike, axis=0, return_index=True)[1]:
        others = np.array(
            [np.min(before[i, : k + 1] + after[i + 1, k::-1]) for k in range(most + 1)]
        )
        gain = weights[i] * (2 * counts[i] * j + j * j)
        best = np.maximum(best, gain[None, :] - others[:, None])
    return total + best


def _costs(counts: Counts, weights: Numbers, removable: Counts, most: int) -> NDArray[np.float64]:
    """Return the least cost of 0, 1, ... removals from the first 0, 1, ... quadrats."""
    cost = np.full((counts.size + 1, most + 1), np.inf)
    cost[0, 0] = 0.0
    for i, (x, w, spare) in enumerate(zip(counts, weights, removable, strict=True)):
        cost[i + 1] = cost[i]
        for r in range(1, min(int(spare), most) + 1):
            here = w * r * (2 * x - r)
            np.minimum(cost[i + 1, r:], cost[i, :-r] + here, out=cost[i + 1, r:])
    return cost


def _rank(many: Counts) -> Counts:
    """Return 0, 1, ... many[0] - 1, 0, 1, ... many[1] - 1, and so on."""
    starts = np.cumsum(many) - many
    return np.arange(int(many.sum())) - np.repeat(starts, many)


def _level(counts: Counts, weights: Numbers, most: int) -> float:
    """Return a step up to which there are at least `most` steps, and not many more."""
    low, high = 0.0, float(weights.max() * (2 * (counts.max() + most) + 1))
    for _ in range(60):
        middle = (low + high) / 2
        many = np.maximum(0, np.floor((middle / weights - 1) / 2) - counts + 1).sum()
        low, high = (low, middle) if many >= most else (middle, high)
    return high * (1 + 1e-9)
