"""A picture judged in tiles holds what it holds in one piece: no seam doubles or loses a spot."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import shapely
from scipy.spatial import cKDTree

from detect.area import StudyArea, frame_area
from detect.doubt import GENERAL
from detect.find import Found, find_spots
from detect.lengths import Length
from detect.photograph import Photograph
from detect.sizes import learn_diameters
from detect.tiles import Tiling, cut_tiles
from detect.view import grid_of, part_of_view, view_of
from detect.wanted import DetectOptions, Kind
from detect.windows import views_that_teach
from tests.scenes import SpotScene, scattered

# Everything is cut into the smallest tiles, and learned from the whole as one piece is.
SMALLEST = Tiling(most_pixels=0, core=240, taught_by=10**9)
GROUND = {"ground": (0.42, 0.33, 0.25), "colour": (0.3, 0.5, 0.16)}


def scene(**choices: object) -> SpotScene:
    discs = scattered(120, radius=(5, 8), size=(700, 520), gap=2.0)
    return SpotScene(width=700, height=520, discs=discs, **choices)


def repeated(down: int, across: int) -> Photograph:
    """The same scene several times over, side by side."""
    return Photograph(
        Path("a.png"), "0", np.tile(scene(light=0.0).draw().stored, (down, across, 1))
    )


def found(
    photograph: Photograph,
    kind: Kind,
    tiling: Tiling | None,
    diameter: tuple[float, float],
    **choices: Any,
) -> Found:
    smallest, largest = (Length(value, "px") for value in diameter)
    options = DetectOptions(kind=kind, diameter=(smallest, largest), **choices)
    area = frame_area(photograph.width, photograph.height)
    return find_spots(photograph, area, options, tiling=tiling)


@pytest.mark.parametrize("kind", ["spots", "colonies", "lesions", "seedlings"])
def test_tiles_find_what_one_piece_finds(kind: Kind) -> None:
    photograph = scene(**GROUND if kind == "seedlings" else {}).draw()
    diameter = (10.0, 17.0)
    one = found(photograph, kind, None, diameter)
    tiled = found(photograph, kind, SMALLEST, diameter)
    assert "tiles" not in one.settings
    assert tiled.settings["tiles"] == (6 if kind == "seedlings" else 4)
    assert len(one.spots) > 90
    assert len(tiled.spots) == len(one.spots)
    away, nearest = cKDTree(tiled.spots.centres).query(one.spots.centres)
    assert away.max() < 0.5
    assert len(set(nearest)) == len(one.spots)
    assert tiled.spots.radius[nearest] == pytest.approx(one.spots.radius, abs=0.5)
    assert tiled.settings["noise_lab"] == one.settings["noise_lab"]


def test_a_reduced_picture_is_cut_on_one_grid() -> None:
    drawn = scene().draw().stored
    big = Photograph(Path("a.png"), "0", drawn.repeat(3, axis=0).repeat(3, axis=1))
    one, tiled = (found(big, "spots", tiling, (31.0, 51.0)) for tiling in (None, SMALLEST))
    assert 0.25 < one.settings["working_px_per_px"] < 0.27
    assert tiled.settings["tiles"] == 4
    assert len(tiled.spots) == len(one.spots) > 90
    away = cKDTree(tiled.spots.centres).query(one.spots.centres)[0]
    assert away.max() * one.settings["working_px_per_px"] < 0.5


def test_an_object_on_a_seam_is_found_once() -> None:
    # Cores meet between 239 and 240, and between 479 and 480, across and down.
    lines = [(x, 60.0 + 40 * k) for x in (239.5, 238, 480) for k in range(11)]
    lines += [(70.0 + 40 * k, 239.5) for k in range(4)] + [(300.0 + 40 * k, 241) for k in range(4)]
    discs = np.array([(x, y, 6.0) for x, y in lines])
    photograph = SpotScene(width=700, height=520, discs=discs).draw()
    one, tiled = (
        found(photograph, "spots", tiling, (8.0, 15.0), colour="grey", polarity="dark")
        for tiling in (None, SMALLEST)
    )
    assert tiled.settings["tiles"] == 6
    away = cKDTree(tiled.spots.centres).query(discs[:, :2])[0]
    assert (away < 1.0).sum() >= 40
    assert len(tiled.spots) == len(one.spots)
    assert cKDTree(tiled.spots.centres).query(one.spots.centres)[0].max() < 0.5


def test_windows_teach_nearly_what_the_whole_does() -> None:
    photograph = repeated(3, 3)
    area = frame_area(photograph.width, photograph.height)
    views = views_that_teach(photograph, area, 1.0, 16.0, 1_000_000)
    assert len(views) == 4
    assert all(view.lab.shape == (448, 448, 3) for view in views)
    corners = {(view.left, view.top) for view in views}
    assert len(corners) == len(views)
    one = found(photograph, "spots", None, (10.0, 17.0))
    taught = found(photograph, "spots", Tiling(0, 480, 1_000_000), (10.0, 17.0))
    assert len(taught.spots) == pytest.approx(len(one.spots), rel=0.03)
    assert taught.settings["noise_lab"] == pytest.approx(one.settings["noise_lab"], rel=0.1)


def test_windows_lie_in_the_study_area() -> None:
    photograph = repeated(3, 3)
    area = StudyArea(shapely.Point(1050, 780).buffer(770), "polygon", "drawn")
    views = views_that_teach(photograph, area, 1.0, 16.0, 900_000)
    assert len(views) == 4
    assert all(view.inside[224, 224] for view in views)


def test_sizes_are_learned_from_windows_of_a_large_picture(monkeypatch: pytest.MonkeyPatch) -> None:
    photograph = repeated(2, 2)
    area = frame_area(photograph.width, photograph.height)
    whole = learn_diameters(photograph, area, DetectOptions(), GENERAL)
    monkeypatch.setattr("detect.sizes._TAUGHT_BY", 700_000)
    assert learn_diameters(photograph, area, DetectOptions(), GENERAL) == pytest.approx(
        whole, rel=0.2
    )


@pytest.mark.parametrize("size", [(100, 90), (700, 520), (719, 481), (2400, 250)])
def test_cores_cover_every_pixel_once_and_tiles_see_around_them(size: tuple[int, int]) -> None:
    photograph = Photograph(Path("a.png"), "0", np.zeros((size[1], size[0], 3), np.uint8))
    grid = grid_of(photograph, frame_area(*size), shrink=1.0)
    seen = np.zeros(size[::-1], dtype=int)
    for tile in cut_tiles(grid, core=240, around=70):
        (x0, x1), (y0, y1) = tile.core_columns, tile.core_rows
        seen[y0:y1, x0:x1] += 1
        for core, whole, length in (
            (tile.core_columns, tile.columns, size[0]),
            (tile.core_rows, tile.rows, size[1]),
        ):
            assert whole[0] == max(0, core[0] - 80)
            assert whole[1] == min(length, core[1] + 80)
    assert (seen == 1).all()


@pytest.mark.parametrize("shrink", [1.0, 0.73])
def test_a_part_of_a_view_is_that_part(shrink: float) -> None:
    photograph = scene().draw()
    area = StudyArea(shapely.box(11.3, 20.7, 640.2, 480.1), "polygon", "drawn")
    grid = grid_of(photograph, area, shrink=shrink)
    whole = view_of(photograph, area, shrink=shrink)
    part = part_of_view(photograph, area, grid, (37, 200), (50, 180))
    assert np.abs(part.lab - whole.lab[50:180, 37:200]).max() < 1.5  # a step of 1/255 at most
    assert np.array_equal(part.inside, whole.inside[50:180, 37:200])
    x, y = part.to_photograph(np.array([5.0]), np.array([6.0]))
    again = whole.to_photograph(np.array([42.0]), np.array([56.0]))
    assert (x[0], y[0]) == pytest.approx((again[0][0], again[1][0]))


def test_tiles_outside_the_area_are_not_looked_at_and_progress_counts_the_others() -> None:
    photograph = scene().draw()
    area = StudyArea(shapely.box(10, 10, 600, 480), "polygon", "drawn").polygon
    area = area.difference(shapely.box(245, -5, 475, 500))
    options = DetectOptions(diameter=(Length(8, "px"), Length(17, "px")))
    told: list[tuple[int, int]] = []
    result = find_spots(
        photograph,
        StudyArea(area, "polygon", "drawn"),
        options,
        tiling=SMALLEST,
        progress=lambda done, total: told.append((done, total)),
    )
    assert told == [(k + 1, len(told)) for k in range(len(told))]
    assert result.settings["tiles"] == len(told) == 4
