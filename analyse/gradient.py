"""What is left of a pattern beyond its gradient, in words."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from analyse.departures import Departure, clearest, length_words
from analyse.verdict import LEVEL, Verdict, p_text

if TYPE_CHECKING:
    from analyse.trends import Trends

_TOLD = {"clumped": "clumped", "more": "clumped", "even": "evenly spaced", "less": "evenly spaced"}


def gradient_remark(
    verdict: Verdict,
    trends: Trends,
    before: Sequence[Departure],
    beyond: Sequence[Departure],
    unit: str,
) -> str:
    """Name a gradient, and say what is left of the pattern beyond it.

    Parameters
    ----------
    verdict : str
        On the quadrats as asked.
    trends : Trends
        Those that were tried, one of which stands out.
    before, beyond : sequence of Departure
        Of the tests over sides and distances, against points placed at random, and against points
        placed at random along the gradient; empty where nothing but counts is known.
    unit : {"mm", "px"}
        Of lengths.

    Returns
    -------
    str
        One sentence.

    Raises
    ------
    ValueError
        If no trend stands out.

    Notes
    -----
    A gradient explains the quadrats where their X2 with expected counts along it is no longer
    outside what chance gives, and no test over sides and distances departs from points placed at
    random along it.

    Examples
    --------
    >>> import numpy as np
    >>> from analyse.findings import analyse_points
    >>> points = 100 * np.random.default_rng(2).random((150, 2)) ** [0.5, 1.0]
    >>> found = analyse_points(points, (0, 0, 100, 100), simulations=99)
    >>> print(gradient_remark("clumped", found.trend, [], [], "mm"))
    The density rises towards the right (p < 0.001, allowing for clumping), and this gradient explains what the quadrats show.
    """
    gradient = trends.clearest
    if gradient is None:
        raise ValueError("no gradient was found, so there is none to tell of")
    p = p_text(min(trends.adjusted))
    start = f"The density rises towards {gradient.direction} ({p}, allowing for clumping)"
    left = [each for each in beyond if each.direction is not None]
    if left:
        return f"{start}; beyond this gradient {_left_words(verdict, clearest(left), unit)}."
    counts = trends.beyond
    if counts is not None and counts.p_two_sided <= LEVEL:
        more = "more" if counts.p_clumped < counts.p_even else "less"
        still = "still " if verdict == _TOLD[more] else ""
        return (
            f"{start}; beyond this gradient the counts {still}vary {more} than chance would give"
            f" ({p_text(counts.p_two_sided)})."
        )
    return f"{start}{_explained(verdict, before)}."


def _explained(verdict: Verdict, before: Sequence[Departure]) -> str:
    """Say what a gradient explains, where nothing is left beyond it."""
    if verdict == "clumped":
        return ", and this gradient explains what the quadrats show"
    if verdict == "evenly spaced":
        return "; beyond this gradient no departure from random was found"
    if any(each.direction for each in before):
        return ", and this gradient explains what is seen over sides and distances"
    return ", a slow change that quadrats compared as a whole do not show"


def _left_words(verdict: Verdict, most: Departure, unit: str) -> str:
    """Say what is left beyond a gradient, and where most."""
    place = f"in quadrats of {length_words(most.at, unit)}"
    if most.name != "vmr_by_side":
        place = f"nearer than {length_words(most.at, unit)}"
    still = "still " if verdict == _TOLD[most.direction or ""] else ""
    left = (
        f"there is {still}clumping" if most.direction == "clumped" else f"spots {still}lie evenly"
    )
    return f"{left}, most {place} (adjusted {p_text(most.adjusted)})"
