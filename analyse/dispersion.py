"""How counts vary between quadrats: the variance-to-mean ratio and its test.

Conventions: the variance divides by q - 1 (q quadrats); X2 = (q - 1) VMR with q - 1 degrees of
freedom; the upper tail means clumped, the lower one even, and the two-sided p is twice the smaller.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from analyse.density import garwood_limits as garwood_limits
from analyse.errors import TooFewQuadrats


@dataclass(frozen=True, slots=True)
class Dispersion:
    """How counts vary between quadrats, against the variation that chance alone would give.

    Parameters
    ----------
    q : int
        Quadrats, at least 2.
    n : int
        Points in them.
    mean, variance : float
        Of the counts; the variance divides by q - 1. For quadrats of unequal area the variance
        is `vmr` times the mean: what equal quadrats would show.
    vmr : float
        Variance-to-mean ratio, X2 / (q - 1): about 1 at random, above clumped, below even.
    chi2 : float
        Index-of-dispersion statistic X2 = sum (x - E)^2 / E.
    df : int
        Degrees of freedom, q - 1.
    p_clumped, p_even, p_two_sided : float
        Chi-square p: upper tail, lower tail, and twice the smaller (at most 1).

    Notes
    -----
    Without any point the ratio and what follows from it are NaN.
    """

    q: int
    n: int
    mean: float
    variance: float
    vmr: float
    chi2: float
    df: int
    p_clumped: float
    p_even: float
    p_two_sided: float

    def __repr__(self) -> str:
        return (
            f"<Dispersion: VMR {self.vmr:.4g} of {self.n} points in {self.q} quadrats, chi-square"
            f" p = {self.p_two_sided:.3g} two-sided>"
        )


def dispersion(counts: ArrayLike) -> Dispersion:
    """Return the variance-to-mean ratio of counts in equal quadrats, and its chi-square test.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.

    Returns
    -------
    Dispersion

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If a count is negative or no whole number.

    Notes
    -----
    X2 = sum (x - m)^2 / m = (q - 1) s^2 / m, compared with chi-square on q - 1 degrees of freedom;
    conditional on the total, the counts are multinomial at random. The approximation needs a mean
    count of about 1 or more.

    References
    ----------
    Fisher, R. A., Thornton, H. G. and Mackenzie, W. A. (1922). The accuracy of the plating method
    of estimating the density of bacterial populations. Annals of Applied Biology 9, 325-359.

    Examples
    --------
    >>> d = dispersion([12, 16, 20])
    >>> d.chi2, d.df, round(d.p_clumped, 5)
    (2.0, 2, 0.36788)
    """
    x = checked_counts(counts)
    _enough(x.size)
    mean = float(x.mean())
    variance = float(((x - mean) ** 2).sum() / (x.size - 1))
    chi2 = (x.size - 1) * variance / mean if mean > 0 else math.nan
    return _judged(x, variance, chi2)


def clipped_dispersion(counts: ArrayLike, areas: ArrayLike) -> Dispersion:
    """Return the same for quadrats of unequal area, whose expected counts go by area.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.
    areas : array_like of float, shape (q,)
        Area of each quadrat inside the study area, in any one unit.

    Returns
    -------
    Dispersion
        With E = n a / A, X2 = sum (x - E)^2 / E and `vmr` = X2 / (q - 1). For equal areas it is
        the same as `dispersion`.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.
    ValueError
        If a count or an area is impossible, or their numbers differ.

    References
    ----------
    Pearson, K. (1900). On the criterion that a given system of deviations ... Philosophical
    Magazine 50, 157-175.

    Examples
    --------
    >>> clipped_dispersion([2, 4, 6], [1, 2, 3]).chi2
    0.0
    """
    x = checked_counts(counts)
    _enough(x.size)
    expected = expected_counts(x, areas)
    n = float(x.sum())
    chi2 = float(((x - expected) ** 2 / expected).sum()) if n > 0 else math.nan
    variance = chi2 / (x.size - 1) * n / x.size if n > 0 else 0.0
    return _judged(x, variance, chi2)


def expected_counts(counts: ArrayLike, areas: ArrayLike | None) -> NDArray[np.float64]:
    """Return the counts expected at random given their total: by area, equal where it is unknown.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.
    areas : array_like of float, shape (q,), or None
        Areas in any one unit.

    Returns
    -------
    ndarray of shape (q,)

    Raises
    ------
    ValueError
        If an area is not positive or the numbers of counts and areas differ.

    Examples
    --------
    >>> expected_counts([2, 7, 3], [1, 2, 3]).tolist()
    [2.0, 4.0, 6.0]
    """
    x = checked_counts(counts)
    a = np.ones(x.size) if areas is None else checked_areas(areas)
    if a.size != x.size:
        raise ValueError(f"{a.size} areas for {x.size} counts")
    return np.asarray(x.sum() * (a / a.sum()))


def residuals(counts: ArrayLike, expected: ArrayLike) -> NDArray[np.float64]:
    """Return the standardised residual of each quadrat: how far from random, in standard errors.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.
    expected : array_like of float, shape (q,)
        Counts expected at random; they sum to the total.

    Returns
    -------
    ndarray of shape (q,)
        (x - E) / sqrt(E (1 - E / n)); NaN without points.

    References
    ----------
    Haberman, S. J. (1973). The analysis of residuals in cross-classified tables. Biometrics 29,
    205-220.

    Examples
    --------
    >>> residuals([0, 4, 0, 0], [1, 1, 1, 1]).round(3).tolist()
    [-1.155, 3.464, -1.155, -1.155]
    """
    x, e = checked_counts(counts), np.asarray(expected, dtype=np.float64)
    total = e.sum()
    if not total > 0:
        return np.full(x.size, np.nan)
    spread = np.sqrt(e * (1 - e / total))
    unknown = np.full(x.size, np.nan)
    return np.asarray(np.divide(x - e, spread, out=unknown, where=spread > 0))


def normal_deviate(chi2: float, df: int) -> float:
    """Return d = sqrt(2 X2) - sqrt(2 df - 1), near standard normal at random for many quadrats.

    Parameters
    ----------
    chi2 : float
        X2, 0 or more.
    df : int
        Degrees of freedom, 1 or more.

    Returns
    -------
    float
        Positive where counts are clumped, negative where they are even.

    References
    ----------
    Fisher, R. A. (1925). Statistical Methods for Research Workers. Oliver and Boyd, Edinburgh.

    Examples
    --------
    >>> round(normal_deviate(475.7179, 399), 4)
    2.6142
    """
    return math.sqrt(2 * chi2) - math.sqrt(2 * df - 1)


def vmr_standard_error(q: int) -> float:
    """Return the standard error of the variance-to-mean ratio at random, sqrt(2 / (q - 1)).

    Parameters
    ----------
    q : int
        Quadrats, at least 2.

    Returns
    -------
    float

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 quadrats.

    Notes
    -----
    The standard error of a chi-square over its degrees of freedom. Given S points the exact
    variance is 2 (1 - 1 / S) / (q - 1) (Haldane 1940), so that the form serves from some tens of
    points on. Older texts also use sqrt(2 q) / (q - 1) (Blackman), which is a little larger.

    References
    ----------
    Bartlett, M. S., as quoted by Greig-Smith, P. (1983). Quantitative Plant Ecology, 3rd edition.
    Blackwell, Oxford.
    Haldane, J. B. S. (1940). The mean and variance of chi-square, when used as a test of
    homogeneity, when expectations are small. Biometrika 31, 346-355.

    Examples
    --------
    >>> vmr_standard_error(51)
    0.2
    """
    _enough(q)
    return math.sqrt(2 / (q - 1))


def checked_counts(counts: ArrayLike) -> NDArray[np.int64]:
    """Return counts as whole numbers, or refuse them.

    Parameters
    ----------
    counts : array_like, any shape
        Whole numbers of 0 or more.

    Returns
    -------
    ndarray of int64, shape (q,)

    Raises
    ------
    ValueError
        If one is negative, not whole or not finite.

    Examples
    --------
    >>> checked_counts([[2.0, 0.0], [3.0, 1.0]]).tolist()
    [2, 0, 3, 1]
    """
    x = np.asarray(counts).reshape(-1)
    if x.size and not (np.isfinite(x).all() and (x >= 0).all() and (x == np.floor(x)).all()):
        raise ValueError("counts must be whole numbers of 0 or more")
    return x.astype(np.int64)


def checked_areas(areas: ArrayLike) -> NDArray[np.float64]:
    """Return areas as positive finite numbers, or refuse them.

    Parameters
    ----------
    areas : array_like, any shape
        In any one unit.

    Returns
    -------
    ndarray of float64, shape (q,)

    Raises
    ------
    ValueError
        If one is not positive and finite.

    Examples
    --------
    >>> checked_areas([4, 2.5]).tolist()
    [4.0, 2.5]
    """
    a = np.asarray(areas, dtype=np.float64).reshape(-1)
    if not (np.isfinite(a).all() and (a > 0).all()):
        raise ValueError("areas must be positive and finite")
    return a


def _enough(q: int) -> None:
    """Refuse fewer than 2 quadrats."""
    if q < 2:
        raise TooFewQuadrats(
            f"Dispersion needs at least 2 quadrats, not {q}; choose smaller quadrats."
        )


def _judged(x: NDArray[np.int64], variance: float, chi2: float) -> Dispersion:
    """Return the dispersion with its chi-square p values."""
    q, df = x.size, x.size - 1
    upper, lower = float(special.chdtrc(df, chi2)), float(special.chdtr(df, chi2))
    two_sided = min(1.0, 2 * min(upper, lower)) if math.isfinite(chi2) else math.nan
    mean, vmr = float(x.mean()), chi2 / df
    return Dispersion(q, int(x.sum()), mean, variance, vmr, chi2, df, upper, lower, two_sided)
