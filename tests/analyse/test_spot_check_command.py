"""The command of spot checks from draw to tables, and every sentence for what cannot be done."""

from __future__ import annotations

import csv
import re
from pathlib import Path

import cv2
import numpy as np
import pytest
import shapely
from typer.testing import CliRunner

from analyse.blind_pictures import quadrat_picture
from analyse.cli import app
from analyse.tables import SUMMARY_COLUMNS
from detect.amendments import read_amendments
from detect.photograph import read_photograph
from detect.scale import Scale
from detect.spot_check import latest_spot_check, outline_of
from tests.discs import scattered
from tests.reviewing import write_sheet_of

OBJECTS = scattered(12, seed=4)
SCALE = Scale(np.diag([0.1, 0.1, 1.0]), "line", 0.002, "a line")


def run(*arguments: object) -> tuple[int, str]:
    done = CliRunner().invoke(app, ["spot-check", *map(str, arguments)])
    return done.exit_code, done.output


def filled(form: Path, sheet: Path, **changed: str) -> Path:
    """Fill in the list as a person does who errs nowhere."""
    known = latest_spot_check(read_amendments(sheet))
    assert known is not None
    outlines = {str(each.quadrat): outline_of(each.outline) for each in known.draw.quadrats}
    with form.open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    for row in rows:
        inside = shapely.intersects_xy(outlines[row["quadrat"]], OBJECTS[:, 0], OBJECTS[:, 1])
        row["count"] = str(int(inside.sum()))
    rows[0] |= changed
    path = form.with_name("hand.csv")
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, rows[0].keys())
        writer.writeheader()
        writer.writerows(rows)
    return path


@pytest.fixture
def sheet(tmp_path: Path) -> Path:
    """Twelve discs, of which the first nine were found."""
    path = write_sheet_of(tmp_path, scale=SCALE)
    text = path.read_text(encoding="utf-8")
    log = path.with_name("a.amendments.jsonl")
    lines = [
        f'{{"schema": 2, "id": "s{k}", "time": "2026-05-04T10:00:00+00:00", "who": "Ann",'
        f' "what": "strike", "spot": "{k}"}}\n'
        for k in (10, 11, 12)
    ]
    log.write_text("".join(lines), encoding="utf-8")
    assert text
    return path


def drawn(sheet: Path, number: int = 8) -> Path:
    code, said = run(sheet, "--draw", number, "--grid", "4x5", "--who", "Ann")
    assert code == 0, said
    assert f"Drawn: {number} of 20 quadrats, seed 1." in said
    return sheet.with_name("a.spot_check.csv")


def test_from_the_draw_to_the_tables(sheet: Path, tmp_path: Path) -> None:
    form = drawn(sheet, 20)
    code, said = run(sheet, "--counts", filled(form, sheet), "--who", "Bo")
    assert code == 0, said
    assert re.search(r"objects, difference +12 +12 +12", said)
    assert "in 20 of 20 quadrats, drawn at random, a person counted 12" in said
    assert "The count may not be trusted on the rest" in said
    assert "recall" not in said.split("Spot check")[0]
    assert run(sheet) == (0, said)
    done = CliRunner().invoke(
        app, ["analyse", str(sheet), "--out", str(tmp_path / "out"), "--simulations", "99"]
    )
    assert done.exit_code == 0, done.output
    assert "a.png: Spot check: in 20 of 20 quadrats" in done.output
    with (tmp_path / "out" / "summary.csv").open(encoding="utf-8", newline="") as file:
        (row,) = csv.DictReader(file)
    assert (row["spot_check_quadrats"], row["count_corrected"]) == ("20", "12.0")
    assert (row["count"], row["spot_check_trust"]) == ("9", "not trusted")
    assert float(row["density_corrected"]) == pytest.approx(12 / float(row["area_mm2"]) * 100)
    assert (row["spot_check_recall"], row["spot_check_precision"]) == ("", "")
    with (tmp_path / "out" / "tests.csv").open(encoding="utf-8", newline="") as file:
        rows = {row["statistic"]: row for row in csv.DictReader(file)}
    assert rows["count_corrected"]["value"] == "12.0"
    assert "Cochran 1977" in rows["count_corrected"]["method"]
    assert rows["count_corrected_plain"]["n"] == "20"
    assert "recall" not in rows


