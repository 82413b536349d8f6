"""Which state of a sheet follows from what people changed on it."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import fields, replace
from typing import Any

import numpy as np
import shapely
from shapely.geometry import box, shape

from detect.amendment import Amendment, NewSpot
from detect.area import StudyArea
from detect.errors import AmendmentRefused, DetectError, LogCorrupt
from detect.scale import Scale, scale_from_line
from detect.sheet import Sheet
from detect.spot_check import check_marked
from detect.spots import Spots

_COLUMNS = tuple(field.name for field in fields(Spots))
_FRESH: dict[str, Any] = {"contrast": math.nan, "fill": 1.0, "doubt": 0.0, "found": False}


def current_state(sheet: Sheet, amendments: Sequence[Amendment]) -> Sheet:
    """Apply amendments to a sheet.

    Parameters
    ----------
    sheet : Sheet
        As found.
    amendments : sequence of Amendment
        In order. What was undone leaves no trace but its id, which is not used again.

    Returns
    -------
    Sheet
        The same sheet with its spots, its area and its scale changed; spots that were found are
        never removed, only struck.

    Raises
    ------
    LogCorrupt
        If an amendment does not fit: it names a spot the sheet has not, places one under a taken
        id, leaves the photograph, or undoes what cannot be undone.
    """
    if not amendments:
        return sheet
    return Amended.of(sheet, amendments).state()


class Amended:
    """A sheet that is being amended, one change at a time.

    Parameters
    ----------
    sheet : Sheet
        As found.
    """

    def __init__(self, sheet: Sheet) -> None:
        self.sheet = sheet
        self.log: list[Amendment] = []
        self.at_id: dict[str, Amendment] = {}
        self.active: dict[str, bool] = {}
        self.taken: set[str] = set(sheet.spots.id)
        self._start()

    @classmethod
    def of(cls, sheet: Sheet, amendments: Sequence[Amendment]) -> Amended:
        """Return a sheet with the amendments of its log applied (raises LogCorrupt)."""
        amended = cls(sheet)
        for amendment in amendments:
            try:
                amended.check(amendment)
            except AmendmentRefused as trouble:
                raise LogCorrupt(
                    f"The amendment {amendment.id!r} of {sheet.photograph.name} {trouble};"
                    " put its log right."
                ) from trouble
            amended.apply(amendment)
        return amended

    def _start(self) -> None:
        """Go back to the sheet as found."""
        spots = self.sheet.spots
        self._columns: dict[str, list[Any]] = {"id": list(spots.id)}
        for name in _COLUMNS[1:]:
            self._columns[name] = getattr(spots, name).tolist()
        self._at = {name: row for row, name in enumerate(spots.id)}
        self._area, self._scale = self.sheet.area, self.sheet.scale

    def __contains__(self, spot: str) -> bool:
        return spot in self._at

    def spot(self, name: str) -> dict[str, Any]:
        """Return what is known of one spot, by the names of the columns of `Spots`."""
        row = self._at[name]
        return {column: values[row] for column, values in self._columns.items()}

    def found(self, name: str) -> dict[str, Any]:
        """Return what was known of a spot when it was found."""
        row = self._at[name]  # found spots come first, and stay where they are
        return {column: getattr(self.sheet.spots, column)[row] for column in _COLUMNS}

    @property
    def area(self) -> StudyArea:
        """The study area as it is now."""
        return self._area

    @property
    def scale(self) -> Scale | None:
        """The scale as it is now."""
        return self._scale

    def state(self) -> Sheet:
        """Return the sheet as it is now."""
        columns = {name: np.array(self._columns[name]) for name in _COLUMNS[1:]}
        spots = Spots(tuple(self._columns["id"]), **columns)
        return replace(self.sheet, spots=spots, area=self._area, scale=self._scale)

    def check(self, amendment: Amendment) -> None:
        """Refuse a change that does not fit the sheet as it is now.

        Raises
        ------
        AmendmentRefused
            With a message that goes on from "The amendment ... of ...".
        """
        if amendment.what in ("undo", "redo"):
            self._check_turned(amendment)
        for new in amendment.placed:
            if new.spot in self.taken:
                raise AmendmentRefused(
                    f"would {amendment.what} spot {new.spot!r}, but there already is one"
                )
        self._check_needed(amendment)
        for x, y in _places(amendment):
            self._check_inside(x, y)
        if amendment.area is not None:
            self._area_of(amendment.area)
        if amendment.line:
            self._scale_of(amendment)
        if amendment.what == "spot_check_marked":
            drawn = str(amendment.of)
            check_marked(self.at_id.get(drawn), self.active.get(drawn, False), amendment)

    def apply(self, amendment: Amendment) -> None:
        """Apply a change that has been checked; this cannot fail."""
        self.log.append(amendment)
        self.at_id[amendment.id] = amendment
        self.active[amendment.id] = True
        self.taken.update(new.spot for new in amendment.placed)
        if amendment.what in ("undo", "redo"):
            self.active[str(amendment.of)] = amendment.what == "redo"
            self._start()
            for each in self.log:
                if each.is_edit and self.active[each.id]:
                    self._carry_out(each)
        else:
            self._carry_out(amendment)

    def _check_turned(self, amendment: Amendment) -> None:
        """Refuse to undo or do again what cannot be."""
        target = self.at_id.get(str(amendment.of))
        if target is None:
            raise AmendmentRefused(
                f"would {amendment.what} {amendment.of!r}, but there is no such change"
            )
        if target.what in ("undo", "redo"):
            raise AmendmentRefused(
                f"would {amendment.what} the change {target.id!r}, which is no edit but an {target.what}"
            )
        if self.active[target.id] == (amendment.what == "redo"):
            already = "not undone" if amendment.what == "redo" else "undone already"
            raise AmendmentRefused(
                f"would {amendment.what} the change {target.id!r}, but that is {already}"
            )
        self._check_order(amendment, target)

    def _check_order(self, amendment: Amendment, target: Amendment) -> None:
        """Refuse to take a spot away from a later change that needs it, or bring one back without."""
        if amendment.what == "undo":
            made = {new.spot for new in target.placed}
            for each in self.log:
                needs = made & set(each.changed) or (
                    each.what == "spot_check_marked" and each.of == target.id
                )
                if self.active[each.id] and each.id != target.id and needs:
                    raise AmendmentRefused(
                        f"would undo the change {target.id!r}, but the later change {each.id!r}"
                        f" by {each.who} needs its {_made_by(target)}; undo that one first"
                    )
        elif target.what == "spot_check_marked" and not self.active.get(str(target.of), False):
            raise AmendmentRefused(
                f"would redo the change {target.id!r}, but its spot check is undone; redo that one"
                " first"
            )
        elif missing := [spot for spot in target.changed if spot not in self._at]:
            raise AmendmentRefused(
                f"would redo the change {target.id!r}, but its spot {missing[0]!r} is undone;"
                " redo that one first"
            )

    def _check_needed(self, amendment: Amendment) -> None:
        """Refuse a change of a spot that is not there, or that asks for a counted one and is struck."""
        for spot in amendment.changed:
            if spot not in self._at:
                raise AmendmentRefused(
                    f"would {amendment.what} spot {spot!r}, but there is no such spot"
                )
            if amendment.what in ("split", "merge") and not self.spot(spot)["counted"]:
                raise AmendmentRefused(
                    f"would {amendment.what} spot {spot!r}, but that is struck; restore it first"
                )

    def _check_inside(self, x: float, y: float) -> None:
        """Refuse a place outside the photograph."""
        width, height = self.sheet.photograph.width, self.sheet.photograph.height
        if not (-0.5 <= x <= width - 0.5 and -0.5 <= y <= height - 0.5):
            raise AmendmentRefused(f"puts a spot at {x:g}, {y:g}, outside the photograph")

    def _carry_out(self, amendment: Amendment) -> None:
        """Change the columns, the area or the scale."""
        what = amendment.what
        for spot in amendment.changed:
            if what in ("strike", "restore", "split", "merge"):
                self._columns["counted"][self._at[spot]] = what == "restore"
        for new in amendment.placed:
            self._place(new)
        if what in ("move", "resize"):
            row = self._at[str(amendment.spot)]
            if amendment.x is not None and amendment.y is not None:
                self._columns["x"][row], self._columns["y"][row] = amendment.x, amendment.y
            if amendment.radius is not None:
                self._columns["radius"][row] = amendment.radius
                self._columns["area"][row] = math.pi * amendment.radius**2
        elif amendment.area is not None:
            self._area = self._area_of(amendment.area)
        elif amendment.line:
            self._scale = self._scale_of(amendment)

    def _place(self, new: NewSpot) -> None:
        """Add a counted spot."""
        self._at[new.spot] = len(self._columns["id"])
        values = _FRESH | {
            "id": new.spot,
            "x": new.x,
            "y": new.y,
            "radius": new.radius,
            "area": math.pi * new.radius**2,
            "counted": True,
        }
        for name, column in self._columns.items():
            column.append(values[name])

    def _area_of(self, values: Mapping[str, Any]) -> StudyArea:
        """Read a study area drawn by hand, which must lie within the photograph."""
        try:
            outline = shapely.force_2d(shape(dict(values)))
            finite = bool(np.isfinite(shapely.get_coordinates(outline)).all())
            if not finite or outline.is_empty:
                raise ValueError("positions that are no pairs of numbers")
            area = StudyArea(outline, "polygon", "drawn by hand")
        except DetectError as trouble:
            raise AmendmentRefused(f"draws no study area: {str(trouble).rstrip('.')}") from trouble
        except (KeyError, TypeError, ValueError, IndexError, AttributeError) as trouble:
            raise AmendmentRefused("draws no study area: it is no GeoJSON outline") from trouble
        except (shapely.errors.ShapelyError, RecursionError, OverflowError) as trouble:
            raise AmendmentRefused("draws no study area: it is no GeoJSON outline") from trouble
        identity = self.sheet.photograph
        frame = box(-0.5, -0.5, identity.width - 0.5, identity.height - 0.5)
        if not frame.buffer(1e-6).covers(outline):
            raise AmendmentRefused(
                "draws a study area that leaves the photograph of"
                f" {identity.width} x {identity.height} pixels"
            )
        return area

    def _scale_of(self, amendment: Amendment) -> Scale:
        """Take the scale from a line of known length, straightened as the sheet's lens asks."""
        ends = np.reshape(np.array(amendment.line, dtype=np.float64), (2, 2))
        lens = None if self.sheet.scale is None else self.sheet.scale.lens
        try:
            straight = ends if lens is None else lens.straighten(ends)
            scale = scale_from_line(straight[0], straight[1], float(amendment.mm or 0.0))
            return replace(scale, lens=lens, note=f"{scale.note}, drawn by hand")
        except DetectError as trouble:
            raise AmendmentRefused(f"gives no scale: {str(trouble).rstrip('.')}") from trouble


def _made_by(target: Amendment) -> str:
    """Return what a later change may need of an earlier one."""
    return "quadrats" if target.what == "spot_check_drawn" else "spot"


def _places(amendment: Amendment) -> list[tuple[float, float]]:
    """Return every place that must lie within the photograph."""
    places = [(new.x, new.y) for new in amendment.placed]
    if amendment.what == "move" and amendment.x is not None and amendment.y is not None:
        places.append((amendment.x, amendment.y))
    if amendment.line:
        x1, y1, x2, y2 = amendment.line
        places += [(x1, y1), (x2, y2)]
    return places
