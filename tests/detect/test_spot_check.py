"""Spot checks in the log: what is written and read back, refused, undone and done again."""

from __future__ import annotations

import json
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from shapely.geometry import box, mapping

from detect.amended import Amended, current_state
from detect.amendment import Amendment
from detect.area import frame_area
from detect.changes import changes_of
from detect.errors import AmendmentRefused
from detect.sheet import SCHEMA, PhotographIdentity, Sheet
from detect.spot_check import Draw, DrawnQuadrat, latest_spot_check
from detect.spots import Spots

TIME = "2026-05-04T10:00:00+00:00"


def outline(x: float) -> dict[str, Any]:
    return json.loads(json.dumps(mapping(box(x, 0, x + 10, 10))))  # type: ignore[no-any-return]


def quadrat(number: int, **values: Any) -> DrawnQuadrat:
    known = {"quadrat": number, "stratum": 0, "counted": 2, "outline": outline(10.0 * number)}
    return DrawnQuadrat(**(known | values))


DRAW = Draw(7, (9,), 20, (quadrat(2), quadrat(5)))
SHEET = Sheet(
    SCHEMA,
    "test",
    PhotographIdentity("a.png", "ab" * 32, 100, 80),
    None,
    frame_area(100, 80),
    {},
    Spots.found_at([20.0], [5.0], [3.0]),
)


def drawn(name: str = "d") -> Amendment:
    return Amendment(name, TIME, "Ann", "spot_check_drawn", draw=DRAW)


def marked(name: str, number: int, *marks: tuple[float, float], **more: Any) -> Amendment:
    values: dict[str, Any] = {"of": "d", "quadrat": number, "count": len(marks), "marks": marks}
    return Amendment(name, TIME, "Ann", "spot_check_marked", **(values | more))


@pytest.mark.parametrize(
    "amendment",
    [drawn(), marked("m", 2, (21.0, 5.0), (25.5, 6)), marked("m", 2), marked("m", 5, count=4)],
)
def test_a_line_of_the_log_is_read_back_as_it_was(amendment: Amendment) -> None:
    line = amendment.line_of_log()
    assert json.loads(line)["schema"] == 3
    assert Amendment.from_dict(json.loads(line)) == amendment


def test_lines_of_other_kinds_are_still_of_schema_2() -> None:
    assert Amendment("s", TIME, "Ann", "strike", spot="1").as_dict()["schema"] == 2


def test_a_spot_check_changes_no_spot_and_no_state_of_review() -> None:
    log = [drawn(), marked("m", 2, (21.0, 5.0))]
    assert changes_of(SHEET, log).state == "new"
    assert current_state(SHEET, log).spots.id == SHEET.spots.id
    assert not any(each.is_edit for each in log)
    undone = [*log, Amendment("u", TIME, "Ann", "undo", of="m")]
    assert changes_of(SHEET, undone).state == "new"
    mark = Amendment("c", TIME, "Ann", "checked")
    assert changes_of(SHEET, [mark, *log]).is_checked


def test_the_newest_marks_of_a_quadrat_stand_until_they_are_undone() -> None:
    log = [drawn(), marked("m", 2, (21.0, 5.0)), marked("n", 2)]
    known = latest_spot_check(log)
    assert known is not None
    assert (known.marked[2].count, known.is_done, known.before) == (0, False, 0)
    again = latest_spot_check([*log, Amendment("u", TIME, "Ann", "undo", of="n")])
    assert again is not None
    np.testing.assert_array_equal(again.marked[2].marks, [[21.0, 5.0]])
    done = latest_spot_check([*log, marked("o", 5, count=3)])
    assert done is not None
    assert done.is_done
    assert (done.marked[5].count, done.marked[5].marks) == (3, None)
    assert (repr(done), repr(done.draw)) == (
        "<Checked: 2 of 2 quadrats>",
        "<Draw of 2 of 9 quadrats, seed 7>",
    )


