"""How the chance of being found goes with size, contrast or distance: logistic curves."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

_ROUNDS, _CLOSE = 100, 1e-8
_LONGEST_STEP = 2.0


@dataclass(frozen=True, slots=True, eq=False)
class LogisticCurve:
    """Log odds as a sum of terms: b0 + b1 x1 + b2 x2 + ...

    Parameters
    ----------
    weights : ndarray of shape (1 + k,)
        b0, b1, ..., bk.
    covariance : ndarray of shape (1 + k, 1 + k)
        Of the weights, from the information at the fit.
    """

    weights: NDArray[np.float64]
    covariance: NDArray[np.float64]

    def __post_init__(self) -> None:
        self.weights.setflags(write=False)
        self.covariance.setflags(write=False)

    def at(self, terms: ArrayLike) -> NDArray[np.float64]:
        """Return the chance for each of (n, k) rows of terms."""
        return _chance(_with_one(terms), self.weights)


def fit_logistic(terms: ArrayLike, found: ArrayLike) -> LogisticCurve:
    """Fit a logistic curve by penalised maximum likelihood.

    Parameters
    ----------
    terms : array_like of shape (n, k)
        x1 ... xk of each trial.
    found : array_like of bool, shape (n,)
        How each trial ended.

    Returns
    -------
    LogisticCurve

    Raises
    ------
    ValueError
        If there are no trials, or the columns differ in length.

    Notes
    -----
    The log likelihood is penalised by half the log determinant of the information (Jeffreys'
    prior), which takes the first-order bias off the weights and gives finite ones even where a
    term parts the found from the others without overlap [1]_, [2]_.

    References
    ----------
    .. [1] Firth D (1993). Bias reduction of maximum likelihood estimates. Biometrika 80, 27-38.
    .. [2] Heinze G, Schemper M (2002). A solution to the problem of separation in logistic
       regression. Statistics in Medicine 21, 2409-2419.

    Examples
    --------
    >>> fit_logistic([[]] * 3, [True, True, False]).at([[]]).round(3).tolist()
    [0.625]
    """
    x = _with_one(terms)
    y = np.asarray(found, dtype=np.float64).reshape(-1)
    if len(x) != y.size or y.size == 0:
        raise ValueError(f"{len(x)} rows of terms for {y.size} trials")
    weights = np.zeros(x.shape[1])
    best = _penalised(x, y, weights)
    for _ in range(_ROUNDS):
        chance = _chance(x, weights)
        root = np.sqrt(chance * (1 - chance))[:, None] * x
        inverse = np.linalg.pinv(root.T @ root)
        leverage = np.einsum("ij,jk,ik->i", root, inverse, root)
        step = inverse @ (x.T @ (y - chance + leverage * (0.5 - chance)))
        step *= min(1.0, _LONGEST_STEP / max(float(np.abs(step).max()), 1e-12))
        # A step that overshoots is halved until it climbs.
        for _ in range(12):
            value = _penalised(x, y, weights + step)
            if value >= best:
                break
            step = step / 2
        weights, best = weights + step, max(value, best)
        if np.abs(step).max() < _CLOSE:
            break
    chance = _chance(x, weights)
    root = np.sqrt(chance * (1 - chance))[:, None] * x
    return LogisticCurve(weights, np.asarray(np.linalg.pinv(root.T @ root), dtype=np.float64))


def _with_one(terms: ArrayLike) -> NDArray[np.float64]:
    """Put a column of ones before the terms."""
    x = np.asarray(terms, dtype=np.float64)
    if x.ndim == 1:
        x = x.reshape(len(x), 0 if x.size == 0 else 1)
    return np.column_stack([np.ones(len(x)), x])


def _chance(x: NDArray[np.float64], weights: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the chance of each row."""
    return np.asarray(1.0 / (1.0 + np.exp(-np.clip(x @ weights, -35.0, 35.0))))


def _penalised(
    x: NDArray[np.float64], y: NDArray[np.float64], weights: NDArray[np.float64]
) -> float:
    """Return the log likelihood with Jeffreys' penalty."""
    odds = np.clip(x @ weights, -35.0, 35.0)
    chance = _chance(x, weights)
    information = (x * (chance * (1 - chance))[:, None]).T @ x
    sign, size = np.linalg.slogdet(information)
    if sign <= 0:
        return -np.inf
    return float((y * odds - np.logaddexp(0.0, odds)).sum() + 0.5 * size)
