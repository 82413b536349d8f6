"""Does the density rise along the rows or columns of a table of contiguous counts."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.blocks import contiguous
from analyse.errors import TrendNotFound
from analyse.trend_fit import PARTITIONS, best_slope
from analyse.trend_record import Trend, assembled


def fit_count_trend(counts: ArrayLike, *, side: float = 1.0) -> Trend:
    """Fit a log-linear trend to counts in contiguous quadrats, and test it.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats, along a line or in a grid.
    side : float
        Side of a quadrat; 1 gives slopes per quadrat.

    Returns
    -------
    Trend
        Of kind "plane"; x goes along the columns from the left edge, y down the rows. Along a
        line it is denser towards "the end" or "the start".

    Raises
    ------
    TrendNotFound
        If there are no points, too few quadrats, or all points lie in the quadrats of one end.

    Notes
    -----
    Counts are Poisson with log mean linear in the middles of the quadrats: the usual log-linear
    model. The rest is as for points, see `analyse.trend.fit_trend`; dispersion is estimated in
    about 9, 16 and 36 blocks of quadrats, or in single quadrats where there are fewer.

    References
    ----------
    McCullagh, P. and Nelder, J. A. (1989). Generalized Linear Models, 2nd edition, chapters 6 and
    9. Chapman and Hall.

    Examples
    --------
    >>> fit_count_trend([[9, 5, 2], [8, 4, 3], [11, 6, 1], [7, 5, 2]]).direction
    'the left'
    """
    grid = contiguous(counts)
    n = int(grid.sum())
    if n == 0:
        raise TrendNotFound("Without points there is no slope of the density.")
    rows, columns = grid.shape
    middle = np.array([columns, rows]) * side / 2
    row, column = (index.ravel() for index in np.indices(grid.shape))
    places = (np.column_stack([column, row]) + 0.5) * side - middle
    unit = side * math.sqrt(grid.size)
    varies = np.array([columns > 1, rows > 1])
    z, x = places[:, varies] / unit, grid.ravel()
    found = best_slope(z, np.ones(grid.size), x @ z / n, n)
    mass = np.exp(z @ found.slope - (z @ found.slope).max())
    expected = n * mass / mass.sum()
    partitions = [
        (np.bincount(block, x).astype(np.int64), np.bincount(block, expected).astype(np.float64))
        for block in _partitions(row, column, grid.shape)
    ]
    half = np.array([[-columns, -rows], [-columns, rows], [columns, -rows], [columns, rows]])
    ends = (half * side / 2 / unit)[:, varies]
    origin = (float(middle[0]), float(middle[1]))
    trend = assembled("plane", n, origin, unit, found, partitions, ends)
    if varies.all():
        return trend
    slope, error = np.zeros(2), np.full(2, np.nan)
    slope[varies], error[varies] = trend.coefficients, trend.standard_errors
    return replace(trend, coefficients=slope, standard_errors=error)


def _partitions(
    row: NDArray[np.int64], column: NDArray[np.int64], shape: tuple[int, ...]
) -> list[NDArray[np.int64]]:
    """Return, for each partition, the block that each quadrat belongs to."""
    found = []
    for blocks in PARTITIONS:
        side = max(1.0, math.sqrt(shape[0] * shape[1] / blocks))
        down, across = (max(1, round(length / side)) for length in shape)
        if shape[0] == 1:
            down, across = 1, min(shape[1], blocks)
        found.append((row * down // shape[0]) * across + column * across // shape[1])
    return found
