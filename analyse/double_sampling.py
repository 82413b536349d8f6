"""What a careful count of a few quadrats says of a quick count of all: totals with limits."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from analyse.columns import hold_columns
from analyse.density import Limits

LEVEL = 0.95
FEWEST_FOR_RATIO = 10  # quick counts in the sample below which a ratio to them is too shaky
_HALF_STEP = 0.5  # of one more unit, by which the upper limit looks beyond what was seen

_Column = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class DoubleSample:
    """Quadrats counted twice: all of them quickly, a random sample in strata carefully.

    Parameters
    ----------
    stratum : ndarray of int, shape (n,)
        Of each quadrat of the sample, from 0.
    quick : ndarray of shape (n,)
        Its quick count.
    careful : ndarray of shape (n,)
        Its careful count.
    sizes : ndarray of int, shape (h,)
        Quadrats in each stratum, sampled or not.
    total : float
        Sum of the quick counts over all quadrats.

    Raises
    ------
    ValueError
        If a stratum holds fewer quadrats than were drawn of it, or none was drawn of one that has
        some.
    """

    stratum: NDArray[np.int64]
    quick: _Column
    careful: _Column
    sizes: NDArray[np.int64]
    total: float

    def __post_init__(self) -> None:
        hold_columns(self, ("stratum", "quick", "careful"), length=len(self))
        hold_columns(self, ["sizes"])
        drawn = np.bincount(self.stratum, minlength=self.sizes.size)
        if drawn.size > self.sizes.size or (drawn > self.sizes).any():
            raise ValueError("more quadrats were drawn of a stratum than it holds")
        if ((drawn == 0) & (self.sizes > 0)).any():
            raise ValueError("a stratum of which no quadrat was drawn cannot be estimated")

    def __len__(self) -> int:
        return len(self.stratum)

    def __repr__(self) -> str:
        return f"<DoubleSample: {len(self)} of {int(self.sizes.sum())} quadrats, {self.sizes.size} strata>"

    @property
    def drawn(self) -> NDArray[np.int64]:
        """How many quadrats were drawn of each stratum."""
        return np.bincount(self.stratum, minlength=self.sizes.size)

    @property
    def weights(self) -> _Column:
        """How many quadrats each one of the sample stands for."""
        return np.asarray((self.sizes / np.maximum(self.drawn, 1))[self.stratum], dtype=np.float64)

    @property
    def is_census(self) -> bool:
        """Whether every quadrat was counted carefully."""
        return bool((self.drawn == self.sizes).all())


@dataclass(frozen=True, slots=True)
class Estimate:
    """A total with its standard error.

    Parameters
    ----------
    value : float
    standard_error : float
        NaN where no stratum tells how its quadrats vary.
    df : float
        Degrees of freedom of the standard error.
    """

    value: float
    standard_error: float
    df: float

    def limits(self, level: float = LEVEL) -> Limits:
        """Return limits by Student's t."""
        half = 0.0
        if self.standard_error != 0:
            half = float(special.stdtrit(self.df, 0.5 + level / 2)) * self.standard_error
        return Limits(self.value, self.value - half, self.value + half, level)


def difference_total(sample: DoubleSample) -> Estimate:
    """Estimate the careful total by adding the mean difference to the quick total.

    Parameters
    ----------
    sample : DoubleSample

    Returns
    -------
    Estimate
        Unbiased; its standard error knows that few quadrats were left out (finite population).

    Notes
    -----
    Y = X + sum over strata of N_h times the mean of y - x; its variance is
    sum N_h^2 (1 - n_h / N_h) s_h^2 / n_h, with degrees of freedom by Satterthwaite.

    References
    ----------
    Cochran, W. G. (1977). Sampling Techniques, 3rd ed. Wiley. Chapters 5, 7.2 and 12.
    Satterthwaite, F. E. (1946). An approximate distribution of estimates of variance components.
    Biometrics Bulletin 2, 110-114.

    Examples
    --------
    >>> quick, careful = np.array([4.0, 2.0, 0.0, 6.0]), np.array([5.0, 2.0, 0.0, 8.0])
    >>> sample = DoubleSample(np.zeros(4, dtype=int), quick, careful, np.array([40]), 120.0)
    >>> estimate = difference_total(sample)
    >>> estimate.value, round(estimate.standard_error, 2)
    (150.0, 18.17)
    """
    added = sample.careful - sample.quick
    variance, df = _variance(sample, sample.weights, added)
    return Estimate(float(sample.total + (sample.weights * added).sum()), math.sqrt(variance), df)


