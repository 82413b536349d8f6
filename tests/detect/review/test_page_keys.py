"""The page without a mouse, by touch, and what is only for looking."""

from __future__ import annotations

import math

from playwright.sync_api import Browser

from tests.detect.review.browsing import Desk, Server, reviewing
from tests.detect.review.drawn import FALSE, MISSED, Laid


def focus_stage(desk: Desk) -> None:
    """Come to the photograph by the Tab key alone."""
    for _ in range(40):
        if desk.page.evaluate("() => document.activeElement.id") == "stage":
            return
        desk.key("Tab")
    raise AssertionError("the Tab key never came to the photograph")


def cross_to(desk: Desk, x: float, y: float) -> None:
    """Move the cross by the arrow keys to a place of the photograph, as near as its steps allow."""
    for axis, keys in ((0, ("ArrowLeft", "ArrowRight")), (1, ("ArrowUp", "ArrowDown"))):
        for _ in range(200):
            cx, cy = (float(value) for value in desk.stage("cross").split())
            left = ((x - cx), (y - cy))[axis] * float(desk.stage("scale"))
            if abs(left) <= 3:
                break
            fast = "Shift+" if abs(left) > 50 else ""
            desk.key(fast + keys[left > 0])


def test_the_doubtful_are_gone_through_by_keys_alone_most_doubtful_first(
    desk: Desk, server: Server, laid: Laid
) -> None:
    focus_stage(desk)
    assert desk.page.get_attribute("#doubtful", "data-left") == "3"
    desk.key("n")
    assert "Doubt 0.90" in desk.said()
    desk.key("x")
    assert "Doubt 0.80" in desk.said()
    desk.key("k")
    assert "Doubt 0.60" in desk.said()
    assert "1 doubtful spot left" in desk.said()
    desk.key("p")
    assert "Doubt 0.80" in desk.said()
    desk.key("n")
    assert "Doubt 0.60" in desk.said()
    desk.key("x")
    desk.wait("document.getElementById('doubtful').dataset.left === '0'")
    desk.settle()
    ids = [line["spot"] for line in server.log(laid.sheet)]
    first = len(laid.clear) + 3
    assert ids == [str(first + 1), str(first + 3)]
    assert desk.shown_count == laid.counted - 2
    desk.key("c")
    desk.settle()
    assert [line["what"] for line in server.log(laid.sheet)] == ["strike", "strike", "checked"]
    desk.reload()
    assert desk.page.get_attribute("#doubtful", "data-left") == "0", "who was called real stays so"


def test_a_spot_is_placed_moved_resized_and_struck_by_keys_alone(
    desk: Desk, server: Server, laid: Laid
) -> None:
    focus_stage(desk)
    desk.key("ArrowRight")
    cross_to(desk, *MISSED)
    desk.key("Enter")
    desk.settle()
    placed = server.log(laid.sheet)[-1]
    assert placed["what"] == "place"
    assert math.dist((placed["x"], placed["y"]), MISSED) < 4
    desk.key("]")
    desk.key("d", "Shift+ArrowRight", "ArrowDown", "d")
    desk.settle()
    lines = server.log(laid.sheet)
    assert [line["what"] for line in lines] == ["place", "resize", "move"]
    assert lines[1]["radius"] > placed["radius"]
    assert lines[2]["x"] - placed["x"] > 20
    desk.key("d", "ArrowLeft", "Escape")
    desk.key("Enter", "u")
    desk.settle()
    assert [line["what"] for line in server.log(laid.sheet)][3:] == ["strike", "undo"]


def test_a_box_is_struck_by_keys_alone(desk: Desk, server: Server, laid: Laid) -> None:
    focus_stage(desk)
    desk.key("2", "ArrowRight")
    cross_to(desk, 60, 60)
    desk.key("d")
    cross_to(desk, 240, 190)
    desk.key("Enter")
    desk.settle()
    assert desk.shown_count == laid.counted - 4


