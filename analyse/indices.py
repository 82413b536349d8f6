"""Indices of clumping that other studies report, for comparison with them."""

from __future__ import annotations

import math

from numpy.typing import ArrayLike

from analyse.dispersion import dispersion
from analyse.morisita import morisita_index as morisita_index


def mean_crowding(counts: ArrayLike) -> float:
    """Return mean crowding, m + VMR - 1: the others in its quadrat that a point meets on average.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.

    Returns
    -------
    float
        NaN without points.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If a count is negative or no whole number.

    References
    ----------
    Lloyd, M. (1967). Mean crowding. Journal of Animal Ecology 36, 1-30.

    Examples
    --------
    >>> mean_crowding([1, 1, 1, 1])
    0.0
    """
    d = dispersion(counts)
    return d.mean + d.vmr - 1


def patchiness(counts: ArrayLike) -> float:
    """Return patchiness, mean crowding over the mean: 1 at random, and 1 + 1 / k when clumped.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.

    Returns
    -------
    float
        NaN without points. k is that of the moments, m^2 / (s^2 - m).

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If a count is negative or no whole number.

    Notes
    -----
    Unlike the variance-to-mean ratio it stays the same when a share of the points is removed at
    random, for instance by death or by a detector that misses some.

    References
    ----------
    Lloyd, M. (1967). Mean crowding. Journal of Animal Ecology 36, 1-30.

    Examples
    --------
    >>> patchiness([4, 0, 0, 0])
    4.0
    """
    d = dispersion(counts)
    return (d.mean + d.vmr - 1) / d.mean if d.n > 0 else math.nan


def cluster_size_index(counts: ArrayLike) -> float:
    """Return the index of cluster size, VMR - 1: 0 at random.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.

    Returns
    -------
    float
        NaN without points.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If a count is negative or no whole number.

    References
    ----------
    David, F. N. and Moore, P. G. (1954). Notes on contagious distributions in plant populations.
    Annals of Botany 18, 47-53.

    Examples
    --------
    >>> cluster_size_index([4, 0, 0, 0])
    3.0
    """
    return dispersion(counts).vmr - 1


def greens_index(counts: ArrayLike) -> float:
    """Return Green's index, (VMR - 1) / (S - 1) with S points: 1 if all are in one quadrat.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.

    Returns
    -------
    float
        NaN with fewer than 2 points.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If a count is negative or no whole number.

    References
    ----------
    Green, R. H. (1966). Measurement of non-randomness in spatial distributions. Researches on
    Population Ecology 8, 1-7.

    Examples
    --------
    >>> greens_index([4, 0, 0, 0])
    1.0
    """
    d = dispersion(counts)
    return (d.vmr - 1) / (d.n - 1) if d.n > 1 else math.nan
