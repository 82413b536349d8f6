"""How many points would have to be false, or missed, for the verdict to change."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from analyse.chance import LEVEL
from analyse.count_chance import SimulatedTest
from analyse.dispersion import checked_areas, checked_counts
from analyse.extremes import (
    bound_after_removals,
    greatest_after_additions,
    greatest_after_both,
    greatest_after_removals,
    least_after_additions,
    least_after_removals,
)
from analyse.verdict import FEWEST_QUADRATS, FEWEST_SPOTS, Verdict

_TIE = 1e-9  # as in the simulated p
_STEPS = 30_000_000  # of dynamic programming, beyond which a bound is given
_BOTH = 4_000_000  # pairs of removals and additions, times kinds of quadrats, likewise
_MOST_ADDED = 64  # times the points and quadrats there are; beyond, no number is given


@dataclass(frozen=True, slots=True)
class Judge:
    """Which verdict X2 of counts comes to, for every total.

    Parameters
    ----------
    n, q : int
        Points and quadrats of the counts that were judged.
    low, high : float
        X2 below which these were even and above which they were clumped (`SimulatedTest`).
    inverse_shares : float
        Sum over quadrats of the study area over theirs.

    Notes
    -----
    At the total n this is the reported test. At another total m the two critical values keep their
    distance from the mean q - 1 in standard deviations, which are known exactly:
    Var(X2) = 2 (q - 1) + (sum 1/p - q^2 - 2q + 2) / m for shares p of the area. So the same
    simulations judge all totals, and chance does not decide between neighbouring ones. Fewer than 10
    points were never judged; there the quantiles of chi-square stand in.

    References
    ----------
    Haldane, J. B. S. (1937). The exact value of the moments of the distribution of chi-square, used
    as a test of goodness of fit, when expectations are small. Biometrika 29, 133-143.

    Examples
    --------
    >>> from analyse.findings import CountTable, analyse_counts
    >>> counts = [0, 9, 1, 0, 8, 0, 2, 7, 0, 0]
    >>> found = analyse_counts(CountTable("bed", counts), simulations=99)
    >>> judge = Judge.of(counts, np.ones(10), found.simulated)
    >>> judge.verdict([3, 2, 3, 2, 4, 3, 2, 3, 2, 3], np.ones(10))
    'evenly spaced'
    """

    n: int
    q: int
    low: float
    high: float
    inverse_shares: float

    @classmethod
    def of(cls, counts: ArrayLike, areas: ArrayLike, test: SimulatedTest) -> Judge:
        """Return the judge that gave a verdict on counts in quadrats of these areas."""
        x, share = checked_counts(counts), _shares(areas)
        return cls(int(x.sum()), x.size, test.low, test.high, float((1 / share).sum()))

    @property
    def too_few_quadrats(self) -> bool:
        """Whether no number of points would be enough."""
        return self.q < FEWEST_QUADRATS

    def spread(self, totals: ArrayLike) -> NDArray[np.float64]:
        """Return the standard deviation of X2 at random, for each total."""
        m, q = np.asarray(totals, dtype=np.float64), self.q
        varies = 2 * (q - 1) + (self.inverse_shares - q * q - 2 * q + 2) / m
        return np.asarray(np.sqrt(np.maximum(varies, 0.0)))

    def limits(self, totals: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the critical values, low and high, for each total of at least 1."""
        df, low, high = self.q - 1, self.low, self.high
        here = self.spread(self.n) if self.n >= FEWEST_SPOTS else math.sqrt(2 * df)
        if self.n < FEWEST_SPOTS:
            low, high = special.chdtri(df, [1 - LEVEL / 2, LEVEL / 2])
        ratio = self.spread(totals) / here
        return df + (low - df) * ratio, df + (high - df) * ratio

    def signs(self, chi2: ArrayLike, totals: ArrayLike) -> NDArray[np.int64]:
        """Return 1 for clumped, -1 for even and 0 for neither, whatever the number of points."""
        seen = np.asarray(chi2, dtype=np.float64)
        low, high = self.limits(totals)
        tie = _TIE * np.maximum(1.0, np.where(np.isfinite(seen), seen, 1.0))
        return (seen > high + tie).astype(np.int64) - (seen < low - tie)

    def verdict(self, counts: ArrayLike, areas: ArrayLike) -> Verdict:
        """Return the verdict on other counts in the same quadrats."""
        x, share = checked_counts(counts), _shares(areas)
        m = int(x.sum())
        if m < FEWEST_SPOTS or self.too_few_quadrats:
            return "too few to tell"
        sign = int(self.signs((x * x / share).sum() / m - m, m))
        return ("no departure from random found", "clumped", "evenly spaced")[sign]