def test_the_list_and_the_pictures_do_not_tell_what_was_detected(sheet: Path) -> None:
    form = drawn(sheet)
    text = form.read_text(encoding="utf-8")
    assert text.splitlines()[0] == "quadrat,x_px,y_px,width_px,height_px,x_mm,y_mm,count"
    assert all(line.endswith(",") for line in text.splitlines()[1:])
    page = form.with_name("a.spot_check.html").read_text(encoding="utf-8")
    assert page.count("data:image/jpeg;base64,") == 8
    assert "http" not in page
    assert "stratum" not in text + page
    photograph = read_photograph(sheet.with_name("a.png"))
    known = latest_spot_check(read_amendments(sheet))
    assert known is not None
    each = known.draw.quadrats[0]
    picture = quadrat_picture(photograph, outline_of(each.outline))
    assert max(picture.shape) == 900
    x0, y0, x1, y1 = outline_of(each.outline).bounds
    inner = photograph.stored[int(y0) + 3 : int(y1) - 2, int(x0) + 3 : int(x1) - 2]
    middle = picture[picture.shape[0] // 2 - 150 :][:300, picture.shape[1] // 2 - 150 :][:, :300]
    near = cv2.resize(np.ascontiguousarray(inner), (1, 1), interpolation=cv2.INTER_AREA)
    assert np.abs(middle.mean(axis=(0, 1)) - near[0, 0]).max() < 40  # bright, as photographed


def test_drawing_again_changes_nothing_and_another_seed_draws_anew(sheet: Path) -> None:
    form = drawn(sheet)
    log, text = sheet.with_name("a.amendments.jsonl").read_bytes(), form.read_bytes()
    drawn(sheet)
    assert sheet.with_name("a.amendments.jsonl").read_bytes() == log
    assert form.read_bytes() == text
    code, _ = run(sheet, "--draw", 8, "--grid", "4x5", "--seed", 2)
    assert code == 0
    assert form.read_bytes() != text
    known = latest_spot_check(read_amendments(sheet))
    assert known is not None
    assert known.draw.seed == 2


def test_without_the_photograph_there_is_a_list_alone(sheet: Path, tmp_path: Path) -> None:
    sheet.with_name("a.png").unlink()
    code, said = run(sheet, "--draw", 8, "--grid", "4x5", "--out", tmp_path / "there")
    assert code == 0
    assert "Note: a.png is not to be found, so there are no pictures." in said
    assert [path.name for path in (tmp_path / "there").iterdir()] == ["a.spot_check.csv"]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((), "No spot check was drawn for a.sheet.json; draw one with --draw 10 first."),
        (("--draw", 4), "A spot check takes 5 to 200 quadrats, not 4."),
        (("--draw", 60, "--grid", "4x5"), "There are 20 quadrats, fewer than the 60 to be drawn"),
        (("--draw", "some"), "--draw"),
        (("--draw", 8, "--counts", "x.csv"), "--draw and --counts cannot apply together"),
        (("--seed", 3), "--seed 3 is for drawing; give it together with --draw"),
        (("--rings", "3x8"), "--rings 3x8 is for drawing"),
    ],
)
def test_wrong_requests_are_told(sheet: Path, arguments: tuple[object, ...], message: str) -> None:
    code, said = run(sheet, *arguments)
    assert code == 2
    assert message in said


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"count": ""}, "hand.csv, row 2, column count, is empty; fill it in or remove the row."),
        ({"count": "many"}, "hand.csv, row 2, column count: 'many' is not a count"),
        (
            {"count": "10001"},
            "hand.csv, row 2: nobody counts 10,001 in one quadrat; a spot check takes up to 10,000",
        ),
        ({"quadrat": "99"}, "hand.csv, row 2: quadrat 99 was not drawn for this spot check (quad"),
    ],
)
def test_wrong_counts_are_told_and_nothing_is_kept(
    sheet: Path, change: dict[str, str], message: str
) -> None:
    hand = filled(drawn(sheet), sheet, **change)
    code, said = run(sheet, "--counts", hand)
    assert (code, message in said) == (2, True), said
    assert run(sheet)[1].startswith("Error: ")


def test_a_list_with_gaps_or_repeats_is_told(sheet: Path) -> None:
    form = drawn(sheet)
    hand = filled(form, sheet)
    lines = hand.read_text(encoding="utf-8").splitlines(keepends=True)
    hand.write_text("".join(lines[:-1]), encoding="utf-8")
    assert "of the 8 quadrats drawn; a sample with gaps is no random" in run(
        sheet, "--counts", hand
    )[1].replace("\n", " ")
    hand.write_text("".join([*lines, lines[1]]), encoding="utf-8")
    assert "comes twice; remove one of its rows." in run(sheet, "--counts", hand)[1]
    hand.write_text("x,y\n1,2\n", encoding="utf-8")
    assert "hand.csv has no column 'quadrat' (its columns: x, y)" in run(sheet, "--counts", hand)[1]
    code, said = run(sheet)
    assert code == 2
    assert "8 of the 8 quadrats drawn for a.sheet.json are not counted yet" in said


def test_a_folder_of_two_sheets_is_told(tmp_path: Path) -> None:
    for name in ("a.png", "b.png"):
        write_sheet_of(tmp_path, name)
    code, said = run(tmp_path, "--draw", 8)
    assert (code, f"{tmp_path} holds 2 sheets; name one of them." in said) == (2, True)


def test_the_columns_stand_at_the_end_of_the_summary() -> None:
    assert "count_corrected_low" in SUMMARY_COLUMNS[SUMMARY_COLUMNS.index("verdict") + 1 :]
