"""How much neighbouring blocks of a line differ, at every place and for many grids at once."""

from __future__ import annotations

from collections.abc import Callable
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

BlockMethod = Literal["nested", "BQV", "TTLQV", "3TLQV", "PQV"]


def largest_size(shape: tuple[int, ...], method: BlockMethod) -> int:
    """Return the largest size a local variance has in a grid of this shape.

    Parameters
    ----------
    shape : (rows, columns)
        Of the grid; (1, n) for a transect.
    method : {"TTLQV", "3TLQV", "PQV"}
        Which variance.

    Returns
    -------
    int
        0 where not even single quadrats can be compared.

    Examples
    --------
    >>> [largest_size((1, 20), method) for method in ("TTLQV", "3TLQV", "PQV")]
    [10, 6, 10]
    """
    return max(shape) // _TERMS[method][0]


def local_variances(
    grids: ArrayLike, method: BlockMethod, sizes: NDArray[np.int64]
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Return a local variance of many grids of one shape at once.

    Parameters
    ----------
    grids : array_like of shape (m, rows, columns)
        Counts.
    method : {"TTLQV", "3TLQV", "PQV"}
        Which variance.
    sizes : ndarray of int, shape (k,)
        Sizes, none above `largest_size`.

    Returns
    -------
    values : ndarray of shape (m, k)
    terms : ndarray of int, shape (k,)
        Comparisons along rows and columns.

    Examples
    --------
    >>> local_variances([[[5, 5, 0, 0]], [[5, 0, 5, 0]]], "TTLQV", np.array([1, 2]))[0].tolist()
    [[4.166666666666667, 25.0], [12.5, 0.0]]
    """
    blocks, term = _TERMS[method]
    x = np.asarray(grids, dtype=np.float64)
    ways = [_sums(way) for way in (x, x.swapaxes(1, 2)) if way.shape[2] > 1]
    values, terms = np.empty((len(x), len(sizes))), np.empty(len(sizes), dtype=np.int64)
    for k, size in enumerate(sizes.tolist()):
        parts = [term(way, size) for way in ways if way.shape[2] > blocks * size]
        terms[k] = sum(part[0].size for part in parts)
        values[:, k] = sum(part.sum(axis=(1, 2)) for part in parts) / terms[k]
    return values, terms


def _two_term(sums: NDArray[np.float64], size: int) -> NDArray[np.float64]:
    """Return (T1 - T2)^2 / (2b) at every place."""
    totals = _totals(sums, size)
    return np.asarray((totals[..., :-size] - totals[..., size:]) ** 2 / (2 * size))


def _three_term(sums: NDArray[np.float64], size: int) -> NDArray[np.float64]:
    """Return (T1 - 2 T2 + T3)^2 / (8b) at every place."""
    totals = _totals(sums, size)
    middle = totals[..., size:-size]
    off = totals[..., : -2 * size] - 2 * middle + totals[..., 2 * size :]
    return np.asarray(off**2 / (8 * size))


def _paired(sums: NDArray[np.float64], distance: int) -> NDArray[np.float64]:
    """Return (x1 - x2)^2 / 2 of every pair."""
    x = np.diff(sums)
    return np.asarray((x[..., :-distance] - x[..., distance:]) ** 2 / 2)


_TERMS: dict[str, tuple[int, Callable[[NDArray[np.float64], int], NDArray[np.float64]]]] = {
    "TTLQV": (2, _two_term),
    "3TLQV": (3, _three_term),
    "PQV": (2, _paired),
}


def _sums(lines: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return running totals along the last axis, from 0."""
    sums = np.cumsum(lines, axis=-1)
    return np.concatenate([np.zeros_like(sums[..., :1]), sums], axis=-1)


def _totals(sums: NDArray[np.float64], size: int) -> NDArray[np.float64]:
    """Return the total of every run of `size` quadrats."""
    return np.asarray(sums[..., size:] - sums[..., :-size])
