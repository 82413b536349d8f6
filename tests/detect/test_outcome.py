"""Results on disk, and hand edits that outlive a new detection."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from shapely.geometry import box

from detect.amended import current_state
from detect.area import StudyArea
from detect.errors import AmendmentsPresent
from detect.outcome import carry_over, write_detection
from detect.photograph import Photograph
from detect.sheet import (
    Amendment,
    PhotographIdentity,
    Sheet,
    amendments_path,
    append_amendment,
    read_sheet,
    sheet_path,
)
from detect.spots import Spots

TIME = "2026-01-02T10:00:00Z"


def a_photograph(folder: Path, *, sha256: str = "ab") -> Photograph:
    return Photograph(folder / "a.jpg", sha256, np.full((100, 120, 3), 90, dtype=np.uint8))


def a_sheet(photograph: Photograph, places: list[tuple[float, float]]) -> Sheet:
    xy = np.array(places, dtype=float).reshape(-1, 2)
    spots = Spots.found_at(xy[:, 0], xy[:, 1], np.full(len(xy), 5.0))
    area = StudyArea(box(-0.5, -0.5, 119.5, 99.5), "frame", "")
    return Sheet(1, "0.1.0", PhotographIdentity.of(photograph), None, area, {}, spots)


def edit(name: str, what: str, spot: str, **values: float) -> Amendment:
    return Amendment(name, TIME, "me", what, spot, **values)  # type: ignore[arg-type]


def at(sheet: Sheet) -> dict[str, tuple[float, float]]:
    spots = sheet.spots
    return {name: (spots.x[i], spots.y[i]) for i, name in enumerate(spots.id)}


def test_sheet_points_and_overlay_are_written(tmp_path: Path) -> None:
    photograph = a_photograph(tmp_path)
    out = tmp_path / "out"
    out.mkdir()
    outcome = write_detection(photograph, a_sheet(photograph, [(10, 10), (30, 30)]), out)
    names = sorted(path.name for path in out.iterdir())
    assert names == ["a.overlay.jpg", "a.points.csv", "a.sheet.json"]
    assert outcome.path == sheet_path(out, "a")
    assert at(read_sheet(outcome.path)) == {"1": (10, 10), "2": (30, 30)}
    assert read_sheet(outcome.path).settings == {"photograph_at": "../a.jpg"}
    assert outcome.amendments == ()


def test_a_detection_without_hand_edits_replaces_the_old_one(tmp_path: Path) -> None:
    photograph = a_photograph(tmp_path)
    write_detection(photograph, a_sheet(photograph, [(10, 10)]), tmp_path)
    amendments_path(sheet_path(tmp_path, "a")).write_bytes(b"")
    write_detection(photograph, a_sheet(photograph, [(20, 20)]), tmp_path)
    assert at(read_sheet(sheet_path(tmp_path, "a"))) == {"1": (20, 20)}


def with_edits(folder: Path, *edits: Amendment) -> Photograph:
    """A photograph whose sheet has spots at (10,10), (30,30) and (50,50), and hand edits."""
    photograph = a_photograph(folder)
    path = write_detection(
        photograph, a_sheet(photograph, [(10, 10), (30, 30), (50, 50)]), folder
    ).path
    for each in edits:
        append_amendment(amendments_path(path), each)
    return photograph


def test_hand_edits_are_never_left_behind(tmp_path: Path) -> None:
    photograph = with_edits(tmp_path, edit("e1", "strike", "2"))
    before = {path.name: path.read_bytes() for path in tmp_path.iterdir()}
    with pytest.raises(
        AmendmentsPresent,
        match=r"a\.amendments\.jsonl in .* holds 1 hand edit, .*; use --keep-amendments, or another",
    ):
        write_detection(photograph, a_sheet(photograph, [(70, 70)]), tmp_path)
    assert {path.name: path.read_bytes() for path in tmp_path.iterdir()} == before


def test_the_number_of_hand_edits_is_told(tmp_path: Path) -> None:
    photograph = with_edits(tmp_path, edit("e1", "strike", "2"), edit("e2", "restore", "2"))
    with pytest.raises(AmendmentsPresent, match="holds 2 hand edits"):
        write_detection(photograph, a_sheet(photograph, []), tmp_path)


def test_hand_edits_are_carried_over_to_the_same_objects(tmp_path: Path) -> None:
    photograph = with_edits(
        tmp_path,
        edit("e1", "strike", "2"),
        edit("e2", "place", "p1", x=80.0, y=80.0, radius=5.0),
        edit("e3", "move", "3", x=52.0, y=50.0),
    )
    log = amendments_path(sheet_path(tmp_path, "a")).read_bytes()
    # Found anew: the struck one under another number, the placed one, one never seen before;
    # the moved one is not found again.
    anew = a_sheet(photograph, [(31, 30), (81, 80), (100, 20), (10, 10)])
    outcome = write_detection(photograph, anew, tmp_path, keep_amendments=True)
    assert amendments_path(outcome.path).read_bytes() == log
    assert at(outcome.sheet) == {"2": (31, 30), "4": (100, 20), "1": (10, 10), "3": (50, 50)}
    state = outcome.state.spots
    assert state.id == ("2", "4", "1", "3", "p1")
    assert state.counted.tolist() == [False, True, True, True, True]
    assert at(outcome.state)["3"] == (52, 50)
    points = (tmp_path / "a.points.csv").read_text()
    assert points.count("struck") == 1
    assert points.count("placed") == 1


def test_ids_are_never_used_again(tmp_path: Path) -> None:
    photograph = with_edits(tmp_path, edit("e1", "place", "17", x=80.0, y=80.0, radius=5.0))
    outcome = write_detection(
        photograph, a_sheet(photograph, [(100, 20), (100, 60)]), tmp_path, keep_amendments=True
    )
    assert outcome.sheet.spots.id == ("18", "19")


def test_a_placed_spot_that_was_struck_again_does_not_hide_a_find(tmp_path: Path) -> None:
    edits = (
        edit("e1", "place", "p1", x=80.0, y=80.0, radius=5.0),
        edit("e2", "strike", "p1"),
    )
    photograph = with_edits(tmp_path, *edits)
    outcome = write_detection(
        photograph, a_sheet(photograph, [(80, 80)]), tmp_path, keep_amendments=True
    )
    assert (outcome.state.spots.counted & outcome.state.spots.found).sum() == 1


def test_carrying_over_twice_changes_nothing_more(tmp_path: Path) -> None:
    edits = [edit("e1", "strike", "2"), edit("e2", "place", "p1", x=80.0, y=80.0, radius=5.0)]
    photograph = a_photograph(tmp_path)
    old = a_sheet(photograph, [(10, 10), (30, 30), (50, 50)])
    anew = a_sheet(photograph, [(81, 80), (31, 30)])
    once = carry_over(old, anew, edits)
    twice = carry_over(once, anew, edits)
    assert at(current_state(once, edits)) == at(current_state(twice, edits))


def test_hand_edits_of_another_picture_are_not_carried_over(tmp_path: Path) -> None:
    with_edits(tmp_path, edit("e1", "strike", "2"))
    other = a_photograph(tmp_path, sha256="cd")
    with pytest.raises(
        AmendmentsPresent, match=r"hand edits of a\.jpg were made on another picture"
    ):
        write_detection(other, a_sheet(other, []), tmp_path, keep_amendments=True)


def test_hand_edits_without_their_sheet_are_not_carried_over(tmp_path: Path) -> None:
    photograph = with_edits(tmp_path, edit("e1", "strike", "2"))
    sheet_path(tmp_path, "a").unlink()
    with pytest.raises(AmendmentsPresent, match=r"their sheet a\.sheet\.json is gone; put it back"):
        write_detection(photograph, a_sheet(photograph, []), tmp_path, keep_amendments=True)


def test_a_sheet_written_by_detection_keeps_its_other_settings(tmp_path: Path) -> None:
    photograph = a_photograph(tmp_path)
    sheet = replace(a_sheet(photograph, []), settings={"request": {"kind": "colonies"}})
    outcome = write_detection(photograph, sheet, tmp_path)
    assert outcome.sheet.settings == {"request": {"kind": "colonies"}, "photograph_at": "a.jpg"}
