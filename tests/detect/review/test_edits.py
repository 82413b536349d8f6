"""Changes that a page sends: what is kept, what is refused, what is told, and that nothing is lost."""

from __future__ import annotations

import errno
import json
import os
from pathlib import Path
from typing import Any

import pytest

from detect.amendments import read_amendments
from detect.review.record import Record
from detect.scale import Scale
from tests.reviewing import Page, edit, place, review_of, write_sheet_of


@pytest.fixture
def page(tmp_path: Path) -> Page:
    return review_of(tmp_path)


def spot(state: dict[str, Any], name: str) -> dict[str, Any]:
    """One spot of a sheet's state."""
    row = state["spots"]["id"].index(name)
    return {key: column[row] for key, column in state["spots"].items()}


def test_an_edit_is_in_the_log_before_it_is_acknowledged(page: Page) -> None:
    answer = page.amend(place("e1", "n1", 50, 60))
    told = answer.json()
    assert (answer.status_code, told["acknowledged"], told["refused"]) == (200, ["e1"], [])
    assert told["revision"] == 1
    (line,) = page.lines()
    assert line == {"schema": 2, **place("e1", "n1", 50, 60)}
    (change,) = told["changes"]
    assert change["spots"] == [
        {
            "id": "n1",
            "x": 50,
            "y": 60,
            "radius": 7.0,
            "doubt": 0.0,
            "found": False,
            "counted": True,
            "changed": "placed",
        }
    ]
    assert (change["gone"], change["review"]["state"], change["review"]["placed"]) == (
        [],
        "in_review",
        1,
    )


def test_the_log_is_forced_to_the_disk(page: Page, monkeypatch: pytest.MonkeyPatch) -> None:
    forced: list[int] = []
    monkeypatch.setattr(os, "fsync", lambda descriptor: forced.append(os.fstat(descriptor).st_size))
    page.amend(place("e1", "n1"), place("e2", "n2"))
    sizes = [size for size in forced if 0 < size <= page.log.stat().st_size]
    assert page.log.stat().st_size in sizes
    assert len(sizes) >= 2


def test_an_edit_sent_twice_counts_once(page: Page) -> None:
    page.amend(place("e1", "n1"))
    later = place("e1", "n1") | {"time": "2027-01-01T00:00:00+00:00"}
    again = page.amend(later, place("e2", "n2")).json()
    assert again["acknowledged"] == ["e1", "e2"]
    assert [change["revision"] for change in again["changes"]] == [2]
    assert [line["id"] for line in page.lines()] == ["e1", "e2"]


def test_an_id_used_for_another_edit_is_refused(page: Page) -> None:
    page.amend(place("e1", "n1"))
    told = page.amend(place("e1", "n2")).json()
    assert [each["code"] for each in told["refused"]] == ["id_taken"]
    assert told["acknowledged"] == []
    assert len(page.lines()) == 1


INVALID: list[dict[str, Any]] = [
    edit("e", "paint"),
    edit("e", "place", spot="n", x=1.0, y=1.0),
    edit("e", "place", spot="n", x="1", y=1.0, radius=1.0),
    edit("e", "place", spot="n", x=1.0, y=1.0, radius=0.0),
    edit("e", "place", spot="n", x=1.0, y=1.0, radius=-3),
    edit("e", "place", spot="n", x=True, y=1.0, radius=1.0),
    edit("e", "place", spot="n", x=10**400, y=1.0, radius=1.0),
    edit("e", "place", spot="n", x=1.0, y=1.0, radius=1.0, colour="red"),
    edit("e", "place", spot=["n"], x=1.0, y=1.0, radius=1.0),
    edit("e", "strike"),
    edit("e", "strike", spot="1", spots=["2"]),
    edit("e", "strike", spots=["1", "1"]),
    edit("e", "strike", spots="1"),
    edit("e", "strike", spots=[1]),
    edit("e", "split", spot="1", parts=[{"spot": "n", "x": 1.0, "y": 1.0, "radius": 1.0}]),
    edit("e", "split", spot="1", parts=[{"spot": "n"}, {"spot": "m"}]),
    edit("e", "merge", spots=["1"], into={"spot": "n", "x": 1.0, "y": 1.0, "radius": 1.0}),
    edit("e", "set_scale", line=[0, 0, 10], mm=5),
    edit("e", "set_scale", line=[0, 0, 10, 0], mm=-5),
    edit("e", "set_area", area=7),
    edit("e", "note", text=" "),
    edit("e", "note", text="x" * 2001),
    edit("e", "note", text="\ud800"),
    edit("e", "undo"),
    edit("e", "strike", spot="1") | {"who": ""},
    edit("e", "strike", spot="1") | {"who": "x" * 101},
    edit("e", "strike", spot="1") | {"time": "yesterday"},
    edit("e", "strike", spot="1") | {"schema": 4},
    edit("e", "strike", spot="1") | {"schema": "2"},
    edit("x" * 101, "strike", spot="1"),
    {"what": "strike"},
]


