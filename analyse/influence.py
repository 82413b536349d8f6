"""Which spots a person should look at first, and when further ones no longer matter to the verdict."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from analyse.breaking_point import Judge, false_to_change
from analyse.columns import hold_columns
from analyse.count_chance import SimulatedTest
from analyse.recalls import DrawOptions
from analyse.verdict import FEWEST_QUADRATS, FEWEST_SPOTS, Verdict

_NODES = 21  # of the integral over what the doubts have in common
_NEAREST = 1e-6
_SURE = 0.975  # chance that no more spots are false than are reckoned with


@dataclass(frozen=True, slots=True, eq=False)
class LookFirst:
    """The order in which spots should be looked at.

    Parameters
    ----------
    order : ndarray of int, shape (n,)
        Positions of the spots, the weightiest first.
    influence : ndarray of shape (n,)
        How much the evidence changes if this spot alone is struck, in standard deviations of X2.
    decisive : int
        How many of the first decide the matter: once they have been looked at, no plausible number
        of false ones among the others could change the verdict. 0 where that is so already.
    plausible : int
        So many of those after the first `decisive` may well be false, but hardly more.
    """

    order: NDArray[np.int64]
    influence: NDArray[np.float64]
    decisive: int
    plausible: int

    def __post_init__(self) -> None:
        hold_columns(self, ("order", "influence"), length=self.influence.size)

    def __repr__(self) -> str:
        return f"<LookFirst: {self.decisive} of {self.order.size} spots decide>"

    @property
    def settled(self) -> bool:
        """Whether no spot needs to be looked at for the verdict's sake."""
        return self.decisive == 0

    @property
    def sentence(self) -> str:
        """What to look at, in words."""
        n = self.order.size
        if not n:
            return "There is no spot to look at."
        if self.settled:
            return (
                "No spot needs to be looked at for the verdict's sake: no plausible number of false"
                " ones would change it."
            )
        if self.decisive == n:
            return f"All {n:,} spots matter to the verdict: look at every one."
        first = "first spot decides" if self.decisive == 1 else f"first {self.decisive:,} decide"
        return (
            f"Look first at the spots listed first: the {first} the matter, for no plausible number"
            f" of false ones among the other {n - self.decisive:,} would change the verdict."
        )


def influence(counts: ArrayLike, areas: ArrayLike, quadrat: ArrayLike) -> NDArray[np.float64]:
    """Return how much the evidence changes if a spot is struck, for each spot alone.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        Spots in each quadrat.
    areas : array_like of float, shape (q,)
        Area of each quadrat, in any one unit.
    quadrat : array_like of int, shape (n,)
        In which quadrat each spot lies.

    Returns
    -------
    ndarray of shape (n,)
        Change of X2, standardised by its mean and variance at random given the total; 0 or more.

    Notes
    -----
    The change that leaving out one observation makes, as for the influence of a case on any
    statistic. The mean of X2 is q - 1 and its variance at the total m
    2 (q - 1) + (sum 1/p - q^2 - 2q + 2) / m for shares p of the area (Haldane 1937).

    References
    ----------
    Cook, R. D. (1977). Detection of influential observation in linear regression. Technometrics 19,
    15-18.
    Haldane, J. B. S. (1937). The exact value of the moments of the distribution of chi-square, used
    as a test of goodness of fit, when expectations are small. Biometrika 29, 133-143.

    Examples
    --------
    >>> influence([9, 1, 1, 1], [1, 1, 1, 1], [0, 1]).round(2).tolist()
    [1.11, 1.39]
    """
    x, a = np.asarray(counts, dtype=np.float64), np.asarray(areas, dtype=np.float64)
    where = np.asarray(quadrat, dtype=np.int64)
    n, weight = float(x.sum()), a.sum() / a
    if n < 3:
        return np.zeros(where.size)
    total = float(weight @ (x * x))
    here = _deviate(total, n, weight)
    without = _deviate(total - weight * (2 * x - 1), n - 1, weight)
    return np.asarray(np.abs(without - here)[where])


