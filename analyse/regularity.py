"""How far must points be moved until every contiguous quadrat holds the same number."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import permutations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import optimize, sparse

from analyse.blocks import contiguous

MOST_QUADRATS = 400  # of a grid whose distance is solved for; transects have a closed form
LONGEST = 2_000  # quadrats of a transect that is rearranged in good time
_MOST_EXACT = 7  # quadrats of which all arrangements are tried
_MOST_SIMULATED = 36  # quadrats of a grid that is rearranged at random
_GRID_ORDERS = 99  # random arrangements of a grid: each of them is a problem of its own


@dataclass(frozen=True, slots=True)
class Regularity:
    """The distance to regularity, beside that of the same counts in other arrangements.

    Parameters
    ----------
    distance : float
        Least total distance, in quadrats.
    expected : float
        Its mean over arrangements; NaN where the grid is too large to rearrange.
    index : float
        distance / expected: 1 for a random arrangement, above where the crowded quadrats lie
        together.
    p : float
        Share of the arrangements at least as far from regular.
    arrangements : int
        How many there were: all of up to 7 quadrats, else random ones.
    """

    distance: float
    expected: float
    index: float
    p: float
    arrangements: int

    def __repr__(self) -> str:
        return (
            f"<Regularity: distance {self.distance:.4g}, index {self.index:.3g}, p = {self.p:.3g}>"
        )


def distance_to_regularity(counts: ArrayLike) -> float:
    """Return the least total distance over which points must move to make all counts equal.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats; a grid of at most 400.

    Returns
    -------
    float
        In quadrats, between their middles; shares of a point may move where the mean count is
        not whole.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If a grid holds more than 400 quadrats.

    Notes
    -----
    A transport problem. Along a line its least cost is the sum of |running total - running mean|.

    References
    ----------
    Perry, J. N. (1995). Spatial analysis by distance indices. Journal of Animal Ecology 64,
    303-314.

    Examples
    --------
    >>> distance_to_regularity([4, 0, 0, 0]), distance_to_regularity([0, 4, 0, 0])
    (6.0, 4.0)
    """
    grid = contiguous(counts)
    if grid.shape[0] == 1:
        return float(_along_lines(grid)[0])
    if grid.size > MOST_QUADRATS:
        raise ValueError(f"a grid of {grid.size} quadrats is above {MOST_QUADRATS}")
    surplus = grid.ravel() - grid.mean()
    full, empty = np.flatnonzero(surplus > 0), np.flatnonzero(surplus < 0)
    if not full.size:
        return 0.0
    places = np.column_stack(np.divmod(np.arange(grid.size), grid.shape[1])).astype(np.float64)
    apart = np.hypot(*(places[full][:, None] - places[empty][None]).transpose(2, 0, 1))
    moves = sparse.vstack(
        [
            sparse.kron(sparse.eye(full.size), np.ones((1, empty.size))),
            sparse.kron(np.ones((1, full.size)), sparse.eye(empty.size)),
        ]
    ).tocsr()
    sums = np.concatenate([surplus[full], -surplus[empty]])
    # The last sum follows from the others, and rounding would make it contradict them.
    kept = optimize.LinearConstraint(moves[:-1], sums[:-1], sums[:-1])
    solved = optimize.milp(apart.ravel(), constraints=kept)  # no variable is held whole
    return float(np.asarray(solved.fun, dtype=np.float64))


def regularity(counts: ArrayLike, *, rng: np.random.Generator, simulations: int) -> Regularity:
    """Return the distance to regularity and its index over arrangements of the counts.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats; a grid of at most 400.
    rng : numpy.random.Generator
        Source of randomness.
    simulations : int
        Random arrangements of a transect; grids of up to 36 quadrats have at most 99, and larger
        ones none.

    Returns
    -------
    Regularity

    References
    ----------
    Perry, J. N. (1995). Spatial analysis by distance indices. Journal of Animal Ecology 64,
    303-314. Perry, J. N. (1998). Measures of spatial pattern for counts. Ecology 79, 1008-1017.

    Examples
    --------
    >>> found = regularity([4, 0, 0, 0], rng=np.random.default_rng(1), simulations=99)
    >>> found.expected, found.index, found.arrangements
    (5.0, 1.2, 24)
    """
    grid = contiguous(counts)
    seen = distance_to_regularity(grid)
    exact = grid.size <= _MOST_EXACT
    if exact:
        orders = np.array(list(permutations(grid.ravel())))
    elif grid.shape[0] == 1 or grid.size <= _MOST_SIMULATED:
        times = simulations if grid.shape[0] == 1 else min(simulations, _GRID_ORDERS)
        orders = rng.permuted(np.tile(grid.ravel(), (times, 1)), axis=1)
    else:
        return Regularity(seen, math.nan, math.nan, math.nan, 0)
    if grid.shape[0] == 1:
        drawn = _along_lines(orders)
    else:
        drawn = np.array([distance_to_regularity(order.reshape(grid.shape)) for order in orders])
    expected = float(drawn.mean())
    as_far = int((drawn >= seen * (1 - 1e-9)).sum())
    p = as_far / len(drawn) if exact else (1 + as_far) / (len(drawn) + 1)
    index = seen / expected if expected > 0 else math.nan
    return Regularity(seen, expected, index, p, len(drawn))


def _along_lines(lines: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return the distance to regularity of each of many transects."""
    x = lines.astype(np.float64)
    return np.asarray(np.abs(np.cumsum(x - x.mean(axis=1, keepdims=True), axis=1)).sum(axis=1))
