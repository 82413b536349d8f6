"""What may be asked for, and the exact complaint about what may not."""

from __future__ import annotations

from typing import Any, get_args

import pytest

from detect.contrast import Colour
from detect.errors import OptionWrong
from detect.wanted import DetectOptions, Kind


@pytest.mark.parametrize(
    ("asked", "message"),
    [
        (
            {"kind": "pebbles"},
            "The kind 'pebbles' is not known; use one of colonies, seedlings, lesions, spots.",
        ),
        (
            {"colour": "pink"},
            "The colour 'pink' is not known; use one of"
            " auto, grey, green, red, blue, yellow, brown, purple.",
        ),
        (
            {"polarity": "up"},
            "The polarity 'up' is not known; use one of auto, dark, bright.",
        ),
        (
            {"highest_doubt": 0.0},
            "The highest doubt must lie between 0 and 1, not 0;"
            " 0.5 keeps what is more likely real than not.",
        ),
        (
            {"highest_doubt": 1.5},
            "The highest doubt must lie between 0 and 1, not 1.5;"
            " 0.5 keeps what is more likely real than not.",
        ),
        (
            {"highest_doubt": float("nan")},
            "The highest doubt must lie between 0 and 1, not nan;"
            " 0.5 keeps what is more likely real than not.",
        ),
        (
            {"polarity": "dark", "colour": "green"},
            "--polarity dark cannot apply with --colour green: a named colour says already which"
            " side is the object; leave one of them out.",
        ),
    ],
)
def test_what_cannot_be_asked_for(asked: dict[str, Any], message: str) -> None:
    with pytest.raises(OptionWrong) as trouble:
        DetectOptions(**asked)
    assert str(trouble.value) == message


def test_polarity_goes_with_grey_and_with_a_learned_colour() -> None:
    for colour in ("auto", "grey"):
        assert DetectOptions(colour=colour, polarity="dark").polarity == "dark"


@pytest.mark.parametrize("colour", get_args(Colour))
def test_every_colour_may_be_named(colour: Colour) -> None:
    assert DetectOptions(colour=colour).colour == colour


@pytest.mark.parametrize("kind", get_args(Kind))
def test_every_kind_has_a_usual_limit_of_the_models_doubt(kind: Kind) -> None:
    assert 0.0 < DetectOptions(kind=kind).most_doubt < 1.0
