"""Limits of a density from quadrats drawn again and again from those that were counted."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from analyse.density import Limits
from analyse.dispersion import checked_areas, checked_counts

RESAMPLES = 1999


def bootstrap_limits(
    counts: ArrayLike,
    areas: ArrayLike | None = None,
    *,
    rng: np.random.Generator,
    resamples: int = RESAMPLES,
    level: float = 0.95,
) -> Limits:
    """Return the mean per unit area with limits from resampled quadrats.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2, not all equally dense.
    areas : array_like of float, shape (q,), or None
        Area of each quadrat in any one unit; None where they are equal.
    rng : numpy.random.Generator
        Source of randomness.
    resamples : int
        How many.
    level : float
        Confidence level, between 0 and 1.

    Returns
    -------
    Limits
        `value` is points over area.

    Raises
    ------
    ValueError
        If a count or an area is impossible, or all quadrats are equally dense.

    Notes
    -----
    Quadrats, whole and clipped, are drawn with replacement together with their area, and each
    resample gives the ratio of its points to its area. The limits are the bias-corrected and
    accelerated percentiles of these ratios. Quadrats count as independent of each other: a
    gradient, or clumps that reach over several quadrats, make the limits too narrow.

    References
    ----------
    Efron, B. (1987). Better bootstrap confidence intervals. Journal of the American Statistical
    Association 82, 171-185.
    Davison, A. C. and Hinkley, D. V. (1997). Bootstrap Methods and their Application. Cambridge
    University Press, chapters 2 and 5 (ratios; the method).

    Examples
    --------
    >>> limits = bootstrap_limits([0, 9, 0, 0, 8, 1, 0, 7, 0, 0], rng=np.random.default_rng(1))
    >>> limits.value, round(limits.low, 1), round(limits.high, 1)
    (2.5, 0.8, 5.4)
    """
    x = checked_counts(counts)
    a = np.ones(x.size) if areas is None else checked_areas(areas)
    if np.ptp(x / a) == 0:
        raise ValueError("all quadrats are equally dense: there is nothing to resample")
    kinds, many = np.unique(np.column_stack((x, a)).astype(np.float64), axis=0, return_counts=True)
    ratio = float(x.sum() / a.sum())
    drawn = _resampled(kinds, many, resamples, rng)
    below = (np.count_nonzero(drawn < ratio) + 0.5 * np.count_nonzero(drawn == ratio)) / resamples
    tail = (1 - level) / 2
    shift = float(special.ndtri(np.clip(below, 0.5 / resamples, 1 - 0.5 / resamples)))
    percentiles = [_corrected(p, shift, _acceleration(kinds, many)) for p in (tail, 1 - tail)]
    low, high = np.quantile(drawn, percentiles)
    return Limits(ratio, float(low), float(high), level)


def _resampled(
    kinds: NDArray[np.float64],
    many: NDArray[np.int64],
    resamples: int,
    rng: np.random.Generator,
) -> NDArray[np.float64]:
    """Return the ratio of points to area in each resample of the quadrats.

    How often each kind of quadrat (count and area) is drawn is multinomial; so the order of the
    quadrats does not matter, and whole quadrats cost little.
    """
    q = int(many.sum())
    rows = max(1, 1_000_000 // len(many))
    ratios = []
    for start in range(0, resamples, rows):
        draws = rng.multinomial(q, many / q, size=min(rows, resamples - start)) @ kinds
        ratios.append(draws[:, 0] / draws[:, 1])
    return np.concatenate(ratios)


def _acceleration(kinds: NDArray[np.float64], many: NDArray[np.int64]) -> float:
    """Return Efron's acceleration from leaving out one quadrat at a time."""
    total = many @ kinds
    left = total - kinds
    ratios = left[:, 0] / left[:, 1]
    away = np.average(ratios, weights=many) - ratios
    return float((many * away**3).sum() / (6 * (many * away**2).sum() ** 1.5))


def _corrected(p: float, shift: float, acceleration: float) -> float:
    """Return the percentile that the bias-corrected and accelerated bootstrap takes for p."""
    z = shift + float(special.ndtri(p))
    return float(special.ndtr(shift + z / (1 - acceleration * z)))
