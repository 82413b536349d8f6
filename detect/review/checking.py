"""How a spot check goes on the page: what is drawn, what is marked already, what it says in the end."""

from __future__ import annotations

import uuid
from typing import Any, Protocol

from detect.amendments import load_json
from detect.errors import AmendmentRefused
from detect.review.asking import Wrong
from detect.review.record import Answer, Record
from detect.sheet import Amendment, Sheet
from detect.spot_check import Checked, Draw, latest_spot_check


class SpotChecker(Protocol):
    """What draws quadrats and judges what was marked in them; `detect` knows no statistics."""

    def draw(self, state: Sheet) -> Draw:
        """Draw quadrats over a photograph as it stands."""

    def result(self, sheet: Sheet, amendments: list[Amendment]) -> dict[str, Any] | None:
        """Return what a finished spot check says, as plain values."""


def asked_draw(body: bytes) -> tuple[str, bool]:
    """Read who asks for a draw, and whether for a new one though one is finished."""
    try:
        values = load_json(body)
    except ValueError as trouble:
        raise Wrong(400, "json", "The request is no JSON; nothing was drawn.") from trouble
    sound = isinstance(values, dict) and values.keys() <= {"who", "again"}
    who = values.get("who") if sound else None
    again = values.get("again", False) if sound else None
    if not (isinstance(who, str) and who.strip()) or not isinstance(again, bool):
        raise Wrong(400, "request", "The request must hold who, and may hold again; no draw.")
    return who, again


def drawn(record: Record, checker: SpotChecker, who: str, *, again: bool) -> Answer | None:
    """Draw quadrats for a spot check, unless one is under way, or finished and not asked for again.

    Returns
    -------
    Answer or None
        Of the change in the log; None where nothing was drawn.

    Raises
    ------
    AmendmentRefused
        If the draw cannot be written down.
    """
    with record.lock:
        record.refresh()
        known = _known(record)
        if known is not None and not (again and known.is_done):
            return None
        draw = checker.draw(record.amended.state())
        values = {"what": "spot_check_drawn", "draw": draw.as_dict()}
        answer = record.amend([{"id": str(uuid.uuid4()), "who": who, **values}])
        if answer.refused:
            raise AmendmentRefused(answer.refused[0].message)
        return answer


def told(record: Record, checker: SpotChecker) -> dict[str, Any]:
    """Return the spot check of a sheet as the page shows it: no count and no stratum before its end."""
    with record.lock:
        record.refresh()
        known, amended = _known(record), record.amended
        sheet, log = amended.sheet, list(amended.log)
    if known is None:
        return {"draw": None, "result": None}
    quadrats = []
    for each in known.draw.quadrats:
        seen = known.marked.get(each.quadrat)
        marks = None if seen is None or seen.marks is None else seen.marks.tolist()
        quadrats.append(
            {
                "quadrat": each.quadrat,
                "outline": dict(each.outline),
                "count": None if seen is None else seen.count,
                "marks": marks,
            }
        )
    return {
        "draw": {"id": known.id, "all": sum(known.draw.sizes), "quadrats": quadrats},
        "result": checker.result(sheet, log) if known.is_done else None,
    }


def _known(record: Record) -> Checked | None:
    """Return the spot check that stands."""
    return latest_spot_check(record.amended.log, record.amended.active)
