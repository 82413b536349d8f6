"""Area averages on any grid, held against sums written out and against another library."""

from __future__ import annotations

from pathlib import Path

import cv2
import numpy as np
import pytest

from detect import averages
from detect.averages import averaged, averaged_cells
from detect.photograph import Photograph

RNG = np.random.default_rng(3)
STORED = RNG.integers(0, 256, (61, 83, 3)).astype(np.uint8)


def plainly(stored: np.ndarray, n_columns: int, n_rows: int) -> np.ndarray:
    """Every pixel cut into 60 x 60 equal parts, and the parts of each cell averaged."""
    fine = stored.astype(np.float64).repeat(n_rows, axis=0).repeat(n_columns, axis=1)
    height, width = stored.shape[:2]
    return fine.reshape(n_rows, height, n_columns, width, 3).mean(axis=(1, 3))


@pytest.mark.parametrize("cells", [(83, 61), (40, 30), (41, 61), (7, 5), (1, 1)])
def test_each_cell_is_the_mean_of_what_lies_under_it(cells: tuple[int, int]) -> None:
    columns, rows = cells
    got = averaged_cells(STORED, (0, 0), (83, 61, *cells), (0, columns), (0, rows))
    assert got.dtype == np.uint8
    assert np.abs(got - plainly(STORED, columns, rows)).max() <= 0.5 + 1e-3


def test_averages_are_those_of_another_library() -> None:
    got = averaged_cells(STORED, (0, 0), (83, 61, 33, 25), (0, 33), (0, 25))
    theirs = cv2.resize(STORED, (33, 25), interpolation=cv2.INTER_AREA)
    assert np.abs(got.astype(int) - theirs).max() <= 1


@pytest.mark.parametrize("part", [((0, 10), (0, 9)), ((7, 22), (3, 25)), ((32, 33), (24, 25))])
def test_a_part_is_what_it_is_in_the_whole(part: tuple[tuple[int, int], tuple[int, int]]) -> None:
    whole = averaged_cells(STORED, (0, 0), (83, 61, 33, 25), (0, 33), (0, 25))
    (a, b), (c, d) = part
    got = averaged_cells(STORED, (0, 0), (83, 61, 33, 25), *part)
    assert np.array_equal(got, whole[c:d, a:b])


def test_bands_do_not_show(monkeypatch: pytest.MonkeyPatch) -> None:
    whole = averaged_cells(STORED, (0, 0), (83, 61, 33, 25), (0, 33), (0, 25))
    monkeypatch.setattr(averages, "_MOST_READ", 83 * 7)
    again = averaged_cells(STORED, (0, 0), (83, 61, 33, 25), (0, 33), (0, 25))
    assert np.array_equal(whole, again)


def test_the_grid_may_begin_anywhere_and_depth_is_kept() -> None:
    deep = Photograph(Path("a.tif"), "0", STORED.astype(np.uint16) * 257)
    got = averaged(deep, (10, 20), (60, 30, 25, 11), (3, 20), (2, 9))
    part = plainly(STORED[20:50, 10:70], 25, 11)[2:9, 3:20]
    assert np.abs(got * 255 - part).max() < 0.01
    assert got.dtype == np.float32
