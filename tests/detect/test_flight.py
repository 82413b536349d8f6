"""The scale of a camera that looked straight down, from its height and lens."""

from __future__ import annotations

import math

import pytest

from detect.errors import OptionWrong
from detect.flight import HEIGHT_UNCERTAINTY, scale_from_height


def test_similar_triangles_give_the_size_of_a_pixel() -> None:
    # A sensor 13.2 mm wide behind a lens of 8.8 mm sees 30 m x 13.2 / 8.8 = 45 m of ground.
    scale = scale_from_height(30_000, 8.8, 13.2, longer_side_px=4500)
    assert scale.mm_per_px([[0, 0], [900, 900]]) == pytest.approx([10.0, 10.0])
    assert scale.source == "height"
    assert scale.relative_uncertainty == HEIGHT_UNCERTAINTY == 0.05
    assert scale.note == "30 m above the ground, focal length 8.8 mm, sensor 13.2 mm wide"


def test_a_known_height_is_surer() -> None:
    scale = scale_from_height(30_000, 8.8, 13.2, longer_side_px=4500, height_uncertainty=0.01)
    assert scale.relative_uncertainty == 0.01


@pytest.mark.parametrize("wrong", [0.0, -1.0, math.nan, math.inf])
def test_impossible_lengths_are_told(wrong: float) -> None:
    for values, name in (
        ((wrong, 8.8, 13.2), "height"),
        ((30_000, wrong, 13.2), "focal length"),
        ((30_000, 8.8, wrong), "sensor's width"),
    ):
        with pytest.raises(OptionWrong, match=f"The {name} must be a positive number of mm, not"):
            scale_from_height(*values, longer_side_px=4500)


def test_a_height_in_the_wrong_unit_is_told() -> None:
    with pytest.raises(OptionWrong, match="A height of 30 mm is too near for a focal length"):
        scale_from_height(30, 8.8, 13.2, longer_side_px=4500)
