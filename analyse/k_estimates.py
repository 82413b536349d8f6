"""The clumping parameter k without maximum likelihood: by moments, and by the empty quadrats.

Older studies report k by these; maximum likelihood (`analyse.fits`) uses the counts better. Each
estimate that cannot be made says why.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.models import countable
from analyse.negative_binomial import POISSON_LIMIT, fall_of

_NO_POINTS = "no points: no k"


@dataclass(frozen=True, slots=True)
class KEstimate:
    """An estimate of k, and what there is to say of it.

    Parameters
    ----------
    value : float
        Positive; `math.inf` for the Poisson limit, NaN where it cannot be had.
    reason : str
        Why it is infinite or NaN; empty otherwise.
    """

    value: float
    reason: str = ""


def k_by_moments(counts: ArrayLike) -> KEstimate:
    """Return k = m^2 / (s^2 - m), the form of the mean and variance alone: the default.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2 and none above 10,000.

    Returns
    -------
    KEstimate
        The Poisson limit where the variance does not exceed the mean.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 counts.
    ValueError
        If a count is impossible or above 10,000.

    Notes
    -----
    The variance divides by q - 1. Lloyd's patchiness is exactly 1 + 1 / k of this form, which is
    why it is the default; `k_by_corrected_moments` is the other form in use.

    References
    ----------
    Anscombe, F. J. (1950). Sampling theory of the negative binomial and logarithmic series
    distributions. Biometrika 37, 358-382.

    Examples
    --------
    >>> mites = np.repeat(range(8), [70, 38, 17, 10, 9, 3, 2, 1])
    >>> round(k_by_moments(mites).value, 6)
    1.166697
    """
    return _moments(countable(counts), corrected=False)


def k_by_corrected_moments(counts: ArrayLike) -> KEstimate:
    """Return k = (m^2 - s^2 / q) / (s^2 - m), which allows for the sampling error of the mean.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2 and none above 10,000.

    Returns
    -------
    KEstimate
        The Poisson limit where the variance does not exceed the mean; NaN with all points in one
        quadrat, where this form is 0.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 counts.
    ValueError
        If a count is impossible or above 10,000.

    References
    ----------
    Elliott, J. M. (1977). Some Methods for the Statistical Analysis of Samples of Benthic
    Invertebrates, 2nd edition. Freshwater Biological Association, Ambleside.

    Examples
    --------
    >>> mites = np.repeat(range(8), [70, 38, 17, 10, 9, 3, 2, 1])
    >>> round(k_by_corrected_moments(mites).value, 6)
    1.153248
    """
    return _moments(countable(counts), corrected=True)


def k_by_zero_class(counts: ArrayLike) -> KEstimate:
    """Return the k that expects as many empty quadrats as there are: k ln(1 + m / k) = ln(q / n0).

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2 and none above 10,000.

    Returns
    -------
    KEstimate
        The Poisson limit where no more quadrats are empty than chance would leave; NaN where
        none is empty, or all are.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 counts.
    ValueError
        If a count is impossible or above 10,000.

    References
    ----------
    Anscombe, F. J. (1949). The statistical analysis of insect counts based on the negative
    binomial distribution. Biometrics 5, 165-173.

    Examples
    --------
    >>> mites = np.repeat(range(8), [70, 38, 17, 10, 9, 3, 2, 1])
    >>> round(k_by_zero_class(mites).value, 6)
    0.992306
    >>> k_by_zero_class([3, 1, 2]).reason
    'no quadrat is empty: no k by the zero class'
    """
    x = countable(counts)
    q, empty, mean = x.size, int((x == 0).sum()), float(x.mean())
    if empty == q:
        return KEstimate(math.nan, _NO_POINTS)
    if empty == 0:
        return KEstimate(math.nan, "no quadrat is empty: no k by the zero class")
    wanted = math.log(q / empty)
    if wanted >= mean:
        return KEstimate(math.inf, POISSON_LIMIT)
    return KEstimate(fall_of(lambda k: wanted - k * math.log1p(mean / k), mean))


def _moments(x: NDArray[np.int64], *, corrected: bool) -> KEstimate:
    """Return k by moments in whole numbers, so that its sign is exact."""
    q, n = x.size, int(x.sum())
    if n == 0:
        return KEstimate(math.nan, _NO_POINTS)
    spread = q * int((x * x).sum()) - n * n  # q (q - 1) s^2
    over = spread - n * (q - 1)  # q (q - 1) (s^2 - m)
    if over <= 0:
        return KEstimate(math.inf, POISSON_LIMIT)
    above = n * n * (q - 1) - (spread if corrected else 0)
    if above == 0:
        return KEstimate(math.nan, "all points lie in one quadrat: this form of k is 0")
    return KEstimate(above / (q * over))
