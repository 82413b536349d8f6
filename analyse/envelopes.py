"""Is a whole curve within what chance gives: one p and one band for all distances or sides at once."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.columns import hold_columns

Measure = Literal["extreme rank length", "studentised maximum deviation"]
Curves = NDArray[np.float64]

_TIE = 1e-10  # of a column's largest value: values nearer to each other count as equal
_NARROW = 0.02  # of the widest half band: the least by which a departure is divided


@dataclass(frozen=True, slots=True, eq=False)
class Envelope:
    """A curve of the pattern beside the global band of its simulations.

    Parameters
    ----------
    name : str
        What the curve is, such as ``l_function``.
    x : ndarray of shape (k,)
        Distances or sides, increasing, in the unit of the pattern.
    observed : ndarray of shape (k,)
        The curve of the pattern.
    central : ndarray of shape (k,)
        Mean of the simulated curves.
    low, high : ndarray of shape (k,)
        The global band: the pattern's curve leaves it somewhere exactly where `p` is at most `level`.
    p : float
        One p for the whole curve, two-sided; never 0.
    level : float
        Level of the band, in 0..1.
    simulations : int
        How many simulated curves there were.
    measure : {"extreme rank length", "studentised maximum deviation"}
        How curves were ordered.

    Raises
    ------
    ValueError
        If the columns differ in length, hold numbers that are not finite, or `x` does not increase.
    """

    name: str
    x: NDArray[np.float64]
    observed: NDArray[np.float64]
    central: NDArray[np.float64]
    low: NDArray[np.float64]
    high: NDArray[np.float64]
    p: float
    level: float
    simulations: int
    measure: Measure

    def __post_init__(self) -> None:
        columns = ("x", "observed", "central", "low", "high")
        hold_columns(self, columns, length=len(self.x))
        if not len(self.x):
            raise ValueError(f"the curve {self.name} has no values")
        for column in columns:
            if not np.isfinite(getattr(self, column)).all():
                raise ValueError(f"{column} of the curve {self.name} is not finite everywhere")
        if not (np.diff(self.x) > 0).all():
            raise ValueError(f"x of the curve {self.name} does not increase")
        if not (0 < self.p <= 1 and 0 < self.level < 1):
            raise ValueError(f"p {self.p} and level {self.level} must lie within 0..1")

    def __repr__(self) -> str:
        where = f", {self.side} the band most at {self.at:.4g}" if self.side else ""
        return (
            f"<Envelope {self.name}: p = {self.p:.3g} by {self.measure},"
            f" {self.simulations} simulations{where}>"
        )

    @property
    def outside(self) -> NDArray[np.bool_]:
        """Where the pattern's curve lies outside the band."""
        return (self.observed < self.low) | (self.observed > self.high)

    @property
    def departure(self) -> NDArray[np.float64]:
        """How far the curve lies from the middle of the band, in half widths of its own side."""
        middle = np.clip(self.central, self.low, self.high)
        off = self.observed - middle
        half = np.where(off > 0, self.high - middle, middle - self.low)
        least = _NARROW * float((self.high - self.low).max()) / 2
        return np.divide(off, np.maximum(half, least), out=off.copy(), where=half + least > 0)

    @property
    def strongest(self) -> int:
        """Index of the greatest departure; among those outside the band where there are any."""
        size = np.abs(self.departure)
        return int(np.argmax(np.where(self.outside, size, -1) if self.outside.any() else size))

    @property
    def at(self) -> float:
        """Distance or side of the greatest departure."""
        return float(self.x[self.strongest])

    @property
    def side(self) -> Literal["above", "below"] | None:
        """On which side of the band the curve lies at its greatest departure; None if nowhere."""
        if not self.outside.any():
            return None
        return "above" if self.observed[self.strongest] > self.high[self.strongest] else "below"


