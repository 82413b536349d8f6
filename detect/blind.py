"""How close two objects may lie before the detector sees them as one."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from detect.logistic import fit_logistic
from detect.planted import BlindDistance

# Fewer pairs, or none seen as one, or none as two, tell no distance.
FEWEST_PAIRS = 8
# What is thought of the steepness beforehand: log odds per sum of radii, and how far its logarithm
# may be off (one standard deviation). Few pairs make a curve look steeper than it is.
_USUAL_SLOPE, _SLOPE_SPREAD = 4.0, 0.7
# How strongly a ceiling at a half, and one at 1, are held off.
_CEILING = 0.5, 0.3
# Steps of the numerical second derivatives, in the curve's own terms.
_STEP = 1e-3


def blind_distance(separation: ArrayLike, both: ArrayLike) -> BlindDistance | None:
    """Estimate the blind distance from pairs at known separations.

    Parameters
    ----------
    separation : array_like of shape (n,)
        Distance of both centres over the sum of both radii.
    both : array_like of bool, shape (n,)
        Whether both were found.

    Returns
    -------
    BlindDistance or None
        None where the pairs tell none: fewer than 8, all or none found as two, or a curve whose
        half lies outside the separations tried.

    Notes
    -----
    The chance of being found as two is a logistic curve in the separation that levels off at a
    ceiling, for one of a pair may be missed however far apart they lie. A curve without ceiling is
    drawn flat by a few such misses, and its half with it [1]_. The blind distance is where the
    chance is a half, not half of the ceiling. The fit is by penalised maximum likelihood: a
    normal law on the log steepness and a beta law on how far the ceiling lies above a half on the
    way to 1 (our own choices). The standard error is from the
    curvature of the penalised log likelihood at its maximum [2]_.

    References
    ----------
    .. [1] Wichmann FA, Hill NJ (2001). The psychometric function: I. Fitting, sampling, and
       goodness of fit. Perception and Psychophysics 63, 1293-1313.
    .. [2] Finney DJ (1971). Probit Analysis, 3rd edition. Cambridge University Press, chapter 3.

    Examples
    --------
    >>> apart = np.linspace(0.3, 1.6, 40)
    >>> seen = blind_distance(apart, apart > 0.8)
    >>> round(seen.value, 1)
    0.8
    """
    from scipy.optimize import minimize

    x = np.asarray(separation, dtype=np.float64).reshape(-1)
    y = np.asarray(both, dtype=np.bool_).reshape(-1)
    if x.size < FEWEST_PAIRS or y.all() or not y.any():
        return None
    b0, b1 = fit_logistic(x[:, None], y).weights
    if not b1 > 0 or not x.min() <= -b0 / b1 <= x.max():
        return None
    start = np.array([-b0 / b1, math.log(_USUAL_SLOPE), 2.0])
    how = {"maxiter": 2000, "xatol": 1e-5, "fatol": 1e-8}
    search: Any = minimize
    best = search(_cost, start, args=(x, y), method="Nelder-Mead", options=how).x
    if not x.min() <= best[0] <= x.max():
        return None
    variance = float(np.linalg.pinv(_curvature(best, x, y))[0, 0])
    return BlindDistance(float(best[0]), math.sqrt(variance)) if variance > 0 else None


def _cost(terms: NDArray[np.float64], x: NDArray[np.float64], y: NDArray[np.bool_]) -> float:
    """Return the penalised log likelihood, turned over, of half, log steepness and ceiling.

    The ceiling is (1 + u) / 2 with u the logistic of the third term, so that a half is reached.
    """
    half, log_slope, level = terms
    level = float(np.clip(level, -30.0, 30.0))
    u = 1.0 / (1.0 + math.exp(-level))
    ceiling = 0.5 * (1.0 + u)
    # Where the chance is a half, the curve under the ceiling has log odds of log(1 / u).
    odds = math.exp(min(log_slope, 8.0)) * (x - half) - math.log(u)
    chance = np.clip(ceiling / (1.0 + np.exp(-np.clip(odds, -35.0, 35.0))), 1e-12, 1 - 1e-12)
    told = float(np.log(np.where(y, chance, 1.0 - chance)).sum())
    steep = -0.5 * ((log_slope - math.log(_USUAL_SLOPE)) / _SLOPE_SPREAD) ** 2
    return -float(told + steep + _CEILING[0] * math.log(u) + _CEILING[1] * math.log1p(-u))


def _curvature(
    terms: NDArray[np.float64], x: NDArray[np.float64], y: NDArray[np.bool_]
) -> NDArray[np.float64]:
    """Return the second derivatives of the cost, by central differences."""
    steps = _STEP * np.eye(terms.size)
    return np.array(
        [
            [
                sum(
                    a * b * _cost(terms + a * one + b * other, x, y)
                    for a in (1, -1)
                    for b in (1, -1)
                )
                / (4 * _STEP**2)
                for other in steps
            ]
            for one in steps
        ]
    )
