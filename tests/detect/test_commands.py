"""The commands of the first half, as a person runs them."""

from __future__ import annotations

import csv
import json
from dataclasses import replace
from pathlib import Path

import cv2
import numpy as np
import pytest
from PIL import Image
from typer.testing import CliRunner, Result

from analyse.cli import app
from detect.command_options import with_rounds
from detect.planted import PlantedOptions
from detect.requests import DetectRequest, detect_photograph
from detect.sheet import Amendment, amendments_path, append_amendment, read_sheet
from tests.discs import DIAMETER, scattered, write_discs

SAMPLES = Path(__file__).parents[2] / "sample_images"
PLACES = scattered(24, seed=4)


def run(*arguments: object) -> Result:
    result = CliRunner().invoke(app, [str(argument) for argument in arguments])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


def detect(*arguments: object, out: Path) -> Result:
    return run("detect", *arguments, "--diameter", DIAMETER, "--out", out, "--workers", 1)


def no_parts(folder: Path) -> bool:
    return not [path for path in folder.rglob("*") if path.name.endswith(".part")]


@pytest.fixture
def photo(tmp_path: Path) -> Path:
    return write_discs(tmp_path / "bed_1.png", PLACES)


def test_one_photograph_gives_a_line_and_three_files(photo: Path, tmp_path: Path) -> None:
    out = tmp_path / "out"
    result = detect(photo, "--mm-per-pixel", "0.25", out=out)
    assert result.exit_code == 0
    assert result.stdout == (
        "photograph  spots  doubtful  scale\n"
        "bed_1.png      24         0  0.25 mm per pixel (mm-per-pixel)\n"
        f"Sheets, points and overlays: {out}\n"
        f"Look at the overlays, then test the pattern: strewn analyse {out} --out {out}\n"
    )
    assert result.stderr == ""
    names = sorted(path.name for path in out.iterdir())
    assert names == ["bed_1.overlay.jpg", "bed_1.points.csv", "bed_1.sheet.json"]
    rows = list(csv.DictReader((out / "bed_1.points.csv").read_text(encoding="utf-8").splitlines()))
    xy = np.array([[float(row["x_px"]), float(row["y_px"])] for row in rows])
    nearest = [np.hypot(*(xy - place).T).min() for place in PLACES]
    assert max(nearest) < 1.0
    assert float(rows[0]["x_mm"]) == pytest.approx(0.25 * float(rows[0]["x_px"]))
    overlay = cv2.imread(str(out / "bed_1.overlay.jpg"))
    assert overlay is not None
    assert overlay.shape == (320, 420, 3)


def test_without_a_scale_it_works_in_pixels_and_says_so(photo: Path, tmp_path: Path) -> None:
    result = detect(photo, out=tmp_path / "out")
    assert result.exit_code == 0
    assert "bed_1.png      24         0  none: in pixels only\n" in result.stdout
    row = (tmp_path / "out" / "bed_1.points.csv").read_text().splitlines()[1].split(",")
    assert row[3:5] == ["", ""]
    assert row[6:8] == ["", ""]


@pytest.mark.parametrize(
    ("count", "more"), [(2, []), (7, ["Note: 1 more such note in the sheets."])]
)
def test_what_is_to_be_known_of_a_file_is_said_once_and_of_many_files_in_the_sheets(
    count: int, more: list[str], tmp_path: Path
) -> None:
    photo = write_discs(tmp_path / "discs.png", PLACES)
    (tmp_path / "in").mkdir()
    for k in range(count):
        Image.open(photo).convert("CMYK").save(tmp_path / "in" / f"bed_{k}.jpg", quality=95)
    result = detect(tmp_path / "in", out=tmp_path / "out")
    assert result.exit_code == 0
    note = "printing colours (CMYK) turned into RGB without a profile"
    told = [f"Note: bed_{k}.jpg: {note}" for k in range(min(count, 6))]
    assert result.stderr.splitlines() == told + more
    sheet = read_sheet(tmp_path / "out" / f"bed_{count - 1}.sheet.json")
    assert sheet.settings["notes"] == [note]


@pytest.mark.parametrize("word", ["many", "0.5"])
def test_a_word_after_planted_that_is_no_file_is_told(
    word: str, photo: Path, tmp_path: Path
) -> None:
    result = detect(photo, "--planted", word, out=tmp_path / "out")
    assert result.exit_code == 2
    assert f"--planted must be a whole number of rounds such as 8, or true, not '{word}'." in (
        result.stderr
    )
    assert with_rounds(["--planted", "bed.jpg"]) == ["--planted=8", "bed.jpg"]
    assert with_rounds(["--planted", str(photo)]) == ["--planted=8", str(photo)]
    assert with_rounds(["bed.jpg", "--planted"]) == ["bed.jpg", "--planted=8"]