def look_first(
    doubt: ArrayLike,
    counts: ArrayLike,
    areas: ArrayLike,
    quadrat: ArrayLike,
    test: SimulatedTest,
    *,
    verdict: Verdict,
    options: DrawOptions | None = None,
) -> LookFirst:
    """Return the order in which spots should be looked at, and how many of them decide the matter.

    Parameters
    ----------
    doubt : array_like of shape (n,)
        Of each spot, 0..1.
    counts : array_like of int, shape (q,)
        Spots in each quadrat.
    areas : array_like of float, shape (q,)
        Area of each quadrat.
    quadrat : array_like of int, shape (n,)
        In which quadrat each spot lies.
    test : SimulatedTest
        What the verdict rests on.
    verdict : str
        The verdict.
    options : DrawOptions, optional
        How far the doubts of one photograph err together.

    Returns
    -------
    LookFirst

    Notes
    -----
    The order is by doubt times influence: how likely a look is to strike the spot, times what that
    would do to the evidence. After the first k, the others could hold so many false spots and, with
    97.5 % probability, no more; if the verdict would bear so many, wherever among them they lie
    (`analyse.breaking_point`), the matter is decided. The number is the quantile of a Poisson law
    whose mean is the sum of the doubts, moved together as in `analyse.draws`; a sum of unlike
    chances spreads less than that [1]_. Objects that were missed cannot be settled by looking at
    spots, and have no part in this.

    References
    ----------
    .. [1] Hoeffding, W. (1956). On the distribution of the number of successes in independent
       trials. Annals of Mathematical Statistics 27, 713-721.

    Examples
    --------
    >>> from analyse.count_chance import simulated_p
    >>> counts, areas = np.array([9, 1, 1, 1, 1, 2, 1, 1]), np.ones(8)
    >>> test = simulated_p(counts, areas, rng=np.random.default_rng(1))
    >>> doubt, quadrat = np.where(np.arange(17) < 3, 0.4, 0.01), np.repeat(np.arange(8), counts)
    >>> look_first(doubt, counts, areas, quadrat, test, verdict="clumped")
    <LookFirst: 6 of 17 spots decide>
    """
    options = options or DrawOptions()
    d, x = np.asarray(doubt, dtype=np.float64), np.asarray(counts, dtype=np.int64)
    where = np.asarray(quadrat, dtype=np.int64)
    weight = influence(x, areas, where)
    order = np.lexsort((np.arange(d.size), -d, -d * weight))
    if d.size < FEWEST_SPOTS or x.size < FEWEST_QUADRATS:
        return LookFirst(order, weight, 0, 0)
    judge = Judge.of(x, areas, test)
    means = _expected_false(d[order], options.shared_doubt)

    def decided(k: int) -> bool:
        left = order[k:][d[order[k:]] > 0]
        spare = np.bincount(where[left], minlength=x.size)
        limit = _plausible(means, k)
        most = false_to_change(x, areas, judge, verdict=verdict, removable=spare, limit=limit)
        return most is None

    low, high = 0, d.size
    while low < high:
        middle = (low + high) // 2
        low, high = (low, middle) if decided(middle) else (middle + 1, high)
    return LookFirst(order, weight, low, _plausible(means, low))


def _deviate(
    total: NDArray[np.float64] | float, n: float, weight: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return X2 of sums of squares over shares, in standard deviations from its mean."""
    q = weight.size
    varies = 2 * (q - 1) + (weight.sum() - q * q - 2 * q + 2) / n
    return np.asarray((total / n - n - (q - 1)) / math.sqrt(max(varies, 1e-12)))


def _expected_false(
    doubt: NDArray[np.float64], spread: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return how many of the spots from each on are false, by common step; and the steps' weights."""
    nodes, weights = np.polynomial.hermite_e.hermegauss(_NODES)
    logit = special.logit(np.clip(doubt, _NEAREST, 1 - _NEAREST))
    chance = special.expit(logit + spread * nodes[:, None])
    chance = np.where(doubt > 0, chance, 0.0)
    left = np.zeros((_NODES, doubt.size + 1))
    left[:, :-1] = np.cumsum(chance[:, ::-1], axis=1)[:, ::-1]
    return left, weights / weights.sum()


def _plausible(means: tuple[NDArray[np.float64], NDArray[np.float64]], k: int) -> int:
    """Return the number that the false ones from the k-th spot on hardly exceed."""
    left, weights = means
    low, high = 0, 8 + 2 * math.ceil(float(left[:, k].max()) + 10 * math.sqrt(left[:, k].max()))
    while low < high:
        middle = (low + high) // 2
        enough = float(weights @ special.pdtr(middle, np.maximum(left[:, k], 1e-300))) >= _SURE
        low, high = (low, middle) if enough else (middle + 1, high)
    return low