def global_envelope(
    observed: ArrayLike,
    simulated: ArrayLike,
    x: ArrayLike,
    *,
    name: str,
    level: float = 0.05,
    measure: Measure = "extreme rank length",
) -> Envelope:
    """Judge a whole curve against simulated ones, by one p and one band for all its values.

    Parameters
    ----------
    observed : array_like of shape (k,)
        The curve of the pattern.
    simulated : array_like of shape (simulations, k)
        Curves of patterns drawn under the null.
    x : array_like of shape (k,)
        Distances or sides, increasing.
    name : str
        What the curve is.
    level : float
        Chance, under the null, that the pattern's curve leaves the band anywhere; in 0..1.
    measure : {"extreme rank length", "studentised maximum deviation"}
        How the curves are ordered from the most extreme to the least.

    Returns
    -------
    Envelope

    Raises
    ------
    ValueError
        If shapes do not fit, a value is not finite, the measure is unknown, or there are too few
        simulations to reach `level` at all.

    Notes
    -----
    p is the share of the curves, the observed one included, that are at least as extreme as it.
    Curves as extreme as the observed one count as more extreme, so the test never rejects more
    often than `level`; a rule that leaves them out would be liberal. The band is the pointwise
    range of the curves that are not rejected (extreme rank length), or the mean of the simulations
    plus and minus one multiple of their standard deviation (studentised maximum deviation). The
    curve leaves the band exactly where p is at most `level`.

    Extreme rank length: at each x a curve has the smaller of its ranks from below and from above,
    tied values sharing the mean of their ranks; curves are compared by their smallest rank, then
    by the second smallest, and so on. Without ties this alone makes the band and p agree. Values
    that tie (counts of few points) can hide a curve of small ranks within the range of the others;
    so a curve counts as extreme from where, curves being taken away in this order, it first lies
    outside the range of those left.

    Studentised maximum deviation: the largest distance, over all x, of a curve from the mean of all
    others in their standard deviations. Places where all curves are equal are passed over.

    References
    ----------
    Myllymaki, M., Mrkvicka, T., Grabarnik, P., Seijo, H. and Hahn, U. (2017). Global envelope tests
    for spatial processes. Journal of the Royal Statistical Society B 79, 381-404.
    Mrkvicka, T., Myllymaki, M., Jilek, M. and Hahn, U. (2020). A one-way ANOVA test for functional
    data with graphical interpretation. Kybernetika 56, 432-458.
    Myllymaki, M., Grabarnik, P., Seijo, H. and Stoyan, D. (2015). Deviation test construction and
    power comparison for marked spatial point patterns. Spatial Statistics 11, 19-34.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> walks = rng.standard_normal((999, 20)).cumsum(axis=1)
    >>> seen = global_envelope(walks[0] + 20, walks[1:], np.arange(1, 21), name="walk")
    >>> seen.p <= 0.05, seen.side, bool(seen.outside.any())
    (True, 'above', True)
    """
    curves = _all_curves(observed, simulated, name)
    simulations = len(curves) - 1
    if measure not in get_args(Measure):
        raise ValueError(f"measure must be one of {', '.join(get_args(Measure))}, not {measure!r}")
    if not (0 < level < 1 and 1 / (simulations + 1) <= level):
        raise ValueError(
            f"{simulations} simulations cannot reach level {level:g};"
            " give a level in 0..1 and at least 1 / level - 1 simulations"
        )
    places = np.asarray(x, dtype=np.float64).reshape(-1)
    if places.size != curves.shape[1]:
        raise ValueError(f"{places.size} places for curves of {curves.shape[1]} values")
    curves, ranks = _tied(curves)
    if measure == "extreme rank length":
        p, low, high = _by_rank_length(curves, ranks, level)
    else:
        p, low, high = _by_deviation(curves, level)
    central = curves[1:].mean(axis=0)
    return Envelope(
        name, places, curves[0], central, low, high, p, level, simulations, measure
    )  # fmt: skip


def _all_curves(observed: ArrayLike, simulated: ArrayLike, name: str) -> Curves:
    """Return the observed curve above the simulated ones, or refuse them."""
    seen = np.asarray(observed, dtype=np.float64).reshape(-1)
    drawn = np.asarray(simulated, dtype=np.float64)
    if drawn.ndim != 2 or drawn.shape[1] != seen.size or not seen.size:
        raise ValueError(
            f"simulated curves of shape {drawn.shape} do not fit {seen.size} observed values"
        )
    curves = np.vstack([seen, drawn])
    bad = np.flatnonzero(~np.isfinite(curves).all(axis=0))
    if bad.size:
        raise ValueError(
            f"the curve {name} is not finite in {bad.size} of {seen.size} columns, first in column"
            f" {bad[0]}; leave those columns out before it is judged"
        )
    return curves


