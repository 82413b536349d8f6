"""What the tables say of counts corrected for crowding, beside the count itself."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING

from analyse.crowding import Crowding
from analyse.density import Limits
from analyse.positive_holes import positive_hole
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.said import Findings

CROWDING_SUMMARY_COLUMNS = [
    "count_crowding_corrected",
    "count_crowding_low",
    "count_crowding_high",
    "crowding_by",
]
_PATCHES = "clumps of objects, to the second order (Armitage 1949)"
_HOLES = "positive holes (Andersen 1958; Macher 1989), binomial limits (Clopper and Pearson 1934)"


def crowding_cells(findings: Findings) -> list[Cell]:
    """Return the cells of the summary: corrected count, its limits, by which law.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of cells
        As `CROWDING_SUMMARY_COLUMNS`; empty where nothing is known of crowding. Where it is too
        crowded to tell, only the last is filled.
    """
    seen = findings.crowding
    if seen is None:
        return [None] * len(CROWDING_SUMMARY_COLUMNS)
    return [*_three(seen.corrected), seen.by]


def crowding_rows(findings: Findings) -> Iterator[list[Cell]]:
    """Yield the rows of the table of statistics, without the photograph.

    Parameters
    ----------
    findings : Findings

    Yields
    ------
    list
        Statistic, value, limits, no p, method, what was counted, notes.
    """
    seen = findings.crowding
    if seen is None:
        return
    method = _PATCHES if seen.by == "patches" else _HOLES
    note = f"limits at 95 %; {_about(seen)}"
    row: list[Cell] = ["count_crowding_corrected", *_three(seen.corrected), None, method]
    yield [*row, seen.counted, note]
    for number, (filled, limits) in enumerate(seen.parts, start=1):
        row = [f"positive_hole_{number}", *_three(limits), None, method, filled]
        yield [*row, f"limits at 95 %; plate {number}; {seen.holes} holes"]


def _about(seen: Crowding) -> str:
    """Say what the correction rests on."""
    if seen.by == "holes":
        filled = f"all filled: {positive_hole(seen.holes, seen.holes):.6g}"
        return f"{seen.holes} holes on a plate ({filled})"
    if seen.corrected is None:
        return "too crowded to be corrected: more than 0.5 others within reach of each"
    return f"{seen.neighbours:.3g} others within reach of each, by the pairs just beyond"


def _three(limits: Limits | None) -> list[Cell]:
    """Return a number with its limits; empty cells where there is none."""
    if limits is None:
        return [None] * 3
    return [limits.value, limits.low, limits.high if math.isfinite(limits.high) else None]
