"""The record of everything that is said about one photograph or table."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from analyse.clumped_density import ClumpedLimits
from analyse.columns import hold_columns
from analyse.contiguous import Blocks
from analyse.count_chance import SimulatedTest
from analyse.density import Limits
from analyse.dispersion import Dispersion
from analyse.eyes import Eyes
from analyse.fits import NegativeBinomialFit
from analyse.flags import flag_sentences
from analyse.holm import HolmFamily
from analyse.models import PoissonFit
from analyse.pattern import Pattern, Unit
from analyse.power import WouldShow
from analyse.quadrats import QuadratCounts
from analyse.seeing import PlainTests, rests_words
from analyse.trends import Trends
from analyse.verdict import Verdict

if TYPE_CHECKING:
    from analyse.crowding import Crowding
    from analyse.global_tests import GlobalTests
    from analyse.spot_check import SpotCheck
    from analyse.trust import Trust


@dataclass(frozen=True, slots=True, eq=False)
class Findings:
    """What was found for one photograph or table.

    Parameters
    ----------
    name : str
        File name of the photograph or table.
    n : int
        Points counted.
    unit : {"mm", "px"} or None
        Unit of lengths; None for a table of counts without a side.
    area : float or None
        Study area in the square of `unit`.
    pattern : Pattern or None
        The points; None for a table of counts.
    counts : QuadratCounts
        Counts and, for points, the grid.
    expected, residuals : ndarray of shape (q,)
        Counts expected at random given n, and standardised residuals (NaN without points).
    dispersion_whole : Dispersion or None
        Over whole quadrats; None where there are fewer than 2.
    dispersion_all : Dispersion
        Over all quadrats, expected counts by area.
    simulated : SimulatedTest
        X2 over all quadrats judged by simulation given n, with `eyes` where they are known: what the
        verdict rests on.
    density : Limits or None
        Points per square centimetre with 95 % limits; None where no millimetres are known.
    poisson : PoissonFit or None
        Frequencies in whole quadrats; None without 2 whole ones or with counts above 10,000.
    verdict : str
        The verdict.
    sentence : str
        The verdict as a sentence, with what would have been seen where nothing was found; then, where
        a gradient is found or the tests over sides and distances tell something else, another one.
    detectable : (low, high)
        VMR that would have been seen with about 80 % power, on the even and the clumped side;
        the first is NaN where so few points cannot lie as evenly as that, both where there are
        too few to tell.
    flags : tuple of str
        Reasons for care, names in `analyse.flags.FLAGS`.
    flag_values : dict
        Numbers that the flags' sentences quote.
    seed : int
        Seed of the simulations.
    settings : dict
        How the quadrats were laid and the test was done; plain values.
    blocks : Blocks or None
        Block variances of a table of contiguous quadrats: a grid, or a transect.
    negative_binomial : NegativeBinomialFit or None
        Law of clumped counts fitted to whole quadrats; None where `poisson` is or without points.
    clumped_mean : ClumpedLimits or None
        Mean count of a full quadrat, over all quadrats by area, with limits that allow for
        clumping; where `density` is None it is the only estimate of how many there are.
    clumped_density : ClumpedLimits or None
        The same per square centimetre, to stand beside `density`; None where that is.
    trend : Trends or None
        Gradients of the density, tested so that clumping alone is not taken for one; None with
        fewer than 10 points, and for counts whose places are unknown.
    verdict_before : str or None
        The verdict on the spots as detected, where people have reviewed them since.
    tests : GlobalTests or None
        Tests over all sides and distances against points placed at random; None without points,
        or with fewer than 10.
    holm : HolmFamily or None
        Adjusted p of those of them that are judged together; None where there are no `tests`.
    beyond : GlobalTests or None
        The same tests against points placed at random along the gradient; None where no gradient
        was found.
    beyond_holm : HolmFamily or None
        Their adjusted p.
    shown : WouldShow or None
        The smallest clusters and the smallest spacing that the counts would have shown; None where
        there are too few to tell.
    spot_check : SpotCheck or None
        What a person's blind count of random quadrats says of the spots; None where there was none,
        or not all its quadrats were counted.
    crowding : Crowding or None
        The count corrected for those that lie in others' reach, or for holes hit more than once;
        None where nothing is known of either.
    eyes : Eyes or None
        Of the null that `simulated`, `tests` and `beyond` were drawn from: how near two may lie to
        be seen as one; None for plain chance, as with tables.
    plain : PlainTests or None
        What plain chance gives beside it; None where there are no eyes.
    trust : Trust or None
        What it would take to overturn the verdict, and how likely that is; None without points, and
        with more than a million.
    """

    name: str
    n: int
    unit: Unit | None
    area: float | None
    pattern: Pattern | None
    counts: QuadratCounts
    expected: NDArray[np.float64]
    residuals: NDArray[np.float64]
    dispersion_whole: Dispersion | None
    dispersion_all: Dispersion
    simulated: SimulatedTest
    density: Limits | None
    poisson: PoissonFit | None
    verdict: Verdict
    sentence: str
    detectable: tuple[float, float]
    flags: tuple[str, ...]
    flag_values: dict[str, Any]
    seed: int
    settings: dict[str, Any]
    blocks: Blocks | None = None
    negative_binomial: NegativeBinomialFit | None = None
    clumped_mean: ClumpedLimits | None = None
    clumped_density: ClumpedLimits | None = None
    trend: Trends | None = None
    verdict_before: Verdict | None = None
    tests: GlobalTests | None = None
    holm: HolmFamily | None = None
    beyond: GlobalTests | None = None
    beyond_holm: HolmFamily | None = None
    shown: WouldShow | None = None
    spot_check: SpotCheck | None = None
    crowding: Crowding | None = None
    eyes: Eyes | None = None
    plain: PlainTests | None = None
    trust: Trust | None = None

    def __post_init__(self) -> None:
        hold_columns(self, ("expected", "residuals"), length=len(self.counts))

    def __repr__(self) -> str:
        return f"<Findings {self.name}: {self.verdict}, {self.n} in {len(self.counts)} quadrats>"

    @property
    def flag_sentences(self) -> tuple[str, ...]:
        """The flags as sentences."""
        return flag_sentences(self.flags, self.flag_values)

    @property
    def rests_on(self) -> str:
        """What the verdict rests on, in words."""
        if self.verdict == "too few to tell":
            return "the numbers of points and quadrats alone: too few for a test"
        return (
            f"simulated two-sided p of X2 over all {len(self.counts)} quadrats,"
            f" expected counts by area, given the total{rests_words(self.eyes)}"
        )
