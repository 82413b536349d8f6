"""What open pages are told, and that statistics follow the newest edit."""

from __future__ import annotations

import asyncio
import json
import threading
from collections.abc import AsyncIterator
from pathlib import Path
from typing import Any

from detect.amendment import Amendment
from detect.amendments import amendments_path, append_amendment, read_amendments
from detect.changes import Changes
from detect.review.live import event
from detect.sheet import Sheet
from tests.reviewing import Page, edit, place, review_of


def parsed(text: str) -> tuple[str, dict[str, Any], str | None]:
    """Name, data and number of one event, as a browser reads it."""
    fields = dict(line.split(": ", 1) for line in text.strip().split("\n"))
    return fields["event"], json.loads(fields["data"]), fields.get("id")


async def until(stream: AsyncIterator[str], name: str) -> tuple[dict[str, Any], list[str]]:
    """Read a stream up to the first event of a name; return its data and the names before it."""
    before = []
    async for text in stream:
        if text.startswith(":"):
            continue
        found, data, _ = parsed(text)
        if found == name:
            return data, before
        before.append(found)
    raise AssertionError(f"no {name} among {before}")


def counted(found: Sheet, now: Sheet, changes: Changes) -> dict[str, Any]:
    return {"now": {"count": int(now.spots.counted.sum())}, "placed": changes.placed}


def test_an_event_is_one_line_of_data_whatever_it_holds() -> None:
    name, data, number = parsed(event("change", {"text": "a\nb\u2028c\ud800"}, number=7))
    assert (name, data, number) == ("change", {"text": "a\nb\u2028c\ud800"}, "7")


def test_a_stream_tells_old_and_new_changes_whoever_makes_them(tmp_path: Path) -> None:
    page = review_of(tmp_path, panel=counted)
    page.amend(place("e1", "n1"), place("e2", "n2"))
    live = page.server.lives[page.sheet]

    async def listen() -> None:
        stream = live.stream(1, None)
        first, before = await until(stream, "change")
        assert (first["revision"], first["amendment"]["id"], before) == (2, "e2", [])
        panel, _ = await until(stream, "panel")
        assert (panel["revision"], panel["now"]["count"], panel["placed"]) == (2, 14, 2)
        # A program appends to the log.
        by_hand = Amendment("h1", "2026-05-04T10:00", "Bob", "strike", "1")
        append_amendment(amendments_path(page.sheets[0]), by_hand)
        told, before = await until(stream, "change")
        assert (told["revision"], told["amendment"]["who"], before) == (3, "Bob", [])
        panel, before = await until(stream, "panel")
        assert (panel["revision"], panel["now"]["count"], before) == (3, 13, ["panel_wait"])
        # A page of the same server.
        await asyncio.to_thread(live.record.amend, [edit("e4", "restore", spot="1")])
        live.ring()
        told, _ = await until(stream, "change")
        assert told["revision"] == 4
        # The log is put right by hand: the page must fetch the sheet anew.
        log = amendments_path(page.sheets[0])
        await asyncio.to_thread(log.write_text, "".join(log.read_text().splitlines(True)[:2]))
        told, _ = await until(stream, "reload")
        assert told["generation"] == live.record.generation
        # It is damaged, and put right.
        good = log.read_text()
        await asyncio.to_thread(log.write_text, good + "{\n")
        told, _ = await until(stream, "trouble")
        assert told["error"]["code"] == "log_corrupt"
        await asyncio.to_thread(log.write_text, good)
        await until(stream, "reload")
        page.server.end()
        assert (await until(stream, "bye"))[0] == {}

    asyncio.run(listen())