@pytest.mark.parametrize("wrong", INVALID, ids=lambda each: json.dumps(each)[-60:])
def test_an_impossible_edit_is_refused_and_the_next_ones_are_made(
    page: Page, wrong: dict[str, Any]
) -> None:
    answer = page.amend(wrong, place("good", "n1"))
    told = answer.json()
    assert answer.status_code == 200
    assert [each["code"] for each in told["refused"]] == ["invalid"]
    assert told["acknowledged"] == ["good"]
    assert [line["id"] for line in page.lines()] == ["good"]
    assert read_amendments(page.log)


TRIANGLE = {"type": "Polygon", "coordinates": [[[10, 10], [300, 10], [10, 200], [10, 10]]]}


@pytest.mark.parametrize(
    ("wrong", "message"),
    [
        (edit("e", "strike", spot="99"), "there is no such spot"),
        (place("e", "1"), "there already is one"),
        (place("e", "n", 420, 10), "outside the photograph"),
        (edit("e", "move", spot="1", x=-1, y=0), "outside the photograph"),
        (edit("e", "undo", of="nothing"), "there is no such change"),
        (
            edit(
                "e",
                "set_area",
                area={"type": "Polygon", "coordinates": [[[0, 0], [900, 0], [0, 9]]]},
            ),
            "no GeoJSON outline|leaves the photograph",
        ),
        (
            edit("e", "set_area", area={"type": "Point", "coordinates": [0, 0]}),
            "must be a polygon",
        ),
        (
            edit(
                "e",
                "set_area",
                area={
                    "type": "Polygon",
                    "coordinates": [[[0, 0], [50, 50], [50, 0], [0, 50], [0, 0]]],
                },
            ),
            "outline is not usable",
        ),
        (edit("e", "set_scale", line=[5, 5, 5.2, 5], mm=10), "0.2 pixels apart"),
        (edit("e", "set_scale", line=[5, 5, 900, 5], mm=10), "outside the photograph"),
    ],
)
def test_an_edit_that_does_not_fit_is_refused_with_a_sentence(
    page: Page, wrong: dict[str, Any], message: str
) -> None:
    import re

    told = page.amend(wrong).json()
    ((refused,), acknowledged) = told["refused"], told["acknowledged"]
    assert refused["code"] == "refused"
    assert re.search(message, refused["message"])
    assert refused["message"].startswith("This change ")
    assert acknowledged == []
    assert page.lines() == []


@pytest.mark.parametrize("number", ["NaN", "Infinity", "-Infinity", "1e999"])
def test_numbers_that_are_none_never_reach_the_log(page: Page, number: str) -> None:
    body = json.dumps({"amendments": [place("e1", "n1")]}).replace("50.0", number)
    answer = page.post(f"api/sheets/{page.sheet}/amendments", body.encode())
    assert answer.status_code == 400 or answer.json()["refused"][0]["code"] == "invalid"
    assert page.lines() == []
    assert len(page.state()["spots"]["id"]) == 12


