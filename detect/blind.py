"""How close two objects may lie before the detector sees them as one."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from detect.logistic import fit_logistic
from detect.planted import BlindDistance

# Fewer pairs, or none seen as one, or none as two, tell no distance.
FEWEST_PAIRS = 8


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
    The chance of being found as two is a logistic curve in the separation, fitted by penalised
    maximum likelihood (`detect.logistic.fit_logistic`); its half lies at -b0 / b1. The standard
    error is by the delta method [1]_ with the covariance of both weights, as for the median
    effective dose [2]_.

    References
    ----------
    .. [1] Cramer H (1946). Mathematical Methods of Statistics. Princeton University Press,
       section 28.4.
    .. [2] Finney DJ (1971). Probit Analysis, 3rd edition. Cambridge University Press, chapter 3.

    Examples
    --------
    >>> apart = np.linspace(0.3, 1.6, 40)
    >>> seen = blind_distance(apart, apart > 0.8)
    >>> round(seen.value, 1)
    0.8
    """
    x = np.asarray(separation, dtype=np.float64).reshape(-1)
    y = np.asarray(both, dtype=np.bool_).reshape(-1)
    if x.size < FEWEST_PAIRS or y.all() or not y.any():
        return None
    curve = fit_logistic(x[:, None], y)
    b0, b1 = curve.weights
    if not b1 > 0:
        return None
    half = -b0 / b1
    if not x.min() <= half <= x.max():
        return None
    slope = np.array([-1.0 / b1, b0 / b1**2])
    return BlindDistance(float(half), float(np.sqrt(slope @ curve.covariance @ slope)))