@dataclass(frozen=True, slots=True)
class BreakingPoint:
    """The smallest numbers of wrong points that change a verdict, wherever they lie.

    Parameters
    ----------
    n : int
        Points counted.
    verdict : str
        The verdict.
    false : int or None
        How many of them must be no objects; None where no number of false ones changes it.
    missed : int or None
        How many more objects there must be; None where no number of them changes it.
    either : int or None
        How many errors of both kinds together; None where no number does.
    too_few : bool
        Whether `false` is reached only because fewer than 10 points would be left.
    exact : bool
        False where the counts are so many that `false` or `either` is only known to be at least
        as large as given.
    """

    n: int
    verdict: Verdict
    false: int | None
    missed: int | None
    either: int | None
    too_few: bool = False
    exact: bool = True

    def __repr__(self) -> str:
        at = "" if self.exact else "at least "
        return (
            f"<BreakingPoint of {self.verdict}: {at}{self.false} of {self.n} false,"
            f" {self.missed} missed, {self.either} of both>"
        )

    @property
    def sentence(self) -> str:
        """The numbers in words."""
        if self.false is None and self.missed is None:
            return "No number of wrong spots would change the verdict: there are too few quadrats."
        least = "" if self.exact else "at least "
        ways = []
        if self.false is not None:
            left = f" (fewer than {FEWEST_SPOTS} would be left)" if self.too_few else ""
            were = "was" if self.false == 1 else "were"
            spots = f"{self.false:,} of the {self.n:,} spot{'s' * (self.n != 1)}"
            ways.append(f"if {least}{spots} {were} wrong, in the worst case{left}")
        if self.missed is not None:
            had = "had" if ways else "object had" if self.missed == 1 else "objects had"
            ways.append(f"if {self.missed:,} more {had} been missed")
        alone = [way for way in (self.false, self.missed) if way is not None]
        if len(alone) == 2 and self.either is not None and self.either < min(alone):
            ways.append(f"with {least}{self.either:,} errors of both kinds together")
        return f"The verdict would change {', or '.join(ways)}."


def breaking_point(
    counts: ArrayLike,
    areas: ArrayLike,
    test: SimulatedTest,
    *,
    verdict: Verdict,
    removable: ArrayLike | None = None,
) -> BreakingPoint:
    """Return how many points would have to be false, or missed, to change the verdict.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        Points in each quadrat.
    areas : array_like of float, shape (q,)
        Area of each quadrat, in any one unit.
    test : SimulatedTest
        What the verdict rests on.
    verdict : str
        The verdict.
    removable : array_like of int, shape (q,), or None
        How many points of each quadrat may be false; None for all.

    Returns
    -------
    BreakingPoint

    Notes
    -----
    The worst case: errors lie where they bend the verdict most, which errors of a detector seldom
    do all together. The quadrats stay as they are, also where their side came from the number of
    points, and other counts are judged as `Judge` says. A verdict changes also where fewer than 10
    points are left, or 10 are reached. For each number of errors the least or greatest X2 that they
    can lead to is worked out exactly (`analyse.extremes`), and the smallest number that crosses a
    critical value is the answer; a choice of fewest errors of both kinds never removes and adds in
    one quadrat, where both would undo each other. Tests over sides and distances have no breaking
    point here: no worst case of theirs can be worked out so.

    Examples
    --------
    >>> from analyse.count_chance import simulated_p
    >>> counts, areas = np.array([9, 0, 1, 0, 6, 0, 0, 8, 0, 1]), np.ones(10)
    >>> test = simulated_p(counts, areas, rng=np.random.default_rng(1))
    >>> print(breaking_point(counts, areas, test, verdict="clumped").sentence)
    The verdict would change if 14 of the 25 spots were wrong, ...
    """
    x, share = checked_counts(counts), _shares(areas)
    spare = x if removable is None else np.minimum(checked_counts(removable), x)
    n = int(x.sum())
    if x.size < FEWEST_QUADRATS:
        return BreakingPoint(n, verdict, None, None, None)
    if n < FEWEST_SPOTS:
        return BreakingPoint(n, verdict, None, FEWEST_SPOTS - n, FEWEST_SPOTS - n)
    search = _Search(x, 1 / share, spare, Judge.of(x, areas, test), verdict)
    return search.result()


def false_to_change(
    counts: NDArray[np.int64],
    areas: ArrayLike,
    judge: Judge,
    *,
    verdict: Verdict,
    removable: NDArray[np.int64],
    limit: int,
) -> int | None:
    """Return the fewest false points alone that change a verdict, if no more than `limit` do.

    Examples
    --------
    >>> counts, areas = np.array([9, 0, 1, 0, 6, 0, 0, 8, 0, 1]), np.ones(10)
    >>> from analyse.count_chance import simulated_p
    >>> judge = Judge.of(counts, areas, simulated_p(counts, areas, rng=np.random.default_rng(1)))
    >>> false_to_change(counts, areas, judge, verdict="clumped", removable=counts, limit=20)
    14
    >>> false_to_change(counts, areas, judge, verdict="clumped", removable=counts, limit=5) is None
    True
    """
    if judge.too_few_quadrats or judge.n < FEWEST_SPOTS:
        return None
    return _Search(counts, 1 / _shares(areas), removable, judge, verdict).false(limit)[0]


