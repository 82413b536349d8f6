"""Nothing is lost: a killed server, a closed tab, a full disk, an edit that no longer fits."""

from __future__ import annotations

import resource
import sys
from pathlib import Path

import pytest
from playwright.sync_api import Browser, Dialog

from detect.amendments import Amendment, append_amendment
from tests.detect.review.browsing import Desk, Server, reviewing
from tests.detect.review.drawn import FALSE, MISSED, Laid

WAITING = "document.getElementById('saved').dataset.state === 'waiting'"


def test_edits_made_while_the_server_is_dead_arrive_once_when_it_is_back(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.click(*FALSE[0][:2])
    desk.settle()
    desk.away = True
    server.kill()
    desk.click(*FALSE[1][:2])
    desk.click(*MISSED)
    desk.wait(WAITING)
    desk.wait("document.getElementById('saved').dataset.waiting === '2'")
    assert desk.page.inner_text("#saved-words") == "Not saved: 2 edits waiting"
    assert "start strewn review again" in desk.page.inner_text("#unsaved")
    assert desk.counted == laid.counted - 1, "they are shown all the same"
    assert len(server.log(laid.sheet)) == 1
    url = server.url
    server.start()
    assert server.url == url
    desk.settle()
    desk.away = False
    assert [line["what"] for line in server.log(laid.sheet)] == ["strike", "strike", "place"]
    assert desk.shown_count == laid.counted - 1
    desk.click(*FALSE[2][:2])
    desk.settle()
    assert len(server.log(laid.sheet)) == 4


def test_a_tab_closed_with_unsaved_edits_loses_none(
    browser: Browser, server: Server, laid: Laid, tmp_path: Path
) -> None:
    context = browser.new_context(viewport={"width": 1280, "height": 800})
    first = Desk(context, server)
    first.open()
    first.away = True
    server.kill()
    first.click(*FALSE[0][:2])
    first.wait(WAITING)
    asked: list[str] = []

    def stay(dialog: Dialog) -> None:
        asked.append(dialog.type)
        dialog.dismiss()

    first.page.once("dialog", stay)
    with first.page.expect_event("dialog"):
        first.page.close(run_before_unload=True)
    assert asked == ["beforeunload"], "the tab asks before it closes"
    first.page.close()
    assert first.wrong == []
    server.start()
    second = Desk(context, server)
    second.open()
    second.settle()
    assert second.shown_count == laid.counted - 1
    assert second.wrong == []
    context.close()
    assert [line["what"] for line in server.log(laid.sheet)] == ["strike"]


def test_a_server_killed_in_a_burst_of_edits_has_each_of_them_once_in_the_end(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.click(*FALSE[0][:2])
    desk.settle()
    desk.page.focus("#stage")
    for k in range(200):
        if k == 70:
            desk.away = True
            server.kill()
            saved = len(server.log(laid.sheet))
            acknowledged = int(desk.stage("revision"))
            assert acknowledged <= saved, "what is shown as saved is on the disk"
        desk.key("s")
    desk.wait(WAITING)
    waiting = int(desk.page.get_attribute("#saved", "data-waiting") or 0)
    assert waiting >= 201 - saved
    server.start()
    desk.settle()
    desk.away = False
    lines = server.log(laid.sheet)
    assert len(lines) == len({line["id"] for line in lines}) == 201
    assert [line["what"] for line in lines] == ["strike", *["restore", "strike"] * 100]
    assert desk.shown_count == laid.counted - 1


def test_an_edit_that_no_longer_fits_is_explained_and_given_up(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.click(*MISSED)
    desk.settle()
    (placed,) = server.log(laid.sheet)
    desk.away = True
    server.kill()
    desk.drag([MISSED, (470, 360), (490, 380)])
    desk.wait(WAITING)
    undo = Amendment("by hand", "2026-01-01T10:00", "Ben", "undo", of=placed["id"])
    log = laid.sheet.with_name(laid.sheet.name.replace(".sheet.json", ".amendments.jsonl"))
    append_amendment(log, undo)
    server.start()
    desk.page.wait_for_selector("#refused p")
    desk.settle()
    desk.away = False
    assert "there is no such spot" in desk.page.inner_text("#refused")
    assert desk.counted == desk.shown_count == laid.counted
    desk.page.click("#refused button")
    assert desk.page.locator("#refused p").count() == 0
    assert len(server.log(laid.sheet)) == 2


@pytest.mark.skipif(sys.platform == "win32", reason="a limit on the size of files")
def test_a_disk_that_takes_no_more_is_told_and_nothing_shown_as_saved_is_lost(
    browser: Browser, laid: Laid, tmp_path: Path
) -> None:
    server = Server(laid.folder, tmp_path / "state")
    server.start(preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (700, 700)))
    context = browser.new_context(viewport={"width": 1280, "height": 800})
    desk = Desk(context, server)
    desk.open()
    for k, place in enumerate(laid.clear[:8]):
        desk.click(*place)
        desk.wait(f"document.getElementById('stage').dataset.counted === '{laid.counted - k - 1}'")
    desk.wait(WAITING)
    desk.wait("document.getElementById('unsaved').textContent.includes('cannot be written')")
    saved = server.log(laid.sheet)
    assert 0 < len(saved) < 8
    assert int(desk.page.get_attribute("#saved", "data-waiting") or 0) == 8 - len(saved)
    assert all("507" in each for each in desk.wrong), desk.wrong
    server.kill()
    server.start()
    desk.settle()
    context.close()
    server.kill()
    assert len(server.log(laid.sheet)) == 8


def test_a_server_that_ends_says_good_bye(desk: Desk, server: Server) -> None:
    desk.away = True
    server.stop()
    desk.wait("document.getElementById('saved').dataset.state === 'away'")
    assert desk.page.inner_text("#saved-words") == "The server has ended: edits will wait"
    server.start()
    desk.wait("document.getElementById('saved').dataset.state === 'saved'")
    desk.away = False


def test_a_name_is_asked_for_before_the_mark(browser: Browser, server: Server, laid: Laid) -> None:
    with reviewing(browser, server) as desk:
        desk.page.fill("#who", "")
        desk.page.click("#mark")
        assert "Give your name" in desk.said()
        assert server.log(laid.sheet) == []
