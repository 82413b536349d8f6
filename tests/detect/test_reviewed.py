"""Which sheets count as reviewed, what they say, and what is wrong with those that cannot be used."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import shapely

from detect.amendments import Amendment, amendments_path, append_amendment
from detect.errors import NothingLearned, RequestWrong
from detect.lengths import Length
from detect.requests import detect_photograph, parse_request
from detect.reviewed import Reviewed, gather_reviewed
from detect.sheet import Sheet, read_sheet, sheet_path, write_sheet
from tests.discs import DIAMETER, HEIGHT, RADIUS, WIDTH, scattered, write_discs
from tests.reviewer import review

PLACES = scattered(24, seed=4)


@pytest.fixture(scope="module")
def detected(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Sheet]:
    """A photograph of 24 discs, and its sheet."""
    photo = write_discs(tmp_path_factory.mktemp("photos") / "a.png", PLACES)
    return photo, detect_photograph(photo, parse_request({"diameter": DIAMETER}))[1]


def reviewed_by_truth(detected: tuple[Path, Sheet], folder: Path, n: int = 20) -> Path:
    """Let a person keep the first n discs, strike the rest and place one elsewhere."""
    photo, sheet = detected
    truth = np.vstack([PLACES[:n], [[205.0, 4.0]]])
    review(sheet, photo, truth, np.full(n + 1, RADIUS), folder)
    return sheet_path(folder, "a")


def only(folder: Path) -> Reviewed:
    (reviewed,), left_out = gather_reviewed(folder)
    assert left_out == 0
    return reviewed


def test_what_is_left_standing_is_real_and_what_is_struck_is_not(
    detected: tuple[Path, Sheet], tmp_path: Path
) -> None:
    reviewed_by_truth(detected, tmp_path)
    reviewed = only(tmp_path)
    assert reviewed.real.shape == (21, 3)
    assert reviewed.struck.shape == (4, 3)
    for place in PLACES[20:]:
        assert np.hypot(*(reviewed.struck[:, :2] - place).T).min() < 1.0
    assert reviewed.real[-1].tolist() == [205.0, 4.0, RADIUS]
    assert reviewed.options.diameter == (Length(10, "px"), Length(24, "px"))
    assert reviewed.diameters_px == (10.0, 24.0)
    assert reviewed.photograph == detected[0].resolve()


def test_two_halves_make_the_whole(detected: tuple[Path, Sheet], tmp_path: Path) -> None:
    reviewed_by_truth(detected, tmp_path)
    reviewed = only(tmp_path)
    one, other = reviewed.halves()
    areas = [half.sheet.area.polygon for half in (one, other)]
    assert sum(area.area for area in areas) == pytest.approx(WIDTH * HEIGHT)
    assert areas[0].intersection(areas[1]).area == 0
    assert len(one.real) + len(other.real) == 21
    assert min(len(one.real) + len(one.struck), len(other.real) + len(other.struck)) >= 12


def test_halves_of_a_ragged_area_are_areas(detected: tuple[Path, Sheet], tmp_path: Path) -> None:
    reviewed_by_truth(detected, tmp_path)
    reviewed = only(tmp_path)
    spots = np.vstack([reviewed.real, reviewed.struck])
    at = float(np.median(spots[:, 0])) + 0.01
    # A bay that holds no spot, and whose bottom lies on the line between the halves.
    y = np.sort(spots[spots[:, 0] > at, 1])
    k = int(np.argmax(np.diff(y)))
    bay = [(419.5, y[k] + 1), (at, y[k] + 1), (at, y[k + 1] - 1), (419.5, y[k + 1] - 1)]
    ragged = shapely.Polygon([(-0.5, -0.5), (419.5, -0.5), *bay, (419.5, 319.5), (-0.5, 319.5)])
    area = replace(reviewed.sheet.area, polygon=ragged)
    halves = replace(reviewed, sheet=replace(reviewed.sheet, area=area)).halves()
    parts = [half.sheet.area.polygon for half in halves]
    assert {part.geom_type for part in parts} <= {"Polygon", "MultiPolygon"}
    assert sum(part.area for part in parts) == pytest.approx(ragged.area)


def test_sheets_nobody_marked_as_checked_are_left_out(
    detected: tuple[Path, Sheet], tmp_path: Path
) -> None:
    reviewed_by_truth(detected, tmp_path)
    sheet = detected[1]
    for name in ("b.png", "c.png"):
        write_sheet(replace(sheet, photograph=replace(sheet.photograph, name=name)), tmp_path)
    reviewed, left_out = gather_reviewed(tmp_path)
    assert (len(reviewed), left_out) == (1, 2)
    for name in ("b.png", "c.png"):
        (tmp_path / name).write_bytes(detected[0].read_bytes())
    reviewed, left_out = gather_reviewed(tmp_path, unchanged=True)
    assert (len(reviewed), left_out) == (3, 0)
    assert [len(each.struck) for each in reviewed] == [4, 0, 0]


def test_sheets_that_nobody_reviewed_teach_nothing(
    detected: tuple[Path, Sheet], tmp_path: Path
) -> None:
    write_sheet(detected[1], tmp_path)
    with pytest.raises(
        NothingLearned, match=r"None of the 1 sheets in .* has been marked as checked"
    ):
        gather_reviewed(tmp_path)
    empty = tmp_path / "empty"
    empty.mkdir()
    with pytest.raises(RequestWrong, match="holds no sheets"):
        gather_reviewed(empty)


def test_too_few_spots_teach_nothing(tmp_path: Path) -> None:
    photo = write_discs(tmp_path / "a.png", PLACES[:9])
    sheet = detect_photograph(photo, parse_request({"diameter": DIAMETER}))[1]
    review(sheet, photo, PLACES[:8], np.full(8, RADIUS), tmp_path)
    with pytest.raises(
        NothingLearned, match=r"Only 9 spots were reviewed in .*, and 10 are needed"
    ):
        gather_reviewed(tmp_path)


def test_a_photograph_that_is_gone_or_changed_is_named(
    detected: tuple[Path, Sheet], tmp_path: Path
) -> None:
    path = reviewed_by_truth(detected, tmp_path)
    sheet = read_sheet(path)
    write_sheet(replace(sheet, settings=sheet.settings | {"photograph_at": "gone/a.png"}), tmp_path)
    with pytest.raises(NothingLearned, match=r"photograph of a.sheet.json is not at .*gone.a.png"):
        gather_reviewed(tmp_path)
    write_discs(tmp_path / "a.png", PLACES[:3])
    with pytest.raises(NothingLearned, match=r"a.png has changed since a.sheet.json was made"):
        gather_reviewed(tmp_path)
    (tmp_path / "a.png").write_bytes(detected[0].read_bytes())
    assert only(tmp_path).photograph == tmp_path / "a.png"


@pytest.mark.parametrize(
    ("name", "value", "message"),
    [
        ("kind", "lesions", r"different kinds \(a.png: spots, b.png: lesions\)"),
        ("colour", "red", r"different colours \(a.png: auto, b.png: red\)"),
        ("polarity", "dark", r"different polarities \(a.png: auto, b.png: dark\)"),
    ],
)
def test_unlike_sheets_are_refused(
    detected: tuple[Path, Sheet], tmp_path: Path, name: str, value: str, message: str
) -> None:
    path = reviewed_by_truth(detected, tmp_path)
    sheet = read_sheet(path)
    request = sheet.settings["request"] | {name: value}
    other = replace(
        sheet,
        photograph=replace(sheet.photograph, name="b.png"),
        settings=sheet.settings | {"request": request},
    )
    log = amendments_path(write_sheet(other, tmp_path))
    append_amendment(log, Amendment("1", "2026-05-04T10:00", "Ann", "strike", "1"))
    append_amendment(log, Amendment("2", "2026-05-04T10:01", "Ann", "checked"))
    with pytest.raises(NothingLearned, match=message):
        gather_reviewed(tmp_path)


def test_a_sheet_that_does_not_say_how_it_was_made_is_refused(
    detected: tuple[Path, Sheet], tmp_path: Path
) -> None:
    path = reviewed_by_truth(detected, tmp_path)
    values = json.loads(path.read_text(encoding="utf-8"))
    del values["settings"]["request"]
    path.write_text(json.dumps(values), encoding="utf-8")
    with pytest.raises(NothingLearned, match=r"a.sheet.json does not say how it was detected"):
        gather_reviewed(tmp_path)
