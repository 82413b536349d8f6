"""What concerns a whole photograph: its study area, scale, notes and mark, its place in the queue, two tabs."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from playwright.sync_api import Browser

from tests.detect.review.browsing import Desk, Server, reviewing
from tests.detect.review.drawn import AREA, FALSE, Laid, lay

NASTY = "<img src=x onerror=alert(1)><b>&amp;"


def test_the_study_area_is_moved_and_the_statistics_follow_once_it_is_used(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.page.click("#tool-area")
    desk.drag([(400, 300), (420, 300), (480, 300)])
    assert "the same size" in desk.page.inner_text("#task")
    assert server.log(laid.sheet) == []
    desk.page.click("#leave-area")
    desk.drag([(400, 300), (420, 300), (446, 300)])
    desk.page.click("#use-area")
    desk.settle()
    (line,) = server.log(laid.sheet)
    outline = line["area"]["coordinates"][0]
    assert abs(min(x for x, _ in outline) - (AREA[0] + 46)) < 1
    assert abs(max(x for x, _ in outline) - (AREA[2] + 46)) < 1
    assert desk.counted == desk.shown_count == laid.counted
    desk.drag([(847 + 46, 350), (700, 350), (650, 350)])
    assert "smaller" not in desk.page.inner_text("#task"), (
        "an edge between corners is no handle here"
    )


def test_a_corner_of_the_study_area_is_dragged_and_a_new_one_is_drawn(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.page.click("#tool-area")
    desk.drag([(AREA[0], AREA[1]), (100, 250), (150, 300)])
    assert "smaller" in desk.page.inner_text("#task")
    desk.page.click("#use-area")
    desk.settle()
    assert desk.counted == desk.shown_count < laid.counted
    desk.page.click("#area-outline")
    for place in ((70, 70), (830, 70), (830, 300), (70, 300), (70, 70)):
        desk.click(*place)
    desk.page.click("#use-area")
    desk.settle()
    inside = sum(y < 300 for _, y in laid.clear) + sum(y < 300 for _, y, _ in FALSE)
    assert desk.counted == desk.shown_count == inside
    desk.page.click("#area-circle")
    desk.drag([(450, 350), (500, 350), (700, 350)])
    desk.page.click("#use-area")
    desk.settle()
    assert desk.counted == desk.shown_count
    assert [line["what"] for line in server.log(laid.sheet)] == ["set_area"] * 3
    desk.page.click("#undo")
    desk.settle()
    assert desk.counted == desk.shown_count == inside


def test_a_scale_line_says_what_it_changes_before_it_is_used(
    desk: Desk, server: Server, laid: Laid
) -> None:
    area = desk.page.inner_text("#figures dd:nth-of-type(3)")
    desk.page.click("#tool-scale")
    desk.drag([(100, 200), (200, 200), (300, 200)])
    desk.page.fill("#line-mm", "40")
    assert "Lengths +100" in desk.page.inner_text("#scale-told")
    assert "density \u221275" in desk.page.inner_text("#scale-told")
    desk.page.click("#use-line")
    desk.settle()
    (line,) = server.log(laid.sheet)
    assert line["mm"] == 40
    assert desk.page.inner_text("#figures dd:nth-of-type(3)") != area


def test_notes_and_names_are_shown_as_they_were_typed(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.page.fill("#who", NASTY)
    desk.page.click("#notes-title")
    desk.page.fill("#note", f"{NASTY} at the rim")
    desk.page.click("#note-add")
    desk.settle()
    desk.wait("document.querySelectorAll('#notes li').length === 1")
    assert desk.page.inner_text("#notes p") == f"{NASTY} at the rim"
    desk.page.click("#mark")
    desk.settle()
    desk.wait("document.body.dataset.state === 'checked'")
    assert NASTY in desk.page.inner_text("#mark-told")
    assert desk.page.locator("#panel img").count() == 0
    desk.page.click("#unmark")
    desk.settle()
    kinds = [line["what"] for line in server.log(laid.sheet)]
    assert kinds == ["note", "checked", "unchecked"]
    assert {line["who"] for line in server.log(laid.sheet)} == {NASTY}


@pytest.fixture
def three(browser: Browser, tmp_path: Path) -> Iterator[tuple[Server, list[Laid]]]:
    folder = tmp_path / "three"
    sheets = [lay(folder, name) for name in ("a.png", "b.png", f"c {NASTY.replace('/', '')}.png")]
    running = Server(folder, tmp_path / "state")
    running.start()
    yield running, sheets
    running.kill()


def test_photographs_are_a_queue_with_their_states(
    browser: Browser, three: tuple[Server, list[Laid]]
) -> None:
    server, sheets = three
    with reviewing(browser, server) as desk:
        desk.page.fill("#who", "Ann")
        assert desk.page.inner_text("#photograph-place") == "1 of 3, 0 checked"
        desk.page.click("#mark-and-next")
        desk.wait("document.getElementById('photograph-name').textContent === 'b.png'")
        desk.ready()
        desk.click(*FALSE[0][:2])
        desk.settle()
        desk.key(".")
        desk.wait("document.getElementById('photograph-name').textContent.startsWith('c <img')")
        desk.ready()
        desk.page.click("#photographs")
        first = "document.querySelector('#queue .state').textContent"
        desk.wait(f"{first}.startsWith('checked by Ann, ')")
        states = desk.page.locator("#queue .state").all_inner_texts()
        assert states[1:] == ["in review", "new"]
        desk.page.click("#queue button >> nth=1")
        desk.wait("document.getElementById('photograph-name').textContent === 'b.png'")
        desk.reload()
        assert desk.page.inner_text("#photograph-name") == "b.png"
        assert desk.shown_count == sheets[1].counted - 1
    assert [line["what"] for line in server.log(sheets[0].sheet)] == ["checked"]


def test_two_tabs_see_each_others_edits_and_overwrite_nothing(
    browser: Browser, desk: Desk, server: Server, laid: Laid
) -> None:
    with reviewing(browser, server) as other:
        desk.page.fill("#who", "Ann")
        other.page.fill("#who", "Ben")
        desk.click(*FALSE[0][:2])
        other.wait(f"document.getElementById('stage').dataset.counted === '{laid.counted - 1}'")
        other.click(*FALSE[1][:2])
        desk.wait(f"document.getElementById('stage').dataset.counted === '{laid.counted - 2}'")
        desk.click(*laid.clear[0])
        other.click(*laid.clear[1])
        for each in (desk, other):
            each.wait("document.getElementById('stage').dataset.revision === '4'")
            each.settle()
            assert each.counted == each.shown_count == laid.counted - 4
        other.page.click("#undo")
        desk.wait("document.getElementById('stage').dataset.revision === '5'")
        desk.page.click("#undo")
        for each in (desk, other):
            each.wait("document.getElementById('stage').dataset.revision === '6'")
            each.settle()
            assert each.counted == each.shown_count == laid.counted - 2
    undone = [line for line in server.log(laid.sheet) if line["what"] == "undo"]
    assert [line["who"] for line in undone] == ["Ben", "Ann"], "each undoes what is their own"


def test_the_page_says_so_when_edits_change_the_verdict(desk: Desk, laid: Laid) -> None:
    before = desk.page.get_attribute("#verdict", "data-verdict")
    assert desk.page.is_hidden("#verdict-change")
    desk.page.click("#tool-box")
    desk.drag([(60, 60), (500, 300), (840, 560)])
    desk.settle()
    after = desk.page.get_attribute("#verdict", "data-verdict")
    assert after != before
    assert f"from {before} to {after}" in desk.page.inner_text("#verdict-change")