@pytest.mark.parametrize(
    "body",
    [
        *(b"", b"{", b"[]", b'{"amendments": []}', b'{"amendments": {}}', b"\xff", b"[" * 100_000),
        b'{"amendments": [1], "more": 2}',
        b'{"amendments": [1], "after": true}',
        b'{"amendments": ' + str([1] * 501).encode() + b"}",
    ],
    ids=range(10),
)
def test_a_body_that_is_no_list_of_edits_is_refused(page: Page, body: bytes) -> None:
    answer = page.post(f"api/sheets/{page.sheet}/amendments", body)
    assert answer.status_code == 400
    assert answer.json()["error"]["code"] in ("json", "request")
    assert not page.log.exists()


def test_striking_many_is_one_edit_that_one_undo_takes_back(page: Page) -> None:
    page.amend(edit("e1", "strike", spots=["1", "2", "3"]))
    state = page.state()
    assert state["review"]["struck"] == 3
    told = page.amend(edit("e2", "undo", of="e1")).json()
    assert sorted(each["id"] for each in told["changes"][0]["spots"]) == ["1", "2", "3"]
    assert all(each["counted"] for each in told["changes"][0]["spots"])
    assert page.state()["review"]["struck"] == 0
    assert len(page.lines()) == 2


def test_split_and_merge_are_one_edit_each_and_can_be_undone(page: Page) -> None:
    parts = [{"spot": n, "x": 100.0 + k, "y": 50.0, "radius": 4.0} for k, n in enumerate("pq")]
    told = page.amend(edit("e1", "split", spot="1", parts=parts)).json()["changes"][0]
    assert {each["id"]: each["counted"] for each in told["spots"]} == {
        "1": False,
        "p": True,
        "q": True,
    }
    into = {"spot": "m", "x": 100.0, "y": 50.0, "radius": 8.0}
    page.amend(edit("e2", "merge", spots=["p", "q"], into=into))
    refused = page.amend(edit("e3", "undo", of="e1")).json()["refused"]
    assert (
        "the later change 'e2' by Ann needs its spot; undo that one first" in refused[0]["message"]
    )
    page.amend(edit("e4", "undo", of="e2"))
    told = page.amend(edit("e5", "undo", of="e1")).json()["changes"][0]
    assert told["gone"] == ["p", "q"]
    assert page.state()["spots"]["id"] == [str(k) for k in range(1, 13)]
    assert page.state()["spots"]["counted"] == [True] * 12
    # Done again, in their order; and an id once used stays taken.
    assert (
        "redo that one first"
        in page.amend(edit("e6", "redo", of="e2")).json()["refused"][0]["message"]
    )
    page.amend(edit("e7", "redo", of="e1"), edit("e8", "redo", of="e2"))
    assert spot(page.state(), "m")["counted"]
    page.amend(edit("e9", "undo", of="e2"))
    assert page.amend(place("e10", "m")).json()["refused"][0]["code"] == "refused"


def test_undo_and_redo_reach_back_to_the_first_edit_across_a_restart(tmp_path: Path) -> None:
    page = review_of(tmp_path)
    page.amend(*(edit(f"e{k}", "move", spot="1", x=10.0 + k, y=20.0) for k in range(60)))
    start = Page(tmp_path, page.sheets)
    assert spot(start.state(), "1")["x"] == 69.0
    back = [edit(f"u{k}", "undo", of=f"e{k}") for k in reversed(range(60))]
    assert len(start.amend(*back).json()["acknowledged"]) == 60
    assert start.state()["spots"]["changed"] == [None] * 12
    third = Page(tmp_path, page.sheets)
    third.amend(*(edit(f"r{k}", "redo", of=f"e{k}") for k in range(60)))
    assert spot(third.state(), "1")["x"] == 69.0
    assert len(third.lines()) == 180
    history = third.state()["history"]
    assert [each["active"] for each in history] == [True] * 180


def test_the_edit_of_another_is_not_overwritten_by_an_undo(page: Page) -> None:
    page.amend(edit("e1", "move", spot="1", x=10, y=10))
    page.amend(edit("e2", "move", spot="1", x=20, y=20) | {"who": "Bob"})
    page.amend(edit("e3", "undo", of="e1"))
    assert spot(page.state(), "1")["x"] == 20


