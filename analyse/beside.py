"""What is judged beside the quadrats: the tests over all sides and distances, also beyond a gradient."""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

from analyse.departures import Departure, departures_of, disagreement, judged_together
from analyse.errors import TooCrowded
from analyse.eyes import Eyes
from analyse.global_tests import GlobalTests, global_tests
from analyse.gradient import gradient_remark
from analyse.holm import HolmFamily
from analyse.pattern import Pattern
from analyse.seeing import own_seed, seen_null
from analyse.trend import TrendRandomness
from analyse.trend_record import Trend
from analyse.trends import Trends
from analyse.verdict import Verdict

PLAIN_SIMULATIONS = 199  # of plain chance, where it only stands beside the null with eyes


@dataclass(frozen=True, slots=True, eq=False)
class Beside:
    """What was judged beside the quadrats.

    Parameters
    ----------
    tests : GlobalTests or None
        Over all sides and distances, against points placed at random.
    holm : HolmFamily or None
        Adjusted p of those of them that are judged together.
    beyond : GlobalTests or None
        The same tests against points placed at random along the gradient.
    beyond_holm : HolmFamily or None
        Their adjusted p.
    plain : GlobalTests or None
        The first tests without eyes, by fewer simulations; None where there are none.
    plain_holm : HolmFamily or None
        Their adjusted p.
    """

    tests: GlobalTests | None = None
    holm: HolmFamily | None = None
    beyond: GlobalTests | None = None
    beyond_holm: HolmFamily | None = None
    plain: GlobalTests | None = None
    plain_holm: HolmFamily | None = None

    @property
    def departures(self) -> tuple[Departure, ...]:
        """How the tests that are judged together depart from points placed at random."""
        return _departures(self.tests, self.holm)


def judge_beside(
    pattern: Pattern,
    gradient: Trend | None,
    *,
    seed: int,
    simulations: int,
    workers: int = 1,
    eyes: Eyes | None = None,
) -> Beside:
    """Test a pattern over all sides and distances, and once more beyond its gradient.

    Parameters
    ----------
    pattern : Pattern
        Points in a study area.
    gradient : Trend or None
        The trend of the density that stands out, if one does.
    seed : int
        Seed of the simulations, 0 or more; together with the pattern's name it fixes the result.
    simulations : int
        How many.
    workers : int
        How many processes may share the simulations.
    eyes : Eyes or None
        Of the null that the verdict rests on; None for points as they are.

    Returns
    -------
    Beside
        Empty with fewer than 10 points.

    Raises
    ------
    OptionWrong
        If the seed or the number of simulations is out of range.

    Examples
    --------
    >>> lattice = [(x + 0.5, y + 0.5) for x in range(8) for y in range(8)]
    >>> beside = judge_beside(Pattern.of(lattice, (0, 0, 8, 8)), None, seed=1, simulations=99)
    >>> beside.holm["nearest_neighbour"]
    0.03
    """
    judge = partial(global_tests, pattern, workers=workers)
    own = own_seed(seed, pattern.name)
    null = None if eyes is None else seen_null(pattern, eyes)
    try:
        tests = judge(seed=own, null=null, simulations=simulations)
    except TooCrowded:  # of so many a rare pattern cannot be drawn: points as they are, then
        tests = judge(seed=own, simulations=simulations)
    plain = None
    if tests is not None and eyes is not None:
        plain = judge(seed=own, simulations=min(simulations, PLAIN_SIMULATIONS))
    beyond = None
    if tests is not None and gradient is not None:
        own = own_seed(seed, f"{pattern.name}, beyond the gradient")
        law = TrendRandomness(pattern.area, gradient)
        seen = law if eyes is None else seen_null(pattern, eyes, law)
        try:
            beyond = judge(seed=own, null=seen, simulations=simulations)
        except TooCrowded:  # where the gradient is densest: points as they are, then
            beyond = judge(seed=own, null=law, simulations=simulations)
    return Beside(tests, _family(tests), beyond, _family(beyond), plain, _family(plain))


def remark(
    verdict: Verdict,
    trends: Trends | None,
    beside: Beside,
    *,
    side: float | None,
    unit: str | None,
    width: float,
) -> str:
    """Return the sentence that goes with a verdict on the quadrats.

    Parameters
    ----------
    verdict : str
        On the quadrats as asked.
    trends : Trends or None
        The gradients that were tried.
    beside : Beside
        The tests over sides and distances.
    side : float or None
        Side of the quadrats; None where they are no squares.
    unit : {"mm", "px"} or None
        Of lengths.
    width : float
        Usual width of a spot; NaN where not known.

    Returns
    -------
    str
        Of a gradient, or else of where the tests over sides and distances tell something else;
        empty where none is needed.

    Examples
    --------
    >>> import math
    >>> from analyse.findings import analyse_points
    >>> bed = [(x + 0.5, y + 0.5) for x in range(8) for y in range(8)]
    >>> found = analyse_points(bed, (0, 0, 8, 8), simulations=99)
    >>> nothing = Beside()
    >>> remark(found.verdict, None, nothing, side=2.0, unit="mm", width=math.nan)
    ''
    """
    if verdict == "too few to tell":
        return ""
    before = beside.departures
    if trends is None or trends.clearest is None:
        return disagreement(verdict, before, side=side, unit=unit or "", width=width)
    beyond = _departures(beside.beyond, beside.beyond_holm)
    return gradient_remark(verdict, trends, before, beyond, unit or "")


def _family(tests: GlobalTests | None) -> HolmFamily | None:
    """Return the adjusted p of the tests that are judged together."""
    return None if tests is None else judged_together(tests.envelopes)


def _departures(tests: GlobalTests | None, family: HolmFamily | None) -> tuple[Departure, ...]:
    """Return how the tests of a family depart."""
    return () if tests is None or family is None else departures_of(tests.envelopes, family)
