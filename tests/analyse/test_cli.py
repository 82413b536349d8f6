"""The one command line, as a person runs it: tables, exit codes, one sentence per trouble."""

from __future__ import annotations

import csv
import errno
import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import typer.main
from typer.core import TyperGroup
from typer.testing import CliRunner, Result

from analyse.cli import app, main
from detect.requests import tool_version
from detect.sheet import Amendment, amendments_path, append_amendment, read_sheet
from tests.discs import DIAMETER, scattered, write_discs

ROOT = Path(__file__).parents[2]
FAST = ("--simulations", "199")


def run(*arguments: object) -> Result:
    result = CliRunner().invoke(app, [str(argument) for argument in arguments])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


def refused(result: Result, message: str) -> bool:
    """Whether a command ended with 2 and exactly this sentence."""
    shown = (result.exit_code, result.stdout, result.stderr)
    assert shown == (2, "", f"Error: {message}\n")
    return True


def a_table(path: Path, points: np.ndarray) -> Path:
    rows = "".join(f"{x},{y}\n" for x, y in points)
    path.write_text(f"x,y\n{rows}", encoding="utf-8")
    return path


@pytest.fixture
def points(tmp_path: Path) -> Path:
    return a_table(tmp_path / "points.csv", np.random.default_rng(3).uniform(0, 100, (80, 2)))


@pytest.fixture
def sheets(tmp_path: Path) -> Path:
    """A folder with the sheet of one photograph of 24 spots."""
    photo = write_discs(tmp_path / "bed_1.png", scattered(24, seed=4))
    out = tmp_path / "sheets"
    options = ("--diameter", DIAMETER, "--mm-per-pixel", "0.25", "--out", out)
    assert run("detect", photo, *options).exit_code == 0
    return out


def test_the_version_is_told() -> None:
    result = run("--version")
    assert (result.exit_code, result.stdout) == (0, f"strewn {tool_version()}\n")


def test_nothing_said_shows_help() -> None:
    result = run()
    assert "detect" in result.output
    assert "survey" in result.output


def test_python_m_analyse_is_the_command() -> None:
    done = subprocess.run(
        [sys.executable, "-m", "analyse", "--version"],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout == f"strewn {tool_version()}\n"


@pytest.mark.parametrize("command", ["detect", "analyse", "survey", "score"])
def test_every_command_has_help_with_its_options(command: str) -> None:
    result = run(command, "--help")
    assert result.exit_code == 0
    assert "--out" in result.stdout


# Analyse: sheets.


def test_a_sheet_is_analysed_with_its_photograph(sheets: Path, tmp_path: Path) -> None:
    out = tmp_path / "out"
    result = run("analyse", sheets, "--out", out, *FAST)
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert lines[0].split() == ["photograph", "count", "per", "cm2", "VMR", "X2/df", "p", "verdict"]
    assert lines[1].split()[:3] == ["bed_1.png", "24", "0.286"]
    assert lines[2].startswith("VMR (variance-to-mean ratio) is of whole quadrats")
    assert lines[3:] == [f"Tables: {out}", f"Report: {out / 'report.html'}"]
    assert "Note: No person has checked these spots" in result.stderr
    names = sorted(path.name for path in out.iterdir())
    assert names == [
        "curves.csv", "look_first.csv", "quadrats.csv", "report.html", "summary.csv", "tests.csv",
    ]  # fmt: skip
    (row,) = csv.DictReader((out / "summary.csv").read_text(encoding="utf-8").splitlines())
    assert float(row["density_per_cm2"]) == pytest.approx(24 / (420 * 320 * 0.0625) * 100)
    quadrats = csv.DictReader((out / "quadrats.csv").read_text(encoding="utf-8").splitlines())
    assert sum(int(quadrat["count"]) for quadrat in quadrats) == 24
    assert "data:image/jpeg" in (out / "report.html").read_text(encoding="utf-8")


def test_the_same_request_gives_the_same_bytes(sheets: Path, tmp_path: Path) -> None:
    for out in ("one", "two"):
        assert run("analyse", sheets, "--out", tmp_path / out, *FAST).exit_code == 0
    for name in ("quadrats.csv", "summary.csv", "tests.csv", "report.html"):
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "two" / name).read_bytes()