def test_area_and_scale_follow_their_edits_and_their_undo(page: Page) -> None:
    told = page.amend(
        edit("e1", "set_area", area=TRIANGLE),
        edit("e2", "set_scale", line=[0, 0, 100, 0], mm=25),
    ).json()["changes"]
    assert told[0]["area"]["kind"] == "polygon"
    assert told[0]["area"]["changed"]
    assert told[1]["scale"]["mm_per_px"] == pytest.approx(0.25)
    assert told[1]["scale"]["line"] == [0, 0, 100, 0, 25]
    state = page.state()
    assert (state["review"]["area_changed"], state["review"]["scale_changed"]) == (True, True)
    back = page.amend(edit("u2", "undo", of="e2"), edit("u1", "undo", of="e1")).json()["changes"]
    assert back[0]["scale"] is None
    assert back[1]["area"]["kind"] == "frame"
    assert not page.state()["review"]["area_changed"]


def test_what_a_mark_says_follows_what_happens_after_it(page: Page) -> None:
    states = []
    for each in (
        edit("n1", "note", text="glare"),
        edit("e1", "strike", spot="1"),
        edit("c1", "checked"),
        edit("n2", "note", text="looked at twice"),
        edit("e2", "strike", spot="2"),
        edit("u2", "undo", of="e2"),
        edit("u1", "undo", of="e1"),
        edit("r1", "redo", of="e1"),
        edit("e3", "strike", spot="3"),
        edit("c2", "checked"),
        edit("x1", "unchecked"),
    ):
        states.append(page.amend(each).json()["changes"][-1]["review"]["state"])
    assert states == [
        *("in_review", "in_review", "checked", "checked"),
        *("changed_since_checked", "checked", "changed_since_checked", "checked"),
        *("changed_since_checked", "checked", "in_review"),
    ]
    assert [note["text"] for note in page.state()["notes"]] == ["glare", "looked at twice"]


def test_html_in_names_and_notes_stays_text(tmp_path: Path) -> None:
    evil = "<img src=x onerror=alert(1)>"
    page = Page(tmp_path, [write_sheet_of(tmp_path, "a.png")])
    page.amend(edit("e1", "note", text=evil) | {"who": evil}, place("e2", evil))
    answer = page.get(f"api/sheets/{page.sheet}")
    assert answer.headers["content-type"] == "application/json"
    assert answer.headers["x-content-type-options"] == "nosniff"
    state = answer.json()
    assert state["notes"][0]["text"] == state["notes"][0]["who"] == evil
    assert state["spots"]["id"][-1] == evil


@pytest.mark.parametrize("name", ["<b>x.png", "a b%2f..png", "caf\u00e9 \u00b5.png", "'; x.png"])
def test_any_file_name_is_told_as_it_is_and_leads_nowhere(tmp_path: Path, name: str) -> None:
    page = Page(tmp_path, [write_sheet_of(tmp_path, name)])
    assert page.get("api/queue").json()["sheets"][0]["photograph"] == name
    assert page.state()["photograph"] == name
    assert page.get(page.state()["picture"]["url"]).status_code == 200
    assert page.amend(place("e1", "n1")).json()["acknowledged"] == ["e1"]
    assert (tmp_path / f"{Path(name).stem}.amendments.jsonl").exists()


def test_a_log_replaced_in_the_moment_of_writing_gets_the_edit_at_the_next_try(
    page: Page, monkeypatch: pytest.MonkeyPatch
) -> None:
    import detect.amendments
    from detect.locked import locked

    page.amend(place("e1", "n1"))
    beside = page.log.with_suffix(".new")
    beside.write_bytes(page.log.read_bytes())

    def replaced(file: Any) -> Any:
        if beside.exists():
            beside.replace(page.log)
        return locked(file)

    monkeypatch.setattr(detect.amendments, "locked", replaced)
    answer = page.amend(place("e2", "n2"))
    assert answer.status_code == 507
    assert "was replaced while it was written to" in answer.json()["error"]["message"]
    assert [line["id"] for line in page.lines()] == ["e1"]
    assert page.amend(place("e2", "n2")).json()["acknowledged"] == ["e2"]
    assert [line["id"] for line in page.lines()] == ["e1", "e2"]


