"""What becomes of the count, the density and the verdict if the detector errs as it is known to err."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy import special

from analyse.breaking_point import Judge
from analyse.density import CM2, Limits
from analyse.pattern import Pattern
from analyse.quadrats import QuadratCounts, quadrats_of
from analyse.recalls import NEAREST, DrawOptions, RecallSource, recalls
from analyse.verdict import FEWEST_SPOTS, Verdict

_CELLS_AT_ONCE = 4_000_000
_DRAWN = 10_000_000  # draws times spots and quadrats


@dataclass(frozen=True, slots=True)
class UnderDoubt:
    """What many draws of the detector's errors gave.

    Parameters
    ----------
    n : int
        Spots counted.
    draws : int
        How many draws.
    stands : float
        Share of them in which the verdict is the same.
    verdicts : tuple of (str, float)
        Each verdict and its share of the draws, most frequent first.
    false, missed : float
        Mean number of spots that are no objects, and of objects that are no spots.
    recall : Limits or None
        Share of the objects that is found; None where nothing is taken to be missed.
    source : {"planted", "assumed", "checked", "table"}
        Where that comes from: planted objects; assumed; a person has checked the photograph; points
        that no detector found.
    count : Limits
        Objects there are in this photograph: error of detection alone.
    density : Limits or None
        Objects per square centimetre of what the photograph stands for: errors of detection, of
        sampling and of the scale; None without a scale.
    vmr : Limits
        X2 / df over all quadrats: errors of detection and of sampling.
    """

    n: int
    draws: int
    stands: float
    verdicts: tuple[tuple[Verdict, float], ...]
    false: float
    missed: float
    recall: Limits | None
    source: RecallSource
    count: Limits
    density: Limits | None
    vmr: Limits

    def __repr__(self) -> str:
        return (
            f"<UnderDoubt: verdict stands in {100 * self.stands:.0f} % of {self.draws} draws, count"
            f" {self.count.value:.0f} ({self.count.low:.0f} to {self.count.high:.0f})>"
        )


def under_doubt(
    pattern: Pattern,
    counts: QuadratCounts,
    judge: Judge,
    *,
    verdict: Verdict,
    rng: np.random.Generator,
    options: DrawOptions | None = None,
) -> UnderDoubt:
    """Draw what may really be there many times, and judge it anew each time.

    Parameters
    ----------
    pattern : Pattern
        Points with their doubts, and what planted objects showed.
    counts : QuadratCounts
        The same points in quadrats.
    judge : Judge
        What a verdict is, for each total.
    verdict : str
        The verdict on the points as they are.
    rng : numpy.random.Generator
        Source of randomness.
    options : DrawOptions, optional
        Number of draws, spreads, level.

    Returns
    -------
    UnderDoubt

    Notes
    -----
    In each draw a spot is real with probability 1 less its doubt, after the doubts of the whole
    photograph have moved by one common normal step on the logit scale: the errors of a detector
    within one picture have common causes, and doubts that are right on average over many pictures
    err together in each [1]_. Of the K that are real a chance R was found: missed are as many as a
    negative binomial law of K successes with chance R leaves out, the law of the total under the
    prior 1 / N. Before anything is measured the logit of R has a normal law, that of drawn scenes,
    or with a chance of 1 in 5 a uniform one from -2 to 6. Planted objects are found with a chance
    that differs from R by a common step, for they are copies of the clearest spots; of m of them a
    share was found, m being R (1 - R) over the squared standard error, but no more than the number
    of copies. R is drawn from the law that follows by Bayes' theorem, by weighting and drawing
    again [4]_.

    Where missed objects lie is not known. Under a random pattern they lie anywhere, whatever was
    found; under a clumped one they lie in the clumps. So where the verdict is clumped they are
    thrown into quadrats by the mean density there given the spots found, if densities vary between
    quadrats as a gamma law: a weight of 1 - 1/VMR on the spots, 1/VMR on the area [2]_. Else they are
    thrown by the area alone. Thrown near spots always, they would make any pattern clumped.

    The count's interval is of the objects in this very photograph. The density's adds what a sample
    leaves open, a gamma law with the variance of the count times the VMR of the draw (at least 1),
    and the normal error of the scale, twice that of a length; the VMR's adds quadrats drawn with
    replacement [3]_. Quadrats and their sides stay as they are.

    References
    ----------
    .. [1] Cox, D. R. and Snell, E. J. (1989). Analysis of Binary Data, 2nd edition. Chapman and
       Hall, London, section 3.2: overdispersion by a random effect.
    .. [2] Robbins, H. (1956). An empirical Bayes approach to statistics. Proceedings of the Third
       Berkeley Symposium on Mathematical Statistics and Probability 1, 157-163.
    .. [3] Efron, B. (1979). Bootstrap methods: another look at the jackknife. Annals of Statistics
       7, 1-26.
    .. [4] Rubin, D. B. (1988). Using the SIR algorithm to simulate posterior distributions. Bayesian
       Statistics 3, 395-402.

    Examples
    --------
    >>> import shapely
    >>> from analyse.findings import analyse_pattern
    >>> places = np.random.default_rng(1).random((60, 2)) * 100
    >>> pattern = Pattern.of(places, shapely.box(0, 0, 100, 100), doubt=np.full(60, 0.1))
    >>> found = analyse_pattern(pattern)
    >>> judge = Judge.of(found.counts.counts, found.counts.area, found.simulated)
    >>> rng = np.random.default_rng(2)
    >>> under_doubt(pattern, found.counts, judge, verdict=found.verdict, rng=rng)
    <UnderDoubt: verdict stands in 99 % of 999 draws, count 54 (19 to 60)>
    """
    options = options or DrawOptions()
    many = max(99, _DRAWN // (len(pattern) + len(counts)))
    options = replace(options, draws=min(options.draws, many))
    source, shares = recalls(pattern, options, rng)
    real = _real_in_quadrats(pattern, counts, source, options, rng)
    kept = real.sum(axis=1)
    area = np.ones(len(counts)) if counts.area is None else counts.area
    share = area / area.sum()
    missed = np.zeros(options.draws, dtype=np.int64)
    if shares is not None and kept.max() > 0:
        missed[kept > 0] = rng.negative_binomial(kept[kept > 0], shares[kept > 0])
    on_spots = _clumping(counts, share) if verdict == "clumped" else 0.0
    there = real + _thrown(missed, real, share, on_spots, rng)
    total = there.sum(axis=1)
    chi2 = _chi2(there, share)
    found = _verdicts(judge, chi2, total)
    varies = np.maximum(1.0, np.nan_to_num(chi2 / (len(counts) - 1), nan=1.0))
    return UnderDoubt(
        len(pattern),
        options.draws,
        dict(found).get(verdict, 0.0),
        found,
        float(len(pattern) - kept.mean()),
        float(missed.mean()),
        None if shares is None else _limits(shares, options.level),
        source,
        _whole_limits(total, options.level),
        _density(pattern, total, varies, rng, options.level),
        _limits(_resampled(there, share, rng), options.level),
    )


def _real_in_quadrats(
    pattern: Pattern,
    counts: QuadratCounts,
    source: RecallSource,
    options: DrawOptions,
    rng: np.random.Generator,
) -> NDArray[np.int64]:
    """Return how many spots of each quadrat are real, for each draw."""
    certain = np.broadcast_to(counts.counts, (options.draws, len(counts)))
    if source == "checked" or counts.grid is None or not (pattern.doubt > 0).any():
        return certain
    quadrat = quadrats_of(pattern.points, counts.grid)
    unsure = np.flatnonzero(pattern.doubt > 0)
    unsure = unsure[np.argsort(quadrat[unsure], kind="stable")]
    where, starts = np.unique(quadrat[unsure], return_index=True)
    doubt = pattern.doubt[unsure]
    logit = special.logit(np.clip(doubt, NEAREST, 1 - NEAREST))
    steps = options.shared_doubt * rng.standard_normal(options.draws)
    real = certain.copy()
    batch = max(1, _CELLS_AT_ONCE // doubt.size)
    for first in range(0, options.draws, batch):
        rows = slice(first, min(first + batch, options.draws))
        chance = special.expit(logit + steps[rows, None])
        false = (rng.random(chance.shape) < chance) | (doubt == 1)
        real[rows, where] -= np.add.reduceat(false.astype(np.int64), starts, axis=1)
    return real


def _clumping(counts: QuadratCounts, share: NDArray[np.float64]) -> float:
    """Return how much the density of a quadrat goes by its own count."""
    vmr = float(_chi2(counts.counts[None], share)[0]) / (len(counts) - 1)
    return max(0.0, 1 - 1 / vmr)


def _thrown(
    missed: NDArray[np.int64],
    real: NDArray[np.int64],
    share: NDArray[np.float64],
    on_spots: float,
    rng: np.random.Generator,
) -> NDArray[np.int64]:
    """Return how many missed objects fall into each quadrat, for each draw."""
    if not missed.any():
        return np.zeros_like(real)
    found = real / np.maximum(real.sum(axis=1, keepdims=True), 1)
    chance = (1 - on_spots) * share + on_spots * found
    return np.asarray(rng.multinomial(missed, chance / chance.sum(axis=1, keepdims=True)))


def _chi2(there: NDArray[np.int64], share: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return X2 of each row of counts; NaN without points."""
    total = there.sum(axis=1)
    squares = (there.astype(np.float64) ** 2) @ (1 / share)
    value = np.full(total.shape, np.nan)
    return np.asarray(np.divide(squares, total, out=value, where=total > 0) - total)


