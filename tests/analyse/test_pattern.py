"""Patterns from programs, tables and sheets."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import shapely

from analyse.errors import TableWrong
from analyse.findings import analyse_pattern
from analyse.pattern import Circle, Pattern, pattern_from_sheet
from analyse.point_table import read_points
from detect.area import StudyArea
from detect.errors import AreaWrong
from detect.scale import Scale
from detect.sheet import SCHEMA, Amendment, PhotographIdentity, Sheet
from detect.spots import Spots
from tests.analyse import published

FRAME = StudyArea(shapely.box(-0.5, -0.5, 199.5, 99.5), "frame", "the whole picture")


def sheet(**changes: object) -> Sheet:
    """A sheet of four spots in a picture of 200 x 100 pixels at a tenth of a millimetre each."""
    spots = Spots.found_at(
        [10, 60, 110, 160], [20, 40, 60, 80], [3, 3, 3, 3], doubt=[0, 0.1, 0.6, 0.9]
    )
    plain = Sheet(
        SCHEMA,
        "0",
        PhotographIdentity("dish.jpg", "0" * 64, 200, 100),
        Scale.from_mm_per_pixel(0.1, relative_uncertainty=0.02),
        FRAME,
        {},
        spots,
    )
    return replace(plain, **changes)  # type: ignore[arg-type]


def change(number: int, what: str, spot: str, **values: float) -> Amendment:
    """Return an amendment made at noon."""
    return Amendment(str(number), "2026-01-01T12:00:00", "A", what, spot, **values)  # type: ignore[arg-type]


def test_a_sheet_in_millimetres() -> None:
    pattern = pattern_from_sheet(sheet())
    assert pattern.name == "dish.jpg"
    assert pattern.points.tolist() == [pytest.approx(p) for p in ([1, 2], [6, 4], [11, 6], [16, 8])]
    assert pattern.area.area == pytest.approx(200.0)
    assert (pattern.unit, pattern.area_kind, pattern.relative_uncertainty) == ("mm", "frame", 0.02)
    assert (pattern.reviewed, pattern.flags) == (False, ("doubtful", "unreviewed"))
    assert (pattern.doubtful, pattern.dish) == (2, None)


def test_amendments_are_applied_and_struck_spots_left_out() -> None:
    changes = [
        change(1, "strike", "3"),
        change(2, "place", "p1", x=5.0, y=5.0, radius=2.0),
        change(3, "move", "4", x=150.0, y=70.0),
    ]
    pattern = pattern_from_sheet(sheet(), changes)
    assert pattern.points.tolist() == [
        pytest.approx(p) for p in ([1, 2], [6, 4], [15, 7], [0.5, 0.5])
    ]
    assert pattern.doubt.tolist() == [0, 0.1, 0.9, 0]
    assert not pattern.reviewed
    assert "unreviewed" not in pattern.flags
    assert "in_review" in pattern.flags
    checked = Amendment("4", "2026-01-01T13:00:00", "B", "checked")
    pattern = pattern_from_sheet(sheet(), [*changes, checked])
    assert pattern.reviewed
    assert {"unreviewed", "in_review"} & set(pattern.flags) == set()
    assert (pattern.changes.checked_by, pattern.changes.people) == ("B", ("A", "B"))
    assert (pattern.changes.placed, pattern.changes.struck, pattern.changes.moved) == (1, 1, 1)


def test_spots_outside_the_area_are_left_out_and_counted() -> None:
    area = StudyArea(shapely.box(0, 0, 120, 99), "polygon", "by hand")
    pattern = pattern_from_sheet(sheet(area=area))
    assert (len(pattern), pattern.outside) == (3, 1)
    assert "outside" in pattern.flags


def test_without_a_scale_everything_stays_in_pixels() -> None:
    pattern = pattern_from_sheet(sheet(scale=None))
    assert (pattern.unit, pattern.relative_uncertainty) == ("px", 0.0)
    assert pattern.points[1].tolist() == [60, 40]
    assert "uncalibrated" in pattern.flags


def test_notes_on_the_dish_become_a_flag() -> None:
    empty = sheet(spots=Spots.none())
    noted = replace(empty, settings={"dish": ["several round things are seen"]})
    assert pattern_from_sheet(noted).flags == ("dish_unsure", "unreviewed")
    assert pattern_from_sheet(empty).flags == ("unreviewed",)


def test_the_flag_of_the_dish_quotes_its_notes_alone() -> None:
    notes = ["several round things are seen", "9 % of the dish's edge lie beyond the frame"]
    found = analyse_pattern(
        pattern_from_sheet(replace(sheet(), settings={"dish": notes})), simulations=99
    )
    told = [said for said in found.flag_sentences if "dish" in said]
    assert told == [f"Of the dish: {notes[0]}; {notes[1]}."]


def test_no_spots_are_a_pattern_of_length_0() -> None:
    pattern = pattern_from_sheet(sheet(spots=Spots.none()))
    assert (len(pattern), pattern.points.shape) == (0, (0, 2))
    assert pattern.flags == ("unreviewed",)


def test_a_dish_brings_its_circle() -> None:
    disc = StudyArea(shapely.Point(100, 50).buffer(40, quad_segs=90), "dish", "inner edge")
    dish = pattern_from_sheet(sheet(area=disc)).dish
    assert isinstance(dish, Circle)
    assert (dish.x, dish.y, dish.radius) == pytest.approx((10, 5, 4), rel=1e-4)


def test_a_tilted_plot_becomes_its_rectangle() -> None:
    """A homography that takes a skewed four-cornered outline to 1000 x 750 mm, worked by hand."""
    matrix = np.array([[2.0, 0.3, 5.0], [0.1, 1.8, -4.0], [2e-4, 1e-4, 1.0]])
    back = Scale(np.linalg.inv(matrix), "corners", 0.01, "plot 1000 x 750 mm")
    corners_mm = np.array([[0, 0], [1000, 0], [1000, 750], [0, 750]])
    outline = shapely.Polygon(back.to_px(corners_mm))
    area = StudyArea(outline, "plot", "four corners")
    middle = back.to_px([[500.0, 375.0]])[0]
    spots = Spots.found_at([middle[0]], [middle[1]], [3.0])
    pattern = pattern_from_sheet(sheet(area=area, scale=back, spots=spots))
    assert pattern.area.area == pytest.approx(750_000)
    assert pattern.area.symmetric_difference(shapely.box(0, 0, 1000, 750)).area < 1e-6
    assert pattern.points[0].tolist() == pytest.approx([500, 375])


def test_a_table_of_points(tmp_path: Path) -> None:
    path = tmp_path / "bed.csv"
    path.write_text("# bed 4\nid,Y,x,note\n1,2,1,\n2,3,1.5,late\n3,3,1.5,twice\n4,30,1,\n")
    pattern = read_points(path, area=shapely.box(0, 0, 100, 100), unit="cm")
    assert pattern.name == "bed.csv"
    assert pattern.points.tolist() == [[10, 20], [15, 30], [15, 30]]
    assert (pattern.unit, pattern.outside, pattern.duplicates) == ("mm", 1, 1)
    assert pattern.flags == ("outside", "duplicates")
    assert pattern.reviewed


def test_published_points() -> None:
    """Ripley (1977), Strauss (1975): 42 cells and 62 seedlings."""
    for name, window, n in (
        ("cells", published.CELLS_WINDOW, 42),
        ("redwood", published.REDWOOD_WINDOW, 62),
    ):
        pattern = read_points(published.DATA / f"{name}.csv", area=shapely.box(*window))
        assert (len(pattern), pattern.outside) == (n, 0)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "x,z\n1,2\n",
            r"bed.csv has no column 'y' \(its columns: x, z\); name the columns x and y",
        ),
        ("1,2\n3,4\n", r"bed.csv has no column 'x' \(its columns: 1, 2\)"),
        ("x,y\n1,b\n", r"bed.csv, row 2, column y: 'b' is not a number"),
        ("x,y\n1,2\nnan,2\n", r"bed.csv, row 3, column x: 'nan' is not finite"),
        ("x,y\n1\n", r"bed.csv, row 2, column y, is empty"),
    ],
)
def test_what_is_no_table_of_points_is_refused(tmp_path: Path, text: str, message: str) -> None:
    path = tmp_path / "bed.csv"
    path.write_text(text)
    with pytest.raises(TableWrong, match=message):
        read_points(path, area=shapely.box(0, 0, 1, 1))


def test_a_table_of_no_points(tmp_path: Path) -> None:
    path = tmp_path / "bed.csv"
    path.write_text("x,y\n")
    assert len(read_points(path, area=shapely.box(0, 0, 1, 1))) == 0


def test_points_on_the_edge_are_inside() -> None:
    assert len(Pattern.of([[0, 0], [10, 10], [10, 5], [10.01, 5]], (0, 0, 10, 10))) == 3


@pytest.mark.parametrize(
    ("area", "message"),
    [
        (shapely.Point(1, 1), "must be a polygon, not a Point"),
        (shapely.Polygon([(0, 0), (2, 2), (2, 0), (0, 2)]), "is not usable"),
        (shapely.Polygon(), "encloses nothing"),
        ((5, 0, 1, 2), "The rectangle 5,0,1,2 encloses nothing"),
    ],
)
def test_an_unusable_area_is_refused(area: object, message: str) -> None:
    with pytest.raises(AreaWrong, match=message):
        Pattern.of([[1, 1]], area)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"doubt": [0.1]}, "doubt has 1 values for 2 points"),
        ({"doubt": [0.1, 1.1]}, "a doubt is not within 0..1"),
        ({"doubt": [0.1, math.nan]}, "a doubt is not within 0..1"),
        ({"points": [[1, math.inf], [1, 1]]}, "a point is not finite"),
        ({"unit": "inch"}, "unit must be mm or px, not 'inch'"),
        ({"relative_uncertainty": -0.1}, "relative_uncertainty must be 0 or more, not -0.1"),
    ],
)
def test_a_pattern_checks_itself(changes: dict[str, object], message: str) -> None:
    pattern = Pattern.of([[1, 1], [2, 2]], (0, 0, 10, 10))
    with pytest.raises(ValueError, match=message):
        replace(pattern, **changes)  # type: ignore[arg-type]


def test_columns_cannot_be_changed_and_the_input_is_left_alone() -> None:
    points = np.array([[1.0, 1.0]])
    pattern = Pattern.of(points, (0, 0, 10, 10))
    with pytest.raises(ValueError, match="read-only"):
        pattern.points[0, 0] = 5
    points[0, 0] = 7
    assert pattern.points[0, 0] == 1.0


def test_a_point_that_is_no_number_is_refused_not_left_out() -> None:
    with pytest.raises(ValueError, match="a point is not finite"):
        Pattern.of([[1, 1], [math.nan, 2]], (0, 0, 10, 10))


def test_a_round_area_of_a_table_is_a_dish() -> None:
    """It once was none, so that no gradient from its edge was tried and no rings could be laid."""
    disc = Pattern.of([[1, 2]], shapely.Point(3, 4).buffer(10))
    assert disc.dish is not None
    assert (disc.dish.x, disc.dish.y) == pytest.approx((3, 4))
    assert disc.dish.radius == pytest.approx(10, rel=2e-3)
    holed = shapely.Point(3, 4).buffer(10).difference(shapely.Point(3, 9).buffer(1))
    for area in (shapely.box(0, 0, 5, 5), shapely.Point(3, 4).buffer(10, quad_segs=2), holed):
        assert Pattern.of([[1, 2]], area).dish is None
