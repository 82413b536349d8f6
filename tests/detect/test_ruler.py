"""The banded bar: found at any turn, to a fraction of a pixel, and refused when in doubt."""

from __future__ import annotations

import csv
import math

import cv2
import numpy as np
import pytest

from detect.errors import OptionWrong, ScaleNotFound
from detect.photograph import read_photograph
from detect.ruler import Bar, find_bar, scale_from_bar
from tests.conftest import SAMPLE
from tests.marked_scenes import bar_scene
from tests.scenes import photograph_of, soil, text_page


@pytest.mark.parametrize("seed", [1310, 1311, 1312])
def test_a_bar_is_found_at_any_turn(seed: int) -> None:
    scene, ends = bar_scene(seed)
    bar = find_bar(scene.draw())
    scale = scale_from_bar(bar, 50.0)
    a, b = scale.to_mm(ends)
    assert math.dist(a, b) == pytest.approx(50.0, rel=0.003)
    off = min(np.abs(np.sort(bar.ends, axis=0) - np.sort(ends, axis=0)).max(), 9.0)
    assert off < 0.1 * bar.length_px / bar.bands
    assert 0 < scale.relative_uncertainty < 0.002


@pytest.mark.parametrize("name", ["leaf_01.jpg", "leaf_02.jpg"])
def test_the_bar_of_the_sample_agrees_with_the_drawn_truth(name: str) -> None:
    with (SAMPLE / "truth" / "trial.csv").open(encoding="utf-8", newline="") as file:
        (row,) = (row for row in csv.DictReader(file) if row["photograph"] == name)
    bar = find_bar(read_photograph(SAMPLE / name))
    assert bar.length_px == pytest.approx(float(row["known_length_px"]), rel=0.003)
    assert bar.bands == 5
    scale = scale_from_bar(bar, 50.0)
    assert scale.source == "ruler"
    assert scale.note == f"a bar of 50 mm found, 5 bands, {bar.length_px:.1f} pixels long"


def test_thick_ink_does_not_lengthen_a_bar() -> None:
    page = np.full((300, 900), 230, np.uint8)
    for k in range(3):  # bands of 100 pixels from x = 150, 4 pixels too long at either end
        cv2.rectangle(page, (150 + 200 * k - 4, 120), (150 + 200 * k + 103, 170), 20, -1)
    bar = find_bar(photograph_of(cv2.GaussianBlur(page, (0, 0), 1.0)))
    assert bar.length_px == pytest.approx(500.0, abs=0.05)
    assert bar.ends[np.argmin(bar.ends[:, 0]), 0] == pytest.approx(149.5, abs=0.05)


def test_no_bar_is_told() -> None:
    for nothing in (soil(), text_page(), photograph_of(np.full((200, 300), 0.5))):
        with pytest.raises(ScaleNotFound, match=r"No banded bar is seen in scene.png: one of five"):
            find_bar(nothing)


def test_a_bar_of_three_bands_is_none() -> None:
    page = np.full((300, 900), 230, np.uint8)
    for k in range(2):
        cv2.rectangle(page, (150 + 200 * k, 120), (249 + 200 * k, 170), 20, -1)
    with pytest.raises(ScaleNotFound, match="No banded bar"):
        find_bar(photograph_of(page))


def test_two_bars_are_told() -> None:
    scene, _ = bar_scene(1313, bars=2)
    with pytest.raises(
        ScaleNotFound,
        match=r"2 banded bars are seen in scene.png \(about \d+,\d+, \d+,\d+\); leave",
    ):
        find_bar(scene.draw())


def test_an_impossible_length_is_told() -> None:
    bar = Bar(np.array([[10.0, 10.0], [400.0, 10.0]]), 5, 0.1)
    with pytest.raises(OptionWrong, match="length must be a positive number of millimetres"):
        scale_from_bar(bar, -1.0)