def _verdicts(
    judge: Judge, chi2: NDArray[np.float64], total: NDArray[np.int64]
) -> tuple[tuple[Verdict, float], ...]:
    """Return each verdict with its share of the draws, most frequent first."""
    few = (total < FEWEST_SPOTS) | judge.too_few_quadrats
    signs = np.zeros(total.shape, dtype=np.int64)
    signs[~few] = judge.signs(chi2[~few], total[~few])
    names: tuple[tuple[Verdict, NDArray[np.bool_]], ...] = (
        ("clumped", ~few & (signs == 1)),
        ("evenly spaced", ~few & (signs == -1)),
        ("no departure from random found", ~few & (signs == 0)),
        ("too few to tell", few),
    )
    shares = [(name, float(where.mean())) for name, where in names if where.any()]
    return tuple(sorted(shares, key=lambda each: -each[1]))


def _density(
    pattern: Pattern,
    total: NDArray[np.int64],
    varies: NDArray[np.float64],
    rng: np.random.Generator,
    level: float,
) -> Limits | None:
    """Return the density per square centimetre with all its errors."""
    if pattern.unit != "mm":
        return None
    mean = rng.gamma((total + 0.5) / varies, varies)
    of_area = np.exp(2 * pattern.relative_uncertainty * rng.standard_normal(total.size))
    limits = _limits(mean * of_area * CM2 / float(pattern.area.area), level)
    middle = float(np.median(total)) * CM2 / float(pattern.area.area)
    return Limits(middle, min(limits.low, middle), max(limits.high, middle), level)


