"""What a detection leaves on disk, and how hand edits live on when a photograph is detected again."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any
from uuid import uuid4

import numpy as np

from detect.amended import current_state
from detect.amendments import (
    Amendment,
    amendments_path,
    append_amendment,
    read_amendments,
)
from detect.changes import changes_of
from detect.errors import AmendmentsPresent, PhotographFailed
from detect.files import write_bytes_atomically, write_text_atomically
from detect.matching import match_spots
from detect.on_map import points_geojson
from detect.overlay import overlay_jpeg
from detect.photograph import Photograph, read_photograph
from detect.sheet import Sheet, points_csv, read_sheet, sheet_path, write_sheet
from detect.spots import Spots


@dataclass(frozen=True, slots=True)
class Outcome:
    """What was written for one photograph.

    Parameters
    ----------
    sheet : Sheet
        As written: as found, before amendments.
    amendments : tuple of Amendment
        The hand edits that go with it.
    path : Path
        Where the sheet is.
    """

    sheet: Sheet
    amendments: tuple[Amendment, ...]
    path: Path

    @property
    def state(self) -> Sheet:
        """The sheet with the hand edits applied."""
        return current_state(self.sheet, self.amendments)


def write_detection(
    photograph: Photograph, sheet: Sheet, folder: Path, *, keep_amendments: bool = False
) -> Outcome:
    """Write sheet, points and overlay of one photograph, and never lose a hand edit.

    Parameters
    ----------
    photograph : Photograph
        The photograph.
    sheet : Sheet
        What was found in it.
    folder : Path
        Where to; it exists.
    keep_amendments : bool
        Carry existing hand edits over to the new detection instead of refusing.

    Returns
    -------
    Outcome

    Raises
    ------
    AmendmentsPresent
        If hand edits exist and are not to be carried over, or cannot be.
    FolderNotWritable
        If a file cannot be written.
    """
    path = sheet_path(folder, sheet.stem)
    amendments = read_amendments(path)
    if amendments and not keep_amendments:
        raise AmendmentsPresent(
            f"{amendments_path(path).name} in {folder} holds {_changes(amendments)}, which a new"
            " detection would leave behind; use --keep-amendments, or another folder for --out."
        )
    sheet = replace(sheet, settings=sheet.settings | {"photograph_at": _way(photograph, folder)})
    if amendments:
        old = _same_photograph(path, sheet)
        sheet = carry_over(old, sheet, amendments)
        amendments = _mark_taken_back(path, old, sheet, amendments)
    outcome = Outcome(sheet, amendments, path)
    write_views(photograph, outcome.state, folder)
    write_sheet(sheet, folder)
    return outcome


def write_views(photograph: Photograph, state: Sheet, folder: Path) -> None:
    """Write table of points, overlay and, on a map, layer of a sheet with its hand edits applied."""
    write_points(state, folder)
    if photograph.georeference is not None:
        layer = points_geojson(state, photograph.georeference)
        write_text_atomically(folder / f"{state.stem}.points.geojson", layer)
    picture = overlay_jpeg(photograph, state.area, state.spots)
    write_bytes_atomically(folder / f"{state.stem}.overlay.jpg", picture)


def write_points(state: Sheet, folder: Path) -> None:
    """Write the table of points of a sheet with its hand edits applied."""
    write_text_atomically(folder / f"{state.stem}.points.csv", points_csv(state))


def photograph_of(sheet: Sheet, folder: Path) -> Photograph | None:
    """Find the photograph of a sheet, for pictures: where it was, or beside the sheet.

    Parameters
    ----------
    sheet : Sheet
        The sheet.
    folder : Path
        Where the sheet lies.

    Returns
    -------
    Photograph or None
        None where the very file that was detected is not to be found.
    """
    way = sheet.settings.get("photograph_at")
    places = [folder / str(way)] if way else []
    for place in (*places, folder / sheet.photograph.name):
        try:
            photograph = read_photograph(place)
        except PhotographFailed:
            continue
        if photograph.sha256 == sheet.photograph.sha256:
            return photograph
    return None


def carry_over(old: Sheet, new: Sheet, amendments: Sequence[Amendment]) -> Sheet:
    """Give the objects of a new detection the ids that hand edits know them by.

    Parameters
    ----------
    old : Sheet
        The sheet the amendments were made on.
    new : Sheet
        A new detection of the same photograph.
    amendments : sequence of Amendment
        Hand edits of `old`.

    Returns
    -------
    Sheet
        `new`, in which a spot that lies where an old one lay has its id, other spots have ids
        never used before, spots found where a person had placed one are left out, and spots
        that a person had changed are kept as they were even if they were not found again.
    """
    placed = _placed(current_state(old, amendments).spots)
    fresh = new.spots.where(np.setdiff1d(np.arange(len(new.spots)), _matched(new.spots, placed)))
    match = match_spots(fresh.centres, old.spots.centres, old.spots.radius)
    names: dict[int, str] = {
        int(i): old.spots.id[j] for i, j in zip(match.found, match.truth, strict=True)
    }
    used = {*old.spots.id, *(spot for each in amendments for spot in each.touched)}
    following = 1 + max((int(name) for name in used if name.isdecimal()), default=0)
    for i in range(len(fresh)):
        if i not in names:
            names[i] = str(following)
            following += 1
    renamed = replace(fresh, id=tuple(names[i] for i in range(len(fresh))))
    touched = {spot for each in amendments for spot in each.changed}
    lost = [i for i, name in enumerate(old.spots.id) if name in touched - set(renamed.id)]
    return replace(new, spots=_joined(renamed, old.spots.where(lost)))


def _mark_taken_back(
    path: Path, old: Sheet, new: Sheet, amendments: tuple[Amendment, ...]
) -> tuple[Amendment, ...]:
    """Take back the mark that a photograph is checked, where a person has not seen what was found now."""
    if changes_of(old, amendments).checked_by is None or _alike(old, new):
        return amendments
    now = datetime.now(UTC).isoformat(timespec="seconds")
    taken_back = Amendment(f"detected again {uuid4().hex}", now, "strewn detect", "unchecked")
    append_amendment(amendments_path(path), taken_back)
    return (*amendments, taken_back)


def _alike(one: Sheet, other: Sheet) -> bool:
    """Whether two sheets have the same spots in the same area."""
    names = ("x", "y", "radius")
    return (
        one.spots.id == other.spots.id
        and all(np.array_equal(getattr(one.spots, n), getattr(other.spots, n)) for n in names)
        and one.area.polygon.equals(other.area.polygon)
    )


def _placed(spots: Spots) -> Spots:
    """Choose the spots that a person placed and still counts."""
    return spots.where(~spots.found & spots.counted)


def _matched(spots: Spots, others: Spots) -> Any:
    """Return the positions of the spots that lie where others lie."""
    return match_spots(spots.centres, others.centres, others.radius).found


def _joined(first: Spots, second: Spots) -> Spots:
    """Put two tables one under the other."""
    columns: list[Any] = [first.id + second.id]
    for name in ("x", "y", "radius", "area", "contrast", "fill", "doubt", "found", "counted"):
        columns.append(np.concatenate([getattr(first, name), getattr(second, name)]))
    return Spots(*columns)


def _same_photograph(path: Path, sheet: Sheet) -> Sheet:
    """Read the sheet that hand edits belong to, which must be of the same photograph."""
    if not path.exists():
        raise AmendmentsPresent(
            f"{amendments_path(path).name} holds hand edits, but their sheet {path.name} is gone;"
            " put it back, or move the log away."
        )
    old = read_sheet(path)
    if old.photograph.sha256 != sheet.photograph.sha256:
        raise AmendmentsPresent(
            f"The hand edits of {old.photograph.name} were made on another picture of that name;"
            " use another folder for --out."
        )
    return old


def _way(photograph: Photograph, folder: Path) -> str:
    """Return the way from the results to the photograph, for pictures in a later report."""
    try:
        return Path(os.path.relpath(photograph.path.resolve(), folder.resolve())).as_posix()
    except ValueError:
        return photograph.path.resolve().as_posix()


def _changes(amendments: Sequence[Amendment]) -> str:
    """Say how many hand edits there are."""
    return "1 hand edit" if len(amendments) == 1 else f"{len(amendments)} hand edits"
