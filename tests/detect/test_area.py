"""Study areas: their outlines, insets, files, and every way an outline can be wrong."""

from __future__ import annotations

import json
import math
import os
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from shapely.geometry import LineString, MultiPolygon, Polygon, box, mapping

from detect.area import StudyArea, dish_area, frame_area, leaf_area, plot_area, polygon_area
from detect.dish import Dish, Ellipse
from detect.errors import AreaWrong
from detect.georeference import Georeference
from tests.scenes import LEAVES

DISH = Dish(Ellipse(200.0, 150.0, 100.0, 96.0, 20.0), None, 0.98)
SQUARE = [[10, 10], [60, 10], [60, 40], [10, 40], [10, 10]]
HOLE = [[20, 20], [30, 20], [30, 30], [20, 30], [20, 20]]


def saved(folder: Path, value: Any) -> Path:
    path = folder / "area.geojson"
    path.write_text(value if isinstance(value, str) else json.dumps(value), encoding="utf-8")
    return path


def test_a_dish_s_area_is_that_of_its_ellipse() -> None:
    area = dish_area(DISH, width=1200, height=1000)
    assert area.kind == "dish"
    assert area.note == "dish found (98 % of its edge seen)"
    assert area.polygon.area == pytest.approx(math.pi * 100 * 96, rel=1e-4)
    assert area.contains([[200, 150], [200, 245], [200, 260]]).tolist() == [True, True, False]


def test_an_inset_steps_the_edge_inwards() -> None:
    area = dish_area(
        Dish(Ellipse(0, 0, 100.0, 100.0, 0.0), None, 1.0), width=300, height=300, inset_px=10
    )
    assert area.polygon.area == pytest.approx(math.pi * 90**2, rel=1e-3)
    assert area.note == "dish found (100 % of its edge seen), inset by 10.0 pixels"


def test_an_inset_widens_the_holes_too(tmp_path: Path) -> None:
    path = saved(tmp_path, {"type": "Polygon", "coordinates": [SQUARE, HOLE]})
    assert polygon_area(path, 100, 80).polygon.area == 1500 - 100
    inner = polygon_area(path, 100, 80, inset_px=2).polygon
    widened = 14 * 14 - (4 - math.pi) * 4  # its corners become round
    assert inner.area == pytest.approx(46 * 26 - widened, rel=1e-3)


def test_the_frame_reaches_from_pixel_edge_to_pixel_edge() -> None:
    area = frame_area(40, 30)
    assert area.polygon.bounds == (-0.5, -0.5, 39.5, 29.5)
    assert frame_area(40, 30, inset_px=5).polygon.bounds == (4.5, 4.5, 34.5, 24.5)
    assert area.kind == "frame"


def test_a_plot_lies_between_its_corners() -> None:
    area = plot_area([[10, 10], [110, 12], [108, 90], [9, 88]])
    assert area.kind == "plot"
    assert area.contains([[50, 50], [5, 5]]).tolist() == [True, False]


def test_a_leaf_s_holes_are_no_study_area() -> None:
    photograph, truth = LEAVES["small leaf"].draw()
    area = leaf_area(photograph)
    assert (area.kind, area.note) == ("leaf", "leaf found, without its 2 holes")
    assert area.polygon.area == pytest.approx(truth.sum(), rel=0.02)
    assert leaf_area(photograph, inset_px=4).polygon.area < area.polygon.area


@pytest.mark.parametrize(
    "value",
    [
        {"type": "Polygon", "coordinates": [SQUARE]},
        {"type": "MultiPolygon", "coordinates": [[SQUARE]]},
        {
            "type": "Feature",
            "properties": {},
            "geometry": {"type": "Polygon", "coordinates": [SQUARE]},
        },
        {
            "type": "FeatureCollection",
            "features": [
                {"type": "Feature", "geometry": {"type": "Polygon", "coordinates": [SQUARE]}}
            ],
        },
        {"type": "Polygon", "coordinates": [[[x, y, 0.0] for x, y in SQUARE]]},
    ],
    ids=["polygon", "multipolygon", "feature", "collection", "with heights"],
)
def test_a_polygon_file_is_read(value: dict[str, Any], tmp_path: Path) -> None:
    area = polygon_area(saved(tmp_path, value), 100, 80)
    assert area.kind == "polygon"
    assert area.polygon.area == 1500
    assert area.polygon.bounds == (10, 10, 60, 40)
    assert area.note == "polygon from area.geojson"


def of(*ring: list[float]) -> dict[str, Any]:
    return {"type": "Polygon", "coordinates": [list(ring)]}


