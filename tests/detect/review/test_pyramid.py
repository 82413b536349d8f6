"""Tiles of photographs too large to be sent whole."""

from __future__ import annotations

import hashlib
from dataclasses import replace
from pathlib import Path
from typing import Any

import cv2
import numpy as np
import pytest

import detect.review.pictures
import detect.review.shapes
from detect.photograph import Photograph
from detect.review.pyramid import TILE, NoSuchTile, Pyramid, TilesNotReady, levels
from detect.sheet import PhotographIdentity, read_sheet, write_sheet
from tests.reviewing import Page, review_of

SIZE = (1300, 900)  # not a multiple of anything


def a_photograph(size: tuple[int, int] = SIZE) -> Photograph:
    """A smooth picture that differs everywhere."""
    y, x = np.mgrid[: size[1], : size[0]].astype(np.float64)
    bands = [127 + 100 * np.sin(x / 90), 127 + 100 * np.sin(y / 70), 255 * x / size[0]]
    stored = np.dstack(bands).astype(np.uint8)
    return Photograph(Path("wide.png"), hashlib.sha256(stored.tobytes()).hexdigest(), stored)


class OnDisk:
    """Pixels that stay on disk, without reduced copies, and how much of them was read."""

    ndim, has_copies = 3, False

    def __init__(self, stored: Any) -> None:
        self._stored, self.shape, self.dtype, self.read = stored, stored.shape, stored.dtype, 0

    def __getitem__(self, part: Any) -> Any:
        cut = self._stored[part]
        self.read += cut.shape[0] * cut.shape[1]
        return cut


def joined(pyramid: Pyramid, level: int) -> Any:
    """All tiles of a size, put together."""
    size = pyramid.levels[level]
    rows = []
    for row in range(size.rows):
        tiles = [
            cv2.imdecode(np.frombuffer(pyramid.tile(level, column, row), np.uint8), 1)
            for column in range(size.columns)
        ]
        rows.append(np.hstack(tiles))
    return np.vstack(rows)[..., ::-1].astype(int)


def test_sizes_halve_until_one_tile_holds_all() -> None:
    found = levels(40_000, 25_000)
    assert (found[0].columns, found[0].rows) == (79, 49)
    assert (found[-1].columns, found[-1].rows) == (1, 1)
    assert found[-2].width > TILE
    assert len(levels(500, 100)) == 1


def test_tiles_put_together_are_the_picture_at_each_size(tmp_path: Path) -> None:
    photograph = a_photograph()
    pyramid = Pyramid(photograph, tmp_path)
    for size in pyramid.levels:
        picture = joined(pyramid, size.level)
        assert picture.shape == (size.height, size.width, 3)
        step = 2**size.level
        # The pixel in the middle of each square of the full picture, at whole numbers.
        at = (np.arange(5, 400, 37) // step).astype(int)
        middle = at * step + step // 2
        wanted = photograph.stored[middle][:, middle].astype(int)
        assert np.abs(picture[at][:, at] - wanted).max() < 12 + 4 * step


def test_a_tile_is_made_once_and_kept(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    first = Pyramid(a_photograph(), tmp_path).tile(1, 0, 0)

    def never(*_: Any) -> Any:
        raise AssertionError("made twice")

    monkeypatch.setattr(Pyramid, "_cut", never)
    assert Pyramid(a_photograph(), tmp_path).tile(1, 0, 0) == first
    assert not [path for path in tmp_path.rglob("*") if path.suffix == ".part"]


def test_where_nothing_can_be_kept_tiles_are_held_in_memory(tmp_path: Path) -> None:
    home = tmp_path / "home"
    home.write_text("a file where the folder should be")
    pyramid = Pyramid(a_photograph(), home)
    assert pyramid.tile(0, 0, 0) == pyramid.tile(0, 0, 0)
    assert len(pyramid._held) == 1


@pytest.mark.parametrize("place", [(0, 3, 0), (0, 0, 2), (9, 0, 0), (2, 1, 0), (-1, 0, 0)])
def test_there_are_no_tiles_beyond_the_picture(tmp_path: Path, place: tuple[int, int, int]) -> None:
    with pytest.raises(NoSuchTile):
        Pyramid(a_photograph(), tmp_path).tile(*place)


def test_of_a_raster_without_copies_small_sizes_are_made_from_large_tiles(tmp_path: Path) -> None:
    photograph = a_photograph()
    raster = OnDisk(photograph.stored)
    pyramid = Pyramid(replace(photograph, stored=raster), tmp_path / "a")  # type: ignore[arg-type]
    pyramid.tile(0, 0, 0)
    with pytest.raises(TilesNotReady):
        pyramid.tile(2, 0, 0)
    told: list[tuple[int, int]] = []
    pyramid.make(lambda done, total: told.append((done, total)))
    assert told[-1] == (pyramid.total, pyramid.total) == (6 + 2 + 1, 9)
    assert raster.read == SIZE[0] * SIZE[1]  # each pixel once
    direct = Pyramid(photograph, tmp_path / "b")
    for level in (1, 2):
        assert np.abs(joined(pyramid, level) - joined(direct, level)).mean() < 3


def test_tiles_of_pictures_not_looked_at_for_long_are_thrown_away(tmp_path: Path) -> None:
    import os

    for k in range(25):
        folder = tmp_path / f"{k:064d}-1"
        folder.mkdir()
        os.utime(folder, (1000.0 + k, 1000.0 + k))
    Pyramid(a_photograph(), tmp_path)
    left = sorted(path.name for path in tmp_path.iterdir())
    assert len(left) == 20
    assert f"{5:064d}-1" not in left
    assert f"{24:064d}-1" in left


def test_a_page_gets_tiles_of_a_large_photograph(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    monkeypatch.setattr(detect.review.pictures, "WHOLE_UP_TO", 1000)
    folder = tmp_path / "plot"
    folder.mkdir()
    page = review_of(folder)
    picture = a_photograph()
    path = folder / "wide.png"
    cv2.imwrite(str(path), picture.stored[..., ::-1])
    identity = PhotographIdentity("wide.png", hashlib.sha256(path.read_bytes()).hexdigest(), *SIZE)
    sheet = write_sheet(replace(read_sheet(page.sheets[0]), photograph=identity), folder)
    wide = Page(folder, [sheet])
    told = wide.state()["picture"]
    assert (told["kind"], told["tile"], len(told["levels"])) == ("tiles", TILE, 3)
    tile = wide.get(f"{told['url']}/2/0/0")
    assert tile.headers["content-type"] == "image/jpeg"
    assert cv2.imdecode(np.frombuffer(tile.content, np.uint8), 1).shape == (225, 325, 3)
    assert wide.get(f"{told['url']}/3/0/0").status_code == 404
    assert wide.get(f"{told['url']}/0/-1/0").status_code == 400
    assert wide.get(f"api/sheets/{wide.sheet}/picture").status_code == 404
    small = Page(folder, page.sheets)
    monkeypatch.undo()
    assert small.get(f"api/sheets/{small.sheet}/tiles/0/0/0").status_code == 404
