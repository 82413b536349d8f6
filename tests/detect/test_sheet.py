"""The record of a photograph: it reads back as written, and hand edits apply in order."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from shapely.geometry import MultiPolygon, Point, box

from detect.amended import current_state
from detect.amendments import load_json
from detect.area import StudyArea
from detect.errors import SheetUnreadable
from detect.planted import Planted
from detect.scale import Scale
from detect.sheet import (
    Amendment,
    PhotographIdentity,
    Sheet,
    amendments_path,
    append_amendment,
    points_csv,
    read_amendments,
    read_sheet,
    write_sheet,
)
from detect.spots import Spots
from tests.detect.test_planted import MEASURED

TIME = "2026-01-02T10:00:00Z"
COLUMNS = ("x", "y", "radius", "area", "contrast", "fill", "doubt", "found", "counted")


def a_sheet(spots: Spots | None = None, *, scale: Scale | None = None) -> Sheet:
    if spots is None:
        spots = Spots.found_at([10, 50.25], [20, 30], [4, 6], contrast=[5, np.nan], doubt=[0, 0.6])
    area = StudyArea(Point(50, 40).buffer(30).difference(Point(50, 40).buffer(5)), "dish", "found")
    identity = PhotographIdentity("dish µ.jpg", "ab" * 32, 100, 80, "2026-01-01T08:00:00")
    return Sheet(1, "0.1.0", identity, scale, area, {"kind": "colonies", "n": [1, 2]}, spots)


def same(first: Sheet, second: Sheet) -> bool:
    columns = all(
        np.array_equal(getattr(first.spots, name), getattr(second.spots, name), equal_nan=True)
        for name in COLUMNS
    )
    scales = [sheet.scale.as_dict() if sheet.scale else None for sheet in (first, second)]
    return (
        columns
        and first.spots.id == second.spots.id
        and scales[0] == scales[1]
        and first.area.polygon.equals_exact(second.area.polygon, 0.0)
        and (first.area.kind, first.area.note) == (second.area.kind, second.area.note)
        and first.photograph == second.photograph
        and first.settings == second.settings
        and first.planted == second.planted
    )


def an_edit(what: str = "strike", spot: str = "1", /, name: str = "e1", **values: Any) -> Amendment:
    return Amendment(name, TIME, "R. Reader", what, spot, **values)  # type: ignore[arg-type]


def test_a_sheet_reads_back_as_written(tmp_path: Path) -> None:
    sheet = a_sheet(
        scale=Scale(np.array([[0.1, 0.01, 3], [0, 0.1, 4], [1e-5, 0, 1]]), "corners", 0.01, "x")
    )
    path = write_sheet(sheet, tmp_path)
    assert path.name == "dish µ.sheet.json"
    assert same(read_sheet(path), sheet)
    again = tmp_path / "again"
    again.mkdir()
    assert write_sheet(read_sheet(path), again).read_bytes() == path.read_bytes()


def test_a_sheet_without_spots_or_scale_reads_back(tmp_path: Path) -> None:
    sheet = replace(a_sheet(Spots.none()), planted=Planted(10, 1, note="Too little."))
    back = read_sheet(write_sheet(sheet, tmp_path))
    assert same(back, sheet)
    assert len(back.spots) == 0
    assert back.spots.found.dtype == np.bool_


def test_a_sheet_with_an_area_in_two_parts_reads_back(tmp_path: Path) -> None:
    parts = MultiPolygon([box(0, 0, 10, 10), box(20, 20, 30, 30)])
    sheet = replace(a_sheet(), area=StudyArea(parts, "polygon", "file"))
    assert same(read_sheet(write_sheet(sheet, tmp_path)), sheet)


finite = st.floats(-1e6, 1e6)


@given(
    st.lists(
        st.tuples(
            finite, finite, st.floats(1e-3, 1e4), st.floats(0, 1), st.floats(), st.booleans()
        ),
        max_size=6,
    )
)
def test_any_spots_survive_the_round_trip(tmp_path_factory: Any, rows: list[Any]) -> None:
    columns = [np.array([row[k] for row in rows], dtype=float) for k in range(5)]
    contrast = np.where(np.isfinite(columns[4]), columns[4], np.nan)
    spots = Spots.found_at(*columns[:3], contrast=contrast, doubt=columns[3])
    spots = replace(spots, counted=np.array([row[5] for row in rows], dtype=bool))
    sheet = a_sheet(spots)
    assert same(read_sheet(write_sheet(sheet, tmp_path_factory.mktemp("sheet"))), sheet)


def test_a_missing_sheet_says_so(tmp_path: Path) -> None:
    with pytest.raises(SheetUnreadable, match=r"a\.sheet\.json cannot be read \(no such file"):
        read_sheet(tmp_path / "a.sheet.json")


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            b"{",
            r"a\.sheet\.json is damaged \(it is no JSON at character 2\); restore a copy or detect again\.",
        ),
        (b"\xff\xfe", r"is damaged \(it is not text\); restore"),
        (b"[1]", "is no sheet: it has no schema number"),
        (b"{}", "is no sheet: it has no schema number"),
        (b'{"schema": 7}', r"has schema 7, but this version reads 1; use the version that wrote"),
        (b'{"schema": 1, "x": NaN}', r"is damaged \(NaN is not a number\)"),
        (b'{"schema": 1}', r"is damaged \('spot_columns' is missing\)"),
    ],
)
def test_a_damaged_sheet_says_how(tmp_path: Path, text: bytes, message: str) -> None:
    path = tmp_path / "a.sheet.json"
    path.write_bytes(text)
    with pytest.raises(SheetUnreadable, match=message):
        read_sheet(path)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda v: v["spots"][0].pop(), "a spot has too few or too many values"),
        (
            lambda v: v["spots"][0].__setitem__(3, -1) or v["spots"][0].__setitem__(3, "x"),
            "damaged",
        ),
        (lambda v: v["spots"][0].__setitem__(3, None), "a spot's radius is not positive"),
        (lambda v: v["spot_columns"].pop(), "spot columns"),
        (lambda v: v.pop("photograph"), "'photograph' is missing"),
        (lambda v: v["photograph"].pop("width"), "width"),
        (lambda v: v["area"]["geometry"].__setitem__("type", "Blob"), "damaged"),
        (lambda v: v["scale"].__setitem__("matrix", [[0, 0, 0]] * 3), "is not a map of a plane"),
    ],
)
def test_a_sheet_with_impossible_values_says_which(
    tmp_path: Path, change: Any, message: str
) -> None:
    path = write_sheet(a_sheet(scale=Scale.from_mm_per_pixel(0.1)), tmp_path)
    values = json.loads(path.read_text(encoding="utf-8"))
    change(values)
    path.write_text(json.dumps(values), encoding="utf-8")
    with pytest.raises(SheetUnreadable, match=message):
        read_sheet(path)


def test_a_sheet_of_another_schema_cannot_be_made() -> None:
    with pytest.raises(ValueError, match="schema 2 is not 1"):
        replace(a_sheet(), schema=2)


def test_points_are_listed_in_pixels_and_millimetres() -> None:
    sheet = current_state(a_sheet(scale=Scale.from_mm_per_pixel(0.5)), [an_edit("strike", "2")])
    assert points_csv(sheet).splitlines() == [
        "id,x_px,y_px,x_mm,y_mm,radius_px,radius_mm,area_mm2,contrast,doubt,origin,standing",
        "1,10.0,20.0,5.0,10.0,4.0,2.0,12.56637,5.0,0.0,found,counted",
        "2,50.25,30.0,25.125,15.0,6.0,3.0,28.27433,,0.6,found,struck",
    ]


def test_points_without_a_scale_have_no_millimetres() -> None:
    assert points_csv(a_sheet()).splitlines()[1] == "1,10.0,20.0,,,4.0,,,5.0,0.0,found,counted"


def test_edits_apply_in_order() -> None:
    edits = [
        an_edit("strike", "1"),
        an_edit("strike", "2", name="e2"),
        an_edit("restore", "1", name="e3"),
        an_edit("place", "p-1", name="e4", x=5.0, y=6.0, radius=2.0),
        an_edit("move", "1", name="e5", x=11.5, y=21.0),
        an_edit("resize", "2", name="e6", radius=3.0),
        an_edit("move", "p-1", name="e7", x=7.0, y=8.0),
    ]
    before = a_sheet()
    spots = current_state(before, edits).spots
    assert spots.id == ("1", "2", "p-1")
    assert spots.x.tolist() == [11.5, 50.25, 7.0]
    assert spots.y.tolist() == [21.0, 30.0, 8.0]
    assert spots.radius.tolist() == [4.0, 3.0, 2.0]
    assert np.allclose(spots.area, np.pi * np.array([16, 9, 4]))
    assert spots.counted.tolist() == [True, False, True]
    assert spots.found.tolist() == [True, True, False]
    assert spots.doubt.tolist() == [0.0, 0.6, 0.0]
    assert before.spots.counted.all()


def test_no_edits_change_nothing() -> None:
    assert same(current_state(a_sheet(), []), a_sheet())
    assert len(current_state(a_sheet(Spots.none()), []).spots) == 0


@pytest.mark.parametrize(
    ("edit", "message"),
    [
        (an_edit("strike", "9"), r"would strike spot '9', but there is no such spot; put its log"),
        (
            an_edit("place", "1", x=1.0, y=1.0, radius=1.0),
            r"'e1' of dish µ\.jpg would place spot '1', but there already is one; put its log",
        ),
        (
            an_edit("move", "1", x=100.0, y=1.0),
            "puts a spot at 100, 1, outside the photograph; put its log right",
        ),
        (an_edit("move", "1", x=1.0, y=-0.6), "outside the photograph"),
    ],
)
def test_an_edit_that_does_not_fit_is_refused(edit: Amendment, message: str) -> None:
    with pytest.raises(SheetUnreadable, match=message):
        current_state(a_sheet(), [edit])


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"what": "paint"}, "the change 'paint' is not known"),
        ({"id": " "}, "id must be a text in quotes, not ' '"),
        ({"who": ""}, "who must be a text in quotes"),
        ({"spot": 3}, "spot must be a text in quotes, not 3"),
        ({"time": "yesterday"}, "time must be a date and time such as .* not 'yesterday'"),
        ({"what": "move", "x": 1.0}, "'move' needs y"),
        ({"what": "strike", "radius": 1.0}, "'strike' takes no radius"),
        ({"what": "resize", "radius": -1.0}, "radius must be positive, not -1.0"),
        ({"what": "resize", "radius": True}, "radius must be a number, not True"),
        ({"what": "move", "x": float("nan"), "y": 1.0}, "x must be a number, not nan"),
    ],
)
def test_an_impossible_edit_cannot_be_made(values: dict[str, Any], message: str) -> None:
    whole = {"id": "e", "time": TIME, "who": "me", "what": "strike", "spot": "1"} | values
    with pytest.raises(ValueError, match=message):
        Amendment(**whole)


def test_edits_are_appended_and_read_back(tmp_path: Path) -> None:
    log = tmp_path / "a.amendments.jsonl"
    edits = (an_edit(), an_edit("move", "2", name="ü", x=1.0, y=2.0))
    for edit in edits:
        append_amendment(log, edit)
    assert read_amendments(log) == edits
    assert log.read_text(encoding="utf-8").count("\n") == 2
    assert read_amendments(tmp_path / "a.sheet.json") == edits


def test_no_log_means_no_edits(tmp_path: Path) -> None:
    assert read_amendments(tmp_path / "a.amendments.jsonl") == ()
    assert amendments_path(tmp_path / "a.sheet.json") == tmp_path / "a.amendments.jsonl"


def test_a_torn_last_line_is_left_out_and_then_cut_away(tmp_path: Path) -> None:
    log = tmp_path / "a.amendments.jsonl"
    append_amendment(log, an_edit())
    whole = log.read_bytes()
    for cut in range(1, len(whole) - 1):
        log.write_bytes(whole + an_edit(name="e2").line_of_log().encode()[:cut])
        assert read_amendments(log) == (an_edit(),)
    append_amendment(log, an_edit(name="e3"))
    assert read_amendments(log) == (an_edit(), an_edit(name="e3"))


def test_a_last_line_that_only_lacks_its_end_counts(tmp_path: Path) -> None:
    log = tmp_path / "a.amendments.jsonl"
    log.write_text(an_edit().line_of_log().rstrip("\n"))
    assert read_amendments(log) == (an_edit(),)
    append_amendment(log, an_edit(name="e2"))
    assert read_amendments(log) == (an_edit(), an_edit(name="e2"))


@pytest.mark.parametrize("bad", ["{", "[]", '{"id": "x"}', "\0\0", ""])
def test_a_bad_line_in_the_middle_is_an_error_with_its_number(tmp_path: Path, bad: str) -> None:
    log = tmp_path / "a.amendments.jsonl"
    log.write_text(an_edit().line_of_log() + bad + "\n" + an_edit(name="e2").line_of_log())
    message = r"Line 2 of a\.amendments\.jsonl cannot be read \(.*\); put that line right"
    with pytest.raises(SheetUnreadable, match=message):
        read_amendments(log)


def test_a_repeated_edit_counts_once(tmp_path: Path) -> None:
    log = tmp_path / "a.amendments.jsonl"
    log.write_text(an_edit().line_of_log() * 2 + an_edit("restore", name="e2").line_of_log())
    assert [edit.id for edit in read_amendments(log)] == ["e1", "e2"]


def test_one_id_for_two_edits_is_an_error(tmp_path: Path) -> None:
    log = tmp_path / "a.amendments.jsonl"
    log.write_text(an_edit().line_of_log() + an_edit("restore").line_of_log())
    with pytest.raises(SheetUnreadable, match=r"Line 2 .* repeats the id 'e1' for another change"):
        read_amendments(log)


def test_not_a_number_is_refused_in_files() -> None:
    with pytest.raises(ValueError, match="-Infinity is not a number"):
        load_json(b'{"x": -Infinity}')


def test_what_planted_objects_showed_reads_back(tmp_path: Path) -> None:
    sheet = replace(a_sheet(), planted=MEASURED)
    assert read_sheet(write_sheet(sheet, tmp_path)).planted == MEASURED


def test_a_sheet_from_before_planted_objects_reads_as_it_did(tmp_path: Path) -> None:
    path = write_sheet(a_sheet(), tmp_path)
    text = path.read_text(encoding="utf-8")
    assert '"planted": null,\n' in text
    path.write_text(text.replace('"planted": null,\n', ""), encoding="utf-8")
    assert same(read_sheet(path), a_sheet())


def test_impossible_results_of_planted_objects_are_damage(tmp_path: Path) -> None:
    path = write_sheet(replace(a_sheet(), planted=MEASURED), tmp_path)
    text = path.read_text(encoding="utf-8")
    assert '"found": 81' in text
    path.write_text(text.replace('"found": 81', '"found": 91'), encoding="utf-8")
    with pytest.raises(SheetUnreadable, match=r"is damaged \(found 91 of 90 copies\)"):
        read_sheet(path)


def test_an_id_with_brackets_and_a_spot_not_measured_are_written_a_line_each(
    tmp_path: Path,
) -> None:
    spots = Spots.found_at([1.0, 2.0, 3.0], [4.0, 5.0, 6.0], [2.0, 2.0, 2.0])
    spots = replace(spots, id=("1", "a], [b", "3"), contrast=np.array([1.5, np.nan, 2.5]))
    sheet = a_sheet(spots)
    path = write_sheet(sheet, tmp_path)
    lines = path.read_text().split('"spots": [\n')[1].splitlines()
    assert [line[:6] for line in lines[:3]] == ['["1", ', '["a], ', '["3", ']
    again = read_sheet(path).spots
    assert again.id == spots.id
    assert np.array_equal(again.contrast, spots.contrast, equal_nan=True)


def test_amendments_change_their_spots_and_no_others() -> None:
    n = 50
    spots = Spots.found_at(np.arange(n) + 1.0, np.full(n, 9.0), np.full(n, 2.0))
    sheet = a_sheet(spots)
    assert current_state(sheet, ()) is sheet
    log = (
        Amendment("a", "2026-01-01T00:00:00Z", "me", "strike", "7"),
        Amendment("b", "2026-01-01T00:00:00Z", "me", "move", "9", x=3.5, y=4.5),
        Amendment("c", "2026-01-01T00:00:00Z", "me", "place", "p1", x=1.0, y=2.0, radius=3.0),
        Amendment("d", "2026-01-01T00:00:00Z", "me", "resize", "p1", radius=4.0),
    )
    state = current_state(sheet, log).spots
    assert state.id == (*spots.id, "p1")
    assert np.flatnonzero(~state.counted).tolist() == [6]
    assert (state.x[8], state.y[8]) == (3.5, 4.5)
    assert (state.x[-1], state.y[-1], state.radius[-1]) == (1.0, 2.0, 4.0)
    assert state.area[-1] == pytest.approx(np.pi * 16)
    assert not state.found[-1]
    others = np.setdiff1d(np.arange(n), [8])
    assert np.array_equal(state.x[others], spots.x[others])
    assert np.array_equal(state.radius[:n], spots.radius)