def test_two_servers_on_one_folder_see_each_others_edits(tmp_path: Path) -> None:
    one = review_of(tmp_path)
    other = Page(tmp_path, one.sheets)
    other.state()
    one.amend(place("a1", "n1"))
    body = {"amendments": [place("b1", "n2")], "after": 0}
    told = other.post(f"api/sheets/{other.sheet}/amendments", body).json()
    assert told["revision"] == 2
    assert [change["revision"] for change in told["changes"]] == [1, 2]
    assert [change["amendment"]["id"] for change in told["changes"]] == ["a1", "b1"]
    assert other.amend(place("b2", "n1")).json()["refused"][0]["code"] == "refused"
    assert one.state()["spots"]["id"][-2:] == ["n1", "n2"]
    assert one.state()["review"]["placed"] == 2


class _Full:
    """A disk on which some bytes are left, and then none."""

    def __init__(self, left: int) -> None:
        self.left = left

    def write(self, real: Any, data: Any) -> int:
        taken = bytes(data[: self.left])
        if not taken:
            raise OSError(errno.ENOSPC, "No space left on device")
        self.left -= len(taken)
        return int(real(taken))


@pytest.mark.parametrize("left", [0, 30, 400])
def test_a_full_disk_loses_nothing_shown_as_saved(
    page: Page, monkeypatch: pytest.MonkeyPatch, left: int
) -> None:
    from io import FileIO

    import detect.amendments

    page.amend(place("e0", "n0"))
    disk = _Full(left)

    class Small(FileIO):
        def write(self, data: Any) -> int:
            return disk.write(super().write, data)

    monkeypatch.setattr(detect.amendments, "FileIO", Small)
    edits = [place(f"e{k}", f"n{k}") for k in range(1, 6)]
    answer = page.amend(*edits)
    told = answer.json()
    assert answer.status_code == 507
    assert told["error"]["code"] == "disk_full"
    assert "no space left" in told["error"]["message"]
    saved = told["acknowledged"]
    assert saved == [f"e{k}" for k in range(1, 1 + len(saved))]
    assert len(saved) < 5
    assert [line["id"] for line in page.lines()] == ["e0", *saved]
    assert page.state()["revision"] == 1 + len(saved)
    monkeypatch.undo()
    assert page.amend(*edits).json()["acknowledged"] == [f"e{k}" for k in range(1, 6)]
    assert [line["id"] for line in page.lines()] == [f"e{k}" for k in range(6)]


def test_a_log_that_cannot_be_opened_is_told(page: Page, monkeypatch: pytest.MonkeyPatch) -> None:
    real = os.open

    def forbidden(path: Any, *more: Any, **others: Any) -> int:
        if str(path).endswith(".jsonl"):
            raise PermissionError(errno.EACCES, "Permission denied")
        return real(path, *more, **others)

    monkeypatch.setattr(os, "open", forbidden)
    answer = page.amend(place("e1", "n1"))
    assert answer.status_code == 507
    assert answer.json()["error"]["code"] == "not_writable"
    assert "permission denied" in answer.json()["error"]["message"]
    assert answer.json()["acknowledged"] == []
    assert "n1" not in page.state()["spots"]["id"]


