"""Through whose eyes are counts judged, and what would plain chance say."""

from __future__ import annotations

import math
import zlib
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from scipy import special

from analyse.count_chance import SimulatedTest
from analyse.errors import TooCrowded
from analyse.eyes import CONTACT, Eyes, expected_pairs, known_radii, near_pairs
from analyse.nulls import Null
from analyse.pattern import Pattern
from analyse.quadrats import QuadratCounts
from analyse.seen_counts import seen_p
from analyse.seen_randomness import SeenRandomness
from analyse.verdict import LEVEL, Verdict, decide, p_text

if TYPE_CHECKING:
    from analyse.global_tests import GlobalTests
    from analyse.holm import HolmFamily

_SOURCES = {
    "planted": "measured with planted objects",
    "default": "the usual one, not measured in this photograph",
    "person": "assumed of the person who checked it",
}
_SEES = {"planted": "a detector", "default": "a detector", "person": "an eye"}


@dataclass(frozen=True, slots=True, eq=False)
class PlainTests:
    """What the plain null gives, beside the one that has eyes.

    Parameters
    ----------
    verdict : str
        On the quadrats, had it rested on it.
    simulated : SimulatedTest
        X2 of the quadrats.
    tests : GlobalTests or None
        Over all sides and distances; None with fewer than 10 points.
    holm : HolmFamily or None
        Their adjusted p.

    Examples
    --------
    >>> even = SimulatedTest(4.0, 1.0, 0.01, 0.02, 99)
    >>> PlainTests("evenly spaced", even).simulated.p_two_sided
    0.02
    """

    verdict: Verdict
    simulated: SimulatedTest
    tests: GlobalTests | None = None
    holm: HolmFamily | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Seeing:
    """The counts of a pattern, judged with the eyes that counted it.

    Parameters
    ----------
    eyes : Eyes or None
        Of the null that the verdict rests on; None where that is plain chance.
    simulated : SimulatedTest
        Of that null.
    plain : SimulatedTest
        Of plain chance; the same where there are no eyes.
    too_crowded : bool
        Whether eyes are known, but so many spots can hardly be told apart at random.
    """

    eyes: Eyes | None
    simulated: SimulatedTest
    plain: SimulatedTest
    too_crowded: bool = False

    @property
    def flags(self) -> tuple[str, ...]:
        """Reasons for care, names in `analyse.flags.FLAGS`."""
        source = None if self.eyes is None else self.eyes.source
        raised = {
            "usual_blind": source == "default",
            "person_blind": source == "person",
            "contact": source == "contact",
            "crowded_null": self.too_crowded,
        }
        return tuple(name for name, known in raised.items() if known)


def seen_null(pattern: Pattern, eyes: Eyes, base: Null | None = None) -> Null:
    """Return random objects of a pattern's sizes as seen by eyes.

    Parameters
    ----------
    pattern : Pattern
        With radii.
    eyes : Eyes
        How near two may lie to be seen as one, or to lie at all.
    base : Null or None
        The law of their places; None for complete spatial randomness.

    Returns
    -------
    Null

    Examples
    --------
    >>> pattern = Pattern.of([[1, 2], [5, 5]], (0, 0, 10, 10), radius=[1.0, 1.0])
    >>> seen_null(pattern, Eyes(0.6, 0.1, math.nan, "default")).name
    'complete spatial randomness, as the detector sees it'
    """
    return SeenRandomness(pattern.area, known_radii(pattern), eyes, base)


def judge_seen(
    pattern: Pattern | None,
    counts: QuadratCounts,
    plain: SimulatedTest,
    *,
    seed: int,
    simulations: int,
    workers: int = 1,
) -> Seeing:
    """Judge counts in quadrats with the eyes that counted the pattern.

    Parameters
    ----------
    pattern : Pattern or None
        The points; None for a table of counts, which tells nothing of eyes.
    counts : QuadratCounts
        Their counts, in a grid.
    plain : SimulatedTest
        What plain chance gives.
    seed : int
        Seed of the simulations, 0 or more; with the pattern's name it fixes the result.
    simulations : int
        How many.
    workers : int
        How many processes may share them.

    Returns
    -------
    Seeing

    Notes
    -----
    Where the counts are more even than chance with eyes (or, for tables with radii, than plain
    chance) gives, and spots overlap more rarely than they would (Poisson, lower tail of 5 %), they are
    judged once more, against discs that cannot overlap. If that null is not rejected, the verdict
    rests on it: the spacing is one by contact.

    Examples
    --------
    >>> plain = SimulatedTest(4.0, 0.97, 0.04, 0.08, 99)
    >>> from analyse.quadrats import QuadratCounts
    >>> counts = QuadratCounts([2, 1, 2, 1], None, [True] * 4)
    >>> judge_seen(None, counts, plain, seed=1, simulations=99).eyes is None
    True
    """
    n, grid = int(counts.counts.sum()), counts.grid
    if pattern is None or grid is None or decide(n, len(counts), plain) == "too few to tell":
        return Seeing(None, plain, plain)

    def against(eyes: Eyes) -> SimulatedTest:
        return seen_p(
            counts.counts,
            grid,
            seen_null(pattern, eyes),
            simulations=simulations,
            seed=own_seed(seed, f"{pattern.name}, seen, {eyes.source}"),
            workers=workers,
        )

    seeing, eyes = Seeing(None, plain, plain), Eyes.of(pattern)
    if eyes is not None:
        try:
            seeing = Seeing(eyes, against(eyes), plain)
        except TooCrowded:
            return replace(seeing, too_crowded=True)
    if decide(n, len(counts), seeing.simulated) != "evenly spaced":
        return seeing
    contact = Eyes(CONTACT, 0.0, math.nan if eyes is None else eyes.recall, "contact")
    if avoids_overlap(pattern, 0.0 if eyes is None else eyes.blind):
        try:
            judged = against(contact)
        except TooCrowded:
            return seeing
        if decide(n, len(counts), judged) != "evenly spaced":
            return replace(seeing, eyes=contact, simulated=judged)
    return seeing