def test_a_sheet_whose_photograph_is_gone_is_analysed_all_the_same(
    sheets: Path, tmp_path: Path
) -> None:
    (tmp_path / "bed_1.png").unlink()
    result = run("analyse", sheets / "bed_1.sheet.json", "--out", tmp_path / "out", *FAST)
    assert result.exit_code == 0
    assert "data:image/jpeg" not in (tmp_path / "out" / "report.html").read_text(encoding="utf-8")


def test_another_picture_under_the_same_name_is_not_shown(sheets: Path, tmp_path: Path) -> None:
    write_discs(tmp_path / "bed_1.png", scattered(10, seed=9))
    assert run("analyse", sheets, "--out", tmp_path / "out", *FAST).exit_code == 0
    assert "data:image/jpeg" not in (tmp_path / "out" / "report.html").read_text(encoding="utf-8")


def test_without_a_scale_pixels_are_named_everywhere(tmp_path: Path) -> None:
    photo = write_discs(tmp_path / "bed_1.png", scattered(24, seed=4))
    run("detect", photo, "--diameter", DIAMETER, "--out", tmp_path / "sheets")
    out = tmp_path / "out"
    result = run("analyse", tmp_path / "sheets", "--out", out, *FAST)
    assert result.exit_code == 0
    assert "no scale" in result.stdout
    assert "Note: No scale is known" in result.stderr
    (row,) = csv.DictReader((out / "summary.csv").read_text(encoding="utf-8").splitlines())
    assert row["density_per_cm2"] == row["area_mm2"] == row["quadrat_mm"] == ""
    assert "No scale is known" in (out / "report.html").read_text(encoding="utf-8")


def test_a_damaged_sheet_is_listed_and_the_others_are_done(sheets: Path, tmp_path: Path) -> None:
    (sheets / "bed_2.sheet.json").write_text("{")
    result = run("analyse", sheets, "--out", tmp_path / "out", *FAST)
    assert result.exit_code == 1
    assert "bed_1.png" in result.stdout
    (failure,) = [line for line in result.stderr.splitlines() if not line.startswith("Note: ")]
    assert failure.startswith("bed_2.sheet.json: ")
    assert "bed_2.sheet.json" in (tmp_path / "out" / "report.html").read_text(encoding="utf-8")


def test_a_folder_without_sheets_is_refused(tmp_path: Path) -> None:
    result = run("analyse", tmp_path, "--out", tmp_path / "out")
    assert refused(
        result, f"The folder {tmp_path} holds no sheets (*.sheet.json); run strewn detect first."
    )


def test_a_quadrat_larger_than_the_area_is_a_wrong_request(sheets: Path, tmp_path: Path) -> None:
    result = run("analyse", sheets, "--quadrat", "10m", "--out", tmp_path / "out", *FAST)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert result.stderr.startswith("bed_1.sheet.json: ")
    assert result.stderr.count("\n") == 1
    assert list((tmp_path / "out").iterdir()) == []


def test_rings_need_a_dish(sheets: Path, tmp_path: Path) -> None:
    result = run("analyse", sheets, "--rings", "3x8", "--out", tmp_path / "out", *FAST)
    assert result.exit_code == 2
    assert "dish" in result.stderr


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (["--quadrat", "-5mm"], "--quadrat must be positive and finite, not '-5mm'."),
        (["--quadrat", "nanmm"], "--quadrat must be positive and finite, not 'nanmm'."),
        (["--quadrat", "5"], "--quadrat needs a unit: '5' could be px, mm, cm or m; write 5mm."),
        (["--grid", "5"], "--grid must be two whole numbers such as 5x5, not '5'."),
        (
            ["--grid", "5x5", "--quadrat", "5mm"],
            "Only one of --quadrat, --grid and --rings can lay the quadrats; choose one.",
        ),
        (
            ["--area", "0,0,1,1"],
            "--area 0,0,1,1 is for tables of points; a sheet has its own, and counts have none."
            " Leave it out.",
        ),
        (
            ["--unit", "cm"],
            "--unit cm is for tables of points; a sheet has its own, and counts have none."
            " Leave it out.",
        ),
    ],
)
def test_wrong_options_are_refused(
    sheets: Path, tmp_path: Path, options: list[str], message: str
) -> None:
    assert refused(run("analyse", sheets, *options, "--out", tmp_path / "out"), message)
    assert not (tmp_path / "out").exists()