def _tied(curves: Curves) -> tuple[Curves, Curves]:
    """Return the curves with values made equal that differ by rounding alone, and their ranks.

    The first row stays as it is. Equal values share the mean of their ranks.
    """
    n = len(curves)
    order = np.argsort(curves, axis=0, kind="stable")
    ordered = np.take_along_axis(curves, order, axis=0)
    new = np.diff(ordered, axis=0) > _TIE * np.abs(ordered[[0, -1]]).max(axis=0)
    place, edge = np.arange(n)[:, None], np.ones((1, curves.shape[1]), dtype=bool)
    first = np.maximum.accumulate(np.where(np.vstack([edge, new]), place, 0), axis=0)
    last = np.minimum.accumulate(np.where(np.vstack([new, edge]), place, n)[::-1], axis=0)[::-1]
    equal, ranks = np.empty_like(curves), np.empty_like(curves)
    np.put_along_axis(equal, order, np.take_along_axis(ordered, first, axis=0), axis=0)
    np.put_along_axis(ranks, order, (first + last) / 2 + 1, axis=0)
    return np.where(equal == equal[0], curves[0], equal), ranks


def _by_rank_length(curves: Curves, ranks: Curves, level: float) -> tuple[float, Curves, Curves]:
    """Return p and the band of the first curve by extreme rank length."""
    step = _steps(ranks)
    order = np.argsort(-step, kind="stable")  # least extreme first
    lows = np.minimum.accumulate(curves[order], axis=0)[::-1]
    highs = np.maximum.accumulate(curves[order], axis=0)[::-1]
    taken = np.searchsorted(np.sort(step), np.arange(step.max() + 1))  # curves gone after t steps
    lows, highs = lows[taken], highs[taken]
    leaves = _first_outside(curves, lows, highs)
    gone = np.searchsorted(np.sort(leaves), np.arange(len(taken) + 1), side="right") / len(curves)
    last = int(np.flatnonzero(gone[:-1] <= level)[-1])
    return float(gone[leaves[0]]), lows[last], highs[last]


def _steps(ranks: Curves) -> NDArray[np.int64]:
    """Return, from 0 for the most extreme, the place of each curve by extreme rank length."""
    ordered = np.sort(np.minimum(ranks, len(ranks) + 1 - ranks), axis=1)
    order = np.lexsort(ordered.T[::-1])
    new = (np.diff(ordered[order], axis=0) != 0).any(axis=1)
    step = np.empty(len(ranks), dtype=np.int64)
    step[order] = np.concatenate([[0], np.cumsum(new)])
    return step


def _first_outside(curves: Curves, lows: Curves, highs: Curves) -> NDArray[np.int64]:
    """Return for each curve how many steps are taken away when it first leaves the range of the rest.

    Row t of `lows` and `highs` is the range of what is left after t steps; a curve that never
    leaves it has the number of rows.
    """
    leaves = np.full(len(curves), len(lows))
    for k in range(curves.shape[1]):
        below = np.searchsorted(lows[:, k], curves[:, k], side="right")
        above = np.searchsorted(-highs[:, k], -curves[:, k], side="right")
        leaves = np.minimum(leaves, np.minimum(below, above))
    return leaves


def _by_deviation(curves: Curves, level: float) -> tuple[float, Curves, Curves]:
    """Return p and the band of the first curve by studentised maximum deviation."""
    largest = _tied(_largest_deviations(curves)[:, None])[0][:, 0]
    share = np.searchsorted(np.sort(-largest), -largest, side="right") / len(curves)
    reach = _left_out(float(largest[share > level].max()), len(curves))
    if math.isinf(reach):  # too many curves stand alone where all others are equal
        return float(share[0]), curves.min(axis=0), curves.max(axis=0)
    middle, spread = curves[1:].mean(axis=0), reach * curves[1:].std(axis=0, ddof=1)
    low, high = middle - spread, middle + spread
    if share[0] > level:  # rounding must not put the curve that sets the band outside it
        low, high = np.minimum(low, curves[0]), np.maximum(high, curves[0])
    return float(share[0]), low, high


def _largest_deviations(curves: Curves) -> NDArray[np.float64]:
    """Return the largest distance of each curve from the mean of all, in standard deviations."""
    varies = (curves != curves[0]).any(axis=0)
    seen = curves[:, varies]
    off = np.abs(seen - seen.mean(axis=0)) / seen.std(axis=0, ddof=1)
    return np.asarray(off.max(axis=1, initial=0.0))


def _left_out(z: float, n: int) -> float:
    """Return a deviation from the mean of n values, the own one among them, as one from the others.

    In both cases in standard deviations, those of the same values as the mean. As it grows with z
    at every x alike, both order the curves in the same way.
    """
    left = 1 - n * z * z / (n - 1) ** 2
    if left < 1e-9:  # all others are equal
        return math.inf
    return z * n / (n - 1) * math.sqrt((n - 2) / (n - 1) / left)