def test_letters_are_left_alone_in_fields_with_ctrl_and_when_switched_off(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.page.click("#notes-title")
    desk.page.fill("#note", "")
    desk.page.type("#note", "n x 2 u ?")
    assert desk.page.input_value("#note") == "n x 2 u ?"
    assert desk.stage("tool") == "spot"
    desk.page.focus("#stage")
    desk.key("Control+x", "Alt+2")
    assert desk.stage("tool") == "spot"
    desk.key("?")
    assert desk.page.is_visible("#help")
    rows = desk.page.locator("#key-list dt").all_inner_texts()
    assert {"N", "X", "H, held down", "1 to 7"} <= set(rows)
    desk.page.uncheck("#letters")
    desk.key("Escape")
    desk.page.focus("#stage")
    desk.key("2")
    assert desk.stage("tool") == "spot"
    desk.key("ArrowRight", "Control+z")
    assert desk.said() == "Nothing of yours to undo."
    assert server.log(laid.sheet) == []


def painted(desk: Desk, layer: str) -> int:
    """Return how many pixels of a layer are painted."""
    return int(
        desk.page.evaluate(
            """(id) => {
              const canvas = document.getElementById(id);
              const copy = new OffscreenCanvas(canvas.width, canvas.height);
              const context = copy.getContext("2d", { willReadFrequently: true });
              context.drawImage(canvas, 0, 0);
              const { data } = context.getImageData(0, 0, canvas.width, canvas.height);
              let sum = 0;
              for (let i = 3; i < data.length; i += 4) sum += data[i] > 0;
              return sum;
            }""",
            layer,
        )
    )


def seen_rings(desk: Desk) -> int:
    return max(
        painted(desk, f"layer-{name}")
        for name in ("rings", "rings-back")
        if desk.page.is_visible(f"#layer-{name}")
    )


def test_marks_are_hidden_while_a_key_is_held_and_come_back(desk: Desk) -> None:
    desk.page.focus("#stage")
    assert seen_rings(desk) > 1000
    drawn = int(desk.stage("drawn"))
    desk.page.keyboard.down("h")
    desk.wait(f"Number(document.getElementById('stage').dataset.drawn) > {drawn}")
    assert seen_rings(desk) == 0
    desk.page.keyboard.up("h")
    desk.wait(f"Number(document.getElementById('stage').dataset.drawn) > {drawn + 1}")
    assert seen_rings(desk) > 1000


def test_looks_change_what_is_seen_and_nothing_that_is_counted(
    desk: Desk, server: Server, laid: Laid
) -> None:
    ground = painted(desk, "layer-ground")
    desk.page.click("#view-box summary")
    desk.page.check("#show-grid")
    desk.page.wait_for_function("() => document.getElementById('show-grid').checked")
    desk.page.evaluate(
        "() => new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))"
    )
    assert painted(desk, "layer-ground") > ground
    desk.page.fill("#brightness", "1.5")
    desk.page.select_option("#channel", "green")
    look = desk.page.evaluate("() => document.getElementById('layer-photograph').style.filter")
    assert look == 'url("#channel-green") brightness(1.5)'
    desk.page.click("#look-usual")
    assert (
        desk.page.evaluate("() => document.getElementById('layer-photograph').style.filter")
        == "none"
    )
    desk.page.click("#loupe-button")
    desk.page.mouse.move(*desk.at(*laid.clear[0]))
    desk.page.wait_for_selector("#loupe")
    assert server.log(laid.sheet) == []


def test_the_wheel_zooms_where_the_pointer_is_and_a_drag_shifts(desk: Desk, laid: Laid) -> None:
    at = desk.at(300, 300)
    desk.page.mouse.move(*at)
    before = float(desk.stage("scale"))
    desk.page.mouse.wheel(0, -400)
    desk.wait(f"Number(document.getElementById('stage').dataset.scale) > {1.3 * before}")
    assert math.dist(desk.at(300, 300), at) < 1
    desk.drag_on_screen([at, (at[0] + 50, at[1] + 30)])
    assert math.dist(desk.at(300, 300), (at[0] + 50, at[1] + 30)) < 1
    desk.key("0")
    assert abs(float(desk.stage("scale")) - before) < 1e-9


def test_two_fingers_zoom_and_one_taps(browser: Browser, server: Server, laid: Laid) -> None:
    with reviewing(browser, server, has_touch=True) as desk:
        session = desk.page.context.new_cdp_session(desk.page)
        x, y = desk.at(*MISSED)
        before = float(desk.stage("scale"))

        def touch(kind: str, *points: tuple[float, float]) -> None:
            told = [{"x": px, "y": py, "id": k} for k, (px, py) in enumerate(points)]
            session.send("Input.dispatchTouchEvent", {"type": kind, "touchPoints": told})

        touch("touchStart", (x - 40, y), (x + 40, y))
        for wide in (60, 80, 100):
            touch("touchMove", (x - wide, y), (x + wide, y))
        touch("touchEnd")
        desk.wait(f"Number(document.getElementById('stage').dataset.scale) > {2 * before}")
        assert math.dist(desk.at(*MISSED), (x, y)) < 3
        assert server.log(laid.sheet) == []
        sx, sy = desk.at(*MISSED)
        desk.page.touchscreen.tap(sx, sy)
        desk.settle()
        assert [line["what"] for line in server.log(laid.sheet)] == ["place"]


def test_everything_has_a_name_for_those_who_listen(desk: Desk) -> None:
    nameless = desk.page.evaluate(
        """() => [...document.querySelectorAll("button, input, select, textarea")]
             .filter((each) => !(each.textContent.trim() || each.ariaLabel || each.labels?.length))
             .map((each) => each.id || each.outerHTML)"""
    )
    assert nameless == []
    assert desk.page.get_attribute("#said", "aria-live") == "polite"
    x, y, _ = FALSE[0]
    desk.click(x, y)
    desk.settle()
    assert "spots counted" in desk.said()
