"""What planted objects say of how much the detector misses: a sentence, and numbers for tables."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING

from detect.files import Cell
from detect.missed import Z, wilson

if TYPE_CHECKING:
    from analyse.pattern import Pattern

_RECALL = "planted objects (Stetson 1987), weighted by 1 over the chance found (Horvitz and Thompson 1952)"
_BLIND = (
    "pairs of planted objects, half of a logistic curve with a ceiling (Wichmann and Hill 2001)"
)
_SHARE = "share of planted objects found again, Wilson (1927) limits"


def planted_sentence(pattern: Pattern | None) -> str:
    """Say what share of copies was found, and how near two may lie to be seen as one.

    Parameters
    ----------
    pattern : Pattern or None
        With what planted objects showed, if they were set; None for a table of counts.

    Returns
    -------
    str
        Empty where none were set.
    """
    planted = None if pattern is None else pattern.planted
    if pattern is None or planted is None:
        return ""
    said = []
    if planted.recall is not None:
        share, low, high = (
            100 * value for value in (planted.recall.value, planted.recall.low, planted.recall.high)
        )
        said.append(
            f"Of {planted.copies:,} copies of its own spots set into the photograph,"
            f" {planted.found:,} were found again. Some were made smaller and fainter, or set"
            " nearer to others, than its spots are, so the share found of its objects is another:"
            " with each spot given the chance of copies of its own size, contrast and nearness to"
            f" others, it is {share:.0f} % (95 % limits {low:.0f} to {high:.0f} %), for objects"
            " that look like those found."
        )
    if planted.blind is not None:
        said.append(
            f"Two closer than {planted.blind.value:.2f} of their radii's sum are mostly seen as"
            f" one{_in_unit(pattern)}."
        )
    if planted.note:
        said.append(planted.note)
    return " ".join(said)


def planted_cells(pattern: Pattern | None) -> list[Cell]:
    """Return the cells of the summary: recall, its limits, blind distance in radii and in mm.

    Parameters
    ----------
    pattern : Pattern or None
        None for a table of counts.

    Returns
    -------
    list
        Of 5 cells, empty where not measured.
    """
    planted = None if pattern is None else pattern.planted
    if pattern is None or planted is None:
        return [None] * 5
    seen = planted.recall
    recall: list[Cell] = [None] * 3 if seen is None else [seen.value, seen.low, seen.high]
    blind = None if planted.blind is None else planted.blind.value
    return [*recall, blind, pattern.blind if pattern.unit == "mm" else None]


def planted_rows(pattern: Pattern | None) -> Iterator[list[Cell]]:
    """Yield the rows of the table of statistics, without the photograph.

    Parameters
    ----------
    pattern : Pattern or None
        None for a table of counts.

    Yields
    ------
    list
        Statistic, value, limits, no p, method, number of copies or pairs, notes.
    """
    planted = None if pattern is None else pattern.planted
    if planted is None:
        return
    note = f"{planted.rounds} rounds, seed {planted.seed}"
    seen = planted.recall
    if seen is not None:
        said = f"limits at 95 %; {planted.found} of {planted.copies} copies found; {note}"
        row: list[Cell] = ["planted_recall", seen.value, seen.low, seen.high]
        yield [*row, None, _RECALL, planted.copies, said]
    for name, table in (
        ("radius_px", planted.by_radius_px),
        ("contrast", planted.by_contrast),
        ("separation", planted.by_separation),
    ):
        for share in (share for share in table if share.copies):
            value = share.found / share.copies
            limits = wilson(value, share.copies)
            upper = "on" if share.high == math.inf else f"to {share.high:.4g}"
            said = f"{name} from {share.low:.4g} {upper}; {note}"
            yield [f"planted_by_{name}", value, *limits, None, _SHARE, share.copies, said]
    if planted.blind is not None:
        value, half = planted.blind.value, Z * planted.blind.standard_error
        said = f"sums of both radii; {planted.pairs_as_two} of {planted.pairs} pairs seen as two"
        row = ["blind_distance", value, max(0.0, value - half), value + half]
        yield [*row, None, _BLIND, planted.pairs, f"{said}; {note}"]


def _in_unit(pattern: Pattern) -> str:
    """Return the blind distance of usual spots as a length, in brackets."""
    if math.isnan(pattern.blind):
        return ""
    return f" ({pattern.blind:.3g} {pattern.unit} between usual spots)"
