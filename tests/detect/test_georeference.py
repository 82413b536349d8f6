"""Georeferences: pixels measured on the ground, against values that stand elsewhere."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detect.errors import PhotographUnreadable
from detect.georeference import Georeference, utm_zone
from detect.photograph import read_photograph
from detect.requests import detect_photograph, parse_request
from detect.sheet import read_sheet, write_sheet
from tests.detect.test_raster import PICTURE, saved
from tests.scenes import SpotScene, scattered

rasterio = pytest.importorskip("rasterio", reason="the extra geo is not installed")
Affine = rasterio.Affine


def placed(folder: Path, crs: str | None, transform: Any) -> Georeference:
    tags = {"crs": crs, "transform": transform}
    georeference = read_photograph(saved(folder / "a.tif", PICTURE, **tags)).georeference
    assert georeference is not None
    return georeference


def at(x: float, y: float, side: float) -> Any:
    return rasterio.transform.from_origin(x, y, side, side)


def test_on_the_central_meridian_of_a_utm_zone_the_factor_is_0_9996(tmp_path: Path) -> None:
    # The grid's definition: central scale factor 0.9996 (Snyder 1987, USGS PP 1395, section 8).
    georeference = placed(tmp_path, "EPSG:32632", at(500_000, 5_200_000, 0.005))
    assert georeference.factor == pytest.approx(0.9996, abs=2e-6)
    scale = georeference.scale()
    assert scale.source == "georeference"
    assert scale.mm_per_px([[40, 40]])[0] == pytest.approx(5 / 0.9996, rel=1e-5)
    assert "EPSG:32632" in scale.note
    assert "0.99960" in scale.note
    assert 0.0005 <= scale.relative_uncertainty < 0.001


@pytest.mark.parametrize("latitude", [0.0, 47.4, -60.0])
def test_web_maps_are_measured_on_the_ground(tmp_path: Path, latitude: float) -> None:
    # Spherical formulas used with geodetic latitudes (EPSG:1024, IOGP 373-7-2 section 1.3.4.2):
    # on the ellipsoid k is a / (N cos) along the parallel and a / (M cos) along the meridian.
    a, f = 6_378_137.0, 1 / 298.257223563
    e2, phi = f * (2 - f), np.radians(latitude)
    w = 1 - e2 * np.sin(phi) ** 2
    along, up = a / np.sqrt(w) * np.cos(phi) / a, a * (1 - e2) / w**1.5 * np.cos(phi) / a
    y = a * np.log(np.tan(np.pi / 4 + phi / 2))
    georeference = placed(tmp_path, "EPSG:3857", at(1_000_000, y + 45 * 0.01, 0.01))
    matrix = georeference.scale().matrix
    assert matrix[0, 0] == pytest.approx(10 * along, rel=1e-5)
    assert matrix[1, 1] == pytest.approx(10 * up, rel=1e-5)


def test_feet_become_millimetres(tmp_path: Path) -> None:
    # New York, Long Island, in US survey feet (1200/3937 m by definition).
    georeference = placed(tmp_path, "EPSG:2263", at(984_250, 200_000, 0.01))
    side = georeference.scale().mm_per_px([[60, 40]])[0]
    assert side * georeference.factor == pytest.approx(10 * 1200 / 3937, rel=1e-6)
    assert georeference.factor == pytest.approx(1.0, abs=1e-4)


@pytest.mark.parametrize("degrees", [30.0, 90.0, 200.0])
def test_a_turned_raster_keeps_x_right_and_y_down(tmp_path: Path, degrees: float) -> None:
    turned = at(500_000, 5_200_000, 0.005) * Affine.rotation(degrees)
    georeference = placed(tmp_path, "EPSG:32632", turned)
    matrix = georeference.scale().matrix
    assert matrix[:2, :2] == pytest.approx(np.diag([5.002, 5.002]), abs=0.001)


def test_pixels_that_are_not_square_are_measured_as_they_are(tmp_path: Path) -> None:
    oblong = Affine(0.004, 0, 500_000, 0, -0.006, 5_200_000)
    matrix = placed(tmp_path, "EPSG:32632", oblong).scale().matrix
    assert matrix[:2, :2] == pytest.approx(np.diag([4, 6]) / 0.9996, rel=1e-4, abs=1e-6)


def test_pixel_centres_are_at_whole_numbers(tmp_path: Path) -> None:
    georeference = placed(tmp_path, "EPSG:32632", at(500_000, 5_200_000, 0.5))
    corner = georeference.to_map([[-0.5, -0.5]])
    assert corner == pytest.approx(np.array([[500_000, 5_200_000]]))
    points = np.array([[3.0, 8.0], [100.25, 0.5]])
    assert georeference.to_px(georeference.to_map(points)) == pytest.approx(points, abs=1e-6)


@pytest.mark.parametrize(
    ("crs", "transform", "message"),
    [
        (
            "EPSG:4326",
            at(8.5, 47.4, 1e-7),
            r"degrees \(EPSG:4326\).*EPSG:32632 \(UTM zone 32 north\)",
        ),
        ("EPSG:4326", at(-70.7, -33.4, 1e-7), r"EPSG:32719 \(UTM zone 19 south\)"),
        (None, at(500_000, 5_200_000, 0.005), "does not say of which map; assign"),
        ("EPSG:32632", Affine(0.005, 0, 500_000, 0, 0.005, 5_200_000), "mirrors it"),
    ],
)
def test_what_gives_no_lengths_is_refused_with_the_remedy(
    tmp_path: Path, crs: str | None, transform: Any, message: str
) -> None:
    georeference = placed(tmp_path, crs, transform)
    with pytest.raises(PhotographUnreadable, match=message):
        georeference.scale()


@pytest.mark.parametrize(
    ("place", "zone"),
    [
        ((-180, 10), "EPSG:32601 (UTM zone 1 north)"),
        ((179.99, -10), "EPSG:32760 (UTM zone 60 south)"),
        ((180, 10), "EPSG:32660 (UTM zone 60 north)"),
        ((2.999, 51), "EPSG:32631 (UTM zone 31 north)"),
    ],
)
def test_zones_are_six_degrees_wide_from_the_date_line(
    place: tuple[float, float], zone: str
) -> None:
    assert utm_zone(*place) == zone


def scene_on_map(folder: Path, crs: str, transform: Any) -> Path:
    drawn = SpotScene(discs=scattered(25, radius=(6, 10))).draw()
    return saved(folder / "a.tif", drawn.stored, crs=crs, transform=transform)


def test_a_georeferenced_raster_brings_its_scale_along(tmp_path: Path) -> None:
    path = scene_on_map(tmp_path, "EPSG:32632", at(500_000, 5_200_000, 0.005))
    _, sheet = detect_photograph(path, parse_request({"diameter": "55-110mm"}))
    assert len(sheet.spots) == 25
    assert sheet.scale is not None
    assert sheet.scale.source == "georeference"
    write_sheet(sheet, tmp_path)
    again = read_sheet(tmp_path / "a.sheet.json").scale
    assert again is not None
    assert again.note == sheet.scale.note


def test_another_scale_takes_its_place(tmp_path: Path) -> None:
    path = scene_on_map(tmp_path, "EPSG:4326", at(8.5, 47.4, 1e-7))
    asked = {"diameter": "11-22px"}
    with pytest.raises(PhotographUnreadable, match=r"^a\.tif: the raster's georeference is in deg"):
        detect_photograph(path, parse_request(asked))
    _, sheet = detect_photograph(path, parse_request(asked | {"mm_per_pixel": 7.5}))
    assert sheet.scale is not None
    assert sheet.scale.source == "mm-per-pixel"