@pytest.mark.parametrize(
    ("amendment", "message"),
    [
        (marked("m", 2, of="x"), "spot check 'x', but no such spot check was drawn"),
        (marked("m", 3), "marks quadrat 3, which was not drawn for this spot check"),
        (marked("m", 2, (31.0, 5.0)), "marks 31, 5, which lies outside quadrat 2"),
        (marked("m", 2, of="s"), "spot check 's', but no such spot check was drawn"),
        (Amendment("u", TIME, "Bo", "undo", of="d"), "by Ann needs its quadrats; undo that one"),
    ],
)
def test_what_does_not_fit_is_refused(amendment: Amendment, message: str) -> None:
    note = Amendment("s", TIME, "Ann", "note", text="dry")
    amended = Amended.of(SHEET, [note, drawn(), marked("first", 5)])
    with pytest.raises(AmendmentRefused, match=message):
        amended.check(amendment)


def test_a_draw_can_be_undone_and_its_marks_not_done_again_without_it() -> None:
    undo = Amendment("u", TIME, "Ann", "undo", of="m")
    amended = Amended.of(SHEET, [drawn(), marked("m", 2), undo])
    amended.apply(Amendment("v", TIME, "Ann", "undo", of="d"))
    assert latest_spot_check(amended.log) is None
    with pytest.raises(AmendmentRefused, match="its spot check is undone; redo that one first"):
        amended.check(Amendment("w", TIME, "Ann", "redo", of="m"))


WRONG = [
    ({"draw": None}, "'spot_check_drawn' needs draw"),
    ({"draw": {"seed": 1}}, "a draw must have seed, sizes, total, quadrats"),
    ({"draw": {**DRAW.as_dict(), "quadrats": [{}]}}, "a drawn quadrat must have quadrat, stratum"),
    ({"draw": {**DRAW.as_dict(), "quadrats": []}}, "a spot check has 1 to 1000 quadrats, not 0"),
    ({"draw": {**DRAW.as_dict(), "quadrats": "all"}}, "sizes and quadrats of a draw must be lists"),
    ({"draw": {**DRAW.as_dict(), "sizes": [1]}}, "of stratum 0 none is drawn, or more than its 1"),
    ({"draw": {**DRAW.as_dict(), "sizes": [0]}}, "sizes must be a whole number of 1 or more"),
    ({"draw": {**DRAW.as_dict(), "total": 1.5}}, "total must be a whole number of 0 or more"),
]


@pytest.mark.parametrize(("values", "message"), WRONG)
def test_an_impossible_draw_is_refused(values: dict[str, Any], message: str) -> None:
    line = drawn().as_dict() | values
    with pytest.raises(ValueError, match=message):
        Amendment.from_dict(line)


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"stratum": 1}, "a quadrat is of a stratum that is not told"),
        ({"counted": -1}, "counted must be a whole number of 0 or more, not -1"),
        ({"quadrat": 0}, "quadrat must be a whole number of 1 or more, not 0"),
        ({"quadrat": 5}, "a quadrat is drawn twice"),
        ({"outline": {"type": "Point", "coordinates": [1, 2]}}, "outline must be a GeoJSON"),
        ({"outline": {"type": "Polygon"}}, "outline must be a GeoJSON"),
        ({"outline": 5}, "outline must be a GeoJSON"),
        ({"outline": mapping(box(0, 0, 0, 5))}, "outline must be a GeoJSON"),
    ],
)
def test_an_impossible_quadrat_is_refused(values: dict[str, Any], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        replace(DRAW, quadrats=(quadrat(2, **values), quadrat(5)))


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"count": 3}, "count is 3, but there are 1 marks"),
        ({"count": -1}, "count must be a whole number of 0 or more, not -1"),
        ({"count": None}, "'spot_check_marked' needs count"),
        ({"count": True}, "count must be a whole number of 0 or more, not True"),
        ({"quadrat": 2.5}, "quadrat must be a whole number of 0 or more, not 2.5"),
        ({"marks": [[1]]}, "a mark must be two numbers, x and y"),
        ({"marks": [[1, "2"]]}, "y must be a number, not '2'"),
        ({"of": None}, "'spot_check_marked' needs of"),
        ({"text": "x"}, "'spot_check_marked' takes no text"),
    ],
)
def test_impossible_marks_are_refused(values: dict[str, Any], message: str) -> None:
    line = marked("m", 2, (21.0, 5.0)).as_dict() | values
    with pytest.raises(ValueError, match=message):
        Amendment.from_dict(line)