def test_a_folder_is_done_in_natural_order(tmp_path: Path) -> None:
    for name in ("bed_10.png", "bed_9.png"):
        write_discs(tmp_path / name, PLACES)
    result = detect(tmp_path, out=tmp_path / "out")
    lines = result.stdout.splitlines()
    assert [line.split()[0] for line in lines[1:3]] == ["bed_9.png", "bed_10.png"]


def test_the_sample_dish_is_found_by_its_diameter(tmp_path: Path) -> None:
    options = ("--kind", "colonies", "--dish-mm", "86", "--inset", "1mm", "--diameter", "1.2-6mm")
    out = tmp_path / "out"
    result = run("detect", SAMPLES / "dish_03.jpg", *options, "--out", out)
    assert result.exit_code == 0, result.stderr
    sheet = read_sheet(out / "dish_03.sheet.json")
    assert sheet.area.kind == "dish"
    assert sheet.scale is not None
    assert sheet.scale.source == "dish"
    truth = run("score", out, "--truth", SAMPLES / "truth")
    assert truth.exit_code == 0
    recall = float(truth.stdout.splitlines()[1].split()[4])
    assert recall >= 0.9


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (
            ("--diameter", "1-1e9px"),
            "The largest diameter (1e+09 px) is larger than the study area (420 x 320 px);"
            " give smaller diameters.",
        ),
        (
            ("--diameter", "400-410px"),
            "The smallest diameter (400 px) is larger than the study area (420 x 320 px);"
            " give smaller diameters.",
        ),
        (
            ("--line", "0,0,9999,0", "--line-mm", "50"),
            "The position 9999,0 lies outside the picture of 420 x 320 pixels;"
            " give x and y as seen in the upright picture.",
        ),
        (
            ("--corners", "-50,0,400,0,400,300,0,300", "--plot", "10x10mm"),
            "The position -50,0 lies outside the picture of 420 x 320 pixels;"
            " give x and y as seen in the upright picture.",
        ),
    ],
)
def test_what_does_not_fit_the_photograph_is_told_in_a_sentence(
    photo: Path, tmp_path: Path, options: tuple[str, ...], message: str
) -> None:
    out = tmp_path / "out"
    result = run("detect", photo, *options, "--out", out)
    assert result.exit_code == 2
    assert result.stderr == f"bed_1.png: {message}\n"
    assert list(out.iterdir()) == []


def test_the_help_names_no_types(photo: Path) -> None:
    for words in (("--help",), *((name, "--help") for name in ("detect", "analyse", "score"))):
        shown = run(*words)
        assert shown.exit_code == 0
        assert "<" not in shown.stdout
        assert "[x>=" not in shown.stdout


# Photographs that cannot be done: each is listed with its reason, the others are done.


def a_jpeg(path: Path) -> bytes:
    write_discs(path.with_suffix(".png"), PLACES)
    picture = cv2.imread(str(path.with_suffix(".png")))
    path.with_suffix(".png").unlink()
    assert picture is not None
    return cv2.imencode(".jpg", picture)[1].tobytes()


def a_huge_header(path: Path) -> bytes:
    data = bytearray(a_jpeg(path))
    at = data.index(b"\xff\xc0")
    data[at + 5 : at + 9] = (0xFFFF).to_bytes(2, "big") * 2
    return bytes(data)


def a_huge_png(path: Path) -> bytes:
    import struct
    import zlib

    header = struct.pack(">II5B", 100_000, 100_000, 8, 2, 0, 0, 0)
    chunk = b"IHDR" + header
    start = b"\x89PNG\r\n\x1a\n" + struct.pack(">I", len(header)) + chunk
    end = struct.pack(">I", 0) + b"IEND" + struct.pack(">I", zlib.crc32(b"IEND"))
    return start + struct.pack(">I", zlib.crc32(chunk)) + end


BAD = {
    "text": lambda path: b"This is a letter.\n",
    "cut short": lambda path: a_jpeg(path)[:2000],
    "empty": lambda path: b"",
    "one pixel": lambda path: cv2.imencode(".png", np.zeros((1, 1, 3), np.uint8))[1].tobytes(),
    "huge header": a_huge_header,
    "huge picture": a_huge_png,
}


@pytest.mark.parametrize("kind", BAD)
def test_a_bad_photograph_is_listed_and_the_others_are_done(kind: str, tmp_path: Path) -> None:
    folder, out = tmp_path / "in", tmp_path / "out"
    folder.mkdir()
    write_discs(folder / "bed_1.png", PLACES)
    (folder / "bed_2.jpg").write_bytes(BAD[kind](folder / "bed_2.jpg"))
    result = detect(folder, out=out)
    assert result.exit_code == 1
    assert "bed_1.png      24" in result.stdout
    (line,) = result.stderr.splitlines()
    assert line.startswith("bed_2.jpg: ")
    assert line.count("bed_2.jpg") == 1
    assert line.endswith(".")
    assert not list(out.glob("bed_2*"))
    assert no_parts(tmp_path)


