"""The pool of candidates: every drawn object is among them, whatever its height."""

from __future__ import annotations

import cv2
import numpy as np
import pytest

from detect.candidates import SURROUNDINGS, _clean, find_candidates
from detect.contrast import Contrast
from detect.regions import Candidates

HEIGHT, WIDTH = 160, 240


def discs(*rows: tuple[float, float, float, float], ring: float = 0.0) -> np.ndarray:
    """A map of discs x, y, r, height; the middle `ring` share of each is at ground level."""
    y, x = np.mgrid[:HEIGHT, :WIDTH]
    out = np.zeros((HEIGHT, WIDTH), np.float32)
    for a, b, r, height in rows:
        away = np.hypot(x - a, y - b)
        out[(away <= r) & (away >= ring * r)] = height
    return out


def pool(drawn: np.ndarray, *, noise: float = 0.5, inside: np.ndarray | None = None) -> Candidates:
    grain = np.random.default_rng(1).normal(0, noise, drawn.shape)
    map_ = (drawn + grain).astype(np.float32)
    inside = np.ones(drawn.shape, bool) if inside is None else inside
    contrast = Contrast(map_, noise, noise, 4 * noise, np.array([1.0, 0, 0]), 1.0)
    return find_candidates(contrast, inside, smallest_px=12, largest_px=40)


def best(found: Candidates, x: float, y: float, r: float) -> tuple[float, float]:
    """Centre error in pixels and relative error of the radius of the candidate most alike."""
    off = np.hypot(found.x - x, found.y - y)
    wrong = np.abs(found.diameter / (2 * r) - 1)
    k = int(np.argmin(off / r + wrong))
    return float(off[k]), float(wrong[k])


def test_objects_of_very_different_height_are_all_in_the_pool() -> None:
    rows = [(40, 40, 10, 3.0), (110, 50, 14, 8.0), (180, 60, 17, 40.0), (90, 120, 8, 15.0)]
    found = pool(discs(*rows))
    for x, y, r, _ in rows:
        off, wrong = best(found, x, y, r)
        assert off < 0.6
        assert wrong < 0.06


@pytest.mark.parametrize("apart", [1.5, 1.8, 2.0])
def test_touching_discs_are_in_the_pool_one_by_one_and_together(apart: float) -> None:
    rows = [(90, 80, 15, 20.0), (90 + 15 * apart, 80, 15, 20.0)]
    found = pool(discs(*rows))
    for x, y, r, _ in rows:
        off, wrong = best(found, x, y, r)
        assert off < 2.0
        assert wrong < 0.1
    middle = np.abs(found.x - (90 + 7.5 * apart)) < 1.5
    assert (middle & (found.elongation > 1.4) & (found.neck == 0)).any()
    assert (found.neck > 0).any()


@pytest.mark.parametrize("height", [12.0, 16.0])
def test_a_dim_disc_on_the_slope_of_a_bright_one_stands_out_against_its_surroundings(
    height: float,
) -> None:
    bright = cv2.GaussianBlur(discs((100, 80, 14, 60.0)), (0, 0), 5.0)
    dim = cv2.GaussianBlur(discs((124, 80, 9, height)), (0, 0), 1.5)
    contrast = Contrast(bright + dim, 0.5, 0.5, 2.0, np.array([1.0, 0, 0]), 1.0)
    inside = np.ones(bright.shape, bool)
    levels = find_candidates(contrast, inside, smallest_px=12, largest_px=40)
    assert best(levels, 124, 80, 9)[0] > 9
    both = find_candidates(
        contrast, inside, smallest_px=12, largest_px=40, surroundings=SURROUNDINGS
    )
    off, wrong = best(both, 124, 80, 9)
    assert off < 1.0
    assert wrong < 0.12
    assert set(both.local) == {0.0, 1.0}
    assert set(levels.local) == {0.0}


def test_a_round_hole_is_filled_so_that_a_ring_is_one() -> None:
    found = pool(discs((100, 80, 16, 20.0), ring=0.5))
    off, wrong = best(found, 100, 80, 16)
    assert off < 0.5
    assert wrong < 0.05


def test_a_large_gap_between_objects_is_no_hole() -> None:
    mask = np.zeros((HEIGHT, WIDTH), bool)
    mask[20:140, 60:180] = True
    mask[28:132, 68:172] = False  # a frame about a wide opening
    cleaned = _clean(mask, 40.0)
    assert cleaned[80, 120] == 0
    assert cleaned[24, 100] == 1


def test_threads_specks_and_giants_are_dropped() -> None:
    mask = np.zeros((HEIGHT, WIDTH), bool)
    mask[10, 10:200] = True  # a thread
    mask[20, 20] = True  # a speck
    mask[60:150, 100:230] = True  # a giant
    mask[60:75, 20:35] = True
    cleaned = _clean(mask, 20.0)
    assert cleaned[:40].sum() == 0
    assert cleaned[80:130, 120:210].sum() == 0
    assert cleaned[67, 27] == 1


def test_nothing_outside_the_area_is_a_candidate() -> None:
    inside = np.zeros((HEIGHT, WIDTH), bool)
    inside[:, :120] = True
    found = pool(discs((60, 80, 12, 20.0), (180, 80, 12, 20.0)), inside=inside)
    assert len(found) > 0
    assert found.x.max() < 120


def test_a_blank_map_has_no_candidate() -> None:
    assert len(pool(np.zeros((HEIGHT, WIDTH), np.float32), noise=1e-3)) == 0
