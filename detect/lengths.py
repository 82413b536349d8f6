"""What a length typed by a person means: "10mm", "24-48px", "1000x750mm"."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Literal, get_args

from detect.errors import OptionWrong

LengthUnit = Literal["px", "mm", "cm", "m"]
_MM = {"mm": 1.0, "cm": 10.0, "m": 1000.0}
SHORTEST, LONGEST = 1e-6, 1e9  # in any unit: beyond lie only slips of the finger
_NUMBER = r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?|nan|[-+]?inf"
_UNIT = r"\s*(px|mm|cm|m)?\s*"


@dataclass(frozen=True, slots=True)
class Length:
    """A length with the unit it was given in.

    Parameters
    ----------
    value : float
        Positive and finite.
    unit : {"px", "mm", "cm", "m"}
        Unit of `value`.

    Raises
    ------
    OptionWrong
        If `value` is not a positive finite number or the unit is unknown.

    Examples
    --------
    >>> parse_length("1.2cm", name="--quadrat").to_mm()
    12.0
    """

    value: float
    unit: LengthUnit

    def __post_init__(self) -> None:
        if not (math.isfinite(self.value) and self.value > 0):
            raise OptionWrong(
                f"A length must be a positive number, not {self.value:g} {self.unit}; give one such as 10mm."
            )
        if self.unit not in get_args(LengthUnit):
            raise OptionWrong(f"The unit {self.unit!r} is not known; use px, mm, cm or m.")

    def __str__(self) -> str:
        return f"{self.value:g}{self.unit}"

    @property
    def in_pixels(self) -> bool:
        """Whether the length was given in pixels."""
        return self.unit == "px"

    def to_mm(self) -> float:
        """Return the length in millimetres; a length in pixels needs a scale first."""
        if self.in_pixels:
            raise OptionWrong(
                f"{self} is in pixels, but millimetres are needed here; give it in mm, cm or m."
            )
        return self.value * _MM[self.unit]

    def to_px(self, mm_per_px: float | None) -> float:
        """Return the length in pixels, at `mm_per_px` millimetres per pixel (None: unknown)."""
        if self.in_pixels:
            return self.value
        if mm_per_px is None:
            raise OptionWrong(
                f"{self} cannot be turned into pixels, for no scale is known;"
                " give the length in px, or a scale (for example --mm-per-pixel)."
            )
        return self.to_mm() / mm_per_px


def parse_length(
    text: str, *, name: str, unit: LengthUnit | None = None, example: LengthUnit = "mm"
) -> Length:
    """Read one length such as "10mm".

    Parameters
    ----------
    text : str
        A number and a unit (px, mm, cm or m).
    name : str
        What the length is for, as it appears in the message.
    unit : {"px", "mm", "cm", "m"} or None
        Unit of a bare number; None refuses bare numbers.
    example : {"px", "mm", "cm", "m"}
        Unit that such a length usually has, shown where it is missing.

    Returns
    -------
    Length

    Raises
    ------
    OptionWrong
        If `text` is no positive length from 1e-6 to 1e9.
    """
    match = re.fullmatch(rf"\s*({_NUMBER}){_UNIT}", text)
    if match is None:
        raise OptionWrong(f"{name} must be a length such as 10mm, not {text!r}.")
    return _length(match[1], match[2] or unit, name, text, example)


def parse_pair(text: str, *, name: str, separator: Literal["-", "x"]) -> tuple[Length, Length]:
    """Read two lengths, "24-48px" (a range, `-`) or "1000x750mm" (two sides, `x`).

    Parameters
    ----------
    text : str
        Two numbers with the separator between them and a unit after the second (or after both).
    name : str
        What the pair is for, as it appears in the message.
    separator : {"-", "x"}
        `-` for a range, whose first length must be the smaller; `x` for width times height.

    Returns
    -------
    tuple of Length
        Both in one unit.

    Raises
    ------
    OptionWrong
        If `text` is no such pair.
    """
    example = "2-6mm" if separator == "-" else "1000x750mm"
    pattern = rf"\s*({_NUMBER}){_UNIT}{separator}\s*({_NUMBER}){_UNIT}"
    match = re.fullmatch(pattern, text)
    if match is None or (match[2] or match[4]) is None or (match[2] and not match[4]):
        raise OptionWrong(
            f"{name} must be two lengths with a unit such as {example}, not {text!r}."
        )
    first = _length(match[1], match[2] or match[4], name, text)
    second = _length(match[3], match[4], name, text)
    if first.unit != second.unit:
        raise OptionWrong(f"{name} mixes units in {text!r}; use one unit for both lengths.")
    if separator == "-" and first.value >= second.value:
        raise OptionWrong(f"{name} must run from small to large such as {example}, not {text!r}.")
    return first, second


def _length(
    number: str, unit: str | None, name: str, text: str, example: LengthUnit = "mm"
) -> Length:
    """One checked length, with the option's name in the complaint."""
    value = float(number)
    if not (math.isfinite(value) and value > 0):
        raise OptionWrong(f"{name} must be positive and finite, not {text!r}.")
    if not SHORTEST <= value <= LONGEST:
        raise OptionWrong(f"{name} must lie between {SHORTEST:g} and {LONGEST:g}, not at {text!r}.")
    if unit is None:
        raise OptionWrong(
            f"{name} needs a unit: {text!r} could be px, mm, cm or m; write {text.strip()}{example}."
        )
    return Length(value, unit)  # type: ignore[arg-type]  # the pattern admits known units only