def ratio_total(sample: DoubleSample) -> Estimate | None:
    """Estimate the careful total as the quick total times the ratio of both in the sample.

    Parameters
    ----------
    sample : DoubleSample

    Returns
    -------
    Estimate or None
        None where fewer than 10 were counted quickly in the sample: such a ratio is worth nothing.

    Notes
    -----
    The combined ratio of stratified sampling, R = sum w y / sum w x, and the variance of the
    residuals y - R x, scaled by (X / sum w x)^2.

    References
    ----------
    Cochran, W. G. (1977). Sampling Techniques, 3rd ed. Wiley. Sections 6.2 to 6.11.

    Examples
    --------
    >>> quick, careful = np.array([4, 0, 7, 3, 5]), np.array([5, 0, 7, 4, 5])
    >>> sample = DoubleSample(np.zeros(5, int), quick, careful, np.array([40]), 150.0)
    >>> round(ratio_total(sample).value, 1)
    165.8
    """
    weights = _ratio_weights(sample)
    if weights is None:
        return None
    ratio = float((weights * sample.careful).sum() / (weights * sample.quick).sum())
    variance, df = _variance(sample, weights, sample.careful - ratio * sample.quick)
    return Estimate(ratio * sample.total, math.sqrt(variance), df)


def difference_limits(sample: DoubleSample, *, level: float = LEVEL) -> Limits:
    """Return the difference estimate of the careful total with limits that hold for rare errors.

    Parameters
    ----------
    sample : DoubleSample
    level : float
        Confidence level.

    Returns
    -------
    Limits
        Not symmetric about the value, and wide even where both counts agree in the whole sample.

    Notes
    -----
    Limits by Student's t fail where differences are rare: a sample without one has no variance,
    and yet the next quadrat may differ. So what must be added (y above x) and what must be taken
    off (y below x) get limits of their own, as weighted sums of counts: gamma limits, with half a
    step of one more unit of the heaviest weight for what was not seen. Their variance is that
    between the quadrats of a stratum, or that of Poisson counts where that is more, widened by
    (t / z)^2 for the degrees of freedom. Both limits are then combined into those of the
    difference, with their correlation. What was seen in the sample is certain, and of a census
    nothing is uncertain. ``tests/benchmarks/spot_check.py`` measures the coverage.

    References
    ----------
    Fay, M. P. and Feuer, E. J. (1997). Confidence intervals for directly standardized rates: a
    method based on the gamma distribution. Statistics in Medicine 16, 791-801.
    Fay, M. P. and Kim, S. (2017). Confidence intervals for directly standardized rates using mid-p
    gamma intervals. Biometrical Journal 59, 377-387.
    Zou, G. Y. and Donner, A. (2008). Construction of confidence limits about effect measures: a
    general approach. Statistics in Medicine 27, 1693-1702.

    Examples
    --------
    >>> same = np.array([2.0, 3.0, 0.0, 5.0])
    >>> sample = DoubleSample(np.zeros(4, dtype=int), same, same, np.array([40]), 100.0)
    >>> limits = difference_limits(sample)
    >>> limits.value, limits.low < 90, limits.high > 110
    (100.0, True, True)
    """
    return _guarded(sample, sample.weights, np.zeros(len(sample)), level)


def ratio_limits(sample: DoubleSample, *, level: float = LEVEL) -> Limits | None:
    """Return the ratio estimate of the careful total with limits that hold for rare errors.

    Parameters
    ----------
    sample : DoubleSample
    level : float
        Confidence level.

    Returns
    -------
    Limits or None
        None where `ratio_total` is.

    Notes
    -----
    The ratio estimate is the difference estimate with weights scaled so that the sample's quick
    counts sum to the quick total; see `difference_limits`, whose variances become those of
    residuals.

    Examples
    --------
    >>> quick, careful = np.array([4, 0, 7, 3, 5]), np.array([5, 0, 7, 4, 5])
    >>> sample = DoubleSample(np.zeros(5, int), quick, careful, np.array([40]), 150.0)
    >>> round(ratio_limits(sample).value, 1)
    165.8
    """
    weights = _ratio_weights(sample)
    return None if weights is None else _guarded(sample, weights, sample.quick, level)


