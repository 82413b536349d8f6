"""In which shape a sheet, its changes and its troubles are told to the page."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.amended import Amended
from detect.amendment import Amendment
from detect.area import StudyArea
from detect.changes import STATES, Changes
from detect.errors import DetectError, LogCorrupt, LogNewer
from detect.overlay import DOUBTFUL
from detect.review.fit import usual_radius
from detect.review.pictures import PhotographMissing, goes_whole
from detect.review.pyramid import TILE, levels
from detect.review.record import Record, changed_kinds
from detect.scale import Scale
from detect.sheet import Sheet

_SHOWN = ("x", "y", "radius", "doubt", "found", "counted")


class Shapes:
    """How things are told to the page."""

    def sheet(self, record: Record) -> dict[str, Any]:
        """Return the whole state of a sheet."""
        with record.lock:
            amended, state = record.amended, record.amended.state()
            return {
                "id": record.id,
                "photograph": state.photograph.name,
                "generation": record.generation,
                "revision": record.revision,
                "width": state.photograph.width,
                "height": state.photograph.height,
                "picture": picture(record, state),
                "spots": _columns(state, changed_kinds(record)),
                "area": area(amended.area, amended),
                "scale": scale(amended.scale, amended),
                "usual_radius": usual_radius(state.spots, looked_for(state)),
                "doubtful_above": DOUBTFUL,
                "review": review(record.changes()),
                "notes": [
                    {name: getattr(each, name) for name in ("id", "time", "who", "text", "spot")}
                    for each in amended.log
                    if each.what == "note" and amended.active[each.id]
                ],
                "history": [
                    {
                        "revision": number,
                        **{name: getattr(each, name) for name in ("id", "what", "who", "time")},
                        "of": each.of,
                        "active": amended.active[each.id],
                    }
                    for number, each in enumerate(amended.log, start=1)
                ],
                "notices": _notices(record),
            }

    def row(self, record: Record) -> dict[str, Any]:
        """Return the line of a sheet in the queue; of one that cannot be read its trouble."""
        try:
            with record.lock:
                record.refresh()
                changes, state = record.changes(), record.amended.state()
        except DetectError as trouble:
            return {
                "id": record.id,
                "photograph": record.path.name,
                "trouble": self.trouble(trouble),
            }
        counted = state.spots.counted
        return {
            "id": record.id,
            "photograph": state.photograph.name,
            **review(changes),
            "spots": len(state.spots),
            "counted": int(counted.sum()),
            "doubtful": int((counted & (state.spots.doubt > DOUBTFUL)).sum()),
            "trouble": None,
        }

    def changes(self, record: Record, after: int, upto: int) -> list[dict[str, Any]]:
        """Return the changes of some revisions, each with its spots as they are now."""
        with record.lock:
            log = record.amended.log[after:upto]
            counted = review(record.changes())
            return [
                self._change(record, each, number, counted)
                for number, each in enumerate(log, start=after + 1)
            ]

    def _change(
        self, record: Record, amendment: Amendment, number: int, counted: dict[str, Any]
    ) -> dict[str, Any]:
        amended = record.amended
        touched = record.touched(amendment)
        told: dict[str, Any] = {
            "revision": number,
            "amendment": amendment.as_dict(),
            "active": amended.active[amendment.id],
            "spots": [_spot(record, name) for name in touched if name in amended],
            "gone": [name for name in touched if name not in amended],
            "review": counted,
        }
        cause = amendment if amendment.of is None else amended.at_id[amendment.of]
        if cause.what == "set_area":
            told["area"] = area(amended.area, amended)
        if cause.what == "set_scale":
            told["scale"] = scale(amended.scale, amended)
        return told

    def trouble(self, trouble: DetectError) -> dict[str, str]:
        """Return a trouble as code and sentence."""
        code = "sheet_unreadable"
        if isinstance(trouble, LogCorrupt):
            code = "log_corrupt"
        elif isinstance(trouble, LogNewer):
            code = "log_newer"
        elif isinstance(trouble, PhotographMissing):
            code = "photograph_missing"
        return {"code": code, "message": str(trouble)}


def review(changes: Changes) -> dict[str, Any]:
    """Return what changes come to."""
    return {
        "state": changes.state,
        "said": STATES[changes.state],
        "checked_by": changes.checked_by,
        "checked_at": changes.checked_at,
        "people": list(changes.people),
        "placed": changes.placed,
        "struck": changes.struck,
        "moved": changes.moved,
        "resized": changes.resized,
        "area_changed": changes.area_changed,
        "scale_changed": changes.scale_changed,
        "notes": changes.notes,
    }


def area(study: StudyArea, amended: Amended) -> dict[str, Any]:
    """Return a study area and whether a person drew it."""
    return {**study.as_dict(), "changed": study is not amended.sheet.area}


def scale(known: Scale | None, amended: Amended) -> dict[str, Any] | None:
    """Return a scale as it is in the middle of the area, and the line a person drew for it."""
    if known is None:
        return None
    middle = amended.area.polygon.centroid
    drawn = [each for each in amended.log if each.line and amended.active[each.id]]
    return {
        "source": known.source,
        "note": known.note,
        "mm_per_px": float(known.mm_per_px([[middle.x, middle.y]])[0]),
        "relative_uncertainty": known.relative_uncertainty,
        "line": [*drawn[-1].line, drawn[-1].mm] if drawn else None,
        "changed": known is not amended.sheet.scale,
    }


def picture(record: Record, sheet: Sheet) -> dict[str, Any]:
    """Return in which form the photograph is to be had."""
    base = f"api/sheets/{record.id}"
    width, height = sheet.photograph.width, sheet.photograph.height
    if goes_whole(sheet):
        return {"kind": "whole", "url": f"{base}/picture"}
    sizes = [each.as_dict() for each in levels(width, height)]
    return {"kind": "tiles", "url": f"{base}/tiles", "tile": TILE, "levels": sizes}


def looked_for(sheet: Sheet) -> tuple[float, float] | None:
    """Return the range of diameters that was looked for, in pixels, where the sheet tells it."""
    try:
        smallest, largest = sheet.settings["detector"]["diameter_px"]
        return float(smallest), float(largest)
    except (KeyError, TypeError, ValueError):
        return None


def _columns(sheet: Sheet, kinds: Sequence[str | None]) -> dict[str, Any]:
    """Return spots as columns."""
    spots = sheet.spots
    columns: dict[str, Any] = {"id": list(spots.id)}
    for name in _SHOWN:
        column: NDArray[Any] = getattr(spots, name)
        columns[name] = (np.round(column, 4) if column.dtype == np.float64 else column).tolist()
    return {**columns, "changed": list(kinds)}


def _spot(record: Record, name: str) -> dict[str, Any]:
    """Return one spot."""
    values = record.amended.spot(name)
    return {
        "id": name,
        **{column: values[column] for column in _SHOWN},
        "changed": record.kind(name),
    }


def _notices(record: Record) -> list[str]:
    """Return what is to be known of the log."""
    if record.torn:
        return [
            "The last line of the log was cut short in writing and is left out; the change in it was"
            " never shown as saved, or comes again by itself from the page that made it."
        ]
    return []