WRONG = {
    "no json": ("x,y\n1,2", "The polygon file area.geojson is no JSON text; save the outline as"),
    "a list": (
        [1, 2],
        "The polygon file area.geojson holds a list, not a Polygon or MultiPolygon;",
    ),
    "a line": (
        {"type": "LineString", "coordinates": SQUARE},
        "The polygon file area.geojson holds a LineString, not a Polygon or MultiPolygon; save",
    ),
    "no geometry": (
        {"type": "Feature", "geometry": None},
        "The polygon file area.geojson holds a NoneType, not a Polygon",
    ),
    "two features": (
        {"type": "FeatureCollection", "features": [{}, {}]},
        "The polygon file area.geojson holds 2 features; keep the one that is the study area.",
    ),
    "no features": (
        {"type": "FeatureCollection"},
        "The polygon file area.geojson holds 0 features;",
    ),
    "text in it": (
        of([0, 0], [1, "a"], [1, 1], [0, 0]),
        "The polygon file area.geojson has positions that are no pairs of numbers; give rings of",
    ),
    "no coordinates": ({"type": "Polygon"}, "has positions that are no pairs of numbers;"),
    "empty": (
        {"type": "Polygon", "coordinates": []},
        "has positions that are no pairs of numbers;",
    ),
    "two points": (of([0, 0], [1, 1]), "has positions that are no pairs of numbers;"),
    "not finite": (
        '{"type": "Polygon", "coordinates": [[[0, 0], [NaN, 1], [1, 1], [0, 0]]]}',
        "has positions that are no pairs of numbers;",
    ),
    "crossing": (
        of([10, 10], [50, 50], [50, 10], [10, 50], [10, 10]),
        "The study area's outline is not usable (Self-intersection[30 30]); draw it without",
    ),
    "outside": (
        of([10, 10], [160, 10], [160, 40], [10, 10]),
        "The polygon in area.geojson reaches from 10 to 160 in x and from 10 to 40 in y, out "
        "of the picture of 100 x 80 pixels; draw it in pixels of this picture.",
    ),
}


@pytest.mark.parametrize("case", WRONG)
def test_each_wrong_polygon_file_is_told(case: str, tmp_path: Path) -> None:
    value, message = WRONG[case]
    with pytest.raises(AreaWrong) as caught:
        polygon_area(saved(tmp_path, value), 100, 80)
    assert message in str(caught.value)


def test_a_polygon_that_does_not_name_the_raster_s_map_is_told_to(tmp_path: Path) -> None:
    far = saved(tmp_path, of([500001, 5199995], [500007, 5199995], [500007, 5199999]))
    placed = Georeference(np.array([[0.01, 0, 500000], [0, -0.01, 5200000]]), "EPSG:32632")
    with pytest.raises(AreaWrong) as caught:
        polygon_area(far, 900, 700, georeference=placed)
    assert str(caught.value) == (
        "The polygon in area.geojson reaches from 500001 to 500007 in x and from 5199995 to 5199999"
        " in y, out of the picture of 900 x 700 pixels; draw it in pixels of this picture, or name"
        " its map in the file as a GeoJSON's crs (EPSG:32632)."
    )


def test_a_missing_polygon_file_and_a_folder_are_told(tmp_path: Path) -> None:
    with pytest.raises(
        AreaWrong, match=r"There is no polygon file .*no\.geojson; check the path\."
    ):
        polygon_area(tmp_path / "no.geojson", 100, 80)
    if os.name == "posix":
        with pytest.raises(AreaWrong, match=r"cannot be opened \(is a directory\)\."):
            polygon_area(tmp_path, 100, 80)


@pytest.mark.parametrize("inset", [-1.0, math.nan, math.inf])
def test_an_impossible_inset_is_told(inset: float) -> None:
    with pytest.raises(
        AreaWrong, match=r"The inset must be 0 or a positive length, not .* pixels\."
    ):
        frame_area(40, 30, inset_px=inset)


def test_an_inset_that_leaves_nothing_is_told() -> None:
    with pytest.raises(
        AreaWrong, match=r"The inset of 97 pixels leaves nothing of the dish; give a smaller one\."
    ):
        dish_area(DISH, width=1200, height=1000, inset_px=97)


def test_crossed_plot_corners_are_told() -> None:
    with pytest.raises(AreaWrong, match=r"not usable \(Self-intersection.*; draw it without cross"):
        plot_area([[0, 0], [10, 10], [10, 0], [0, 10]])


def test_a_study_area_checks_itself() -> None:
    with pytest.raises(AreaWrong, match=r"A study area must be a polygon, not a LineString; draw"):
        StudyArea(LineString([(0, 0), (1, 1)]), "polygon", "")
    with pytest.raises(AreaWrong, match=r"The study area encloses nothing \(0 square pixels\); dr"):
        StudyArea(Polygon(), "polygon", "")


@given(st.floats(1, 500), st.floats(1, 500), st.floats(0.001, 0.4))
def test_an_area_survives_its_file(width: float, height: float, inset: float) -> None:
    outline = MultiPolygon([box(0, 0, width, height), box(width + 1, 0, width + 2, height)])
    area = StudyArea(outline.buffer(-inset), "polygon", "drawn")
    kept = StudyArea.from_dict(json.loads(json.dumps(area.as_dict())))
    assert kept.polygon.equals(area.polygon)
    assert (kept.kind, kept.note) == (area.kind, area.note)
    assert mapping(kept.polygon)["type"] == area.polygon.geom_type


def test_points_on_the_edge_belong_to_the_area() -> None:
    inside = frame_area(10, 10).contains(np.array([[-0.5, 3], [9.5, 9.5], [9.6, 3]]))
    assert inside.tolist() == [True, True, False]