def _ratio_weights(sample: DoubleSample) -> _Column | None:
    """Return weights with which the quick counts of the sample sum to the quick total."""
    if sample.quick.sum() < FEWEST_FOR_RATIO:
        return None
    scale = sample.total / float((sample.weights * sample.quick).sum())
    return np.asarray(sample.weights * scale)


def _variance(sample: DoubleSample, weights: _Column, values: _Column) -> tuple[float, float]:
    """Return the variance of a weighted sum over a stratified sample, and its degrees of freedom."""
    parts, shares = [], []
    for stratum, (drawn, size) in enumerate(zip(sample.drawn, sample.sizes, strict=True)):
        here = sample.stratum == stratum
        if drawn == size:
            continue
        if drawn < 2:
            return math.nan, math.nan
        spread = float(np.var(values[here], ddof=1))
        parts.append(drawn * (1 - drawn / size) * float(weights[here][0]) ** 2 * spread)
        shares.append(parts[-1] ** 2 / (drawn - 1))
    variance = sum(parts)
    if sum(shares) == 0:
        return variance, _free(sample)
    return variance, variance**2 / sum(shares)


def _free(sample: DoubleSample) -> float:
    """Return the degrees of freedom within strata that were not counted whole."""
    return float(max(1, (sample.drawn - 1)[sample.drawn < sample.sizes].sum()))


def _guarded(sample: DoubleSample, weights: _Column, along: _Column, level: float) -> Limits:
    """Combine the limits of what is to be added and of what is to be taken off."""
    added = sample.careful - sample.quick
    value = float(sample.total + (weights * added).sum())
    if sample.is_census:
        return Limits(value, value, value, level)
    parts = [added.clip(0), (-added).clip(0)]
    left = [_left_over(weights, part, along) for part in parts]
    more, less = (
        _one_sided(sample, weights, part, rest, level)
        for part, rest in zip(parts, left, strict=True)
    )
    shared = _correlation(sample, weights, left)
    below = (more.value - more.low, less.high - less.value)
    above = (more.high - more.value, less.value - less.low)
    low, high = (_together(*halves, shared) for halves in (below, above))
    return Limits(value, max(0.0, value - low), value + high, level)


def _left_over(weights: _Column, part: _Column, along: _Column) -> _Column:
    """Return residuals from a proportion to `along`; the values themselves where that is zero."""
    basis = float((weights * along).sum())
    return part if basis == 0 else part - float((weights * part).sum()) / basis * along


def _one_sided(
    sample: DoubleSample, weights: _Column, part: _Column, rest: _Column, level: float
) -> Limits:
    """Return gamma limits of a weighted sum of counts that are never negative."""
    total, tail = float((weights * part).sum()), (1 - level) / 2
    drawn, sizes = sample.drawn, sample.sizes
    unseen = (1 - drawn / sizes)[sample.stratum]
    between, _ = _variance(sample, weights, rest)
    at_random = float((weights**2 * unseen * part).sum())
    wider = float(special.stdtrit(_free(sample), 1 - tail) / special.ndtri(1 - tail)) ** 2
    variance = max(between if math.isfinite(between) else 0.0, at_random) * wider
    step = float((weights - 1)[unseen > 0].max())
    low = total
    if total > 0 and variance > 0:
        low = variance / total * float(special.gammaincinv(total**2 / variance, tail))
    low = min(total, max(low, float(part.sum())))
    mean, spread = total + _HALF_STEP * step, variance + _HALF_STEP * step**2
    high = mean
    if mean > 0 and spread > 0:
        high = spread / mean * float(special.gammainccinv(mean**2 / spread, tail))
    return Limits(total, low, max(high, total), level)


def _correlation(sample: DoubleSample, weights: _Column, left: list[_Column]) -> float:
    """Return the correlation of what is added with what is taken off, between quadrats."""
    more, less = (_variance(sample, weights, part)[0] for part in left)
    both, _ = _variance(sample, weights, left[0] - left[1])
    if not (more > 0 and less > 0 and math.isfinite(both)):
        return 0.0
    return float(np.clip((more + less - both) / (2 * math.sqrt(more * less)), -1, 1))


def _together(one: float, other: float, shared: float) -> float:
    """Return the half width of a difference from those of its two sides."""
    return math.sqrt(max(0.0, one**2 + other**2 - 2 * shared * one * other))
