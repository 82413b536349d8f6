"""What people did to a photograph's spots, and what became of the verdict: a sentence, and cells."""

from __future__ import annotations

from typing import TYPE_CHECKING

from analyse.wording import several
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.findings import Findings
    from detect.changes import Changes

REVIEW_SUMMARY_COLUMNS = ["reviewed_by", "placed", "struck", "moved", "verdict_before_review"]


def review_cells(findings: Findings) -> list[Cell]:
    """Return the cells of the summary: who marked it as checked, what was changed, what it said before.

    Parameters
    ----------
    findings : Findings
        Of a photograph; all cells of a table are empty.

    Returns
    -------
    list of cells
        As `REVIEW_SUMMARY_COLUMNS`. `reviewed_by` is empty unless the photograph is marked as checked
        as it stands; the verdict before is empty where nobody has changed or marked anything.
    """
    changes = None if findings.pattern is None else findings.pattern.changes
    if changes is None:
        return [None] * len(REVIEW_SUMMARY_COLUMNS)
    return [
        changes.checked_by if changes.is_checked else None,
        changes.placed,
        changes.struck,
        changes.moved,
        findings.verdict_before,
    ]


def review_sentence(findings: Findings) -> str:
    """Say who checked the spots, what was changed, and what the verdict was before.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    str
        Empty for a table, and for a photograph that nobody has touched.
    """
    changes = None if findings.pattern is None else findings.pattern.changes
    if changes is None or changes.state == "new":
        return ""
    return " ".join([_mark(changes), _changed(changes), _verdicts(findings)]).strip()


def _mark(changes: Changes) -> str:
    """Say whether the photograph is marked as checked, by whom and when."""
    if changes.is_checked:
        return f"Marked as checked by {changes.checked_by} on {_day(changes)}."
    if changes.state == "changed_since_checked":
        return f"In review: changed since {changes.checked_by} marked it as checked on {_day(changes)}."
    return "In review: not marked as checked."


def _changed(changes: Changes) -> str:
    """Say what was changed in sum, and by whom."""
    done = [
        f"{several(count, 'spot')} {word}"
        for count, word in (
            (changes.placed, "placed"),
            (changes.struck, "struck"),
            (changes.moved, "moved"),
            (changes.resized, "resized"),
        )
        if count
    ]
    done += ["the study area drawn anew"] if changes.area_changed else []
    done += ["the scale measured anew"] if changes.scale_changed else []
    if not done:
        return "Nothing that counts was changed."
    listed = done[0] if len(done) == 1 else f"{', '.join(done[:-1])} and {done[-1]}"
    return f"{listed[0].upper()}{listed[1:]}, by {_names(changes.people)}."


def _verdicts(findings: Findings) -> str:
    """Set the verdict beside that of the spots as detected."""
    before = findings.verdict_before
    if before is None:
        return ""
    if before == findings.verdict:
        return f"Before the review the verdict was the same ({before})."
    return f"The verdict has changed through the review: before it was {before}."


def _day(changes: Changes) -> str:
    """Return the day of the mark."""
    return str(changes.checked_at)[:10]


def _names(people: tuple[str, ...]) -> str:
    """Return names as a list in words."""
    return people[0] if len(people) == 1 else f"{', '.join(people[:-1])} and {people[-1]}"
