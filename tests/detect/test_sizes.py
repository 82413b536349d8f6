"""Sizes learned from the picture hold the true median diameter."""

from __future__ import annotations

import numpy as np
import pytest

from detect.area import frame_area
from detect.doubt import GENERAL, MODELS
from detect.sizes import learn_diameters
from detect.wanted import DetectOptions, Kind
from tests.scenes import SpotScene, scattered

DARK, LIGHT = (0.33, 0.28, 0.2), (0.9, 0.87, 0.8)


@pytest.mark.parametrize("colour", [DARK, LIGHT])
@pytest.mark.parametrize(
    ("n", "radius", "size"),
    [
        (60, (2.6, 3.4), (420, 320)),
        (40, (5.0, 9.0), (420, 320)),
        (20, (10.0, 18.0), (420, 320)),
        (10, (28.0, 42.0), (560, 420)),
        (7, (52.0, 66.0), (700, 560)),
    ],
)
def test_the_true_median_lies_in_the_learned_range(
    n: int, radius: tuple[float, float], size: tuple[int, int], colour: tuple[float, float, float]
) -> None:
    discs = scattered(n, radius=radius, size=size, seed=n)
    photograph = SpotScene(discs=discs, width=size[0], height=size[1], colour=colour).draw()
    smallest, largest = learn_diameters(photograph, frame_area(*size), DetectOptions(), GENERAL)
    median = 2 * float(np.median(discs[:, 2]))
    assert smallest < median < largest
    assert largest / smallest < 4
    within = (2 * discs[:, 2] > smallest) & (2 * discs[:, 2] < largest)
    assert within.mean() > 0.9


@pytest.mark.parametrize("kind", ["colonies", "seedlings", "lesions", "spots"])
def test_an_empty_picture_is_left_with_the_octave_searched_soonest(kind: Kind) -> None:
    photograph = SpotScene(discs=np.zeros((0, 3)), light=0.0, texture=0.0, blur=0.3).draw()
    area = frame_area(photograph.width, photograph.height)
    smallest, largest = learn_diameters(photograph, area, DetectOptions(kind=kind), MODELS[kind])
    # Whole octaves from 5 up to 0.45 of the short side of 320 pixels: 5, 10, 20, 40, 80.
    assert (smallest, largest) == (40.0, 80.0)
