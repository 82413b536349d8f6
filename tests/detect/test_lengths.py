"""Lengths as people type them."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from detect.errors import OptionWrong
from detect.lengths import Length, parse_length, parse_pair


@pytest.mark.parametrize(
    ("text", "value", "unit", "mm"),
    [
        ("10mm", 10.0, "mm", 10.0),
        (" 1.2 cm ", 1.2, "cm", 12.0),
        (".5m", 0.5, "m", 500.0),
        ("2e1mm", 20.0, "mm", 20.0),
        ("7.", 7.0, "mm", 7.0),
    ],
)
def test_a_length_is_read(text: str, value: float, unit: str, mm: float) -> None:
    length = parse_length(text, name="--quadrat", unit="mm")
    assert (length.value, length.unit) == (value, unit)
    assert length.to_mm() == pytest.approx(mm)


def test_pixels_and_millimetres_meet_only_at_a_scale() -> None:
    assert Length(24, "px").to_px(None) == 24
    assert Length(24, "px").in_pixels
    assert Length(2, "cm").to_px(0.5) == pytest.approx(40.0)
    with pytest.raises(OptionWrong, match=r"24px is in pixels, but millimetres are needed here; g"):
        Length(24, "px").to_mm()
    with pytest.raises(
        OptionWrong, match=r"2cm cannot be turned into pixels, for no scale is known"
    ):
        Length(2, "cm").to_px(None)


@pytest.mark.parametrize(
    ("text", "separator", "expected"),
    [
        ("24-48px", "-", (Length(24, "px"), Length(48, "px"))),
        ("2mm-6mm", "-", (Length(2, "mm"), Length(6, "mm"))),
        ("1e-1-2e0mm", "-", (Length(0.1, "mm"), Length(2, "mm"))),
        ("1000x750mm", "x", (Length(1000, "mm"), Length(750, "mm"))),
        (" 1 x 0.75 m ", "x", (Length(1, "m"), Length(0.75, "m"))),
    ],
)
def test_a_pair_is_read(text: str, separator: str, expected: tuple[Length, Length]) -> None:
    assert parse_pair(text, name="--plot", separator=separator) == expected  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "--quadrat must be a length such as 10mm, not ''."),
        ("ten", "--quadrat must be a length such as 10mm, not 'ten'."),
        ("10 miles", "--quadrat must be a length such as 10mm, not '10 miles'."),
        ("10", "--quadrat needs a unit: '10' could be px, mm, cm or m; write 10mm."),
        ("nan", "--quadrat must be positive and finite, not 'nan'."),
        ("1e300mm", "--quadrat must lie between 1e-06 and 1e+09, not at '1e300mm'."),
        ("1e-7m", "--quadrat must lie between 1e-06 and 1e+09, not at '1e-7m'."),
        ("0mm", "--quadrat must be positive and finite, not '0mm'."),
        ("-3mm", "--quadrat must be positive and finite, not '-3mm'."),
        ("nanmm", "--quadrat must be positive and finite, not 'nanmm'."),
        ("infmm", "--quadrat must be positive and finite, not 'infmm'."),
        ("1e999mm", "--quadrat must be positive and finite, not '1e999mm'."),
    ],
)
def test_what_is_no_length_is_told(text: str, message: str) -> None:
    with pytest.raises(OptionWrong) as caught:
        parse_length(text, name="--quadrat")
    assert str(caught.value) == message


@pytest.mark.parametrize(
    ("text", "separator", "message"),
    [
        ("6", "-", "--diameter must be two lengths with a unit such as 2-6mm, not '6'."),
        ("2-6", "-", "--diameter must be two lengths with a unit such as 2-6mm, not '2-6'."),
        ("2mm-6", "-", "--diameter must be two lengths with a unit such as 2-6mm, not '2mm-6'."),
        ("2x6", "x", "--diameter must be two lengths with a unit such as 1000x750mm, not '2x6'."),
        ("2mm-6cm", "-", "--diameter mixes units in '2mm-6cm'; use one unit for both lengths."),
        ("6-2mm", "-", "--diameter must run from small to large such as 2-6mm, not '6-2mm'."),
        ("6-6mm", "-", "--diameter must run from small to large such as 2-6mm, not '6-6mm'."),
        ("0-6mm", "-", "--diameter must be positive and finite, not '0-6mm'."),
    ],
)
def test_what_is_no_pair_is_told(text: str, separator: str, message: str) -> None:
    with pytest.raises(OptionWrong) as caught:
        parse_pair(text, name="--diameter", separator=separator)  # type: ignore[arg-type]
    assert str(caught.value) == message


@pytest.mark.parametrize("value", [0.0, -1.0, math.nan, math.inf])
def test_a_length_checks_its_value(value: float) -> None:
    with pytest.raises(
        OptionWrong, match=r"A length must be a positive number, not .* mm; give one"
    ):
        Length(value, "mm")


def test_a_length_checks_its_unit() -> None:
    with pytest.raises(OptionWrong, match=r"The unit 'inch' is not known; use px, mm, cm or m\."):
        Length(1.0, "inch")  # type: ignore[arg-type]


@given(st.floats(1e-6, 1e6), st.sampled_from(["px", "mm", "cm", "m"]))
def test_a_length_written_out_is_read_back(value: float, unit: str) -> None:
    length = Length(float(f"{value:g}"), unit)  # type: ignore[arg-type]
    assert parse_length(str(length), name="a") == length
