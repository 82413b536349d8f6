"""The direction of colour that reviewed pixels teach: closed forms and drawn truth."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from detect.area import StudyArea
from detect.fisher import ReviewedPixels, fisher_direction, reviewed_pixels
from detect.photograph import Photograph
from detect.requests import detect_photograph, parse_request
from detect.reviewed import Reviewed
from detect.view import view_of
from detect.wanted import DetectOptions
from tests.discs import RADIUS, scattered, write_discs


def pixels(
    objects: list[float], struck: list[float] | None = None, *, spread: list[float], seed: int = 1
) -> ReviewedPixels:
    """Normal clouds of departures: ground about zero, objects and struck spots about theirs."""
    rng = np.random.default_rng(seed)
    clouds = [rng.normal(0, spread, (3000, 3)) for _ in range(3)]
    false = np.empty((0, 3)) if struck is None else clouds[2] + struck
    return ReviewedPixels(clouds[0] + objects, clouds[1], false, 50, 0 if struck is None else 50)


def test_alike_spreads_give_the_line_between_the_means() -> None:
    direction = fisher_direction([pixels([12.0, -9.0, 0.0], spread=[2.0, 2.0, 2.0])])
    assert direction == pytest.approx((0.8, -0.6, 0.0), abs=0.04)


def test_a_channel_in_which_the_ground_varies_has_less_say() -> None:
    # Fisher (1936): S^-1 (m1 - m0). With S = diag(64, 4, 4) and equal differences of the means the
    # weights go as 1/64 : 1/4; drawing S a tenth towards a round one makes that 1/60.25 : 1/6.25.
    direction = fisher_direction([pixels([10.0, 10.0, 0.0], spread=[8.0, 2.0, 2.0])])
    assert direction is not None
    mean = (64 + 4 + 4) / 3
    expected = (0.9 * 4 + 0.1 * mean + 0.25) / (0.9 * 64 + 0.1 * mean + 0.25)
    assert direction[0] / direction[1] == pytest.approx(expected, rel=0.1)


def test_what_was_struck_is_turned_away_from() -> None:
    red, blue = [0.0, 30.0, 15.0], [0.0, 5.0, -30.0]
    alone = fisher_direction([pixels(red, spread=[3.0, 3.0, 3.0])])
    taught = fisher_direction([pixels(red, blue, spread=[3.0, 3.0, 3.0])])
    assert alone is not None
    assert taught is not None
    assert np.dot(taught, red) > 20
    assert np.dot(taught, blue) < 0.25 * np.dot(taught, red)
    orange = [0.0, 30.0, 45.0]
    before = fisher_direction([pixels(orange, spread=[3.0, 3.0, 3.0])])
    after = fisher_direction([pixels(orange, [0.0, 0.0, 40.0], spread=[3.0, 3.0, 3.0])])
    assert before is not None
    assert after is not None
    assert np.dot(before, [0, 0, 40]) > 30
    assert abs(np.dot(after, [0, 0, 40])) < 10
    assert np.dot(after, orange) > 20


def test_without_pixels_or_without_a_difference_there_is_no_direction() -> None:
    some = pixels([12.0, 0.0, 0.0], spread=[2.0, 2.0, 2.0])
    assert fisher_direction([replace(some, objects=some.objects[:5])]) is None
    assert fisher_direction([replace(some, ground=some.ground[:5])]) is None
    assert fisher_direction([pixels([0.2, 0.0, 0.0], spread=[2.0, 2.0, 2.0])]) is None


def test_pixels_of_a_photograph_are_sorted(tmp_path: Path) -> None:
    places = scattered(24, seed=4)
    path = write_discs(tmp_path / "a.png", places)
    photograph, sheet = detect_photograph(path, parse_request({"diameter": "10-24px"}))
    struck = np.isin(np.arange(len(sheet.spots)), [3, 4, 5, 6])
    spots = replace(sheet.spots, counted=~struck)
    reviewed = Reviewed(replace(sheet, spots=spots), path, DetectOptions())
    view = view_of(photograph, sheet.area, shrink=0.8)
    sorted_ = reviewed_pixels(view, reviewed, (10.0, 24.0))
    assert (sorted_.real_spots, sorted_.struck_spots) == (20, 4)
    assert np.abs(np.median(sorted_.ground, axis=0)).max() < 1.0
    for clouds in (sorted_.objects, sorted_.struck):
        # Light discs: about 120 levels above the ground, and inner pixels alone.
        assert np.percentile(clouds[:, 0], 2) > 25
    area = 0.8**2 * np.pi * (0.75 * RADIUS) ** 2
    assert len(sorted_.struck) == pytest.approx(4 * area, rel=0.25)
    assert isinstance(photograph, Photograph)
    assert isinstance(sheet.area, StudyArea)