@pytest.mark.parametrize("options", [["--seed", "-1"], ["--simulations", "0"], ["--seed", "x"]])
def test_chance_needs_whole_numbers(sheets: Path, options: list[str]) -> None:
    result = run("analyse", sheets, *options)
    assert result.exit_code == 2
    assert options[0] in result.stderr


# Analyse: tables.


def test_a_table_of_points_is_analysed(points: Path, tmp_path: Path) -> None:
    out = tmp_path / "out"
    result = run("analyse", points, "--area", "0,0,100,100", "--out", out, *FAST)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[1].split()[:3] == ["points.csv", "80", "0.8"]
    assert result.stderr == ""


def test_the_unit_holds_for_points_and_area(points: Path, tmp_path: Path) -> None:
    options = ("--area", "0,0,100,100", "--unit", "cm", "--out", tmp_path / "out", *FAST)
    result = run("analyse", points, *options)
    assert result.stdout.splitlines()[1].split()[:3] == ["points.csv", "80", "0.008"]


@pytest.mark.parametrize(
    ("n", "words"), [(0, "too few to tell"), (1, "too few to tell"), (60, "clumped")]
)
def test_no_points_one_point_and_all_in_one_place(tmp_path: Path, n: int, words: str) -> None:
    table = a_table(tmp_path / "p.csv", np.linspace([10.0, 10.0], [11.0, 11.0], 60)[:n])
    result = run("analyse", table, "--area", "0,0,100,100", "--out", tmp_path / "out", *FAST)
    assert result.exit_code == 0
    assert words in result.stdout
    assert (tmp_path / "out" / "report.html").exists()


def test_counts_are_analysed(tmp_path: Path) -> None:
    table = tmp_path / "counts.csv"
    table.write_text("count\n" + "\n".join(["0", "9", "0", "0", "8", "1", "0", "7", "0", "0"]))
    out = tmp_path / "out"
    result = run("analyse", "--counts", table, "--out", out, *FAST)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[1].split()[:3] == ["counts.csv", "25", "-"]
    assert "clumped" in result.stdout
    known = run("analyse", "--counts", table, "--quadrat", "10mm", "--out", out, *FAST)
    assert known.stdout.splitlines()[1].split()[:3] == ["counts.csv", "25", "2.5"]


def test_sheets_points_and_counts_go_together(sheets: Path, points: Path, tmp_path: Path) -> None:
    counts = tmp_path / "counts.csv"
    counts.write_text("1,2,3\n0,1,2\n")
    tables = (points, "--area", "0,0,100,100", "--counts", counts)
    result = run("analyse", sheets, *tables, "--out", tmp_path / "out", *FAST)
    assert result.exit_code == 0
    names = [line.split()[0] for line in result.stdout.splitlines()[1:4]]
    assert names == ["bed_1.png", "points.csv", "counts.csv"]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("a,y\n1,2\n", "'x'"),
        ("x,y\n1,two\n", "'two'"),
        ("x,y\n1,nan\n", "nan"),
        ("x,y\n1,inf\n", "inf"),
        ("", "points.csv"),
    ],
)
def test_a_bad_table_of_points_is_told_in_a_sentence(
    tmp_path: Path, text: str, message: str
) -> None:
    table = tmp_path / "points.csv"
    table.write_text(text)
    result = run("analyse", table, "--area", "0,0,9,9", "--out", tmp_path / "out", *FAST)
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr.startswith("points.csv: ")
    assert message in result.stderr
    assert result.stderr.count("\n") == 1
    assert list((tmp_path / "out").iterdir()) == []


