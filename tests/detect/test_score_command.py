"""`strewn score`, as a person runs it."""

from __future__ import annotations

import csv
from pathlib import Path

import cv2
import numpy as np
import pytest
from typer.testing import CliRunner, Result

from analyse.cli import app
from detect.sheet import Amendment, amendments_path, append_amendment, read_sheet
from tests.discs import DIAMETER, scattered, write_discs, write_truth

PLACES = scattered(24, seed=4)
FILES = [
    "bed_1.scored.jpg",
    "bed_2.scored.jpg",
    "reliability.csv",
    "reliability.png",
    "score.csv",
    "score_by.csv",
]


def run(*arguments: object) -> Result:
    result = CliRunner().invoke(app, [str(argument) for argument in arguments])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


def table(path: Path) -> list[dict[str, str]]:
    return list(csv.DictReader(path.read_text(encoding="utf-8").splitlines()))


def amend(sheet: Path, name: str, what: str, spot: str, **place: float) -> None:
    change = Amendment(name, "2026-01-01T10:00:00", "a person", what, spot, **place)  # type: ignore[arg-type]
    append_amendment(amendments_path(sheet), change)


@pytest.fixture(scope="module")
def detected(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Two photographs of discs with their sheets and truths, to be left as they are."""
    folder = tmp_path_factory.mktemp("detected")
    (folder / "truth").mkdir()
    for name in ("bed_1", "bed_2"):
        write_discs(folder / f"{name}.png", PLACES)
        write_truth(folder / "truth" / f"{name}.csv", PLACES)
    scale = ("--mm-per-pixel", "0.5")
    result = run("detect", folder, "--diameter", DIAMETER, *scale, "--out", folder / "out")
    assert result.exit_code == 0
    return folder


@pytest.fixture
def beds(detected: Path, tmp_path: Path) -> Path:
    """A copy to be changed."""
    for path in sorted(detected.rglob("*")):
        copy = tmp_path / "beds" / path.relative_to(detected)
        if path.is_file():
            copy.parent.mkdir(parents=True, exist_ok=True)
            copy.write_bytes(path.read_bytes())
    return tmp_path / "beds"


def test_scores_are_printed_and_written(beds: Path, tmp_path: Path) -> None:
    amend(beds / "out" / "bed_2.sheet.json", "one", "strike", "3")
    out = tmp_path / "scores"
    result = run("score", beds / "out", "--truth", beds / "truth", "--out", out)
    assert result.exit_code == 0
    assert result.stderr == ""
    lines = [line.split() for line in result.stdout.splitlines()]
    assert lines[0][:6] == ["photograph", "truth", "found", "precision", "recall", "F1"]
    assert lines[0][6:] == ["count", "error", "RMSE", "px", "RMSE", "mm", "AUC", "ECE"]
    assert lines[1][:7] == ["bed_1.png", "24", "24", "1", "1", "1", "0"]
    assert float(lines[1][8]) == pytest.approx(0.5 * float(lines[1][7]), rel=0.01)
    assert lines[2][:5] == ["bed_2.png", "24", "23", "1", "0.958"]
    assert lines[2][6] == "-1"
    assert lines[3][:3] == ["all", "48", "47"]
    assert lines[3][9] == "-"  # no spot is false
    assert result.stdout.splitlines()[-1] == f"Tables, diagram and pictures: {out}"
    assert sorted(path.name for path in out.iterdir()) == FILES
    rows = table(out / "score.csv")
    assert [row["photograph"] for row in rows] == ["bed_1.png", "bed_2.png", "all"]
    assert (rows[2]["matched"], rows[2]["with_doubt"], rows[2]["share_false"]) == (
        "47",
        "47",
        "0.0",
    )


def test_recall_is_printed_by_radius_and_by_crowding(beds: Path, tmp_path: Path) -> None:
    out = tmp_path / "scores"
    result = run("score", beds / "out", "--truth", beds / "truth", "--out", out)
    titles = [line.split("  ")[0] for line in result.stdout.splitlines()]
    assert "true radius" in titles
    assert titles[titles.index("nearest neighbour") + 1] == "below 1 sums of radii"
    assert "3 sums of radii or more" in titles
    rows = table(out / "score_by.csv")
    for by in ("radius", "crowding"):
        for name, number in (("bed_1.png", 24), ("all", 48)):
            of = [row for row in rows if (row["photograph"], row["by"]) == (name, by)]
            assert sum(int(row["truth"]) for row in of) == number
    assert {row["unit"] for row in rows} == {"mm", "radii"}


def test_pictures_show_what_was_missed_and_invented(beds: Path, tmp_path: Path) -> None:
    # A person strikes one real spot and places one where nothing is: 1 missed, 1 no object.
    sheet = beds / "out" / "bed_1.sheet.json"
    struck = read_sheet(sheet).spots
    amend(sheet, "one", "strike", struck.id[0])
    empty = next(
        np.array([x, y])
        for x in range(40, 380, 10)
        for y in range(40, 280, 10)
        if np.hypot(*(PLACES - [x, y]).T).min() > 40
    )
    amend(sheet, "two", "place", "mine", x=float(empty[0]), y=float(empty[1]), radius=8.0)
    result = run("score", sheet, "--truth", beds / "truth", "--out", tmp_path / "scores")
    assert result.exit_code == 0
    picture = cv2.imread(str(tmp_path / "scores" / "bed_1.scored.jpg"))
    assert picture is not None
    assert picture.shape[0] > 320
    row = table(tmp_path / "scores" / "score.csv")[0]
    assert (row["truth"], row["found"], row["matched"]) == ("24", "24", "23")
    assert row["with_doubt"] == "23"  # the placed one has none

    grow = picture.shape[1] // 420

    def inked(ink: tuple[int, int, int], place: np.ndarray) -> int:
        x, y = np.round(place * grow).astype(int)
        reach = 20 * grow
        near = picture[max(0, y - reach) : y + reach, max(0, x - reach) : x + reach, ::-1].astype(
            int
        )
        return int((np.abs(near - ink).max(axis=2) < 70).sum())

    assert inked((255, 120, 40), empty) > 15
    assert inked((240, 228, 66), np.array([struck.x[0], struck.y[0]])) > 15


def test_the_same_scores_give_the_same_bytes(beds: Path, tmp_path: Path) -> None:
    for name in ("first", "second"):
        run("score", beds / "out", "--truth", beds / "truth", "--out", tmp_path / name)
    for name in FILES:
        assert (tmp_path / "first" / name).read_bytes() == (tmp_path / "second" / name).read_bytes()


def test_truth_without_radii_is_scored_and_the_radius_taken_is_said(beds: Path) -> None:
    lines = "".join(f"{x},{y}\n" for x, y in PLACES)
    (beds / "truth" / "bed_1.csv").write_text(f"x,y\n{lines}")
    given = (beds / "out" / "bed_1.sheet.json", "--truth", beds / "truth")
    result = run("score", *given)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[1].split()[1:3] == ["24", "24"]
    assert "true radius" not in result.stdout
    low, high = read_sheet(given[0]).settings["detector"]["diameter_px"]
    usual = 0.5 * (low * high) ** 0.5
    assert result.stderr == (
        f"bed_1.png: 24 of 24 objects have no radius in the truth; {usual:.3g} px is taken.\n"
    )
    result = run("score", *given, "--radius", "2.5mm")
    assert result.stderr.endswith("in the truth; 5 px is taken.\n")


@pytest.mark.parametrize(
    ("radius", "message"),
    [
        ("large", "--radius must be a length such as"),
        ("-3px", "--radius must be positive and finite, not '-3px'"),
    ],
)
def test_an_impossible_radius_is_refused(detected: Path, radius: str, message: str) -> None:
    result = run("score", detected / "out", "--truth", detected / "truth", "--radius", radius)
    assert result.exit_code == 2
    assert message in result.stderr


def test_a_radius_in_millimetres_needs_a_scale(tmp_path: Path) -> None:
    (tmp_path / "truth").mkdir()
    photo = write_discs(tmp_path / "bed_1.png", PLACES)
    (tmp_path / "truth" / "bed_1.csv").write_text("x,y\n20,20\n")
    run("detect", photo, "--diameter", DIAMETER, "--out", tmp_path / "out")
    result = run("score", tmp_path / "out", "--truth", tmp_path / "truth", "--radius", "2mm")
    assert result.exit_code == 2
    assert "cannot be turned into pixels, for no scale is known" in result.stderr


def test_a_photograph_that_has_gone_is_scored_and_not_drawn(beds: Path, tmp_path: Path) -> None:
    (beds / "bed_2.png").unlink()
    out = tmp_path / "scores"
    result = run("score", beds / "out", "--truth", beds / "truth", "--out", out)
    assert result.exit_code == 0
    assert result.stderr == (
        "bed_2.png: the photograph is not where it was detected, so it is not drawn.\n"
    )
    assert sorted(path.name for path in out.iterdir()) == [f for f in FILES if "bed_2" not in f]
    assert len(table(out / "score.csv")) == 3


def test_nothing_found_is_scored_without_a_diagram(beds: Path, tmp_path: Path) -> None:
    sheet = beds / "out" / "bed_1.sheet.json"
    for k, spot in enumerate(read_sheet(sheet).spots.id):
        amend(sheet, f"change {k}", "strike", spot)
    out = tmp_path / "scores"
    result = run("score", sheet, "--truth", beds / "truth", "--out", out)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[1].split() == [
        *("bed_1.png", "24", "0", "-", "0", "0", "-24", "-", "-", "-", "-")
    ]
    assert not (out / "reliability.png").exists()
    assert len((out / "reliability.csv").read_text().splitlines()) == 1


def test_a_sheet_without_truth_is_listed(beds: Path) -> None:
    truth = beds / "truth"
    (truth / "bed_2.csv").unlink()
    result = run("score", beds / "out", "--truth", truth)
    assert result.exit_code == 1
    assert result.stderr == (
        f"bed_2.sheet.json: There is no bed_2.csv in {truth}; add it, or leave the sheet out.\n"
    )
    assert "bed_1.png" in result.stdout
    (truth / "bed_1.csv").write_text("x,r\n1,2\n")
    result = run("score", beds / "out", "--truth", truth)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert "bed_1.sheet.json: The truth bed_1.csv has no column 'y'" in result.stderr


def test_a_truth_of_another_photograph_is_listed(beds: Path) -> None:
    write_truth(beds / "truth" / "bed_1.csv", PLACES * 40)
    result = run("score", beds / "out", "--truth", beds / "truth")
    assert result.exit_code == 1
    assert "bed_1.sheet.json: 24 of the 24 objects of the truth lie outside" in result.stderr


def test_truth_that_is_no_folder_ends_with_2(detected: Path, tmp_path: Path) -> None:
    result = run("score", detected / "out", "--truth", tmp_path / "gone")
    assert result.exit_code == 2
    assert result.stderr.startswith(f"Error: There is no folder {tmp_path / 'gone'}")


def test_results_that_cannot_be_written_end_with_2(detected: Path, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    given = (detected / "out", "--truth", detected / "truth")
    result = run("score", *given, "--out", tmp_path / "file")
    assert result.exit_code == 2
    assert "is a file, not a folder" in result.stderr


def test_a_damaged_sheet_is_listed(beds: Path) -> None:
    (beds / "out" / "bed_1.sheet.json").write_text("{")
    result = run("score", beds / "out", "--truth", beds / "truth")
    assert result.exit_code == 1
    assert result.stderr.startswith("bed_1.sheet.json: ")
    assert "is damaged" in result.stderr
    assert "bed_2.png" in result.stdout


def test_no_sheets_end_with_2(tmp_path: Path) -> None:
    result = run("score", tmp_path, "--truth", tmp_path)
    assert result.exit_code == 2
    assert "holds no sheets" in result.stderr
