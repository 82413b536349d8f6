"""What was learned from corrections: the record, and the small file it is kept in."""

from __future__ import annotations

import math
import tomllib
from dataclasses import dataclass, replace
from hashlib import sha256
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.calibration import Calibration
from detect.contrast import Colour, Polarity
from detect.doubt import FEATURES, DoubtModel
from detect.errors import DetectError, TaughtUnreadable
from detect.lengths import Length, parse_pair
from detect.wanted import DetectOptions, Kind

SCHEMA = 1
TAUGHT_NAME = "taught.toml"
_IMPOSSIBLE = (KeyError, TypeError, ValueError, AttributeError, DetectError)
_AXES = ("lightness", "green_to_red", "blue_to_yellow")


@dataclass(frozen=True, slots=True)
class Lessons:
    """What something was learned from.

    Parameters
    ----------
    photographs : tuple of pairs of str
        File name and sha256 of each reviewed photograph.
    real : int
        Spots that a person left counted or placed.
    placed : int
        Those of them that a person placed.
    struck : int
        Spots that a person struck.

    Raises
    ------
    ValueError
        If a number is negative, more were placed than are real, or no photograph is named.
    """

    photographs: tuple[tuple[str, str], ...]
    real: int
    placed: int
    struck: int

    def __post_init__(self) -> None:
        if not self.photographs:
            raise ValueError("no photograph is named")
        if not 0 <= self.placed <= self.real or self.struck < 0:
            raise ValueError(
                f"{self.real} real spots, {self.placed} placed and {self.struck} struck cannot be"
            )

    @property
    def spots(self) -> int:
        """All spots that a person has looked at."""
        return self.real + self.struck


@dataclass(frozen=True, slots=True)
class Taught:
    """What a person's corrections taught the detector about one kind of photographs.

    Parameters
    ----------
    kind : Kind
        Kind of objects it is for.
    lessons : Lessons
        What it was learned from.
    model : DoubtModel
        Weights of the doubt.
    highest_doubt : float
        Spots of more doubt (after calibration) are not kept.
    calibration : Calibration
        From the model's doubt to the doubt that is shown.
    colour, polarity : Colour, Polarity
        As they were asked for when the reviewed sheets were made.
    direction : tuple of three floats or None
        Unit direction in L*, a*, b* from ground to object; None leaves it to colour and polarity.
    diameter : pair of Length or None
        Smallest and largest diameter; None leaves them to the kind or the picture.
    tool_version : str
        Version of the program that learned.

    Raises
    ------
    ValueError
        If the direction is no direction, or a value is impossible.
    OptionWrong
        If kind, colour, polarity or the highest doubt is impossible.
    """

    kind: Kind
    lessons: Lessons
    model: DoubtModel
    highest_doubt: float
    calibration: Calibration
    colour: Colour = "auto"
    polarity: Polarity = "auto"
    direction: tuple[float, float, float] | None = None
    diameter: tuple[Length, Length] | None = None
    tool_version: str = ""

    def __post_init__(self) -> None:
        DetectOptions(
            kind=self.kind,
            colour=self.colour,
            polarity=self.polarity,
            diameter=self.diameter,
            highest_doubt=self.highest_doubt,
        )
        if not all(map(math.isfinite, (self.model.intercept, *self.model.weights))):
            raise ValueError("a weight is not finite")
        if self.direction is not None:
            length = math.hypot(*self.direction)
            if len(self.direction) != 3 or not abs(length - 1) < 0.01:
                raise ValueError(f"the direction {self.direction} has not the length 1")

    @property
    def identity(self) -> str:
        """The sha256 of its text."""
        return sha256(taught_text(self).encode()).hexdigest()

    def completed(self, asked: DetectOptions) -> DetectOptions:
        """Return options in which what a person did not give is as it was learned.

        Parameters
        ----------
        asked : DetectOptions
            What a person asked for: it wins over what was learned.

        Returns
        -------
        DetectOptions
        """
        own_colour = _names_colour(asked)
        return replace(
            asked,
            diameter=asked.diameter or self.diameter,
            colour=asked.colour if own_colour else self.colour,
            polarity=asked.polarity if own_colour else self.polarity,
            highest_doubt=self.highest_doubt
            if asked.highest_doubt is None
            else asked.highest_doubt,
        )

    def direction_for(self, asked: DetectOptions) -> NDArray[np.float64] | None:
        """Return the learned direction, unless a person named a colour or a side."""
        if self.direction is None or _names_colour(asked):
            return None
        return np.array(self.direction)

    def overruled(self, asked: DetectOptions) -> tuple[str, ...]:
        """Return the names of what was learned and will not be used, for a person asked otherwise."""
        names = []
        if asked.diameter is not None and self.diameter not in (None, asked.diameter):
            names.append("diameter")
        if _names_colour(asked) and (
            self.direction is not None
            or (asked.colour, asked.polarity) != (self.colour, self.polarity)
        ):
            names.append("colour" if asked.colour != "auto" else "polarity")
        if asked.highest_doubt not in (None, self.highest_doubt):
            names.append("highest_doubt")
        return tuple(names)


def _names_colour(asked: DetectOptions) -> bool:
    """Whether a person says how objects stand out."""
    return asked.colour != "auto" or asked.polarity != "auto"


