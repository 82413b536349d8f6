"""A spot check on the page: what is seen, marked and compared, by hand and by keys alone."""

from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import shapely
from playwright.sync_api import Browser
from typer.testing import CliRunner

from analyse.cli import app
from detect.spot_check import outline_of
from tests.detect.review.browsing import Desk, Server, reviewing
from tests.detect.review.drawn import MISSED, PAIR, Laid

ALL = 15


@pytest.fixture
def server(browser: Browser, laid: Laid, tmp_path: Path) -> Iterator[Server]:
    running = Server(
        laid.folder, tmp_path / "state", "--grid", "3x5", "--spot-check", str(ALL), "--seed", "3"
    )
    running.start()
    yield running
    running.kill()


@pytest.fixture
def desk(browser: Browser, server: Server) -> Iterator[Desk]:
    with reviewing(browser, server) as opened:
        opened.wait("document.getElementById('stage').dataset.quadrat")
        yield opened


def objects(laid: Laid) -> list[tuple[float, float]]:
    """What a person sees: the pair as two, the halves as one."""
    return [*laid.clear, MISSED, *PAIR, (606.0, 520.0)]


def outlines(server: Server, laid: Laid) -> dict[str, Any]:
    """Outline of each quadrat drawn, by its number."""
    draw = server.log(laid.sheet)[0]["draw"]
    return {str(each["quadrat"]): outline_of(each["outline"]) for each in draw["quadrats"]}


def rings(desk: Desk) -> int:
    """How many pixels of the layer of rings show something, of the two that change places."""
    count = desk.page.evaluate(
        "() => { const c = document.querySelector("
        "'#layer-rings:not([hidden]), #layer-rings-back:not([hidden])');"
        " const copy = new OffscreenCanvas(c.width, c.height).getContext('2d', { willReadFrequently: true });"
        " copy.drawImage(c, 0, 0);"
        " const d = copy.getImageData(0, 0, c.width, c.height).data;"
        " let n = 0; for (let i = 3; i < d.length; i += 4) n += d[i] > 0; return n; }",
    )
    assert isinstance(count, int)
    return count


def mark(desk: Desk, places: list[tuple[float, float]]) -> None:
    """Click places of the quadrat that is shown."""
    for k, (x, y) in enumerate(places, start=1):
        desk.click(x, y)
        desk.wait(f"document.getElementById('stage').dataset.places === '{k}'")


def go_on(desk: Desk, done: int) -> None:
    """End a quadrat."""
    desk.page.click("#spot-check-next")
    desk.wait(f"document.getElementById('stage').dataset.done === '{done}'")


def test_marking_every_object_gives_the_true_number_and_shows_nothing_before(
    desk: Desk, server: Server, laid: Laid
) -> None:
    assert desk.page.inner_text("#spot-check-title") == f"Spot check: quadrat 1 of {ALL}"
    assert rings(desk) == 0
    for hidden in ("#tools", "#sections", "#count-line", "#undo", "#mark"):
        assert not desk.page.is_visible(hidden), hidden
    shapes = outlines(server, laid)
    for done in range(1, ALL + 1):
        outline = shapes[desk.stage("quadrat")]
        inside = [each for each in objects(laid) if outline.intersects(shapely.Point(each))]
        mark(desk, inside)
        go_on(desk, done)
    desk.wait("document.body.dataset.mode === 'spot-check-done'")
    said = desk.page.inner_text("#spot-check-sentence")
    assert "are corrected to 36 (95 % limits 36 to 36)" in said
    assert f"the {laid.counted} counted in all" in said
    lines = server.log(laid.sheet)
    assert [line["what"] for line in lines] == ["spot_check_drawn"] + ["spot_check_marked"] * ALL
    assert sum(line.get("count", 0) for line in lines) == 36
    again = CliRunner().invoke(app, ["spot-check", str(laid.sheet)])
    assert said in again.output.replace("\n", " ")
    assert rings(desk) == 0
    desk.page.click("#spot-check-show")
    desk.wait("!document.body.dataset.mode")
    desk.settle()
    desk.page.evaluate(
        "() => new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))"
    )
    assert rings(desk) > 0
    assert desk.counted == laid.counted, "marks alone change no spot"
    desk.page.click("#spot-check-place")
    desk.settle()
    placed = [line for line in server.log(laid.sheet) if line["what"] == "place"]
    assert min(math.dist((line["x"], line["y"]), MISSED) for line in placed) < 2
    assert desk.counted == laid.counted + len(placed)
    assert said == desk.page.inner_text("#spot-check-sentence")


def test_by_keys_alone_with_a_mistake_taken_back_and_a_closed_tab(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.page.focus("#stage")
    desk.key("ArrowRight", "Enter")
    desk.wait("document.getElementById('stage').dataset.places === '1'")
    desk.key("Shift+ArrowRight", "Enter")
    desk.wait("document.getElementById('stage').dataset.places === '2'")
    desk.key("Control+z")
    desk.wait("document.getElementById('stage').dataset.places === '1'")
    first = desk.stage("quadrat")
    desk.key("n")
    desk.wait("document.getElementById('stage').dataset.done === '1'")
    assert desk.stage("quadrat") != first
    desk.key("ArrowDown", "Enter")
    desk.wait("document.getElementById('stage').dataset.places === '1'")
    second = desk.stage("quadrat")
    desk.wait("document.getElementById('saved').dataset.state === 'saved'")
    desk.reload()
    desk.wait("document.getElementById('stage').dataset.places === '1'")
    assert desk.stage("quadrat") == second, "it goes on where it was left"
    assert desk.stage("done") == "1"
    desk.page.focus("#stage")
    desk.key("b")
    desk.wait(f"document.getElementById('stage').dataset.quadrat === '{first}'")
    desk.key("u", "n")
    desk.wait(f"document.getElementById('stage').dataset.quadrat === '{second}'")
    desk.wait("document.getElementById('saved').dataset.state === 'saved'")
    lines = [line for line in server.log(laid.sheet) if line["what"] == "spot_check_marked"]
    assert [(str(line["quadrat"]), line["count"]) for line in lines] == [(first, 1), (first, 0)]
    # Keys that would tell or change what was detected do nothing.
    desk.key("s", "x", "k", "g", "c")
    assert len(server.log(laid.sheet)) == 3


def test_a_click_outside_the_quadrat_marks_nothing_and_one_on_a_mark_takes_it_away(
    desk: Desk, server: Server, laid: Laid
) -> None:
    outline = outlines(server, laid)[desk.stage("quadrat")]
    middle = (outline.centroid.x, outline.centroid.y)
    desk.click(outline.bounds[0] - 12, middle[1])
    desk.wait("document.getElementById('said').textContent.includes('outside the quadrat')")
    assert desk.stage("places") == "0"
    mark(desk, [middle])
    desk.click(*middle)
    desk.wait("document.getElementById('stage').dataset.places === '0'")
