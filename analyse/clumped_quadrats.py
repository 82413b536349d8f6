"""Limits of the density from quadrats merged to blocks, so that clumps lie within one of them.

Quadrats that suit the test of dispersion grow smaller the more points there are. Where clumps are
wider than a quadrat, neighbouring counts go together, and limits that take them for independent
come out too narrow. So contiguous quadrats are merged until about two dozen blocks are left.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from analyse.clumped_density import ClumpedLimits, clumped_limits
from analyse.density import CM2
from analyse.quadrats import QuadratCounts

FEWEST_BLOCKS = 24  # full blocks that are left at least: our own choice, see DEVELOPERS.md
_SHARE_DIGITS = 9  # so that full quadrats are alike whatever the rounding of their areas


def clumped_in_quadrats(
    counts: QuadratCounts, *, rng: np.random.Generator, relative_uncertainty: float | None
) -> tuple[ClumpedLimits | None, ClumpedLimits | None]:
    """Return mean count and density of quadrats with limits that allow for clumping.

    Parameters
    ----------
    counts : QuadratCounts
        Counts with their areas, clipped ones included.
    rng : numpy.random.Generator
        Source of the bootstrap's randomness.
    relative_uncertainty : float or None
        Standard uncertainty of a length, as a fraction of it; None where areas are not in square
        millimetres.

    Returns
    -------
    mean : ClumpedLimits or None
        Per full quadrat; None without points.
    density : ClumpedLimits or None
        Per square centimetre; None also where areas are not in square millimetres.

    Notes
    -----
    Quadrats whose places are known are merged to blocks of b by b, with the largest b that leaves
    the area of 24 full blocks: a rule of the grid alone. Blocks at the edge are clipped, and all
    take part with their area as exposure. Counts without places stay as they are.

    Examples
    --------
    >>> seen = np.random.default_rng(1).poisson(3, 100)
    >>> row, column = np.divmod(np.arange(100), 10)
    >>> counts = QuadratCounts(seen, None, np.ones(100, dtype=bool), None, row, column)
    >>> mean, _ = clumped_in_quadrats(
    ...     counts, rng=np.random.default_rng(1), relative_uncertainty=None
    ... )
    >>> mean.quadrats, mean.merged
    (25, (2, 2))
    """
    if not counts.counts.any():
        return None, None
    full, shares = 1.0, np.ones(len(counts))
    if counts.area is not None:
        full = float(counts.area[0]) if counts.grid is None else counts.grid.full_area
        shares = counts.area / full
    merged, block = block_of(counts, shares)
    x = np.bincount(block, weights=counts.counts).astype(np.int64)
    areas = np.round(np.bincount(block, weights=shares), _SHARE_DIGITS)
    mean = replace(clumped_limits(x, areas, rng=rng), merged=merged)
    if counts.area is None or relative_uncertainty is None:
        return mean, None
    return mean, mean.times(CM2 / full, relative_uncertainty)


def block_of(
    counts: QuadratCounts, shares: NDArray[np.float64]
) -> tuple[tuple[int, int], NDArray[np.int64]]:
    """Return how many quadrats make a block, and the block that each quadrat belongs to.

    Parameters
    ----------
    counts : QuadratCounts
        Quadrats, with their row and column where these are known.
    shares : ndarray of shape (q,)
        Area of each as a fraction of a full one.

    Returns
    -------
    merged : (rows, columns)
        1 by 1 where there are too few to merge or their places are not known.
    block : ndarray of int, shape (q,)
        Numbered from 0 without gaps.

    Examples
    --------
    >>> row, column = np.divmod(np.arange(256), 16)
    >>> counts = QuadratCounts(np.ones(256, int), None, np.ones(256, bool), None, row, column)
    >>> merged, block = block_of(counts, np.ones(256))
    >>> merged, int(block.max()) + 1
    ((3, 3), 36)
    """
    if counts.row is None or counts.column is None:
        return (1, 1), np.arange(len(counts))
    rows, columns = int(counts.row.max()) + 1, int(counts.column.max()) + 1
    side = 1
    while _left(side + 1, rows, columns, shares) >= FEWEST_BLOCKS:
        side += 1
    merged = (min(side, rows), min(side, columns))
    place = (counts.row // merged[0]) * columns + counts.column // merged[1]
    return merged, np.unique(place, return_inverse=True)[1]


def _left(side: int, rows: int, columns: int, shares: NDArray[np.float64]) -> float:
    """Return how many full blocks the area makes."""
    return float(shares.sum()) / (min(side, rows) * min(side, columns))