def taught_text(taught: Taught) -> str:
    """Write what was learned so that a person can read it, and `read_taught` reads it back.

    Parameters
    ----------
    taught : Taught

    Returns
    -------
    str
        TOML; numbers are written so that they read back the same.
    """
    lessons = taught.lessons
    lines = [
        "# What corrections taught the detector; use it with: strewn detect --taught FILE",
        f"schema = {SCHEMA}",
        f"tool_version = {_quoted(taught.tool_version)}",
        f"kind = {_quoted(taught.kind)}",
        "",
        "[learned_from]",
        f"spots_real = {lessons.real}  # left counted, or placed",
        f"spots_placed = {lessons.placed}  # those of them that had been missed",
        f"spots_struck = {lessons.struck}",
        "photographs = [",
        *(
            f"  {{ name = {_quoted(name)}, sha256 = {_quoted(digest)} }},"
            for name, digest in lessons.photographs
        ),
        "]",
        "",
        "[objects]",
    ]
    if taught.diameter is not None:
        smallest, largest = taught.diameter
        lines.append(f"diameter = {_quoted(f'{smallest}-{largest}')}")
    lines += [f"colour = {_quoted(taught.colour)}", f"polarity = {_quoted(taught.polarity)}"]
    if taught.direction is not None:
        axes = zip(_AXES, taught.direction, strict=True)
        lines += ["", "[direction]  # from ground to object, in L*, a*, b*"]
        lines += [f"{name} = {value!r}" for name, value in axes]
    lines += [
        "",
        "[doubt]",
        f"highest = {taught.highest_doubt!r}  # what is more doubtful is left out",
        "",
        "[doubt.weights]  # logit(1 - doubt) = intercept + sum of weight x feature",
        *(f"{name} = {getattr(taught.model, name)!r}" for name in ("intercept", *FEATURES)),
        "",
        "[doubt.calibration]  # logit(doubt shown) = intercept + slope x logit(doubt)",
        f"intercept = {taught.calibration.intercept!r}",
        f"slope = {taught.calibration.slope!r}",
    ]
    return "\n".join(lines) + "\n"


def read_taught(path: Path) -> Taught:
    """Read what was learned.

    Parameters
    ----------
    path : Path
        A file that `taught_text` wrote.

    Returns
    -------
    Taught

    Raises
    ------
    TaughtUnreadable
        If the file is missing, damaged, or written by a later version.
    """
    try:
        values = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except OSError as trouble:
        reason = (trouble.strerror or str(trouble)).lower()
        raise TaughtUnreadable(
            f"{path} cannot be read ({reason}); name a {TAUGHT_NAME} that --learn wrote."
        ) from trouble
    except ValueError as trouble:
        raise TaughtUnreadable(_damaged(path, trouble)) from trouble
    schema = values.get("schema")
    if schema != SCHEMA:
        raise TaughtUnreadable(
            f"{path.name} has schema {schema!r}, but this version reads {SCHEMA};"
            " use the version that wrote it, or learn again with --learn."
        )
    try:
        return _taught_from(values)
    except _IMPOSSIBLE as trouble:
        raise TaughtUnreadable(_damaged(path, trouble)) from trouble


def _taught_from(values: dict[str, Any]) -> Taught:
    """Build what a file's values describe."""
    learned, objects, doubt = values["learned_from"], values["objects"], values["doubt"]
    weights = doubt["weights"]
    unknown = set(weights) - {"intercept", *FEATURES}
    if unknown:
        raise ValueError(f"the weight {min(unknown)!r} is not known")
    model = DoubtModel(**{"intercept": weights["intercept"], **dict.fromkeys(FEATURES, 0.0)})
    diameter = objects.get("diameter")
    direction = values.get("direction")
    return Taught(
        values["kind"],
        Lessons(
            tuple((str(entry["name"]), str(entry["sha256"])) for entry in learned["photographs"]),
            int(learned["spots_real"]),
            int(learned["spots_placed"]),
            int(learned["spots_struck"]),
        ),
        replace(model, **{name: float(value) for name, value in weights.items()}),
        float(doubt["highest"]),
        Calibration(**{name: float(value) for name, value in doubt["calibration"].items()}),
        objects["colour"],
        objects["polarity"],
        None if direction is None else _direction_from(direction),
        None if diameter is None else parse_pair(diameter, name="diameter", separator="-"),
        str(values["tool_version"]),
    )


def _direction_from(values: dict[str, Any]) -> tuple[float, float, float]:
    """Read a direction by the names of its axes."""
    lightness, red, yellow = (float(values[name]) for name in _AXES)
    return lightness, red, yellow


def _damaged(path: Path, trouble: Exception) -> str:
    """Say what is damaged about a file, and what to do."""
    reason = f"{trouble.args[0]!r} is missing" if isinstance(trouble, KeyError) else str(trouble)
    return f"{path.name} is damaged ({reason.rstrip('.')}); learn again with --learn."


def _quoted(text: str) -> str:
    """Write a text as a TOML string, which holds control characters as escapes."""
    plain = text.encode("utf-8", errors="replace").decode("utf-8")
    plain = plain.replace("\\", "\\\\").replace('"', '\\"')
    return '"' + "".join(c if c.isprintable() else f"\\U{ord(c):08x}" for c in plain) + '"'
