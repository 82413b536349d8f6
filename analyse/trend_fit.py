"""The slope of log density that fits best, by the exact likelihood, and the dispersion around it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analyse.errors import TrendNotFound

_STEEPEST = 40.0  # log of the greatest ratio of densities: exp(40) is no trend any more
_STEPS, _CLOSE = 100, 1e-12
_NOTHING = 1e-12  # slopes below this are rounding
_FEWEST_DF = 2  # a partition with fewer degrees of freedom says nothing about dispersion
_LEAST = 1e-3  # dispersion counts as this much at least: counts that fit exactly have none
MIDDLE = 16  # quadrats of the partition whose degrees of freedom the F test takes, about
PARTITIONS = (9, MIDDLE, 36)  # quadrats that dispersion is estimated in, about


@dataclass(frozen=True, slots=True, eq=False)
class Slope:
    """The best slope in standardised covariates.

    Parameters
    ----------
    slope : ndarray of shape (k,)
        Log density per unit of each covariate.
    covariance : ndarray of shape (k, k)
        Of the slope, for points that are independent of one another.
    lr : float
        Twice the gain of log-likelihood over no slope.
    """

    slope: NDArray[np.float64]
    covariance: NDArray[np.float64]
    lr: float


def best_slope(
    z: NDArray[np.float64], weights: NDArray[np.float64], mean: NDArray[np.float64], n: int
) -> Slope:
    """Return the slope that maximises the likelihood of n points.

    Parameters
    ----------
    z : ndarray of shape (m, k)
        Covariates at the nodes of a quadrature of the area, or at the middles of quadrats.
    weights : ndarray of shape (m,)
        Weights of the nodes, or areas of the quadrats.
    mean : ndarray of shape (k,)
        Mean of the covariates over the points.
    n : int
        Points.

    Returns
    -------
    Slope

    Raises
    ------
    TrendNotFound
        If the likelihood rises beyond any sensible slope: all points lie at one end.

    Notes
    -----
    Given n, the log-likelihood of an inhomogeneous Poisson process with log density b z is
    n (b mean - log integral exp(b z)); it is concave, and Newton's steps with halving reach its
    maximum. The intercept then makes the expected number n, so slope and likelihood ratio are
    those of the unconditional process too.

    References
    ----------
    Cox, D. R. (1972). The statistical analysis of dependencies in point processes. In: Lewis,
    P. A. W. (ed.), Stochastic Point Processes, Wiley, 55-66. Berman, M. and Turner, T. R. (1992).
    Approximating point process likelihoods with GLIM. Applied Statistics 41, 31-38.

    Examples
    --------
    >>> z, weights = np.linspace(-1, 1, 201)[:, None], np.full(201, 1 / 201)
    >>> best_slope(z, weights, np.array([0.3]), 50).slope.round(2).tolist()
    [0.94]
    """
    b = np.zeros(z.shape[1])
    start = value = _log_likelihood(b, z, weights, mean)
    reach = np.ptp(z, axis=0)
    for _ in range(_STEPS):
        middle, spread = _moments(b, z, weights)
        gradient = mean - middle
        step = np.linalg.solve(spread, gradient)
        size, better = 1.0, -np.inf
        while size > 1e-6 and not better >= value:
            trial = b + size * step
            better = _log_likelihood(trial, z, weights, mean)
            size /= 2
        if not better >= value:
            break
        b, gain, value = trial, better - value, better
        if float(np.abs(b) @ reach) > _STEEPEST:
            raise TrendNotFound(
                "All points lie so near one end of the area that no slope of the density fits."
            )
        if gain < _CLOSE and float(gradient @ step) < _CLOSE:
            break
    b[np.abs(b) < _NOTHING] = 0.0
    spread = _moments(b, z, weights)[1]
    return Slope(b, np.linalg.inv(spread) / n, max(0.0, 2 * n * (value - start)))


def largest_dispersion(
    partitions: Sequence[tuple[NDArray[np.int64], NDArray[np.float64]]], df: int
) -> tuple[float, int]:
    """Return the dispersion of counts around a trend, and its degrees of freedom.

    Parameters
    ----------
    partitions : sequence of (counts, expected)
        The same points counted in coarser and finer quadrats; that whose degrees of freedom
        count comes second.
    df : int
        Slopes fitted.

    Returns
    -------
    (dispersion, degrees of freedom) : tuple of float and int
        Pearson's X2 over its degrees of freedom, the largest of the partitions'.

    Raises
    ------
    TrendNotFound
        If there are too few quadrats.

    Notes
    -----
    Clusters that reach over the edges of small quadrats hide part of their dispersion there, and
    it is the dispersion at the scale of the slope, the whole area, that matters. The largest of
    three coarse partitions keeps the test honest where one alone does not.

    Examples
    --------
    >>> counts, expected = np.array([4, 1, 6, 9, 0, 4, 2, 6]), np.full(8, 4.0)
    >>> largest_dispersion([(counts, expected)], 1)
    (2.5833333333333335, 6)
    """
    found = [
        (float(((x - e) ** 2 / e).sum()) / (x.size - 1 - df), x.size - 1 - df)
        for x, e in partitions
        if x.size - 1 - df >= _FEWEST_DF
    ]
    if not found:
        raise TrendNotFound("There are too few quadrats to tell a slope of the density.")
    judged = found[1] if len(found) > 1 else found[0]
    return max(_LEAST, *(value for value, _ in found)), judged[1]


def _log_likelihood(
    b: NDArray[np.float64],
    z: NDArray[np.float64],
    weights: NDArray[np.float64],
    mean: NDArray[np.float64],
) -> float:
    """Return the log-likelihood of a point."""
    slope = z @ b
    top = float(slope.max())
    total = float(weights @ np.exp(slope - top))
    return float(b @ mean) - top - float(np.log(total)) if total > 0 else -np.inf


def _moments(
    b: NDArray[np.float64], z: NDArray[np.float64], weights: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return mean and covariance of the covariates under a slope."""
    slope = z @ b
    share = weights * np.exp(slope - slope.max())
    share = share / share.sum()
    mean = share @ z
    off = z - mean
    return mean, (off.T * share) @ off
