"""Spots and study areas on the map of a georeferenced raster, read back by other programs."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import shapely

from detect.area import polygon_area
from detect.errors import AreaWrong
from detect.georeference import Georeference
from detect.on_map import named_map, points_geojson
from detect.outcome import write_detection
from detect.photograph import read_photograph
from detect.requests import detect_photograph, parse_request
from detect.scale import Scale
from detect.spots import Spots
from tests.detect.test_sheet import a_sheet

# Half a metre a pixel, turned by a quarter: x of the picture runs north, y east.
TURNED = Georeference(np.array([[0.0, 0.5, 500_000.0], [0.5, 0.0, 5_200_000.0]]), "EPSG:32632")
ON_32632 = {"type": "name", "properties": {"name": "urn:ogc:def:crs:EPSG::32632"}}


def test_the_layer_holds_every_spot_at_its_place_on_the_map() -> None:
    spots = Spots.found_at([10.0, 4.5], [20.0, 8.0], [4.0, 6.0], doubt=[0.25, 0.0])
    spots = replace(spots, counted=np.array([True, False]), found=np.array([False, True]))
    layer = json.loads(points_geojson(a_sheet(spots, scale=Scale.from_mm_per_pixel(500)), TURNED))
    assert layer["crs"] == ON_32632
    first, second = layer["features"]
    assert shapely.from_geojson(json.dumps(first["geometry"])) == shapely.Point(500_010, 5_200_005)
    assert second["geometry"]["coordinates"] == [500_004.0, 5_200_002.25]
    assert first["properties"] == {
        "id": "1",
        "radius_mm": 2000.0,
        "doubt": 0.25,
        "origin": "placed",
        "standing": "counted",
    }
    assert second["properties"]["standing"] == "struck"


def test_without_scale_spots_or_a_named_map_it_says_less() -> None:
    nowhere = replace(TURNED, name="unknown map")
    empty = json.loads(points_geojson(a_sheet(Spots.none()), nowhere))
    assert empty == {"type": "FeatureCollection", "features": []}
    one = json.loads(points_geojson(a_sheet(Spots.found_at([1], [2], [3])), nowhere))
    assert one["features"][0]["properties"]["radius_mm"] is None


def outline(folder: Path, geometry: Any, crs: Any = None) -> Path:
    path = folder / "area.geojson"
    values = {
        "type": "Feature",
        "properties": {},
        "geometry": json.loads(shapely.to_geojson(geometry)),
    }
    path.write_text(json.dumps(values | ({} if crs is None else {"crs": crs})))
    return path


def test_a_polygon_on_the_rasters_map_is_brought_to_pixels(tmp_path: Path) -> None:
    on_map = shapely.box(500_002, 5_200_001, 500_020, 5_200_010)
    path = outline(tmp_path, on_map, ON_32632)
    area = polygon_area(path, 60, 50, georeference=TURNED)
    assert area.polygon.equals(shapely.box(2, 4, 20, 40))
    assert shapely.transform(area.polygon, TURNED.to_map).equals(on_map)


def test_a_polygon_that_names_no_map_is_in_pixels(tmp_path: Path) -> None:
    path = outline(tmp_path, shapely.box(2, 4, 20, 40))
    assert polygon_area(path, 60, 50, georeference=TURNED).polygon.equals(shapely.box(2, 4, 20, 40))


def test_a_polygon_on_another_map_is_refused(tmp_path: Path) -> None:
    degrees = {"type": "name", "properties": {"name": "urn:ogc:def:crs:OGC:1.3:CRS84"}}
    path = outline(tmp_path, shapely.box(8, 47, 9, 48), degrees)
    with pytest.raises(AreaWrong, match=r"on the map urn:.*CRS84, but the raster on EPSG:32632;"):
        polygon_area(path, 60, 50, georeference=TURNED)


@pytest.mark.parametrize(
    ("values", "name"),
    [
        ({"crs": {"properties": {"name": "EPSG:3857"}}}, "EPSG:3857"),
        ({"crs": {"properties": {"name": "urn:ogc:def:crs:EPSG:9.1:3857"}}}, "EPSG:3857"),
        ({"crs": {"properties": {}}}, "None"),
        ({"crs": None}, None),
        ({"crs": {"properties": 3}}, None),
        ([], None),
        ({}, None),
    ],
)
def test_the_name_of_a_map_is_read_in_both_spellings(values: Any, name: str | None) -> None:
    assert named_map(values) == name


def test_the_layer_lies_beside_the_points_of_a_georeferenced_raster_alone(tmp_path: Path) -> None:
    pytest.importorskip("rasterio", reason="the extra geo is not installed")
    from tests.detect.test_georeference import at, scene_on_map

    path = scene_on_map(tmp_path, "EPSG:32632", at(500_000, 5_200_000, 0.005))
    photograph, sheet = detect_photograph(path, parse_request({"diameter": "55-110mm"}))
    write_detection(photograph, sheet, tmp_path)
    layer = json.loads((tmp_path / "a.points.geojson").read_text())
    assert len(layer["features"]) == len(sheet.spots) == 25
    x, y = layer["features"][0]["geometry"]["coordinates"]
    assert 500_000 < x < 500_000 + 0.005 * photograph.width
    assert 5_200_000 - 0.005 * photograph.height < y < 5_200_000
    plain = read_photograph(tmp_path / "a.overlay.jpg")
    assert plain.georeference is None
