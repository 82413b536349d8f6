"""What counts chance alone would give in quadrats of any areas, and how far X2 lies from them."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.chance import LEVEL, SIMULATIONS
from analyse.chance import check_simulations as check_simulations
from analyse.dispersion import checked_areas, clipped_dispersion

_TIE = 1e-9  # statistics closer than this share of themselves count as equal
_CELLS_AT_ONCE = 2_000_000
_ENOUGH_EACH = 4  # points a quadrat from which the least X2 is far below any that matters


@dataclass(frozen=True, slots=True)
class SimulatedTest:
    """A statistic judged against simulations of chance.

    Parameters
    ----------
    statistic : float
        X2 of the counts, with expected counts by area.
    p_clumped, p_even, p_two_sided : float
        Simulated p: share of simulations at least as large, at least as small, and twice the
        smaller (at most 1); never 0.
    simulations : int
        How many there were.
    low, high : float
        The two-sided p is 0.05 or less below `low` and above `high`, and nowhere between; NaN where
        not known.
    """

    statistic: float
    p_clumped: float
    p_even: float
    p_two_sided: float
    simulations: int
    low: float = math.nan
    high: float = math.nan


def multinomial_counts(
    n: int, areas: ArrayLike, simulations: int, rng: np.random.Generator
) -> NDArray[np.int64]:
    """Return the counts that n points placed at random would give in quadrats of these areas.

    Parameters
    ----------
    n : int
        Points in all.
    areas : array_like of shape (q,)
        Area of each quadrat; together they are the study area.
    simulations : int
        How many times.
    rng : numpy.random.Generator
        Source of randomness.

    Returns
    -------
    ndarray of int, shape (simulations, q)
        Every row sums to n.

    Notes
    -----
    The same distribution as counting `random_points` in the quadrats, without placing a point.

    Examples
    --------
    >>> multinomial_counts(5, [1, 1, 2], 4, np.random.default_rng(1)).sum(axis=1).tolist()
    [5, 5, 5, 5]
    """
    a = checked_areas(areas)
    return np.asarray(rng.multinomial(n, a / a.sum(), size=simulations), dtype=np.int64)


def simulated_p(
    counts: ArrayLike,
    areas: ArrayLike,
    *,
    simulations: int = SIMULATIONS,
    rng: np.random.Generator,
) -> SimulatedTest:
    """Judge X2 of counts in quadrats of any areas by simulation, given the total.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.
    areas : array_like of float, shape (q,)
        Area of each quadrat.
    simulations : int
        How many sets of random counts to draw, from 99 to 1,000,000.
    rng : numpy.random.Generator
        Source of randomness.

    Returns
    -------
    SimulatedTest
        All NaN without points.

    Raises
    ------
    OptionWrong
        If the number of simulations is out of range.
    TooFewQuadrats
        If there are fewer than 2 quadrats.

    Notes
    -----
    p = (1 + number at least as extreme) / (simulations + 1). Ties count as extreme, which keeps
    the test valid where counts are few and X2 takes few values.

    References
    ----------
    Davison, A. C. and Hinkley, D. V. (1997). Bootstrap Methods and their Application. Cambridge
    University Press, section 4.2.
    Phipson, B. and Smyth, G. K. (2010). Permutation p-values should never be zero. Statistical
    Applications in Genetics and Molecular Biology 9, article 39.

    Examples
    --------
    >>> test = simulated_p([9, 0, 0, 1], [1, 1, 1, 1], rng=np.random.default_rng(1))
    >>> test.p_clumped < 0.01 < test.p_even
    True
    """
    check_simulations(simulations)
    seen = clipped_dispersion(counts, areas)
    if seen.n == 0:
        return SimulatedTest(math.nan, math.nan, math.nan, math.nan, simulations)
    return judged_among(
        seen.chi2, np.concatenate([*simulated_chi2(seen.n, areas, simulations, rng)])
    )


def judged_among(statistic: float, simulated: NDArray[np.float64]) -> SimulatedTest:
    """Judge a statistic among its values in simulations.

    Parameters
    ----------
    statistic : float
        Large where counts are clumped, small where they are even.
    simulated : ndarray of shape (m,)
        What it was in simulations of chance; ties count as extreme.

    Returns
    -------
    SimulatedTest

    Examples
    --------
    >>> test = judged_among(50.0, np.arange(1.0, 100.0))
    >>> test.p_two_sided, test.low, test.high
    (1.0, 2.0, 98.0)
    """
    tie = _TIE * max(1.0, statistic)
    m = simulated.size
    upper = (1 + int((simulated >= statistic - tie).sum())) / (m + 1)
    lower = (1 + int((simulated <= statistic + tie).sum())) / (m + 1)
    beyond = math.floor(LEVEL / 2 * (m + 1) + _TIE)  # so many may lie at or beyond, itself counted
    low, high = -math.inf, math.inf
    if beyond >= 1:
        low, high = np.partition(simulated, (beyond - 1, m - beyond))[[beyond - 1, m - beyond]]
    both = min(1.0, 2 * min(upper, lower))
    return SimulatedTest(statistic, upper, lower, both, m, float(low), float(high))


def simulated_chi2(
    n: int, areas: ArrayLike, simulations: int, rng: np.random.Generator
) -> Iterator[NDArray[np.float64]]:
    """Yield X2 of random counts, in batches that bound the memory and do not change the values.

    Parameters
    ----------
    n : int
        Points in all, at least 1.
    areas : array_like of shape (q,)
        Area of each quadrat.
    simulations : int
        How many sets of counts.
    rng : numpy.random.Generator
        Source of randomness.

    Yields
    ------
    ndarray of shape (k,)
        X2 of k sets of counts; `simulations` of them in all.

    Examples
    --------
    >>> len(next(simulated_chi2(5, [1, 1, 2], 7, np.random.default_rng(1))))
    7
    """
    a = checked_areas(areas)
    expected = n * (a / a.sum())
    batch = max(1, _CELLS_AT_ONCE // a.size)
    for start in range(0, simulations, batch):
        off = multinomial_counts(n, a, min(batch, simulations - start), rng) - expected
        yield np.asarray((off * off) @ (1 / expected))


def least_chi2(n: int, areas: ArrayLike) -> float:
    """Return the smallest X2 that n points in quadrats of these areas can have at all.

    Parameters
    ----------
    n : int
        Points in all.
    areas : array_like of shape (q,)
        Area of each quadrat.

    Returns
    -------
    float
        0.0 with 4 points or more a quadrat, where it is too small to matter, and without points.

    Notes
    -----
    X2 = sum x^2 / E - n, and the k-th point of a quadrat adds (2k - 1) / E to the sum; as these
    steps rise, the n smallest of all steps give the least.

    Examples
    --------
    >>> round(least_chi2(12, [1] * 25), 3), round(least_chi2(25, [1] * 25), 3)
    (13.0, 0.0)
    """
    a = checked_areas(areas)
    if not 0 < n < _ENOUGH_EACH * a.size:
        return 0.0
    expected = n * (a / a.sum())
    most = math.ceil(expected.max() * (1 + a.size / (2 * n))) + 2
    steps = np.sort(((2 * np.arange(most) + 1)[:, None] / expected).ravel())
    return max(0.0, float(steps[:n].sum() - n))
