"""Limits of the density that allow for clumping, which those of a Poisson count do not.

Two ways that fail differently: a profile likelihood, which believes the negative binomial law, and
a bootstrap of quadrats, which believes nothing but that quadrats are alike and independent.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike
from scipy import optimize, special

from analyse.bootstrap import RESAMPLES, bootstrap_limits
from analyse.density import Limits, widened
from analyse.dispersion import checked_areas, checked_counts
from analyse.negative_binomial import Likelihood, likelihood_of
from analyse.pooling import LARGEST_COUNT

LEVEL = 0.95
FEWEST_RESAMPLED = 6  # quadrats: our own limit
_MOST = 1e6  # times the estimate: beyond, the data set no upper limit worth the name
_K_GRID = np.logspace(-6, 9, 181)
_LOG_STEP = math.log(10) / 12
_REFINEMENTS = 4  # steps towards the best k between two of the grid


@dataclass(frozen=True, slots=True, repr=False)
class ClumpedLimits:
    """Mean count of a full quadrat with limits that allow for clumping.

    To be shown beside the Poisson limits of the density: the profile limits, and the bootstrap's
    where the two differ much; `times` turns them into a density.

    Parameters
    ----------
    profile : Limits or None
        By the negative binomial profile likelihood; its upper limit is `math.inf` where a few
        crowded quadrats leave it open.
    bootstrap : Limits or None
        By resampling quadrats.
    profile_reason, bootstrap_reason : str
        Why one of them is missing; empty otherwise.
    quadrats : int
        How many they rest on, clipped ones included; blocks where quadrats were merged.
    resamples : int
        Of the bootstrap.
    merged : (rows, columns)
        Quadrats to each block, 1 by 1 where none were merged.
    """

    profile: Limits | None
    bootstrap: Limits | None
    profile_reason: str
    bootstrap_reason: str
    quadrats: int
    resamples: int
    merged: tuple[int, int] = (1, 1)

    def __repr__(self) -> str:
        known = [
            f"{name} {limits.value:.4g} ({limits.low:.4g} {_up_to(limits.high)})"
            for name, limits in (("profile", self.profile), ("bootstrap", self.bootstrap))
            if limits is not None
        ]
        return f"<ClumpedLimits: {', '.join(known) or 'none'}>"

    def times(self, factor: float, relative_uncertainty: float = 0.0) -> ClumpedLimits:
        """Return the same as a density, widened by the scale's uncertainty.

        Parameters
        ----------
        factor : float
            Full quadrats per unit of area.
        relative_uncertainty : float
            Standard uncertainty of a length, as a fraction of it.

        Returns
        -------
        ClumpedLimits
        """
        profile, bootstrap = (
            None if limits is None else widened(limits, factor, relative_uncertainty)
            for limits in (self.profile, self.bootstrap)
        )
        return replace(self, profile=profile, bootstrap=bootstrap)


def clumped_limits(
    counts: ArrayLike, areas: ArrayLike | None = None, *, rng: np.random.Generator
) -> ClumpedLimits:
    """Return the mean count of a full quadrat with both kinds of limits.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.
    areas : array_like of float, shape (q,), or None
        Area of each quadrat as a fraction of a full one; None where all are full.
    rng : numpy.random.Generator
        Source of the bootstrap's randomness.

    Returns
    -------
    ClumpedLimits

    Raises
    ------
    ValueError
        If a count or an area is impossible.

    Examples
    --------
    >>> mites = np.repeat(range(8), [70, 38, 17, 10, 9, 3, 2, 1])
    >>> clumped_limits(mites, rng=np.random.default_rng(1))
    <ClumpedLimits: profile 1.147 (0.921 to 1.43), bootstrap 1.147 (0.933 to 1.42)>
    """
    x = checked_counts(counts)
    a = np.ones(x.size) if areas is None else checked_areas(areas)
    profile_reason = bootstrap_reason = ""
    if x.sum() == 0:
        profile_reason = bootstrap_reason = "no points: clumping cannot be judged"
    elif x.max() > LARGEST_COUNT:
        profile_reason = f"a count is above {LARGEST_COUNT}"
    if not profile_reason and x.size < 2:
        profile_reason = "one quadrat: clumping cannot be judged"
    if not bootstrap_reason and x.size < FEWEST_RESAMPLED:
        bootstrap_reason = f"fewer than {FEWEST_RESAMPLED} quadrats: too few to resample"
    elif not bootstrap_reason and np.ptp(x / a) == 0:
        bootstrap_reason = "all quadrats are equally dense: resampling shows no variation"
    return ClumpedLimits(
        None if profile_reason else profile_limits(x, a),
        None if bootstrap_reason else bootstrap_limits(x, a, rng=rng),
        profile_reason,
        bootstrap_reason,
        x.size,
        RESAMPLES,
    )


def profile_limits(
    counts: ArrayLike, areas: ArrayLike | None = None, *, level: float = LEVEL
) -> Limits:
    """Return the mean per unit area with its negative binomial profile-likelihood limits.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2, none above 10,000, not all 0.
    areas : array_like of float, shape (q,), or None
        Area of each quadrat, best as a fraction of a full one; None where they are equal.
    level : float
        Confidence level, between 0 and 1.

    Returns
    -------
    Limits
        `value` is points over area, which is the most likely density whatever k is; the upper
        limit is `math.inf` where it would exceed a million times the estimate.

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 counts.
    ValueError
        If there is no point, or a count or an area is impossible.

    Notes
    -----
    All densities are within the limits whose likelihood, at the k that suits them best, lies at
    most half a chi-square quantile below the greatest. Clipped quadrats take part with their area
    as exposure: the mean and k both go in proportion to it, so that the variance-to-mean ratio is
    the same in all. The chi-square is an approximation for many quadrats; below about 20 the
    limits are somewhat narrow.

    References
    ----------
    Bliss, C. I. and Fisher, R. A. (1953). Fitting the negative binomial distribution to
    biological data. Biometrics 9, 176-200.
    Venzon, D. J. and Moolgavkar, S. H. (1988). A method for computing profile-likelihood-based
    confidence intervals. Applied Statistics 37, 87-94.

    Examples
    --------
    >>> limits = profile_limits([0, 9, 0, 0, 8, 1, 0, 7, 0, 0])
    >>> limits.value, round(limits.low, 2), round(limits.high, 2)
    (2.5, 0.66, 23.2)
    """
    seen = likelihood_of(counts, areas)
    profile = _Profile(seen)
    floor = seen.gain(seen.best_k()) - float(special.chdtri(1, 1 - level)) / 2

    def above(log_mean: float) -> float:
        return profile.best(math.exp(log_mean)) - floor

    at = math.log(seen.mean)
    low = _limit(above, at, -1.0)
    high = _limit(above, at, 1.0)
    return Limits(seen.mean, math.exp(low), math.exp(high), level)


def _up_to(high: float) -> str:
    """Return an upper limit in words."""
    return "without upper limit" if math.isinf(high) else f"to {high:.4g}"


class _Profile:
    """The likelihood of a mean at the k that suits it best, over the gain of the Poisson law."""

    def __init__(self, seen: Likelihood) -> None:
        self.seen = seen
        self.pairs = np.array([seen.pairs(k) for k in _K_GRID])

    def best(self, mean: float) -> float:
        """Return the greatest gain over k: the best of a grid, and refined between its neighbours."""
        on_grid = self.seen.joint_gain(mean, _K_GRID, self.pairs)
        i = int(np.argmax(on_grid))
        best = max(self.seen.poisson_gain(mean), float(on_grid[i]))
        if i in (0, len(_K_GRID) - 1):
            return best
        bend = float(on_grid[i - 1] - 2 * on_grid[i] + on_grid[i + 1]) / _LOG_STEP**2
        if bend >= 0:
            return best
        log_k = at = math.log(_K_GRID[i])
        for _ in range(_REFINEMENTS):
            slope = self.seen.score(math.exp(log_k), mean) / math.exp(log_k)
            log_k = min(max(log_k - slope / bend, at - _LOG_STEP), at + _LOG_STEP)
        k = math.exp(log_k)
        refined = self.seen.joint_gain(mean, np.array([k]), np.array([self.seen.pairs(k)]))
        return max(best, float(refined[0]))


def _limit(above: Callable[[float], float], at: float, direction: float) -> float:
    """Return the log mean at which the profile falls below the floor; infinite where it never does."""
    step = 0.25
    near, far = at, at + direction * step
    while above(far) > 0:
        if abs(far - at) > math.log(_MOST):
            return direction * math.inf
        step *= 2
        near, far = far, at + direction * step
    return float(optimize.brentq(above, near, far, xtol=1e-8, rtol=1e-12))
