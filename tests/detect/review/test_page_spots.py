"""What a person does to single spots on the page, and that it counts."""

from __future__ import annotations

import csv
import math
from pathlib import Path

from typer.testing import CliRunner

from analyse.cli import app
from tests.detect.review.browsing import Desk, Server
from tests.detect.review.drawn import FALSE, HALVES, MISSED, PAIR, RADIUS, Laid


def what(server: Server, laid: Laid) -> list[str]:
    return [line["what"] for line in server.log(laid.sheet)]


def test_what_is_struck_restored_and_placed_is_what_analyse_counts(
    desk: Desk, server: Server, laid: Laid, tmp_path: Path
) -> None:
    assert desk.counted == desk.shown_count == laid.counted
    x, y, _ = FALSE[0]
    desk.click(x, y)
    desk.settle()
    assert desk.shown_count == laid.counted - 1
    desk.click(*laid.clear[3])
    desk.settle()
    desk.click(*laid.clear[3])
    desk.settle()
    assert desk.shown_count == laid.counted - 1
    desk.click(MISSED[0] + 3, MISSED[1] - 2)
    desk.settle()
    assert desk.counted == desk.shown_count == laid.counted
    assert what(server, laid) == ["strike", "strike", "restore", "place"]
    placed = server.log(laid.sheet)[-1]
    off = math.dist((placed["x"], placed["y"]), MISSED)
    assert off < 2.5, "nearer to the object than the click, which was 3.6 pixels beside it"
    assert abs(placed["radius"] - RADIUS) < 1.5
    desk.page.click("#mark")
    desk.settle()
    assert "Checked by" in desk.page.inner_text("#mark-told")
    out = tmp_path / "out"
    result = CliRunner().invoke(app, ["analyse", str(laid.folder), "--out", str(out)])
    assert result.exit_code == 0, result.output
    with (out / "summary.csv").open(encoding="utf-8", newline="") as file:
        (row,) = csv.DictReader(file)
    assert int(row["count"]) == desk.shown_count


def test_a_ring_is_moved_by_dragging_it_and_resized_by_its_handle(
    desk: Desk, server: Server, laid: Laid
) -> None:
    x, y = laid.clear[5]
    desk.drag([(x + 2, y), (x + 30, y + 10), (x + 42, y + 20)])
    desk.settle()
    moved = server.log(laid.sheet)[-1]
    assert moved["what"] == "move"
    assert math.dist((moved["x"], moved["y"]), (x + 40, y + 20)) < 1.5
    x, y = laid.clear[10]
    desk.page.mouse.move(*desk.at(x, y))
    sx, sy = desk.at(x + RADIUS, y)
    desk.drag_on_screen([(sx + 9, sy), (sx + 20, sy), (sx + 29, sy)])
    desk.settle()
    resized = server.log(laid.sheet)[-1]
    assert resized["what"] == "resize"
    assert abs(resized["radius"] - (RADIUS + 20 / float(desk.stage("scale")))) < 1.5
    assert desk.shown_count == laid.counted
    assert "1 moved, 1 resized" in desk.page.inner_text("#changes")


def test_one_spot_is_split_in_two_and_two_are_merged_into_one(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.page.click("#tool-split")
    desk.click(212, 520)
    desk.settle()
    split = server.log(laid.sheet)[-1]
    assert split["what"] == "split"
    assert desk.shown_count == laid.counted + 1
    parts = sorted(split["parts"], key=lambda part: part["x"])
    assert parts[0]["x"] < 212 < parts[1]["x"]
    assert max(abs(part["y"] - PAIR[0][1]) for part in parts) < 4, "along the longer axis"
    desk.page.click("#tool-merge")
    for x, y in HALVES:
        desk.click(x + (3 if x > 606 else -3), y)
    desk.settle()
    merged = server.log(laid.sheet)[-1]
    assert merged["what"] == "merge"
    assert math.dist((merged["into"]["x"], merged["into"]["y"]), (606, 520)) < 3
    assert desk.shown_count == laid.counted


def test_a_split_follows_the_direction_that_is_dragged(
    desk: Desk, server: Server, laid: Laid
) -> None:
    x, y = laid.clear[0]
    desk.key("4")
    desk.drag([(x, y), (x, y + 10), (x, y + 25)])
    desk.settle()
    parts = server.log(laid.sheet)[-1]["parts"]
    assert abs(parts[0]["x"] - parts[1]["x"]) < 2
    assert abs(parts[0]["y"] - parts[1]["y"]) > 0.5 * RADIUS


def test_many_are_struck_by_a_box_and_by_a_loop_and_undone_past_a_reload(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.page.click("#tool-box")
    desk.drag([(60, 60), (300, 120), (340, 190)])
    desk.settle()
    assert desk.shown_count == laid.counted - 6
    desk.page.click("#tool-loop")
    desk.drag([(660, 60), (840, 60), (840, 190), (660, 190), (655, 70)])
    desk.settle()
    assert desk.shown_count == laid.counted - 10
    desk.reload()
    assert desk.shown_count == laid.counted - 10
    desk.page.click("#undo")
    desk.settle()
    assert desk.shown_count == laid.counted - 6
    desk.key("Control+z")
    desk.settle()
    assert desk.shown_count == laid.counted
    assert desk.page.is_disabled("#undo")
    desk.reload()
    desk.page.click("#redo")
    desk.settle()
    assert desk.shown_count == laid.counted - 6
    desk.key("Control+Shift+z")
    desk.settle()
    assert desk.shown_count == laid.counted - 10
    assert desk.page.is_disabled("#redo")
    kinds = ["strike", "strike", "undo", "undo", "redo", "redo"]
    assert what(server, laid) == kinds


def test_all_above_a_doubt_are_shown_and_struck_once_that_is_confirmed(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.page.click("#doubt-all summary")
    desk.page.fill("#doubt-limit", "0.7")
    assert desk.page.inner_text("#doubt-strike") == "Strike these 2 spots"
    assert server.log(laid.sheet) == []
    desk.page.click("#doubt-strike")
    desk.settle()
    assert desk.shown_count == laid.counted - 2
    (line,) = server.log(laid.sheet)
    assert len(line["spots"]) == 2


def test_a_click_beside_the_photograph_places_nothing(
    desk: Desk, server: Server, laid: Laid
) -> None:
    desk.click(-12, 300)
    assert "outside the photograph" in desk.said()
    assert server.log(laid.sheet) == []
