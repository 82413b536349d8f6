"""At which size of block do the counts of contiguous quadrats differ most."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.columns import hold_columns
from analyse.dispersion import checked_counts
from analyse.errors import TooFewQuadrats
from analyse.local_variances import BlockMethod, largest_size, local_variances

MOST_SIZES = 250  # sizes that are computed unless more are asked for


@dataclass(frozen=True, slots=True, eq=False)
class BlockVariance:
    """The variance between neighbouring blocks of contiguous quadrats, by size of block.

    Parameters
    ----------
    method : {"nested", "BQV", "TTLQV", "3TLQV", "PQV"}
        Which variance.
    sizes : ndarray of int, shape (k,)
        Quadrats in a block (along one line, except for nested blocks of a grid); for PQV the
        distance between the two quadrats of a pair, in quadrats. Increasing.
    values : ndarray of float, shape (k,)
        The variance at each size: at random about the mean count, for 3TLQV three quarters of it.
    terms : ndarray of int, shape (k,)
        Comparisons behind each value; for nested blocks the degrees of freedom.
    used : int
        Quadrats used.
    left_out : int
        Quadrats at the end, right or bottom that did not fill a power of two.

    Raises
    ------
    ValueError
        If the columns differ in length.
    """

    method: BlockMethod
    sizes: NDArray[np.int64]
    values: NDArray[np.float64]
    terms: NDArray[np.int64]
    used: int
    left_out: int = 0

    def __post_init__(self) -> None:
        hold_columns(self, ("sizes", "values", "terms"))
        if not self.sizes.shape == self.values.shape == self.terms.shape:
            raise ValueError("sizes, values and terms differ in length")

    def __len__(self) -> int:
        return len(self.sizes)

    def __repr__(self) -> str:
        if not len(self):
            return f"<BlockVariance {self.method}: no sizes>"
        return (
            f"<BlockVariance {self.method}: sizes {self.sizes[0]} to {self.sizes[-1]},"
            f" peak {self.values.max():.4g} at {self.peak}>"
        )

    @property
    def peak(self) -> int:
        """The size with the largest value; the smaller one of two that tie."""
        return int(self.sizes[int(np.argmax(self.values))])

    @property
    def sums(self) -> NDArray[np.float64]:
        """Sums of squares: values times terms."""
        return np.asarray(self.values * self.terms)

    def at(self, size: int) -> float:
        """Return the value at a size; KeyError where it was not computed."""
        found = np.flatnonzero(self.sizes == size)
        if not found.size:
            raise KeyError(size)
        return float(self.values[found[0]])


def nested_blocks(counts: ArrayLike) -> BlockVariance:
    """Return the nested analysis of variance of blocks that double in size.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats, along a line or in a grid.

    Returns
    -------
    BlockVariance
        Values are mean squares. Sizes count quadrats: along a line 1, 2, 4, ...; in a grid 1, 2
        (two side by side in a row), 4 (2 x 2), 8 (2 rows, 4 columns) and so on.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.

    Notes
    -----
    SS(b) = sum T(b)^2 / b - sum T(2b)^2 / (2b), with T(b) the totals of blocks of b quadrats, on
    N / (2b) degrees of freedom. Only the first quadrats of a line, or the top left corner of a
    grid, that fill powers of two are used; `left_out` tells how many were not. In a grid that is
    longer one way, blocks double both ways in turn until one side is used up. Along a line the
    mean squares are the BQV. At random each mean square is about the mean count; they have no
    valid F test against one another, as the counts are no normal values.

    References
    ----------
    Greig-Smith, P. (1952). The use of random and contiguous quadrats in the study of the
    structure of plant communities. Annals of Botany 16, 293-316.

    Examples
    --------
    >>> nested = nested_blocks([[3, 1], [0, 4]])
    >>> nested.sizes.tolist(), nested.values.tolist(), nested.terms.tolist()
    ([1, 2], [5.0, 0.0], [2, 1])
    """
    grid = contiguous(counts)
    x = grid[: _power_of_two(grid.shape[0]), : _power_of_two(grid.shape[1])]
    totals, size = x.astype(np.float64), 1
    sizes, values, terms = [], [], []
    along_row = totals.shape[1] > 1
    while totals.size > 1:
        if along_row:
            first, second = totals[:, ::2], totals[:, 1::2]
        else:
            first, second = totals[::2], totals[1::2]
        sizes.append(size)
        values.append(float(((first - second) ** 2).sum()) / (2 * size * first.size))
        terms.append(first.size)
        totals, size = first + second, 2 * size
        along_row = totals.shape[0] == 1 or (not along_row and totals.shape[1] > 1)
    return BlockVariance(
        "nested", np.array(sizes), np.array(values), np.array(terms), x.size, grid.size - x.size
    )


def blocked_quadrat_variance(counts: ArrayLike) -> BlockVariance:
    """Return BQV of a transect: blocks that double in size, in pairs that do not overlap.

    Parameters
    ----------
    counts : array_like of int, shape (n,)
        Contiguous quadrats along a line.

    Returns
    -------
    BlockVariance
        At 1, 2, 4, ... quadrats.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If the counts are no line.

    Notes
    -----
    The mean over pairs of adjacent blocks of (T1 - T2)^2 / (2b); the first quadrats that fill a
    power of two are used.

    References
    ----------
    Greig-Smith, P. (1952). Annals of Botany 16, 293-316. Hill, M. O. (1973). The intensity of
    spatial pattern in plant communities. Journal of Ecology 61, 225-235.

    Examples
    --------
    >>> blocked_quadrat_variance([5, 5, 0, 0, 5, 5, 0, 0]).values.tolist()
    [0.0, 25.0, 0.0]
    """
    line = _line(counts)
    nested = nested_blocks(line)
    return BlockVariance(
        "BQV", nested.sizes, nested.values, nested.terms, nested.used, nested.left_out
    )


def two_term_variance(counts: ArrayLike, *, largest: int | None = None) -> BlockVariance:
    """Return TTLQV, the two-term local quadrat variance, of a transect or a grid.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats. In a grid blocks lie along its rows and along its columns, and all
        comparisons are averaged.
    largest : int or None
        Largest block; None for as large as two fit one after the other, at most 250.

    Returns
    -------
    BlockVariance

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.

    Notes
    -----
    At block size b the sum over all n + 1 - 2b places of the squared difference between a block
    and the next, divided by 2b (n + 1 - 2b).

    References
    ----------
    Hill, M. O. (1973). The intensity of spatial pattern in plant communities. Journal of Ecology
    61, 225-235.

    Examples
    --------
    >>> two_term_variance([5, 5, 0, 0, 5, 5, 0, 0], largest=2).values.tolist()
    [5.357142857142857, 15.0]
    """
    return _local(counts, "TTLQV", largest)


def three_term_variance(counts: ArrayLike, *, largest: int | None = None) -> BlockVariance:
    """Return 3TLQV, the three-term local quadrat variance, of a transect or a grid.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats; at least 3 in a line.
    largest : int or None
        Largest block; None for as large as three fit one after the other, at most 250.

    Returns
    -------
    BlockVariance
        Without any size where no line holds 3 quadrats.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.

    Notes
    -----
    The sum over all n + 1 - 3b places of (T1 - 2 T2 + T3)^2, divided by 8b (n + 1 - 3b), as is
    common practice; a steady gradient adds nothing to it, unlike to TTLQV. At random, where the
    squares average 6b times the mean, it is about three quarters of the mean count.

    References
    ----------
    Hill, M. O. (1973). The intensity of spatial pattern in plant communities. Journal of Ecology
    61, 225-235.

    Examples
    --------
    >>> three_term_variance([1, 2, 3, 4, 5, 6]).values.tolist()
    [0.0, 0.0]
    """
    return _local(counts, "3TLQV", largest)


def paired_quadrat_variance(counts: ArrayLike, *, largest: int | None = None) -> BlockVariance:
    """Return PQV, the variance of paired quadrats, by their distance along a line.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats.
    largest : int or None
        Largest distance; None for half the longest line, at most 250.

    Returns
    -------
    BlockVariance
        `sizes` are distances.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.

    Notes
    -----
    The sum over all n - d pairs of the squared difference, divided by 2 (n - d). At distance 1 it
    is TTLQV at block size 1.

    References
    ----------
    Ludwig, J. A. and Goodall, D. W. (1978). A comparison of paired- with blocked-quadrat variance
    methods for the analysis of spatial pattern. Vegetatio 38, 49-59.

    Examples
    --------
    >>> paired_quadrat_variance([5, 5, 0, 0, 5, 5, 0, 0]).values.round(2).tolist()
    [5.36, 12.5, 7.5, 0.0]
    """
    return _local(counts, "PQV", largest)


def _local(counts: ArrayLike, method: BlockMethod, largest: int | None) -> BlockVariance:
    """Average the terms of every size along the lines of a grid, or along a transect."""
    grid = contiguous(counts)
    most = largest_size(grid.shape, method)
    sizes = np.arange(1, min(most, MOST_SIZES if largest is None else largest) + 1)
    values, terms = local_variances(grid[None], method, sizes)
    return BlockVariance(method, sizes, values[0], terms, grid.size)


def contiguous(counts: ArrayLike) -> NDArray[np.int64]:
    """Return counts as a grid of whole numbers; a line is a grid of one row.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats.

    Returns
    -------
    ndarray of int, shape (rows, columns)

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If the shape is another, or a count is impossible.

    Examples
    --------
    >>> contiguous([2, 0, 3]).tolist()
    [[2, 0, 3]]
    """
    x = np.asarray(counts)
    if x.ndim not in (1, 2):
        raise ValueError(f"contiguous counts form a line or a grid, not an array of {x.ndim} axes")
    if x.size < 2:
        raise TooFewQuadrats(f"Block variances need at least 2 quadrats, not {x.size}; count more.")
    whole = checked_counts(x)
    shape = (1, -1) if x.ndim == 1 or 1 in x.shape else x.shape
    return np.asarray(whole.reshape(shape), dtype=np.int64)


def _line(counts: ArrayLike) -> NDArray[np.int64]:
    """Return the counts of a transect, or refuse a grid."""
    grid = contiguous(counts)
    if grid.shape[0] != 1:
        raise ValueError(f"{grid.shape[0]} x {grid.shape[1]} quadrats are a grid, not a transect")
    return np.asarray(grid[0], dtype=np.int64)


def _power_of_two(n: int) -> int:
    """Return the largest power of two up to n."""
    return 1 << (n.bit_length() - 1)