@pytest.mark.parametrize("kind", BAD)
def test_a_bad_photograph_alone_fails_with_1(kind: str, tmp_path: Path) -> None:
    path = tmp_path / "bed_2.jpg"
    path.write_bytes(BAD[kind](path))
    result = detect(path, out=tmp_path / "out")
    assert result.exit_code == 1
    assert result.stdout == ""
    assert result.stderr.startswith("bed_2.jpg: ")
    assert list((tmp_path / "out").iterdir()) == []


def test_no_dish_in_the_picture_fails_the_photograph(photo: Path, tmp_path: Path) -> None:
    result = detect(photo, "--dish-mm", "86", out=tmp_path / "out")
    assert result.exit_code == 1
    assert result.stderr.startswith("bed_1.png: ")
    assert "dish" in result.stderr


# Requests that are wrong: one sentence, exit code 2, nothing begun.


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (["--dish-mm", "-86"], "--dish-mm must be positive and finite, not '-86'."),
        (["--dish-mm", "nan"], "--dish-mm must be positive and finite, not 'nan'."),
        (["--dish-mm", "big"], "--dish-mm must be a length such as 10mm, not 'big'."),
        (["--mm-per-pixel", "0"], "--mm-per-pixel must be a positive number, not '0'."),
        (["--line", "1,2,3"], "--line must be 4 numbers with commas between, not '1,2,3'."),
        (
            ["--line", "1,2,3,4"],
            "--line needs --line-mm beside it; give both.",
        ),
        (
            ["--corners", "1,2,3,4,5,6,7,8"],
            "--corners needs --plot beside it; give both.",
        ),
        (
            ["--dish-mm", "86", "--mm-per-pixel", "1"],
            "--mm-per-pixel and --dish-mm both tell the scale; keep one of them.",
        ),
        (
            ["--kind", "stars"],
            "--kind must be one of colonies, seedlings, lesions, spots, not 'stars'.",
        ),
        (["--highest-doubt", "2"], "--highest-doubt must be a number from 0 to 1, not '2'."),
        (["--inset", "2px"], "The inset 2px has no edge to step in from; give an area as well."),
        (
            ["--area", "gone.geojson"],
            "--area names the file gone.geojson, which does not exist; check its path.",
        ),
        (["--workers", "0"], "--workers must be 1 or more, not 0."),
        (["--workers", "two"], "--workers must be a whole number of 18 digits at most, not 'two'."),
        (["--dish-mm", "1e300"], "--dish-mm must lie between 1e-06 and 1e+09, not at '1e300'."),
        (
            ["--mm-per-pixel", "1e-9"],
            "--mm-per-pixel must lie between 1e-06 and 1e+09, not at '1e-9'.",
        ),
    ],
)
def test_a_wrong_option_ends_with_one_sentence(
    photo: Path, tmp_path: Path, options: list[str], message: str
) -> None:
    out = tmp_path / "out"
    result = run("detect", photo, *options, "--out", out)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert result.stderr == f"Error: {message}\n"
    assert not out.exists() or list(out.iterdir()) == []


