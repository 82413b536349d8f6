"""What the quadrat test alone says, without anything else that is said about a photograph."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from analyse.chance import FEWEST_SIMULATIONS, SEED, SIMULATIONS
from analyse.count_chance import SimulatedTest, simulated_p
from analyse.dispersion import Dispersion, clipped_dispersion, dispersion
from analyse.findings import stream
from analyse.pattern import Pattern, pattern_of_state
from analyse.quadrats import Grid, GridOptions, QuadratCounts, count_in_quadrats, lay_grid
from analyse.seeing import judge_seen
from analyse.verdict import Verdict, decide
from detect.changes import Changes
from detect.sheet import Sheet


@dataclass(frozen=True, slots=True, eq=False)
class QuickTest:
    """A quadrat test and its verdict.

    Parameters
    ----------
    pattern : Pattern
        The points.
    counts : QuadratCounts
        And the grid they were counted in.
    everything : Dispersion
        Over all quadrats, expected counts by area.
    whole : Dispersion or None
        Over whole quadrats; None where there are fewer than 2.
    simulated : SimulatedTest
        What the verdict rests on.
    verdict : str
    """

    pattern: Pattern
    counts: QuadratCounts
    everything: Dispersion
    whole: Dispersion | None
    simulated: SimulatedTest
    verdict: Verdict


def quick_test(
    pattern: Pattern,
    options: GridOptions | None = None,
    *,
    grid: Grid | None = None,
    seed: int = SEED,
    simulations: int = SIMULATIONS,
    points_at_most: int | None = None,
) -> QuickTest:
    """Count a pattern in quadrats and test the counts as `analyse_pattern` does, and do no more.

    Parameters
    ----------
    pattern : Pattern
        Points in a study area.
    options : GridOptions or None
        How to lay the quadrats; None for the rule.
    grid : Grid or None
        The grid that follows from them, where it was laid before.
    seed, simulations : int
        Of the simulated p.
    points_at_most : int or None
        Where points must be drawn because the detector's eyes are known, how many in all, so that
        there are fewer simulations, but not below 99; None for no limit.

    Returns
    -------
    QuickTest

    Raises
    ------
    GridWrong
        If the quadrats do not fit the study area.

    Examples
    --------
    >>> points = [[x + 5, y + 5] for x in range(0, 100, 10) for y in range(0, 100, 10)]
    >>> quick_test(Pattern.of(points, (0, 0, 100, 100))).verdict
    'evenly spaced'
    """
    if grid is None:
        asked = options or GridOptions()
        grid = lay_grid(pattern.area, len(pattern), asked, pattern.unit, pattern.dish)
    x = count_in_quadrats(pattern.points, grid)
    everything = clipped_dispersion(x, grid.area)
    whole = dispersion(x[grid.whole]) if int(np.sum(grid.whole)) >= 2 else None
    rng = stream(seed, pattern.name)
    plain = simulated_p(x, grid.area, simulations=simulations, rng=rng)
    counts = QuadratCounts(x, grid.area, grid.whole, grid, grid.row, grid.column)
    fewer = (
        simulations if points_at_most is None else _fewer(simulations, points_at_most, len(pattern))
    )
    simulated = judge_seen(pattern, counts, plain, seed=seed, simulations=fewer).simulated
    verdict = decide(everything.n, everything.q, simulated)
    return QuickTest(pattern, counts, everything, whole, simulated, verdict)


def verdict_as_found(sheet: Sheet, options: GridOptions, *, seed: int, simulations: int) -> Verdict:
    """Return the verdict of a sheet's quadrat test before anybody changed anything on it."""
    pattern = pattern_of_state(sheet, Changes())
    return quick_test(pattern, options, seed=seed, simulations=simulations).verdict


def _fewer(simulations: int, points_at_most: int, n: int) -> int:
    """Return how many simulations of n points are drawn."""
    return min(simulations, max(FEWEST_SIMULATIONS, points_at_most // max(n, 1)))