def avoids_overlap(pattern: Pattern, blind: float) -> bool:
    """Tell whether spots overlap more rarely than those of their sizes would at random.

    Parameters
    ----------
    pattern : Pattern
        With radii.
    blind : float
        Sums of both radii nearer than which none can be seen as two.

    Returns
    -------
    bool
        Whether so few pairs nearer than touching would be seen in at most 5 % of random patterns
        (Poisson law of the number of close pairs).

    Examples
    --------
    >>> lattice = [(x + 0.5, y + 0.5) for x in range(9) for y in range(9)]
    >>> avoids_overlap(Pattern.of(lattice, (0, 0, 9, 9), radius=[0.5] * 81), 0.0)
    True
    """
    if not known_radii(pattern).size or blind >= CONTACT:
        return False
    expected = expected_pairs(pattern, CONTACT) - expected_pairs(pattern, blind)
    seen = near_pairs(pattern.points, pattern.radius, CONTACT)
    return bool(special.pdtr(seen, expected) <= LEVEL)


def eyes_sentence(verdict: Verdict, plain: Verdict, seeing: Seeing) -> str:
    """Say what the eyes make of a verdict, where plain chance would have given another.

    Parameters
    ----------
    verdict : str
        As it is.
    plain : str
        Had it rested on plain chance.
    seeing : Seeing
        What both rest on.

    Returns
    -------
    str
        Empty where both agree or there are no eyes.

    Examples
    --------
    >>> even, fair = SimulatedTest(4.0, 1.0, 0.01, 0.02, 99), SimulatedTest(4.0, 0.8, 0.2, 0.4, 99)
    >>> seeing = Seeing(Eyes(0.6, 0.1, math.nan, "planted"), fair, even)
    >>> print(eyes_sentence("no departure from random found", "evenly spaced", seeing))
    The plain test would call this even (p = 0.020); a detector that sees touching spots as one ...
    """
    eyes = seeing.eyes
    if seeing.too_crowded and plain == "evenly spaced":
        return (
            "So many spots of these sizes could hardly be told apart if they lay at random: that they"
            " are may itself be why the counts are so even."
        )
    if eyes is None or verdict == plain:
        return ""
    judged = p_text(seeing.plain.p_two_sided)
    if eyes.source == "contact":
        return (
            f"The plain test would call this even ({judged}); spots that cannot overlap lie so even"
            " if they are placed at random: this is a minimum spacing by contact, not even spacing."
        )
    if plain == "evenly spaced":
        return (
            f"The plain test would call this even ({judged}); {_SEES[eyes.source]} that sees"
            " touching spots as one makes random look so."
        )
    if plain == "clumped":
        return (
            f"The plain test would call this clumped ({judged}), but only just: seen as one where"
            " they touch, random spots give it as well."
        )
    return (
        f"The plain test would not show it ({judged}); seen as one where they touch, spots look less"
        " clumped than they are."
    )


def rests_words(eyes: Eyes | None) -> str:
    """Say which null a verdict rests on, to follow on the name of its test; empty for plain chance.

    Examples
    --------
    >>> print(rests_words(Eyes(0.9, 0.0, math.nan, "contact")))
    , against random spots of the sizes seen that cannot lie nearer than 0.90 of their radii's sum
    """
    if eyes is None:
        return ""
    if eyes.source == "contact":
        return (
            f", against random spots of the sizes seen that cannot lie nearer than {eyes.blind:.2f} of"
            " their radii's sum"
        )
    return (
        ", against random spots of the sizes seen of which two nearer than"
        f" {eyes.blind:.2f} (standard error {eyes.blind_se:.2f}) of their radii's sum are seen as one:"
        f" {_SOURCES[eyes.source]}"
    )


def own_seed(seed: int, name: str) -> int:
    """Return the seed of one photograph's simulations, which no other one shares.

    Examples
    --------
    >>> own_seed(1, "dish.jpg") != own_seed(1, "leaf.jpg")
    True
    """
    return (seed << 32) + zlib.crc32(name.encode("utf-8"))
