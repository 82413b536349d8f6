"""Rasters on disk: windows are right, whatever the layout; what cannot be right is refused."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import cv2
import numpy as np
import pytest
import tifffile

from detect import photograph as photographs
from detect import raster
from detect.area import AreaWrong, StudyArea, area_with_data, frame_area
from detect.errors import PhotographUnreadable
from detect.find import find_spots
from detect.lengths import Length
from detect.photograph import Photograph, read_photograph
from detect.raster import RasterPixels
from detect.requests import detect_photograph, parse_request
from detect.tiles import Tiling
from detect.wanted import DetectOptions
from tests.scenes import SpotScene, scattered

rasterio = pytest.importorskip("rasterio", reason="the extra geo is not installed")
UTM = rasterio.transform.from_origin(500_000, 5_200_000, 0.005, 0.005)
PICTURE = np.random.default_rng(1).integers(0, 256, (90, 130, 3)).astype(np.uint8)


def saved(path: Path, pixels: np.ndarray, *, alpha: np.ndarray | None = None, **tags: Any) -> Path:
    """Write a GeoTIFF of some bands, (height, width, bands)."""
    bands = pixels.transpose(2, 0, 1)
    if alpha is not None:
        bands = np.concatenate([bands, alpha[None].astype(pixels.dtype)])
    profile = {"crs": "EPSG:32632", "transform": UTM, "compress": "deflate"} | tags
    height, width = pixels.shape[:2]
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=width,
        height=height,
        count=len(bands),
        dtype=pixels.dtype,
        **profile,
    ) as file:
        file.write(bands)
        if alpha is not None:
            file.colorinterp = [*file.colorinterp[:-1], rasterio.enums.ColorInterp.alpha]
    return path


LAYOUTS: dict[str, dict[str, Any]] = {
    "tiles": {"tiled": True, "blockxsize": 32, "blockysize": 16},
    "strips": {"blockysize": 7},
    "planes": {"interleave": "band"},
    "big": {"BIGTIFF": "YES"},
}


@pytest.mark.parametrize("layout", LAYOUTS)
@pytest.mark.parametrize("depth", [np.uint8, np.uint16])
def test_windows_hold_the_pixels_of_the_picture(tmp_path: Path, layout: str, depth: type) -> None:
    pixels = PICTURE.astype(depth) * (257 if depth == np.uint16 else 1)
    photograph = read_photograph(saved(tmp_path / "a.tif", pixels, **LAYOUTS[layout]))
    assert isinstance(photograph.stored, RasterPixels)
    assert (photograph.width, photograph.height) == (130, 90)
    assert photograph.stored.dtype == depth
    assert np.array_equal(photograph.reduced(), pixels)
    assert np.array_equal(photograph.reduced(box=(20, 33, 71, 90)), pixels[33:90, 20:71])
    assert photograph.pixels().max() <= 1.0
    whole = Photograph(tmp_path / "b.tif", "0", pixels)
    for shrink in (0.5, 0.37):
        got, expected = photograph.pixels(shrink=shrink), whole.pixels(shrink=shrink)
        assert got.shape == expected.shape
        assert np.abs(got - expected).max() <= 1.01 / 255


def test_its_identity_is_that_of_the_bytes(tmp_path: Path) -> None:
    import hashlib

    path = saved(tmp_path / "a.tif", PICTURE)
    assert read_photograph(path).sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


def test_one_band_is_grey(tmp_path: Path) -> None:
    photograph = read_photograph(saved(tmp_path / "a.tif", PICTURE[..., :1]))
    assert np.array_equal(photograph.reduced(), np.repeat(PICTURE[..., :1], 3, axis=2))
    assert photograph.notes == ()


def test_white_stored_as_nothing_is_turned_round(tmp_path: Path) -> None:
    path = saved(tmp_path / "a.tif", PICTURE[..., :1], PHOTOMETRIC="MINISWHITE")
    assert np.array_equal(read_photograph(path).reduced()[..., 0], 255 - PICTURE[..., 0])


def test_a_palette_is_followed(tmp_path: Path) -> None:
    path = saved(tmp_path / "a.tif", PICTURE[..., :1] % 4)
    colours = {0: (10, 20, 30, 255), 1: (200, 0, 0, 255), 2: (0, 150, 0, 255), 3: (9, 9, 9, 255)}
    with rasterio.open(path, "r+") as file:
        file.write_colormap(1, colours)
    table = np.array([colours[k][:3] for k in range(4)], dtype=np.uint8)
    got = read_photograph(path).reduced()
    assert np.array_equal(got, table[PICTURE[..., 0] % 4])


def test_of_more_bands_the_colours_are_taken_and_said(tmp_path: Path) -> None:
    pixels = np.concatenate([PICTURE, PICTURE[..., :2] // 2], axis=2)
    photograph = read_photograph(saved(tmp_path / "a.tif", pixels, photometric="RGB"))
    assert np.array_equal(photograph.reduced(), PICTURE)
    assert photograph.notes == ("of 5 bands only 1, 2, 3 used",)


def test_reduced_copies_in_the_file_serve_pictures_alone(tmp_path: Path) -> None:
    path = saved(tmp_path / "a.tif", PICTURE, tiled=True, blockxsize=16, blockysize=16)
    with rasterio.open(path, "r+") as file:
        file.build_overviews([2, 4], rasterio.enums.Resampling.nearest)
    photograph = read_photograph(path)
    exact = cv2.resize(PICTURE, (32, 22), interpolation=cv2.INTER_AREA) / 255
    assert np.abs(photograph.pixels(shrink=0.25) - exact).max() <= 1.01 / 255
    quick = photograph.pixels(shrink=0.25, quick=True)
    assert quick.shape == exact.shape
    assert np.abs(quick - exact).max() > 0.1  # nearest pixels of noise are far from its means


def with_hole() -> np.ndarray:
    alpha = np.full((90, 130), 255)
    alpha[:, :20] = 0
    alpha[40:60, 70:90] = 0
    return alpha


@pytest.mark.parametrize("by", ["alpha", "nodata"])
def test_what_holds_no_data_is_outside_the_study_area(tmp_path: Path, by: str) -> None:
    alpha, pixels = with_hole(), np.maximum(PICTURE, 1)
    if by == "alpha":
        path = saved(tmp_path / "a.tif", pixels, alpha=alpha)
    else:
        path = saved(tmp_path / "a.tif", pixels * (alpha[..., None] > 0), nodata=0)
    photograph = read_photograph(path)
    assert photograph.notes == ()
    area = area_with_data(frame_area(130, 90), photograph.seen)
    y, x = np.mgrid[:90, :130]
    within = area.contains(np.column_stack([x.ravel(), y.ravel()])).reshape(90, 130)
    assert not within[alpha == 0].any()
    assert within[alpha > 0].mean() > 0.95  # a pixel along the edges is left out
    assert area.note == "whole frame, without what holds no data"
    assert np.array_equal(photograph.reduced()[alpha > 0], pixels[alpha > 0])
    hole = StudyArea(frame_area(10, 10).polygon, "polygon", "drawn")
    with pytest.raises(AreaWrong, match="lies where the raster holds no data"):
        area_with_data(hole, photograph.seen)


def test_an_area_that_holds_data_everywhere_is_left_alone(tmp_path: Path) -> None:
    photograph = read_photograph(saved(tmp_path / "a.tif", PICTURE))
    area = frame_area(130, 90)
    assert photograph.seen is None
    assert area_with_data(area, photograph.seen) is area


@pytest.mark.parametrize(
    ("pixels", "tags", "message"),
    [
        (PICTURE.astype(np.float32), {}, "holds float32 numbers, not 8 or 16 bits"),
        (PICTURE.astype(np.int16), {}, "holds int16 numbers"),
        (PICTURE[:10], {}, "the picture has 130 x 10 pixels, too small"),
    ],
)
def test_what_cannot_be_read_right_is_refused(
    tmp_path: Path, pixels: np.ndarray, tags: dict[str, Any], message: str
) -> None:
    with pytest.raises(PhotographUnreadable, match=rf"^a\.tif: .*{message}"):
        read_photograph(saved(tmp_path / "a.tif", pixels, **tags))


def test_a_raster_of_transparency_alone_or_of_no_data_is_refused(tmp_path: Path) -> None:
    path = saved(tmp_path / "a.tif", PICTURE, alpha=np.zeros((90, 130)))
    with pytest.raises(PhotographUnreadable, match="holds no data anywhere"):
        read_photograph(path)


def test_a_turned_raster_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(raster, "LARGE", 1000)
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, PICTURE, photometric="rgb", extratags=[(274, "H", 1, 6, True)])
    with pytest.raises(PhotographUnreadable, match="is to be turned when shown"):
        read_photograph(path)


def test_a_raster_cut_short_is_told(tmp_path: Path) -> None:
    path = saved(tmp_path / "a.tif", PICTURE, tiled=True, blockxsize=16, blockysize=16)
    data = path.read_bytes()
    path.write_bytes(data[: len(data) // 2])
    with pytest.raises(PhotographUnreadable, match=r"a\.tif: the raster .*(damaged|cut short)"):
        read_photograph(path).reduced()


def test_a_plain_small_tiff_is_read_whole_as_before(tmp_path: Path) -> None:
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, PICTURE, photometric="rgb")
    photograph = read_photograph(path)
    assert isinstance(photograph.stored, np.ndarray)
    assert photograph.georeference is None


def test_a_large_plain_tiff_stays_on_disk(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(raster, "LARGE", 1000)
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, PICTURE, photometric="rgb", tile=(16, 16))
    photograph = read_photograph(path)
    assert isinstance(photograph.stored, RasterPixels)
    assert np.array_equal(photograph.reduced(), PICTURE)
    assert photograph.georeference is None


def without_extra(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(raster, "_has_extra", lambda: False)


def test_without_the_extra_a_very_large_raster_is_refused_with_the_remedy(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    without_extra(monkeypatch)
    monkeypatch.setattr(raster, "MOST_WHOLE", 1000)
    path = saved(tmp_path / "a.tif", PICTURE)
    with pytest.raises(PhotographUnreadable, match=r"pip install 'strewn\[geo\]'"):
        read_photograph(path)


def test_without_the_extra_a_georeference_is_left_aside_and_that_is_said(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capfd: pytest.CaptureFixture[str]
) -> None:
    without_extra(monkeypatch)
    photograph = read_photograph(saved(tmp_path / "a.tif", PICTURE))
    assert capfd.readouterr().err == ""  # the decoder keeps to itself which tags it does not know
    assert isinstance(photograph.stored, np.ndarray)
    assert np.array_equal(photograph.stored, PICTURE)
    assert photograph.notes[-1].startswith("georeference not read")


def test_the_limits_of_both_ways_of_reading_agree() -> None:
    assert raster.MOST_WHOLE == photographs.MOST_PIXELS


def test_copies_are_planted_only_in_what_fits_into_memory(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    photograph = read_photograph(saved(tmp_path / "a.tif", PICTURE))
    assert np.array_equal(photograph.stored.copy(), PICTURE)
    monkeypatch.setattr(raster, "LARGE", 1000)
    told = "130 x 90 pixels are too many to plant objects in; leave --planted"
    with pytest.raises(PhotographUnreadable, match=told):
        photograph.stored.copy()
    with pytest.raises(PhotographUnreadable, match=told):
        detect_photograph(tmp_path / "a.tif", parse_request({"planted": 2, "mm_per_pixel": 1.0}))


@pytest.mark.parametrize("tiling", [None, Tiling(0, 240, 10**9)])
def test_spots_on_disk_are_the_spots_in_memory(tmp_path: Path, tiling: Tiling | None) -> None:
    drawn = SpotScene(discs=scattered(40, radius=(6, 10))).draw()
    options = DetectOptions(diameter=(Length(11, "px"), Length(22, "px")))
    area = frame_area(drawn.width, drawn.height)
    expected = find_spots(drawn, area, options).spots
    on_disk = read_photograph(saved(tmp_path / "a.tif", drawn.stored))
    got = find_spots(on_disk, area, options, tiling=tiling).spots
    assert len(got) == len(expected) >= 38
    assert np.abs(got.centres - expected.centres).max() < 0.5
