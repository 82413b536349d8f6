"""What marking a photograph as checked leaves on disk, and what takes the mark back."""

from __future__ import annotations

import csv
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from detect.amendments import Amendment, amendments_path, append_amendment, read_amendments
from detect.changes import changes_of
from detect.outcome import write_detection
from detect.photograph import read_photograph
from detect.sheet import read_sheet
from tests.reviewing import Page, edit, place, review_of


def test_marking_writes_points_and_overlay_of_what_was_checked(tmp_path: Path) -> None:
    page = review_of(tmp_path)
    page.amend(edit("e1", "strike", spot="3"), place("e2", "n1"))
    assert not (tmp_path / "a.points.csv").exists()
    page.server._write_views(page.server.lives[page.sheet].record)
    rows = list(csv.DictReader((tmp_path / "a.points.csv").read_text().splitlines()))
    assert [row["id"] for row in rows if row["standing"] == "struck"] == ["3"]
    assert [row["id"] for row in rows if row["origin"] == "placed"] == ["n1"]
    assert (tmp_path / "a.overlay.jpg").read_bytes()[:2] == b"\xff\xd8"


def test_without_its_photograph_the_points_are_written_all_the_same(tmp_path: Path) -> None:
    page = review_of(tmp_path)
    (tmp_path / "a.png").unlink()
    page.server._write_views(page.server.lives[page.sheet].record)
    assert (tmp_path / "a.points.csv").exists()
    assert not (tmp_path / "a.overlay.jpg").exists()


def test_the_mark_itself_starts_the_writing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    page = review_of(tmp_path)
    begun: list[str] = []

    def begin(work: Any) -> None:
        begun.append(work.__name__)
        work.close()

    monkeypatch.setattr(page.server, "_in_background", begin)
    page.amend(place("e1", "n1"))
    assert begun == []
    page.amend(edit("c", "checked"))
    assert begun == ["to_thread"]


def test_a_new_detection_takes_the_mark_back_unless_it_is_the_same(tmp_path: Path) -> None:
    page = review_of(tmp_path)
    log = amendments_path(page.sheets[0])
    append_amendment(log, Amendment("c", "2026-05-04T10:00", "Ann", "checked"))
    photograph, sheet = read_photograph(tmp_path / "a.png"), read_sheet(page.sheets[0])
    same = write_detection(photograph, sheet, tmp_path, keep_amendments=True)
    assert changes_of(same.sheet, same.amendments).state == "checked"
    assert len(read_amendments(log)) == 1
    fewer = replace(sheet, spots=sheet.spots.where(range(11)))
    anew = write_detection(photograph, fewer, tmp_path, keep_amendments=True)
    assert changes_of(anew.sheet, anew.amendments).state == "in_review"
    checked, back = read_amendments(log)
    assert (checked.what, back.what, back.who) == ("checked", "unchecked", "strewn detect")
    assert Page(tmp_path, page.sheets).state()["review"]["state"] == "in_review"
