"""How far a verdict and a count can be trusted: what it would take to overturn them, how likely that is."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from analyse.breaking_point import BreakingPoint, Judge, breaking_point
from analyse.count_chance import SimulatedTest
from analyse.draws import UnderDoubt, under_doubt
from analyse.influence import LookFirst, look_first
from analyse.pattern import Pattern
from analyse.quadrats import QuadratCounts, quadrats_of
from analyse.verdict import Verdict

MOST_POINTS = 1_000_000  # beyond, no single error matters and sorting them takes too long


@dataclass(frozen=True, slots=True, eq=False)
class Trust:
    """What the verdict of one photograph or table bears.

    Parameters
    ----------
    breaking : BreakingPoint
        How many wrong points change the verdict, at worst.
    doubt : UnderDoubt or None
        What becomes of it under the errors a detector is known to make; None for a table of counts.
    look : LookFirst or None
        Which spots to look at first; None where a person has checked all, or nothing doubts them.
    """

    breaking: BreakingPoint
    doubt: UnderDoubt | None
    look: LookFirst | None

    def __repr__(self) -> str:
        stands = "" if self.doubt is None else f", stands in {100 * self.doubt.stands:.0f} %"
        return f"<Trust: {self.breaking.false} false or {self.breaking.missed} missed{stands}>"


def assumed(trust: Trust | None) -> bool:
    """Return whether a recall stands behind it that nobody measured in this photograph.

    Examples
    --------
    >>> assumed(None)
    False
    """
    return trust is not None and trust.doubt is not None and trust.doubt.source == "assumed"


def trust_in(
    pattern: Pattern | None,
    counts: QuadratCounts,
    test: SimulatedTest,
    *,
    verdict: Verdict,
    rng: np.random.Generator,
) -> Trust | None:
    """Return how far a verdict can be trusted.

    Parameters
    ----------
    pattern : Pattern or None
        The points, with their doubts; None for a table of counts.
    counts : QuadratCounts
        Their counts.
    test : SimulatedTest
        What the verdict rests on.
    verdict : str
        The verdict.
    rng : numpy.random.Generator
        Source of randomness.

    Returns
    -------
    Trust or None
        None without points, and with more than a million.

    Examples
    --------
    >>> from analyse.findings import analyse_points
    >>> places = np.random.default_rng(3).random((80, 2)) * 100
    >>> analyse_points(places, (0, 0, 100, 100)).trust
    <Trust: 5 false or 4 missed, stands in 100 %>
    """
    x = counts.counts
    if not 0 < x.sum() <= MOST_POINTS:
        return None
    area = np.ones(x.size) if counts.area is None else counts.area
    breaking = breaking_point(x, area, test, verdict=verdict)
    if pattern is None or counts.grid is None:
        return Trust(breaking, None, None)
    judge = Judge.of(x, area, test)
    doubt = under_doubt(pattern, counts, judge, verdict=verdict, rng=rng)
    if doubt.source == "checked" or not (pattern.doubt > 0).any():
        return Trust(breaking, doubt, None)
    where = quadrats_of(pattern.points, counts.grid)
    look = look_first(pattern.doubt, x, area, where, test, verdict=verdict)
    return Trust(breaking, doubt, look)
