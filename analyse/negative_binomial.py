"""The negative binomial law of clumped counts: its probabilities, and k by maximum likelihood.

The mean is m and the variance m + m^2 / k: small k is strong clumping, and as k grows without
limit the law becomes the Poisson law of random points. `math.inf` stands for that Poisson limit.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import optimize, special

from analyse.columns import hold_columns
from analyse.dispersion import checked_areas
from analyse.models import countable, poisson_law, poisson_share

POISSON_LIMIT = "Poisson limit: no finite k"
_STEP = 4.0  # factor by which a bracket of k is widened
_SERIES_BELOW = 0.1
_SERIES = [(-1.0) ** i / (i + 3) for i in range(18)]


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Likelihood:
    """The likelihood of counts under the negative binomial law, measured from the Poisson law's.

    Parameters
    ----------
    n : int
        Points, at least 1.
    exposure : float
        Sum of the quadrats' areas A; for equal quadrats their number.
    ratios, weights : ndarray of shape (t,)
        The terms of the likelihood: a quadrat of area a and count x brings j / a for j = 0 ...
        x - 1; equal ones are listed once with their number as weight.
    excess : float
        Sum of x (x - 1) / (2 a) less n^2 / (2 A): for equal quadrats half of q (s^2 - m) with
        the variance that divides by q. A finite k exists where it is positive.

    Notes
    -----
    The mean count of a quadrat is a times the density and its k is a times a common k, so that
    the variance-to-mean ratio is the same everywhere: two adjoining quadrats together follow the
    law too. For equal quadrats this is the ordinary law. The density of greatest likelihood is
    n / A whatever k is.

    All differences are written so that nothing cancels near the Poisson limit: with u = m / k,
    h(u) = u - ln(1 + u) and w(u) = u^2 / 2 - h(u), the gain over Poisson is
    excess / k - sum h(r / k) + n h(u) - k A w(u), and k^2 times its derivative is
    -excess + sum r^2 / (k + r) - A k^2 w(u).

    References
    ----------
    Bliss, C. I. and Fisher, R. A. (1953). Fitting the negative binomial distribution to
    biological data. Biometrics 9, 176-200 (the score equation).
    Levin, B. and Reeds, J. (1977). Compound multinomial likelihood functions are unimodal. Annals
    of Statistics 5, 79-87 (one finite root, and only where the variance exceeds the mean).
    """

    n: int
    exposure: float
    ratios: NDArray[np.float64]
    weights: NDArray[np.float64]
    excess: float

    def __post_init__(self) -> None:
        if self.n < 1:
            raise ValueError("without points there is no likelihood of k")
        hold_columns(self, ("ratios", "weights"))

    def __repr__(self) -> str:
        return f"<Likelihood of {self.n} points: k {k_words(self.best_k())}>"

    @property
    def mean(self) -> float:
        """Density of greatest likelihood: points per unit of exposure."""
        return self.n / self.exposure

    def gain(self, k: float) -> float:
        """Return the log-likelihood at k and the best mean, less the Poisson law's."""
        if math.isinf(k):
            return 0.0
        return float(self.joint_gain(self.mean, np.array([k]), np.array([self.pairs(k)]))[0])

    def joint_gain(
        self, mean: float, k: NDArray[np.float64], pairs: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Return the log-likelihood at any mean and finite k, less the Poisson law's at its best.

        `pairs` holds `pairs(k)` for each k, which does not depend on the mean.
        """
        u, away = mean / k, mean - self.mean
        rest = self.n * _h(u) - k * self.exposure * _w(u) + self.poisson_gain(mean)
        return np.asarray((self.excess + self.exposure * away**2 / 2) / k - pairs + rest)

    def poisson_gain(self, mean: float) -> float:
        """Return the Poisson law's log-likelihood at any mean, less that at its best: 0 or less."""
        return self.n * math.log(mean / self.mean) - self.exposure * (mean - self.mean)

    def pairs(self, k: float) -> float:
        """Return sum h(r / k), the part of the likelihood that only k changes."""
        return float((self.weights * _h(self.ratios / k)).sum())

    def score(self, k: float, mean: float | None = None) -> float:
        """Return k^2 times the likelihood's derivative in k, at the best mean unless one is given.

        It is positive below the best k.
        """
        away = 0.0 if mean is None else mean - self.mean
        u = (self.mean + away) / k
        w = float(_w(np.array([u]))[0])
        tail = float((self.weights * self.ratios**2 / (k + self.ratios)).sum())
        pull = away * (k * u * u / (1 + u) - away / 2)
        return tail - self.excess + self.exposure * (pull - k * k * w)

    def information(self, k: float) -> float:
        """Return the observed information of k: minus the second derivative of `gain`."""
        u = self.mean / k
        w = float(_w(np.array([u]))[0])
        tail = float((self.weights * (self.ratios / (k + self.ratios)) ** 2).sum())
        bend = tail - self.exposure * (self.mean * u * u / (1 + u) - 2 * k * w)
        return (bend + 2 * self.score(k) / k) / (k * k)

    def best_k(self) -> float:
        """Return k of greatest likelihood; `math.inf` where no finite one exists."""
        if not self.excess > 0:
            return math.inf
        return fall_of(self.score, self.n * self.mean / (2 * self.excess))

    def k_limits(self, level: float = 0.95) -> tuple[float, float]:
        """Return the k whose likelihood is not significantly below the best (profile interval).

        The upper end is `math.inf` where the Poisson law itself is among them.
        """
        best = self.best_k()
        floor = self.gain(best) - float(special.chdtri(1, 1 - level)) / 2

        def above(k: float) -> float:
            return self.gain(k) - floor

        low = _root_below(above, best if math.isfinite(best) else self.mean)
        return low, math.inf if floor <= 0 else _root_above(above, best)


def likelihood_of(counts: ArrayLike, areas: ArrayLike | None = None) -> Likelihood:
    """Return the negative binomial likelihood of counts.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2 and none above 10,000; not all 0.
    areas : array_like of float, shape (q,), or None
        Area of each quadrat in any one unit; None where they are equal, which counts as 1 each.

    Returns
    -------
    Likelihood

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 counts.
    ValueError
        If there is no point, or a count or an area is impossible.

    Examples
    --------
    >>> mites = np.repeat(range(8), [70, 38, 17, 10, 9, 3, 2, 1])
    >>> seen = likelihood_of(mites)
    >>> round(seen.best_k(), 4), round(seen.gain(seen.best_k()), 3)
    (1.0246, 20.373)
    """
    x = countable(counts)
    a = np.ones(x.size) if areas is None else checked_areas(areas)
    if a.size != x.size:
        raise ValueError(f"{a.size} areas for {x.size} counts")
    n, exposure = int(x.sum()), float(a.sum())
    ratios, weights = _terms(x, a)
    if np.all(a == 1):
        squares = int((x * x).sum())
        excess = (x.size * (squares - n) - n * n) / (2 * x.size)  # whole numbers: an exact sign
    else:
        excess = float((x * (x - 1) / a).sum()) / 2 - n * n / (2 * exposure)
    return Likelihood(n, exposure, ratios, weights, excess)


def negative_binomial_law(mean: float, k: float, values: ArrayLike) -> NDArray[np.float64]:
    """Return the negative binomial probability of each value.

    Parameters
    ----------
    mean : float
        Mean of the law, 0 or more.
    k : float
        Positive; `math.inf` is the Poisson law.
    values : array_like of int, any shape
        0 to 10,000 or so.

    Returns
    -------
    ndarray of the same shape

    Examples
    --------
    >>> negative_binomial_law(1.0, 1.0, [0, 1, 2]).round(4).tolist()
    [0.5, 0.25, 0.125]
    """
    x = np.asarray(values, dtype=np.int64)
    if math.isinf(k):
        return poisson_law(mean, x)
    steps = np.log1p(np.arange(int(x.max(initial=0))) / k)
    rising = np.concatenate(([0.0], np.cumsum(steps)))[x]
    log_p = rising - (x + k) * math.log1p(mean / k) + special.xlogy(x, mean)
    return np.asarray(np.exp(log_p - special.gammaln(x + 1.0)))


def negative_binomial_share(mean: float, k: float, low: int, high: int | None) -> float:
    """Return the negative binomial probability of a class of counts, both ends included.

    Parameters
    ----------
    mean, k : float
        Of the law, both positive; `math.inf` is the Poisson law.
    low : int
        Lowest count.
    high : int or None
        Highest count; None for no end.

    Returns
    -------
    float

    Examples
    --------
    >>> negative_binomial_share(1.0, 1.0, 2, None)
    0.25
    """
    if math.isinf(k):
        return poisson_share(mean, low, high)
    if high == low:
        return float(negative_binomial_law(mean, k, low))
    tail = _tail(mean, k, low)
    return tail if high is None else tail - _tail(mean, k, high + 1)


def k_words(k: float) -> str:
    """Return k in words: three figures, or the Poisson limit.

    Parameters
    ----------
    k : float
        Positive, `math.inf` or NaN.

    Returns
    -------
    str

    Examples
    --------
    >>> k_words(1.02459), k_words(math.inf), k_words(math.nan)
    ('1.02', 'Poisson limit: no finite k', 'not defined')
    """
    if math.isnan(k):
        return "not defined"
    return POISSON_LIMIT if math.isinf(k) else f"{k:.3g}"


def fall_of(function: Callable[[float], float], start: float) -> float:
    """Return where a function of k falls from positive to negative, seeking outwards from `start`.

    Examples
    --------
    >>> round(fall_of(lambda k: 2 / k - 1, 0.1), 6)
    2.0
    """
    return _root_above(function, start) if function(start) > 0 else _root_down(function, start)


def _terms(
    x: NDArray[np.int64], a: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return j / a of every quadrat and j below its count, and how often each stands there."""
    ratios, weights = [], []
    for area in np.unique(a):
        frequencies = np.bincount(x[a == area])
        at_least = np.cumsum(frequencies[::-1])[::-1][1:]  # quadrats with 1, 2, ... points or more
        ratios.append(np.arange(at_least.size) / area)
        weights.append(at_least.astype(np.float64))
    return np.concatenate(ratios), np.concatenate(weights)


def _w(u: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return ln(1 + u) - u + u^2 / 2 without cancellation: about u^3 / 3 for small u."""
    small = np.minimum(u, _SERIES_BELOW)
    series = small**3 * np.polynomial.polynomial.polyval(small, _SERIES)
    return np.asarray(np.where(u < _SERIES_BELOW, series, np.log1p(u) - u + u * u / 2))


def _h(u: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return u - ln(1 + u) without cancellation."""
    return np.where(u < _SERIES_BELOW, u * u / 2 - _w(u), u - np.log1p(u))


def _tail(mean: float, k: float, low: int) -> float:
    """Return the negative binomial probability of `low` or more."""
    return float(special.betainc(low, k, mean / (k + mean))) if low > 0 else 1.0


def _root_above(function: Callable[[float], float], low: float) -> float:
    """Return the root above `low`, where the function is positive and falls later."""
    high = low * _STEP
    while function(high) > 0:
        low, high = high, high * _STEP
    return _between(function, low, high)


def _root_down(function: Callable[[float], float], high: float) -> float:
    """Return the root below `high`, where the function is negative and positive further down."""
    low = high / _STEP
    while function(low) <= 0:
        low, high = low / _STEP, low
    return _between(function, low, high)


def _root_below(function: Callable[[float], float], high: float) -> float:
    """Return the root of a function that rises to positive, at or near `high` and above."""
    while function(high) <= 0:
        high *= _STEP
    low = high / _STEP
    while function(low) > 0:
        low, high = low / _STEP, low
    return _between(function, low, high)


def _between(function: Callable[[float], float], low: float, high: float) -> float:
    """Return the root between two values of k, sought on the log scale."""
    found = optimize.brentq(
        lambda t: function(math.exp(t)), math.log(low), math.log(high), xtol=1e-14, rtol=1e-14
    )
    return math.exp(float(found))