def test_a_request_that_fits_no_photograph_ends_with_2(photo: Path, tmp_path: Path) -> None:
    result = run("detect", photo, "--diameter", "2-6mm", "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert result.stderr.startswith("bed_1.png: 2mm")
    assert "no scale is known" in result.stderr


@pytest.mark.parametrize(
    ("geometry", "message"),
    [
        ([[0, 0], [200, 300], [200, 0], [0, 300], [0, 0]], "bed_1.png: "),
        ([[1000, 1000], [1200, 1000], [1200, 1200], [1000, 1000]], "bed_1.png: "),
    ],
)
def test_an_unusable_polygon_ends_with_2(
    photo: Path, tmp_path: Path, geometry: list[list[int]], message: str
) -> None:
    polygon = tmp_path / "area.geojson"
    polygon.write_text(json.dumps({"type": "Polygon", "coordinates": [geometry]}))
    result = detect(photo, "--area", polygon, out=tmp_path / "out")
    assert result.exit_code == 2
    assert result.stderr.startswith(message)
    assert result.stderr.count("\n") == 1


def test_a_missing_photograph_ends_with_2(tmp_path: Path) -> None:
    result = detect(tmp_path / "none.jpg", out=tmp_path / "out")
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr == f"Error: {tmp_path / 'none.jpg'} does not exist; check the path.\n"
    assert not (tmp_path / "out").exists()


def test_a_folder_without_photographs_ends_with_2(tmp_path: Path) -> None:
    (tmp_path / "in").mkdir()
    result = detect(tmp_path / "in", out=tmp_path / "out")
    assert result.exit_code == 2
    assert "holds no photograph" in result.stderr


def test_a_file_in_the_place_of_the_folder_ends_with_2(photo: Path, tmp_path: Path) -> None:
    (tmp_path / "out").write_text("mine")
    result = detect(photo, out=tmp_path / "out")
    assert result.exit_code == 2
    assert result.stderr == (
        f"Error: {tmp_path / 'out'} is a file, not a folder; name another folder for --out.\n"
    )
    assert (tmp_path / "out").read_text() == "mine"


def test_an_unknown_option_ends_with_2(photo: Path) -> None:
    result = run("detect", photo, "--moon")
    assert result.exit_code == 2
    assert "--moon" in result.stderr


# Hand edits.


def strike(sheet: Path, spot: str) -> None:
    edit = Amendment("e1", "2026-01-02T10:00:00Z", "me", "strike", spot)
    append_amendment(amendments_path(sheet), edit)


def test_hand_edits_are_not_overwritten(photo: Path, tmp_path: Path) -> None:
    out = tmp_path / "out"
    detect(photo, out=out)
    strike(out / "bed_1.sheet.json", "3")
    before = {path.name: path.read_bytes() for path in out.iterdir()}
    result = detect(photo, out=out)
    assert result.exit_code == 1
    assert result.stderr.startswith("bed_1.png: bed_1.amendments.jsonl in ")
    assert "--keep-amendments" in result.stderr
    assert {path.name: path.read_bytes() for path in out.iterdir()} == before


def test_hand_edits_are_kept_on_request(photo: Path, tmp_path: Path) -> None:
    out = tmp_path / "out"
    detect(photo, out=out)
    strike(out / "bed_1.sheet.json", "3")
    result = detect(photo, "--keep-amendments", out=out)
    assert result.exit_code == 0
    assert "bed_1.png      23" in result.stdout
    assert (out / "bed_1.points.csv").read_text().count(",struck") == 1


def test_planted_objects_are_set_if_asked_and_kept_on_the_sheet(
    photo: Path, tmp_path: Path
) -> None:
    plain = detect(photo, out=tmp_path / "plain")
    assert plain.exit_code == 0
    assert read_sheet(tmp_path / "plain" / "bed_1.sheet.json").planted is None
    result = detect(photo, "--planted", "2", out=tmp_path / "out")
    assert result.exit_code == 0, result.stderr
    sheet = read_sheet(tmp_path / "out" / "bed_1.sheet.json")
    assert sheet.planted is not None
    assert (sheet.planted.rounds, sheet.planted.seed) == (2, 1)
    assert sheet.planted.copies >= 10
    assert sheet.planted.recall is not None
    assert sheet.settings["request"]["planted"] == 2
    name = "bed_1.points.csv"
    assert (tmp_path / "out" / name).read_bytes() == (tmp_path / "plain" / name).read_bytes()


@pytest.mark.parametrize("words", [["--planted"], ["--planted", "--colour", "grey"]])
def test_planted_may_stand_without_its_number(
    photo: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, words: list[str]
) -> None:
    asked: list[object] = []

    def noted(path: Path, request: DetectRequest, **_more: object) -> object:
        asked.append(request.planted)
        return detect_photograph(path, replace(request, planted=None))

    monkeypatch.setattr("detect.commands.detect_photograph", noted)
    assert detect(*words, photo, out=tmp_path / "out").exit_code == 0
    assert asked == [PlantedOptions(rounds=8)]


@pytest.mark.parametrize(
    ("value", "message"),
    [
        ("1", "Planted objects take 2 to 1,000 rounds, not 1; 8 is usual."),
        ("2000", "Planted objects take 2 to 1,000 rounds, not 2000; 8 is usual."),
    ],
)
def test_impossible_rounds_are_refused(
    photo: Path, tmp_path: Path, value: str, message: str
) -> None:
    result = detect(photo, "--planted", value, out=tmp_path / "out")
    assert result.exit_code == 2
    assert result.stderr == f"Error: {message}\n"
    assert not (tmp_path / "out").exists()


def test_rounds_that_are_no_number_are_refused(photo: Path, tmp_path: Path) -> None:
    result = detect(photo, "--planted=many", out=tmp_path / "out")
    assert result.exit_code == 2
    assert result.stderr == (
        "Error: --planted must be a whole number of rounds such as 8, or true, not 'many'.\n"
    )
