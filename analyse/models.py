"""Frequencies of counts, as seen and as the Poisson law expects them at random."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from analyse.columns import hold_columns
from analyse.dispersion import checked_counts
from analyse.errors import TooFewQuadrats
from analyse.pooling import (
    LARGEST_COUNT,
    SMALLEST_EXPECTED,
    CountClass,
    class_labels,
    compare_classes,
    pooled,
)


@dataclass(frozen=True, slots=True, eq=False)
class PoissonFit:
    """Frequencies of counts beside those of a Poisson law with the same mean.

    Parameters
    ----------
    mean : float
        Mean count, estimated from the counts.
    frequencies, poisson : ndarray of shape (k,)
        Quadrats with exactly 0, 1, ... k - 1 points, seen and expected, for drawing. The last
        ones follow the largest count.
    classes : tuple of (low, high)
        Pooled classes of the test, both ends included; the last is open (high is None).
    observed, expected : ndarray of shape (len(classes),)
        Quadrats in each class, seen and expected.
    chi2 : float
        sum (observed - expected)^2 / expected.
    df : int
        Classes - 2: one for the total and one for the mean.
    p : float
        Upper chi-square tail; NaN where `df` is below 1.
    """

    mean: float
    frequencies: NDArray[np.int64]
    poisson: NDArray[np.float64]
    classes: tuple[CountClass, ...]
    observed: NDArray[np.int64]
    expected: NDArray[np.float64]
    chi2: float
    df: int
    p: float

    def __post_init__(self) -> None:
        if not len(self.classes) == len(self.observed) == len(self.expected):
            raise ValueError("classes, observed and expected differ in length")
        hold_columns(self, ("frequencies", "poisson", "observed", "expected"))

    def __repr__(self) -> str:
        fit = f"chi-square {self.chi2:.4g} on {self.df} df, p = {self.p:.3g}"
        return f"<PoissonFit: mean {self.mean:.4g}, {len(self.classes)} classes, {fit}>"

    @property
    def labels(self) -> tuple[str, ...]:
        """Return the classes in words: "0", "1-2", "3 or more"."""
        return class_labels(self.classes)


def poisson_frequencies(
    counts: ArrayLike,
    *,
    pool_classes: Sequence[CountClass] | None = None,
    smallest_expected: float = SMALLEST_EXPECTED,
) -> PoissonFit:
    """Fit a Poisson law to counts in equal quadrats and test the fit.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2 and none above 10,000.
    pool_classes : sequence of (low, high) or None
        Classes that cover 0, 1, 2, ... without a gap, the last with high None; None pools by
        `smallest_expected`.
    smallest_expected : float
        Classes are pooled from both tails until each expects this many quadrats.

    Returns
    -------
    PoissonFit

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 counts.
    ValueError
        If the classes leave a gap, or a count is impossible.

    Notes
    -----
    Poisson counts are what random points give in equal quadrats; the converse does not hold, for
    the frequencies do not know where the quadrats lie. The mean is estimated from the counts
    themselves and not from the classes, so that p is a little too small (Chernoff and Lehmann).

    References
    ----------
    "Student" (1907). On the error of counting with a haemacytometer. Biometrika 5, 351-360.
    Cochran, W. G. (1954). Some methods for strengthening the common chi-square tests. Biometrics
    10, 417-451 (expected counts of 1 in the tails).
    Chernoff, H. and Lehmann, E. L. (1954). The use of maximum likelihood estimates in chi-square
    tests for goodness of fit. Annals of Mathematical Statistics 25, 579-586.

    Examples
    --------
    >>> fit = poisson_frequencies([0] * 109 + [1] * 65 + [2] * 22 + [3] * 3 + [4])
    >>> fit.labels, fit.df
    (('0', '1', '2', '3 or more'), 2)
    """
    x = countable(counts)
    mean, top = float(x.mean()), int(x.max())
    frequencies = np.bincount(x)
    poisson = x.size * poisson_law(mean, np.arange(top + 1))

    def share(low: int, high: int | None) -> float:
        return poisson_share(mean, low, high)

    if pool_classes is None:
        pool_classes = pooled(share, int(mean), x.size, smallest_expected, top)
    fit = compare_classes(frequencies, pool_classes, share, fitted=1)
    return PoissonFit(
        mean,
        frequencies,
        poisson,
        fit.classes,
        fit.observed,
        fit.expected,
        fit.chi2,
        fit.df,
        fit.p,
    )


def countable(counts: ArrayLike) -> NDArray[np.int64]:
    """Return counts whose frequencies can be given, or refuse them.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2 and none above 10,000.

    Returns
    -------
    ndarray of int64, shape (q,)

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 counts.
    ValueError
        If a count is impossible or above 10,000.

    Examples
    --------
    >>> countable([3, 0, 1]).tolist()
    [3, 0, 1]
    """
    x = checked_counts(counts)
    if x.size < 2:
        raise TooFewQuadrats(f"Frequencies need at least 2 quadrats, not {x.size}; count more.")
    top = int(x.max())
    if top > LARGEST_COUNT:
        raise ValueError(f"a count of {top} is above {LARGEST_COUNT}: too many classes")
    return x


def poisson_law(mean: float, values: ArrayLike) -> NDArray[np.float64]:
    """Return the Poisson probability of each value, also for a mean of 0.

    Parameters
    ----------
    mean : float
        Mean of the law, 0 or more.
    values : array_like of int, any shape
        0 or more.

    Returns
    -------
    ndarray of the same shape

    Examples
    --------
    >>> poisson_law(1.0, [0, 1, 2]).round(3).tolist()
    [0.368, 0.368, 0.184]
    """
    k = np.asarray(values, dtype=np.float64)
    return np.asarray(np.exp(special.xlogy(k, mean) - mean - special.gammaln(k + 1)))


def poisson_share(mean: float, low: int, high: int | None) -> float:
    """Return the Poisson probability of a class of counts, both ends included.

    Parameters
    ----------
    mean : float
        Mean of the law, 0 or more.
    low : int
        Lowest count.
    high : int or None
        Highest count; None for no end.

    Returns
    -------
    float

    Examples
    --------
    >>> round(poisson_share(1.0, 1, None), 3)
    0.632
    """
    below = float(special.pdtr(low - 1, mean)) if low > 0 else 0.0
    if high is None:
        return float(special.pdtrc(low - 1, mean)) if low > 0 else 1.0
    if high == low:
        return float(poisson_law(mean, low))
    return float(special.pdtr(high, mean)) - below