def test_torn_corrupt_and_newer_lines_are_told_apart(page: Page) -> None:
    page.amend(place("e1", "n1"), place("e2", "n2"))
    whole = page.log.read_bytes()
    # Torn: left out, told, and cut away by the next edit.
    page.log.write_bytes(whole[:-20])
    torn = Page(page.folder, page.sheets)
    assert torn.state()["spots"]["id"][-1] == "n1"
    assert "cut short" in torn.state()["notices"][0]
    assert torn.amend(place("e2", "n2")).json()["acknowledged"] == ["e2"]
    assert page.log.read_bytes() == whole
    assert torn.state()["notices"] == []
    # Corrupt: the photograph is shut, the line is named, the queue tells.
    lines = whole.splitlines(keepends=True)
    for bad in (b"{\n", b"\0\0\0\n", lines[0].replace(b'"x": 50.0', b'"x": NaN')):
        page.log.write_bytes(bad + lines[1])
        shut = Page(page.folder, page.sheets)
        answer = shut.get(f"api/sheets/{shut.sheet}")
        assert (answer.status_code, answer.json()["error"]["code"]) == (409, "log_corrupt")
        assert "Line 1 of a.amendments.jsonl" in answer.json()["error"]["message"]
        assert shut.amend(place("e3", "n3")).status_code == 409
        assert page.log.read_bytes() == bad + lines[1]
        row = shut.get("api/queue").json()["sheets"][0]
        assert row["trouble"]["code"] == "log_corrupt"
    # Newer: shut as well, and said so.
    page.log.write_bytes(lines[0].replace(b'"schema": 2', b'"schema": 4'))
    newer = Page(page.folder, page.sheets)
    answer = newer.get(f"api/sheets/{newer.sheet}")
    assert (answer.status_code, answer.json()["error"]["code"]) == (409, "log_newer")
    assert newer.amend(place("e3", "n3")).status_code == 409
    # Put right by hand beneath the open page: it goes on.
    page.log.write_bytes(whole)
    assert newer.state()["revision"] == 2


def test_a_newer_last_line_without_its_end_is_not_cut_away(page: Page) -> None:
    page.amend(place("e1", "n1"))
    text = page.log.read_bytes() + b'{"schema": 9, "id": "z", "new": "thing"}'
    page.log.write_bytes(text)
    assert Page(page.folder, page.sheets).amend(place("e2", "n2")).status_code == 409
    assert page.log.read_bytes() == text


def test_a_log_of_the_first_schema_reads_as_it_did(page: Page) -> None:
    page.log.write_text(
        '{"id": "1", "time": "2026-05-04T10:00", "who": "Ann", "what": "strike", "spot": "12"}\n'
    )
    state = Page(page.folder, page.sheets).state()
    assert not spot(state, "12")["counted"]
    assert state["review"]["state"] == "in_review"


def test_detecting_again_beneath_an_open_page_is_seen(page: Page) -> None:
    before = page.state()["generation"]
    page.amend(place("e1", "n1"))
    write_sheet_of(page.folder, "a.png", scale=Scale.from_mm_per_pixel(0.5))
    state = page.state()
    assert state["generation"] != before
    assert state["scale"]["mm_per_px"] == pytest.approx(0.5)
    assert state["spots"]["id"][-1] == "n1"


def test_what_is_kept_step_by_step_is_what_the_log_says(tmp_path: Path) -> None:
    """Counts kept from edit to edit equal those of the whole log read anew."""
    import numpy as np

    page = review_of(tmp_path)
    rng = np.random.default_rng(3)
    done: list[str] = []
    for k in range(120):
        spots = page.state()["spots"]["id"]
        some = str(rng.choice(spots))
        choice = int(rng.integers(6))
        x, y = (float(v) for v in rng.integers(5, 300, 2))
        each = [
            edit(f"e{k}", "strike", spot=some),
            edit(f"e{k}", "restore", spot=some),
            edit(f"e{k}", "move", spot=some, x=x, y=y),
            edit(f"e{k}", "resize", spot=some, radius=3.0 + k % 5),
            place(f"e{k}", f"n{k}", x, y),
            edit(f"e{k}", "undo", of=str(rng.choice(done))) if done else place(f"e{k}", f"n{k}"),
        ][choice]
        if page.amend(each).json()["acknowledged"] and each["what"] != "undo":
            done.append(f"e{k}")
    kept, anew = page.state(), Page(tmp_path, page.sheets).state()
    assert len(page.lines()) > 80
    for name in ("spots", "review", "history", "notes"):
        assert kept[name] == anew[name]
    record = Record(page.sheets[0])
    record.refresh()
    from detect.changes import changes_of
    from detect.sheet import read_sheet

    assert record.changes() == changes_of(read_sheet(page.sheets[0]), read_amendments(page.log))
