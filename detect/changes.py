"""What people did to a photograph's spots in sum, and whether somebody marked it as checked."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from detect.amended import Amended
from detect.amendment import Amendment
from detect.sheet import Sheet
from detect.spot_check import SPOT_CHECK_KINDS
from detect.spots import Spots

ReviewState = Literal["new", "in_review", "checked", "changed_since_checked"]
SpotChange = Literal["placed", "struck", "moved", "resized"]
STATES: dict[ReviewState, str] = {
    "new": "not reviewed",
    "in_review": "in review, not marked as checked",
    "checked": "checked",
    "changed_since_checked": "changed since it was marked as checked",
}


@dataclass(frozen=True, slots=True)
class Changes:
    """What people did in sum, beside the sheet as found.

    Parameters
    ----------
    state : {"new", "in_review", "checked", "changed_since_checked"}
        Nobody has touched it; somebody has, but did not mark it as checked; it is marked, and as it
        was then; it was changed after it was marked.
    checked_by, checked_at : str or None
        Who marked it last, and when; None where no mark stands.
    people : tuple of str
        Who made the changes and marks that stand, in the order of their first.
    placed, struck, moved, resized : int
        Spots that a person added and that count; that were found and do not count; that count
        elsewhere, or in another size, than they were found.
    area_changed, scale_changed : bool
        Whether a person drew another study area, or measured another scale.
    notes : int
        Remarks.
    """

    state: ReviewState = "new"
    checked_by: str | None = None
    checked_at: str | None = None
    people: tuple[str, ...] = ()
    placed: int = 0
    struck: int = 0
    moved: int = 0
    resized: int = 0
    area_changed: bool = False
    scale_changed: bool = False
    notes: int = 0

    @property
    def is_checked(self) -> bool:
        """Whether a person marked the photograph as checked, and it is as it was then."""
        return self.state == "checked"

    @property
    def any_edits(self) -> bool:
        """Whether anything that counts differs from what was found."""
        return bool(
            self.placed
            or self.struck
            or self.moved
            or self.resized
            or self.area_changed
            or self.scale_changed
        )

    @property
    def flags(self) -> tuple[str, ...]:
        """The flag that outputs carry for want of a check."""
        if self.state == "new":
            return ("unreviewed",)
        return () if self.is_checked else ("in_review",)


def changes_of(sheet: Sheet, amendments: Sequence[Amendment]) -> Changes:
    """Return what the amendments of a sheet come to.

    Parameters
    ----------
    sheet : Sheet
        As found.
    amendments : sequence of Amendment
        In order.

    Returns
    -------
    Changes

    Raises
    ------
    LogCorrupt
        If an amendment does not fit.
    """
    amended = Amended.of(sheet, amendments)
    kinds = changes_of_spots(sheet.spots, amended.state().spots)
    return summed(amended, Counter(kinds.tolist()))


def summed(amended: Amended, kinds: Mapping[str, int]) -> Changes:
    """Return what amendments come to, when it is known how many spots were changed in each way."""
    standing = [each for each in amended.log if amended.active[each.id]]
    mark = _mark(amended)
    return Changes(
        state=_state(amended, mark),
        checked_by=None if mark is None else mark.who,
        checked_at=None if mark is None else mark.time,
        people=tuple(
            dict.fromkeys(each.who for each in standing if each.is_edit or each.what == "checked")
        ),
        placed=kinds.get("placed", 0),
        struck=kinds.get("struck", 0),
        moved=kinds.get("moved", 0),
        resized=kinds.get("resized", 0),
        area_changed=any(each.what == "set_area" for each in standing),
        scale_changed=any(each.what == "set_scale" for each in standing),
        notes=sum(each.what == "note" for each in standing),
    )


def change_of_spot(amended: Amended, name: str) -> SpotChange | None:
    """Return what happened to one spot, as `changes_of_spots` tells it of all."""
    now = amended.spot(name)
    if not now["found"]:
        return "placed" if now["counted"] else None
    before = amended.found(name)
    if not now["counted"]:
        return "struck" if before["counted"] else None
    if (now["x"], now["y"]) != (before["x"], before["y"]):
        return "moved"
    return None if now["radius"] == before["radius"] else "resized"


def changes_of_spots(found: Spots, now: Spots) -> NDArray[np.str_]:
    """Return for each spot what happened to it, weightiest first; "" for nothing.

    A spot that a person placed and struck again counts for nothing.
    """
    before = len(found)
    kinds = np.full(len(now), "", dtype="<U8")
    kinds[before:][now.counted[before:]] = "placed"
    same = slice(0, before)
    resized = (now.radius[same] != found.radius) & now.counted[same]
    moved = ((now.x[same] != found.x) | (now.y[same] != found.y)) & now.counted[same]
    kinds[same][resized] = "resized"
    kinds[same][moved] = "moved"
    kinds[same][found.counted & ~now.counted[same]] = "struck"
    return kinds


def _mark(amended: Amended) -> Amendment | None:
    """Return the mark that stands, if any."""
    mark = None
    for each in amended.log:
        if each.what in ("checked", "unchecked") and amended.active[each.id]:
            mark = each if each.what == "checked" else None
    return mark


def _state(amended: Amended, mark: Amendment | None) -> ReviewState:
    """Return how far the review is."""
    if mark is None:
        touched = any(
            each.what not in SPOT_CHECK_KINDS
            and (each.of is None or amended.at_id[each.of].what not in SPOT_CHECK_KINDS)
            for each in amended.log
        )
        return "in_review" if touched else "new"
    then: set[str] = set()
    for each in amended.log:
        if each.id == mark.id:
            break
        if each.is_edit:
            then.add(each.id)
        elif each.what == "undo":
            then.discard(str(each.of))
        elif each.what == "redo" and amended.at_id[str(each.of)].is_edit:
            then.add(str(each.of))
    now = {each.id for each in amended.log if each.is_edit and amended.active[each.id]}
    return "checked" if then == now else "changed_since_checked"