class _Search:
    """The smallest numbers of errors, kind by kind."""

    def __init__(
        self,
        counts: NDArray[np.int64],
        weights: NDArray[np.float64],
        spare: NDArray[np.int64],
        judge: Judge,
        verdict: Verdict,
    ) -> None:
        self.counts, self.weights, self.spare = counts, weights, spare
        self.judge, self.n = judge, judge.n
        self.exact = True
        sign = {"clumped": 1, "evenly spaced": -1}.get(verdict, 0)
        self.down, self.up = sign >= 0, sign <= 0  # which way X2 must go
        self.sign = sign

    def changed(
        self, least: ArrayLike | None, greatest: ArrayLike | None, totals: ArrayLike
    ) -> NDArray[np.bool_]:
        """Return where the least or the greatest T of a total changes the verdict."""
        m = np.asarray(totals, dtype=np.float64)
        changed = np.zeros(m.shape, dtype=bool)
        for extreme, wanted in ((least, self.down), (greatest, self.up)):
            if extreme is not None and wanted:
                chi2 = np.asarray(extreme) / m - m
                changed |= np.isfinite(chi2) & (self.judge.signs(chi2, m) != self.sign)
        return changed

    def result(self) -> BreakingPoint:
        """Return the breaking point."""
        false, too_few = self.false()
        missed = self._missed()
        bounds = [many for many in (false, missed) if many is not None]
        either = self._either(min(bounds)) if bounds else None
        verdict: Verdict = ("no departure from random found", "clumped", "evenly spaced")[self.sign]
        return BreakingPoint(self.n, verdict, false, missed, either, too_few, self.exact)

    def false(self, limit: int | None = None) -> tuple[int | None, bool]:
        """Return the fewest removals up to a limit, and whether they only leave too few."""
        spare = int(self.spare.sum())
        spare = spare if limit is None else min(spare, limit)
        most = min(self.n - FEWEST_SPOTS, spare)
        enough = most < spare  # one more leaves too few
        found = most + 1
        if self.down:
            least = least_after_removals(self.counts, self.weights, self.spare, most)
            found = _first(self.changed(least, None, self.n - np.arange(least.size)), found)
        if self.up:
            for k in _doubling(min(most, found)):
                ways = np.minimum(self.spare, k).sum() + self.counts.size
                exact = bool(ways * (k + 1) <= _STEPS)
                method = greatest_after_removals if exact else bound_after_removals
                greatest = method(self.counts, self.weights, self.spare, k)
                totals = self.n - np.arange(greatest.size)
                first = _first(self.changed(None, greatest, totals), found)
                if first < found:
                    found, self.exact = first, self.exact and exact
                    break
        if found <= most:
            return found, False
        return (found, True) if enough else (None, False)

    def _missed(self) -> int | None:
        """Return the fewest additions."""
        limit = _MOST_ADDED * (self.n + self.counts.size)
        for j in _doubling(limit):
            least = least_after_additions(self.counts, self.weights, j) if self.down else None
            greatest = greatest_after_additions(self.counts, self.weights, j) if self.up else None
            first = _first(self.changed(least, greatest, self.n + np.arange(j + 1)), j + 1)
            if first <= j:
                return first
        return None

    def _either(self, most: int) -> int:
        """Return the fewest errors of both kinds, fewer than `most` or `most` itself."""
        size = min(most - 1, int(self.spare.sum()), self.n - FEWEST_SPOTS + most)
        if size < 1:
            return most
        removed = added = both = None
        if self.down:
            removed = least_after_removals(self.counts, self.weights, self.spare, size)
            added = least_after_additions(self.counts, self.weights, most)
            added = added - added[0]
        if self.up:
            both = self._both(size, most)
        for e in range(1, most):
            k = np.arange(max(0, e - most), min(e, size) + 1)
            totals = self.n - k + (e - k)
            kept = totals >= FEWEST_SPOTS
            k, totals = k[kept], totals[kept]
            least = None if removed is None or added is None else removed[k] + added[e - k]
            greatest = None if both is None else both[k, e - k]
            if self.changed(least, greatest, totals).any():
                return e
        return most

    def _both(self, size: int, most: int) -> NDArray[np.float64]:
        """Return the greatest T by removals and additions, or what it cannot exceed."""
        kinds = np.unique(np.column_stack([self.counts, self.weights, self.spare]), axis=0)
        ways = self.counts.size * most + len(kinds) * most * most
        if ways <= _BOTH:
            return greatest_after_both(self.counts, self.weights, self.spare, most)
        self.exact = False
        removed = bound_after_removals(self.counts, self.weights, self.spare, size)
        added = greatest_after_additions(self.counts, self.weights, most)
        return np.asarray(removed[:, None] + (added - added[0])[None, :])


def _first(changed: NDArray[np.bool_], otherwise: int) -> int:
    """Return the index of the first true entry, or another number where there is none."""
    where = np.flatnonzero(changed)
    return int(where[0]) if where.size and where[0] < otherwise else otherwise


def _doubling(most: int) -> Iterator[int]:
    """Yield 32, 64, ... up to `most`, which comes last."""
    many = 32
    while many < most:
        yield many
        many *= 2
    yield most


def _shares(areas: ArrayLike) -> NDArray[np.float64]:
    """Return the share of the whole area that each quadrat holds."""
    a = checked_areas(areas)
    return np.asarray(a / math.fsum(a))
