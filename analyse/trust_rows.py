"""What the tables say of how far to trust a result, and the list of spots to look at first."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

from detect.files import Cell, csv_text

if TYPE_CHECKING:
    from analyse.findings import Findings

TRUST_SUMMARY_COLUMNS = [
    "false_to_change",
    "missed_to_change",
    "errors_to_change",
    "verdict_stands",
    "expected_false",
    "expected_missed",
    "recall_used",
    "recall_source",
    "count_under_doubt",
    "count_low",
    "count_high",
    "density_under_doubt",
    "density_under_doubt_low",
    "density_under_doubt_high",
    "vmr_under_doubt",
    "vmr_under_doubt_low",
    "vmr_under_doubt_high",
    "look_first",
]
LOOK_COLUMNS = ["photograph", "order", "spot", "x", "y", "unit", "doubt", "influence", "decides"]
LISTED = 10  # spots of each photograph, or as many as decide
_WORST = "smallest number that changes the verdict, wherever they lie (exact for separable X2, Gross 1956; Bellman 1957)"
_DRAWS = "draws of detection error: doubts and recall with a common error a photograph"


def trust_cells(findings: Findings) -> list[Cell]:
    """Return the cells of the summary, as `TRUST_SUMMARY_COLUMNS`.

    Parameters
    ----------
    findings : Findings
        Of one photograph or table.

    Returns
    -------
    list of cells
        Empty ones for what is not known; all of them without points.
    """
    trust = findings.trust
    if trust is None:
        return [None] * len(TRUST_SUMMARY_COLUMNS)
    breaking, doubt = trust.breaking, trust.doubt
    cells: list[Cell] = [breaking.false, breaking.missed, breaking.either]
    if doubt is None:
        return cells + [None] * (len(TRUST_SUMMARY_COLUMNS) - len(cells))
    cells += [doubt.stands, doubt.false, doubt.missed]
    cells += [None if doubt.recall is None else doubt.recall.value, doubt.source]
    for limits in (doubt.count, doubt.density, doubt.vmr):
        cells += [None] * 3 if limits is None else [limits.value, limits.low, limits.high]
    return [*cells, None if trust.look is None else trust.look.decisive]


def trust_rows(findings: Findings) -> Iterator[list[Cell]]:
    """Yield the rows of tests.csv, without the photograph.

    Parameters
    ----------
    findings : Findings
        Of one photograph or table.

    Yields
    ------
    list
        Statistic, value, limits, no p, method, number, notes.
    """
    trust = findings.trust
    if trust is None:
        return
    n = trust.breaking.n
    note = "of the quadrat test" if trust.breaking.exact else "of the quadrat test; a lower bound"
    for name, value in (
        ("false_to_change", trust.breaking.false),
        ("missed_to_change", trust.breaking.missed),
        ("errors_to_change", trust.breaking.either),
    ):
        if value is not None:
            yield [name, value, None, None, None, _WORST, n, note]
    doubt = trust.doubt
    if doubt is None:
        return
    note = f"{doubt.draws} draws, seed {findings.seed}; recall {doubt.source}"
    yield ["verdict_stands", doubt.stands, None, None, None, _DRAWS, n, note]
    of = {
        "count_under_doubt": (doubt.count, "detection error"),
        "density_under_doubt": (doubt.density, "per cm2; errors of detection, sampling and scale"),
        "vmr_under_doubt": (doubt.vmr, "X2/df of all quadrats; errors of detection and sampling"),
        "recall_used": (doubt.recall, "share of the objects that is found"),
    }
    for name, (limits, what) in of.items():
        if limits is not None:
            row: list[Cell] = [name, limits.value, limits.low, limits.high]
            yield [*row, None, _DRAWS, n, f"limits at {100 * limits.level:g} %: {what}; {note}"]
    if trust.look is not None:
        method = "doubt times influence, until the plausible number of false spots cannot change it"
        yield ["look_first", trust.look.decisive, None, None, None, method, n, "spots"]


def look_first_csv(findings: Sequence[Findings]) -> str:
    """Return the spots to look at first, of every photograph, as CSV.

    Parameters
    ----------
    findings : sequence of Findings
        One per photograph or table.

    Returns
    -------
    str
        Of each photograph as many as decide, or the first 10; none of those a person has checked.
        ``spot`` is the id in the table of points, empty for a table.
    """
    return csv_text(LOOK_COLUMNS, (row for each in findings for row in _look_rows(each)), digits=6)


def _look_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the spots of one photograph."""
    look = None if each.trust is None else each.trust.look
    pattern = each.pattern
    if look is None or pattern is None:
        return
    for rank, k in enumerate(look.order[: max(look.decisive, LISTED)].tolist(), start=1):
        name = pattern.spots[k] if pattern.spots else None
        x, y = pattern.points[k].tolist()
        about = [pattern.doubt[k], look.influence[k], rank <= look.decisive]
        yield [each.name, rank, name, x, y, pattern.unit, *about]