def _resampled(
    there: NDArray[np.int64], share: NDArray[np.float64], rng: np.random.Generator
) -> NDArray[np.float64]:
    """Return X2 / df of quadrats drawn with replacement, once for each draw."""
    q = share.size
    times = rng.multinomial(q, np.full(q, 1 / q), size=len(there))
    total, area = (times * there).sum(axis=1), times @ share
    squares = (times * there.astype(np.float64) ** 2) @ (1 / share)
    value = np.full(total.shape, np.nan)
    chi2 = np.divide(squares * area, total, out=value, where=total > 0) - total
    return np.asarray(chi2 / (q - 1) * q / (q - 1))


def _limits(values: NDArray[np.float64], level: float) -> Limits:
    """Return median and limits of draws; NaN where there are none."""
    known = values[np.isfinite(values)]
    if not known.size:
        return Limits(math.nan, math.nan, math.nan, level)
    low, middle, high = np.quantile(known, [(1 - level) / 2, 0.5, (1 + level) / 2])
    return Limits(float(middle), float(low), float(high), level)


def _whole_limits(values: NDArray[np.int64], level: float) -> Limits:
    """Return the same as whole numbers that were drawn."""
    at = [(1 - level) / 2, 0.5, (1 + level) / 2]
    low, middle, high = np.quantile(values, at, method="inverted_cdf")
    return Limits(float(middle), float(low), float(high), level)
