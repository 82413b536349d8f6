"""Study areas typed for a table: four numbers, or a polygon in a file."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
import shapely

from analyse.region import area_from_option, check_area, rectangle
from detect.errors import AreaWrong, OptionWrong

SQUARE = shapely.Polygon([(0, 0), (4, 0), (4, 4), (0, 4)], [[(1, 1), (2, 1), (2, 2), (1, 2)]])


def saved(tmp_path: Path, value: object) -> str:
    """Write GeoJSON, or any text, and return its path."""
    path = tmp_path / "bed.geojson"
    path.write_text(value if isinstance(value, str) else json.dumps(value), encoding="utf-8")
    return str(path)


@pytest.mark.parametrize(("unit", "factor"), [("mm", 1), ("cm", 10), ("m", 1000)])
def test_four_numbers_in_any_unit(unit: str, factor: int) -> None:
    area = area_from_option(" -1, 0,1.5,2 ", unit)  # type: ignore[arg-type]
    assert area.bounds == (-factor, 0, 1.5 * factor, 2 * factor)


@pytest.mark.parametrize("wrap", ["geometry", "feature", "collection"])
def test_a_polygon_in_a_file(tmp_path: Path, wrap: str) -> None:
    geometry = json.loads(shapely.to_geojson(SQUARE))
    feature = {"type": "Feature", "properties": {}, "geometry": geometry}
    values = {
        "geometry": geometry,
        "feature": feature,
        "collection": {"type": "FeatureCollection", "features": [feature]},
    }
    area = area_from_option(saved(tmp_path, values[wrap]), "cm")
    assert area.area == pytest.approx(100 * SQUARE.area)
    assert area.geom_type == "Polygon"


def test_several_polygons_are_one_area(tmp_path: Path) -> None:
    both = shapely.MultiPolygon([shapely.box(0, 0, 1, 1), shapely.box(3, 0, 4, 1)])
    area = area_from_option(saved(tmp_path, shapely.to_geojson(both)))
    assert (area.geom_type, area.area) == ("MultiPolygon", 2.0)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("0,0,10", "needs four finite numbers X0,Y0,X1,Y1"),
        ("0,0,10,nan", "needs four finite numbers"),
        ("0,0,10,inf", "needs four finite numbers"),
        ("0,0,1e300,1", r"A rectangle may reach to 1e\+09 at most, not \[0.0, 0.0, 1e\+300"),
        ("10,0,0,10", "The rectangle 10,0,0,10 encloses nothing; give the smaller corner first"),
        ("0,0,10,0", "encloses nothing"),
        ("nowhere.geojson", "'nowhere.geojson' is neither X0,Y0,X1,Y1 nor a file that can be read"),
        ("0,0,a,10", "'0,0,a,10' is neither X0,Y0,X1,Y1 nor a file"),
    ],
)
def test_an_unusable_area_is_refused(text: str, message: str) -> None:
    with pytest.raises(AreaWrong, match=message):
        area_from_option(text)


@pytest.mark.parametrize(
    ("value", "message"),
    [
        ("{}", "bed.geojson is not GeoJSON; save one polygon as GeoJSON"),
        ("x,y", "bed.geojson is not GeoJSON"),
        ({"type": "Point", "coordinates": [1, 2]}, "must be a polygon, not a Point"),
        (
            {"type": "Polygon", "coordinates": [[[0, 0], [2, 2], [2, 0], [0, 2], [0, 0]]]},
            r"The study area is not usable \(Self-intersection.*draw it without crossings",
        ),
        (
            {"type": "MultiPoint", "coordinates": [[0, 0], [2, 2]]},
            "bed.geojson holds 2 shapes; a study area is one polygon, with holes if need be",
        ),
        ({"type": "Polygon", "coordinates": []}, "encloses nothing; give one with an area above 0"),
        (
            {"type": "FeatureCollection", "features": []},
            "bed.geojson holds 0 shapes; a study area is one polygon",
        ),
    ],
)
def test_an_unusable_file_is_refused(tmp_path: Path, value: object, message: str) -> None:
    with pytest.raises(AreaWrong, match=message):
        area_from_option(saved(tmp_path, value))


def test_an_unknown_unit_is_refused() -> None:
    with pytest.raises(OptionWrong, match="--unit must be mm, cm or m, not 'inch'"):
        area_from_option("0,0,1,1", "inch")  # type: ignore[arg-type]


def test_a_rectangle_of_three_numbers_is_refused() -> None:
    with pytest.raises(AreaWrong, match="needs four finite numbers"):
        rectangle([0, 0, 1])
    check_area(rectangle([0, 0, 1, 1]))
