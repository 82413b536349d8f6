"""The record of what planted objects showed, and the choices of how they are set."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from typing import Any

import pytest

from detect.errors import OptionWrong
from detect.planted import BlindDistance, Planted, PlantedOptions, Recall, Share

MEASURED = Planted(
    rounds=10,
    seed=3,
    copies=90,
    found=81,
    recall=Recall(0.9, 0.82, 0.95, 0.02),
    by_radius_px=(Share(4.0, 6.0, 40, 33), Share(6.0, 9.0, 50, 48)),
    by_contrast=(Share(2.0, 8.0, 90, 81),),
    by_separation=(Share(0.0, 1.5, 20, 12), Share(1.5, math.inf, 70, 69)),
    pairs=50,
    pairs_as_two=30,
    blind=BlindDistance(0.8, 0.05),
    both_radii_px=20.0,
)


def test_a_record_survives_a_file() -> None:
    text = json.dumps(MEASURED.as_dict(), allow_nan=False)
    assert Planted.from_dict(json.loads(text)) == MEASURED


def test_a_record_of_nothing_measured_survives_a_file() -> None:
    nothing = Planted(10, 1, note="Too little to copy.")
    assert Planted.from_dict(json.loads(json.dumps(nothing.as_dict()))) == nothing
    assert math.isnan(nothing.blind_px)


def test_the_blind_distance_in_pixels_is_that_of_usual_spots() -> None:
    assert MEASURED.blind_px == pytest.approx(16.0)


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("found", 91),
        ("pairs_as_two", -1),
        ("copies", True),
        ("rounds", 2.5),
        ("recall", {"value": 0.9, "low": 0.95, "high": 1.0, "standard_error": 0.1}),
        ("recall", {"value": 0.9, "low": 0.8, "high": 1.0, "standard_error": -0.1}),
        ("blind", {"value": -1.0, "standard_error": 0.1}),
        ("blind", {"value": 1.0}),
        ("by_contrast", [[5.0, 2.0, 10, 5]]),
        ("by_contrast", [[2.0, 5.0, 10, 11]]),
        ("by_contrast", [[2.0, 5.0, 10]]),
        ("both_radii_px", 0.0),
        ("pairs", 0),
    ],
)
def test_a_damaged_record_is_refused(name: str, value: Any) -> None:
    with pytest.raises((ValueError, TypeError)):
        Planted.from_dict(MEASURED.as_dict() | {name: value})


def test_a_record_without_one_of_its_parts_is_refused() -> None:
    values = MEASURED.as_dict()
    del values["pairs"]
    with pytest.raises(KeyError, match="pairs"):
        Planted.from_dict(values)


def test_a_result_without_what_it_rests_on_is_refused() -> None:
    with pytest.raises(ValueError, match="a recall without copies"):
        replace(MEASURED, copies=0, found=0)
    with pytest.raises(ValueError, match="a blind distance without pairs"):
        replace(MEASURED, pairs=0, pairs_as_two=0)


@pytest.mark.parametrize("rounds", [1, 0, -3, 1001])
def test_rounds_that_tell_nothing_or_never_end_are_refused(rounds: int) -> None:
    with pytest.raises(OptionWrong, match=rf"take 2 to 1,000 rounds, not {rounds}; 8 is usual"):
        PlantedOptions(rounds=rounds)


def test_a_negative_seed_is_refused() -> None:
    with pytest.raises(OptionWrong, match="whole number of 0 or more, not -1"):
        PlantedOptions(seed=-1)


def test_the_usual_rounds_are_those_the_sentences_name() -> None:
    assert PlantedOptions().rounds == 8