@pytest.mark.parametrize("cell", ["1.5", "-1", "many"])
def test_a_bad_count_is_told_in_a_sentence(tmp_path: Path, cell: str) -> None:
    table = tmp_path / "counts.csv"
    table.write_text(f"count\n1\n2\n{cell}\n")
    result = run("analyse", "--counts", table, "--out", tmp_path / "out", *FAST)
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr.startswith("counts.csv: ")
    assert cell in result.stderr
    assert result.stderr.count("\n") == 1


def test_tables_lack_nothing_silently(points: Path, tmp_path: Path) -> None:
    assert refused(
        run("analyse", points, "--out", tmp_path / "out"),
        "points.csv is a table of points, which needs its study area; give --area X0,Y0,X1,Y1 or"
        " a GeoJSON file (for a table of counts, use --counts).",
    )
    assert refused(
        run("analyse", "--out", tmp_path / "out"),
        "Nothing to analyse; name sheets, their folder, or tables (CSV).",
    )
    gone = tmp_path / "gone.csv"
    assert refused(
        run("analyse", gone, "--area", "0,0,1,1"), f"{gone} does not exist; check the path."
    )
    assert refused(
        run("analyse", points, "--area", "0,0,1,1", "--unit", "inch"),
        "--unit must be mm, cm or m, not 'inch'.",
    )
    counts = tmp_path / "counts.csv"
    counts.write_text("count\n1\n2\n")
    assert refused(
        run("analyse", "--counts", counts, "--grid", "5x5"),
        "--grid 5x5 cannot apply to a table of counts, whose quadrats are laid already;"
        " leave it out.",
    )


def test_an_unusable_area_is_refused(points: Path, tmp_path: Path) -> None:
    crossing = [[0, 0], [20, 30], [20, 0], [0, 30], [0, 0]]
    drawn = tmp_path / "drawn.geojson"
    drawn.write_text(json.dumps({"type": "Polygon", "coordinates": [crossing]}))
    for text in ("0,0,0,0", "0,0,nan,1", "gone.geojson", drawn):
        result = run("analyse", points, "--area", text, "--out", tmp_path / "out")
        assert (result.exit_code, result.stdout) == (2, "")
        assert result.stderr.startswith("Error: ")
        assert result.stderr.count("\n") == 1


def test_two_files_of_one_name_are_refused(points: Path, tmp_path: Path) -> None:
    (tmp_path / "b").mkdir()
    other = a_table(tmp_path / "b" / "points.csv", np.zeros((3, 2)))
    assert refused(
        run("analyse", points, other, "--area", "0,0,1,1"),
        f"{points} and {other} have one name (points.csv); rename one, or analyse them one at a"
        " time with different folders for --out.",
    )


# Survey.


def survey(folder: Path, *options: object) -> Result:
    return run("survey", folder, "--workers", 1, *FAST, *options)


@pytest.fixture
def beds(tmp_path: Path) -> Path:
    folder = tmp_path / "in"
    folder.mkdir()
    write_discs(folder / "bed_1.png", scattered(24, seed=4))
    return folder