def test_stale_statistics_are_dropped_and_the_newest_are_told(tmp_path: Path) -> None:
    go, begun, seen = threading.Event(), threading.Event(), []

    def slow(found: Sheet, now: Sheet, changes: Changes) -> dict[str, Any]:
        seen.append(changes.placed)
        begun.set()
        assert go.wait(30)
        return counted(found, now, changes)

    page = review_of(tmp_path, panel=slow)
    live = page.server.lives[page.sheet]

    async def work() -> dict[str, Any]:
        asked = asyncio.create_task(live.panel())
        await asyncio.to_thread(begun.wait, 30)
        for k in range(20):
            await asyncio.to_thread(live.record.amend, [place(f"e{k}", f"n{k}")])
        go.set()
        return await asked

    panel = asyncio.run(work())
    assert (panel["revision"], panel["placed"]) == (20, 20)
    assert seen == [0, 20]


def test_the_answer_to_an_edit_does_not_wait_for_statistics(tmp_path: Path) -> None:
    go = threading.Event()

    def stuck(found: Sheet, now: Sheet, changes: Changes) -> dict[str, Any]:
        assert go.wait(30)
        return counted(found, now, changes)

    page = review_of(tmp_path, panel=stuck)
    live = page.server.lives[page.sheet]

    async def work() -> None:
        await asyncio.to_thread(live.record.refresh)
        computing = live.compute()
        answer = await asyncio.to_thread(live.record.amend, [place("e1", "n1")])
        assert answer.acknowledged == ["e1"]
        assert not computing.done()
        go.set()
        await computing

    asyncio.run(work())
    assert [each.id for each in read_amendments(page.log)] == ["e1"]


def test_a_bug_in_statistics_does_not_stop_the_review(tmp_path: Path, capsys: Any) -> None:
    def broken(found: Sheet, now: Sheet, changes: Changes) -> dict[str, Any]:
        raise ZeroDivisionError

    page = review_of(tmp_path, panel=broken)
    told = page.get(f"api/sheets/{page.sheet}/panel").json()
    assert told["now"] is None
    assert "could not be computed" in told["trouble"]
    assert "ZeroDivisionError" in capsys.readouterr().err
    assert page.amend(place("e1", "n1")).json()["acknowledged"] == ["e1"]


def test_statistics_of_a_log_that_cannot_be_read_are_refused(tmp_path: Path) -> None:
    page = review_of(tmp_path, panel=counted)
    page.log.write_text("{\n")
    answer = page.get(f"api/sheets/{page.sheet}/panel")
    assert (answer.status_code, answer.json()["error"]["code"]) == (409, "log_corrupt")


def test_the_queue_tells_how_far_each_photograph_is(tmp_path: Path) -> None:
    page = review_of(tmp_path, "a.png", "b.png", "c.png")
    page.amend(
        place("e1", "n1"), edit("e2", "strike", spot="1"), edit("c", "checked") | {"who": "Bob"}
    )
    other = list(page.server.lives)[1]
    page.post(f"api/sheets/{other}/amendments", {"amendments": [edit("n", "note", text="blurred")]})
    a, b, c = page.get("api/queue").json()["sheets"]
    assert (a["photograph"], a["state"], a["checked_by"]) == ("a.png", "checked", "Bob")
    assert (a["people"], a["placed"], a["struck"], a["counted"]) == (["Ann", "Bob"], 1, 1, 12)
    assert a["doubtful"] == 0  # the doubtful one was struck
    assert (b["state"], b["notes"], b["doubtful"]) == ("in_review", 1, 1)
    assert (c["state"], c["checked_at"]) == ("new", None)


def test_a_session_says_who_and_what(tmp_path: Path) -> None:
    told = review_of(tmp_path).get("api/session").json()
    assert (told["schema"], told["folder"]) == (3, tmp_path.name)
    assert told["limits"]["amendments"] == 500


def test_a_server_with_no_login_name_suggests_none(tmp_path: Path, monkeypatch: Any) -> None:
    def nobody() -> str:
        raise OSError("no name")

    monkeypatch.setattr("getpass.getuser", nobody)
    assert Page(tmp_path, review_of(tmp_path).sheets).get("api/session").json()["who"] == ""
