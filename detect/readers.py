"""What the values of a request mean, whether typed as text or held by a recipe."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any, Literal, get_args

from detect.contrast import Colour, Polarity
from detect.errors import OptionWrong
from detect.lengths import LONGEST, SHORTEST, Length, parse_length, parse_pair
from detect.planted import PlantedOptions
from detect.wanted import Kind

AreaWord = Literal["dish", "frame", "plot", "leaf"]
CutDish = Literal["refuse", "use"]
MarkKind = Literal["plates", "fiducials"]
Four = tuple[float, float, float, float]
Corners = tuple[tuple[float, float], ...]


def numbers(text: Any, count: int, name: str) -> tuple[float, ...]:
    """Read `count` finite numbers, from "1,2,3" or from a list that may be nested."""
    pieces = text.split(",") if isinstance(text, str) else _flat(text)
    values = tuple(_finite(piece) for piece in pieces)
    if len(values) != count or not all(map(math.isfinite, values)):
        raise OptionWrong(f"{name} must be {count} numbers with commas between, not {text!r}.")
    return values


def positive(value: Any, name: str) -> float:
    """Read one positive finite number."""
    number = _finite(value)
    if not 0 < number < math.inf:
        raise OptionWrong(f"{name} must be a positive number, not {value!r}.")
    if not SHORTEST <= number <= LONGEST:
        raise OptionWrong(
            f"{name} must lie between {SHORTEST:g} and {LONGEST:g}, not at {value!r}."
        )
    return number


def whole(value: str | None, name: str) -> int | None:
    """Read a whole number typed by a person; None stays None."""
    if value is None:
        return None
    if not re.fullmatch(r"\s*[-+]?\d{1,18}\s*", value):
        raise OptionWrong(f"{name} must be a whole number of 18 digits at most, not {value!r}.")
    return int(value)


def one_of(choices: Sequence[str]) -> Callable[[Any, str], str]:
    """Return a reader of one of some words."""

    def read(value: Any, name: str) -> str:
        if value not in choices:
            raise OptionWrong(f"{name} must be one of {', '.join(choices)}, not {value!r}.")
        return str(value)

    return read


def _length(value: Any, name: str) -> Length:
    """Read one length with its unit."""
    if isinstance(value, Length):
        return value
    return parse_length(value if isinstance(value, str) else repr(value), name=name)


def _height(value: Any, name: str) -> Length:
    """Read the height of a camera, which is told in metres more often than not."""
    if isinstance(value, Length):
        return value
    return parse_length(value if isinstance(value, str) else repr(value), name=name, example="m")


def _range(value: Any, name: str) -> tuple[Length, Length]:
    """Read a range of lengths."""
    return parse_pair(value if isinstance(value, str) else repr(value), name=name, separator="-")


def _sides(value: Any, name: str) -> tuple[Length, Length]:
    """Read width times height."""
    return parse_pair(value if isinstance(value, str) else repr(value), name=name, separator="x")


def _share(value: Any, name: str) -> float:
    """Read a number within 0..1."""
    number = _finite(value)
    if not 0 <= number <= 1:
        raise OptionWrong(f"{name} must be a number from 0 to 1, not {value!r}.")
    return number


def _area(value: Any, name: str) -> AreaWord | Path:
    """Read a word for an area, or the path of a file."""
    if value in get_args(AreaWord):
        return value  # type: ignore[no-any-return]  # one of the words
    if not isinstance(value, str) or not Path(value).suffix:
        words = ", ".join(get_args(AreaWord))
        raise OptionWrong(
            f"{name} must be one of {words} or a GeoJSON file such as area.geojson, not {value!r}."
        )
    return Path(value)


def _rounds(value: Any, name: str) -> PlantedOptions | None:
    """Read whether objects are planted, and in how many rounds."""
    if isinstance(value, bool):
        return PlantedOptions() if value else None
    text = str(value) if isinstance(value, int) else value
    if not isinstance(text, str) or not re.fullmatch(r"\s*\d{1,9}\s*", text):
        raise OptionWrong(
            f"{name} must be a whole number of rounds such as {PlantedOptions().rounds}, or true,"
            f" not {value!r}."
        )
    return PlantedOptions(rounds=int(text))


def _four(value: Any, name: str) -> Four:
    """Read both ends of a line."""
    x1, y1, x2, y2 = numbers(value, 4, name)
    return x1, y1, x2, y2


def _corners(value: Any, name: str) -> Corners | MarkKind:
    """Read four points, or a word for the marks that are to be found there."""
    if value in get_args(MarkKind):
        return value  # type: ignore[no-any-return]  # one of the words
    if isinstance(value, str) and not any(sign.isdigit() for sign in value):
        words = " or ".join(get_args(MarkKind))
        raise OptionWrong(
            f"{name} must be 8 numbers with commas between, or {words} to be found, not {value!r}."
        )
    flat = numbers(value, 8, name)
    return tuple(zip(flat[::2], flat[1::2], strict=True))


def _taught(value: Any, name: str) -> Path:
    """Read the path of a file of what was learned."""
    if not isinstance(value, str | Path) or not str(value):
        raise OptionWrong(f"{name} must be a file such as taught.toml, not {value!r}.")
    return Path(value)


def _lens(value: Any, name: str) -> Path:
    """Read the path of a lens's file, or of photographs of a chessboard."""
    if not isinstance(value, str | Path) or not str(value):
        raise OptionWrong(
            f"{name} must be a file such as lens.toml, or photographs of a chessboard, not {value!r}."
        )
    return Path(value)


def _percent(value: Any, name: str) -> float:
    """Read a share in percent, such as 1%, above 0 and below 100."""
    text = value.strip() if isinstance(value, str) else ""
    share = _finite(text[:-1]) / 100 if text.endswith("%") else math.nan
    if not 0 < share < 1:
        raise OptionWrong(
            f"{name} must be a share of a length above 0% and below 100% such as 1%, not {value!r}."
        )
    return share


READERS: dict[str, Callable[[Any, str], Any]] = {
    "kind": one_of(get_args(Kind)),
    "diameter": _range,
    "colour": one_of(get_args(Colour)),
    "polarity": one_of(get_args(Polarity)),
    "highest_doubt": _share,
    "mm_per_pixel": positive,
    "dish": _length,
    "line": _four,
    "line_length": _length,
    "ruler": _length,
    "corners": _corners,
    "plot": _sides,
    "height": _height,
    "focal_length": _length,
    "sensor_width": _length,
    "lens": _lens,
    "scale_uncertainty": _percent,
    "area": _area,
    "inset": _length,
    "cut_dish": one_of(get_args(CutDish)),
    "taught": _taught,
    "planted": _rounds,
}


def _finite(value: Any) -> float:
    """Turn a number or text into a float; NaN for anything else."""
    if isinstance(value, bool) or not isinstance(value, str | int | float):
        return math.nan
    try:
        return float(value)
    except ValueError:
        return math.nan


def _flat(value: Any) -> list[Any]:
    """Flatten lists of lists."""
    if not isinstance(value, list | tuple):
        return [value]
    return [piece for entry in value for piece in _flat(entry)]