@pytest.mark.parametrize(
    ("option", "value", "message"),
    [
        ("--simulations", "10", "--simulations must lie between 99 and 1,000,000, not at 10;"),
        ("--seed", "-1", "--seed must be a whole number of 0 or more, not -1."),
        ("--seed", "x", "--seed must be a whole number of 18 digits at most, not 'x'."),
    ],
)
def test_chance_that_cannot_be_is_refused_before_anything_is_done(
    beds: Path, tmp_path: Path, option: str, value: str, message: str
) -> None:
    result = survey(beds, option, value, "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert result.stderr.startswith(f"Error: {message}")
    assert not (tmp_path / "out").exists()


def test_a_folder_is_surveyed_by_options(beds: Path, tmp_path: Path) -> None:
    out = tmp_path / "out"
    result = survey(beds, "--diameter", DIAMETER, "--grid", "3x4", "--out", out)
    assert result.exit_code == 0
    assert "bed_1.png" in result.stdout
    assert sorted(path.name for path in out.iterdir()) == [
        "bed_1.overlay.jpg", "bed_1.points.csv", "bed_1.sheet.json", "curves.csv",
        "look_first.csv", "quadrats.csv", "report.html",
        "summary.csv", "tests.csv",
    ]  # fmt: skip
    rows = list(csv.DictReader((out / "quadrats.csv").read_text(encoding="utf-8").splitlines()))
    assert len(rows) == 12


def test_a_survey_of_one_file_is_told_to_be_for_folders(beds: Path, tmp_path: Path) -> None:
    photograph = next(beds.glob("*.png"))
    result = survey(photograph, "--out", tmp_path / "out")
    assert refused(
        result,
        f"{photograph} is a file, and a survey takes a folder of photographs;"
        " give its folder, or use detect for one photograph.",
    )
    assert not (tmp_path / "out").exists()


def test_a_folder_is_surveyed_by_the_recipe_in_it(beds: Path, tmp_path: Path) -> None:
    recipe = f'[trial]\ntitle = "Beds"\nseed = 5\n[[set]]\nmatch = "*"\ndiameter = "{DIAMETER}"\n'
    (beds / "survey.toml").write_text(recipe + 'factors = { block = "north" }\n')
    out = tmp_path / "out"
    result = survey(beds, "--out", out)
    assert result.exit_code == 0
    (row,) = csv.DictReader((out / "summary.csv").read_text(encoding="utf-8").splitlines())
    assert (row["block"], row["seed"], row["count"]) == ("north", "5", "24")
    assert "Beds" in (out / "report.html").read_text(encoding="utf-8")
    again = survey(beds, "--out", out, "--seed", "6")
    assert again.exit_code == 0
    (row,) = csv.DictReader((out / "summary.csv").read_text(encoding="utf-8").splitlines())
    assert row["seed"] == "6"


def test_options_beside_a_recipe_are_refused(beds: Path, tmp_path: Path) -> None:
    recipe = beds / "survey.toml"
    recipe.write_text('[[set]]\nmatch = "*"\n')
    assert refused(
        survey(beds, "--dish-mm", "86"),
        f"--dish-mm cannot apply beside the recipe {recipe}, which says how photographs are"
        " treated; write it there.",
    )


def test_a_bad_recipe_stops_before_anything_is_done(beds: Path, tmp_path: Path) -> None:
    recipe = tmp_path / "r.toml"
    recipe.write_text('[[set]]\nmatch = "*"\ncolor = "red"\n')
    result = survey(beds, "--recipe", recipe, "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert result.stderr.startswith("Error: 'color' in [[set]] 1 is not known")
    assert not (tmp_path / "out").exists()
    assert survey(beds, "--recipe", tmp_path / "gone.toml").exit_code == 2


def test_one_bad_photograph_is_listed_in_table_and_report(beds: Path, tmp_path: Path) -> None:
    (beds / "bed_2.jpg").write_bytes(b"a letter")
    out = tmp_path / "out"
    result = survey(beds, "--diameter", DIAMETER, "--out", out)
    assert result.exit_code == 1
    assert "bed_1.png" in result.stdout
    assert "bed_2.jpg: " in result.stderr
    assert "bed_2.jpg" in (out / "report.html").read_text(encoding="utf-8")
    assert not list(out.glob("bed_2*"))


def test_a_photograph_of_nothing_gives_a_line_and_a_report(tmp_path: Path) -> None:
    folder, out = tmp_path / "in", tmp_path / "out"
    folder.mkdir()
    write_discs(folder / "none.png", [])
    options = ("--diameter", DIAMETER, "--highest-doubt", "0.02", "--out", out)
    result = survey(folder, *options)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[1].split()[:2] == ["none.png", "0"]
    assert "too few to tell" in result.stdout
    assert len(read_sheet(out / "none.sheet.json").spots) == 0
    assert (out / "none.points.csv").read_text().count("\n") == 1
    assert (out / "report.html").exists()


@pytest.mark.parametrize("left", [0, 1])
def test_hand_edits_may_leave_one_spot_or_none(sheets: Path, tmp_path: Path, left: int) -> None:
    sheet = sheets / "bed_1.sheet.json"
    for spot in read_sheet(sheet).spots.id[left:]:
        time = "2026-01-02T10:00:00Z"
        append_amendment(amendments_path(sheet), Amendment(spot, time, "me", "strike", spot))
    result = run("analyse", sheet, "--out", tmp_path / "out", *FAST)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[1].split()[:2] == ["bed_1.png", str(left)]
    assert "too few to tell" in result.stdout


@pytest.mark.parametrize("folder", ["gone", "empty"])
def test_a_folder_of_nothing_is_refused(tmp_path: Path, folder: str) -> None:
    (tmp_path / "empty").mkdir()
    result = survey(tmp_path / folder, "--out", tmp_path / "out")
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr.startswith("Error: The")
    assert not (tmp_path / "out").exists()


def test_a_file_in_the_place_of_the_folder_is_refused(
    beds: Path, points: Path, tmp_path: Path
) -> None:
    out = tmp_path / "out"
    out.write_text("mine")
    message = f"{out} is a file, not a folder; name another folder for --out."
    assert refused(survey(beds, "--out", out), message)
    assert refused(run("analyse", points, "--area", "0,0,9,9", "--out", out), message)
    assert out.read_text() == "mine"


# What is no one's fault, and what is ours.


def test_a_full_disk_is_told_in_a_sentence(
    beds: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(descriptor: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(os, "fsync", full)
    out = tmp_path / "out"
    result = survey(beds, "--diameter", DIAMETER, "--out", out)
    assert result.exit_code == 2
    assert "no space left on device" in result.stderr
    assert result.stderr.count("\n") == 1
    assert list(out.iterdir()) == []


@pytest.mark.parametrize(
    ("trouble", "code", "message"),
    [
        (OSError(errno.ENOSPC, "full"), 2, "Error: The disk is full; make room, or name another"),
        (MemoryError(), 1, "Error: This does not fit into memory; use fewer --workers or smaller"),
        (KeyboardInterrupt(), 130, "Interrupted. What was finished is kept."),
    ],
)
def test_trouble_with_the_computer_is_told_in_a_sentence(
    points: Path, monkeypatch: pytest.MonkeyPatch, trouble: BaseException, code: int, message: str
) -> None:
    def fail(folder: Path) -> None:
        raise trouble

    monkeypatch.setattr("analyse.cli.make_folder", fail)
    result = run("analyse", points, "--area", "0,0,9,9")
    assert result.exit_code == code
    assert result.stderr.startswith(message)
    assert result.stderr.count("\n") == 1


@pytest.mark.parametrize("bug", [ZeroDivisionError(), OSError(errno.EIO, "broken")])
def test_a_bug_keeps_its_traceback(
    points: Path, monkeypatch: pytest.MonkeyPatch, bug: Exception
) -> None:
    def fail(folder: Path) -> None:
        raise bug

    monkeypatch.setattr("analyse.cli.make_folder", fail)
    with pytest.raises(type(bug)):
        run("analyse", points, "--area", "0,0,9,9")


def test_main_ends_as_a_program_does(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(sys, "argv", ["strewn", "--version"])
    with pytest.raises(SystemExit) as end:
        main()
    assert end.value.code == 0
    assert capsys.readouterr().out == f"strewn {tool_version()}\n"


def test_a_survey_takes_every_option_that_says_how_to_detect() -> None:
    group = typer.main.get_command(app)
    assert isinstance(group, TyperGroup)
    names = {
        command: {name for option in group.commands[command].params for name in option.opts}
        for command in ("detect", "survey")
    }
    assert names["detect"] - names["survey"] == {"photographs", "--learn", "--learn-unchanged"}


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (("--ruler-mm", "50", "--mm-per-pixel", "1"), "--mm-per-pixel and --ruler-mm both tell"),
        (("--height", "30"), "--height needs a unit: '30' could be px, mm, cm or m; write 30m."),
        (("--scale-uncertainty", "1%"), "--scale-uncertainty says more about a scale"),
        (("--lens", "nothere", "--mm-per-pixel", "1"), "--lens names nothere, which does not"),
        (("--taught", "none.toml"), "none.toml cannot be read"),
    ],
)
def test_a_survey_refuses_by_the_option_s_name(
    beds: Path, options: tuple[str, ...], message: str
) -> None:
    result = survey(beds, *options)
    assert result.exit_code == 2
    assert message in result.stderr
