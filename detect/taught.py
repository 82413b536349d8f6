"""What was learned from corrections, and how it completes what a person asks for."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detect.calibration import Calibration
from detect.contrast import Colour, Polarity
from detect.doubt import DoubtModel
from detect.lengths import Length
from detect.own_colour import OwnColour
from detect.wanted import DetectOptions, Kind


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
    f1_before, f1_after : float
        F1 on the reviewed photographs as they had been detected, and judged by what the others
        teach.

    Raises
    ------
    ValueError
        If a number is impossible, more were placed than are real, or no photograph is named.
    """

    photographs: tuple[tuple[str, str], ...]
    real: int
    placed: int
    struck: int
    f1_before: float
    f1_after: float

    def __post_init__(self) -> None:
        if not self.photographs:
            raise ValueError("no photograph is named")
        if not (0 <= self.f1_before <= 1 and 0 <= self.f1_after <= 1):
            raise ValueError(f"an F1 of {self.f1_before:g} or {self.f1_after:g} cannot be")
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
    highest_doubt : float or None
        Spots of more doubt (after calibration) are not kept; None leaves it to the kind.
    calibration : Calibration or None
        From the model's doubt, own colour counted in, to the doubt that is shown; None leaves it
        to the kind.
    own_colour : OwnColour or None
        How a candidate's own colour changes its doubt.
    colour, polarity : Colour, Polarity
        As they were asked for when the reviewed sheets were made.
    direction : tuple of three floats or None
        Unit direction in L*, a*, b* from ground to object; None leaves it to colour and polarity.
    diameter : pair of Length or None
        Smallest and largest diameter; None leaves them to the kind or the picture.
    sized : bool
        Whether the diameters were learned, not just asked for.
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
    highest_doubt: float | None
    calibration: Calibration | None
    own_colour: OwnColour | None = None
    colour: Colour = "auto"
    polarity: Polarity = "auto"
    direction: tuple[float, float, float] | None = None
    diameter: tuple[Length, Length] | None = None
    sized: bool = False
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
        if self.sized and self.diameter is None:
            raise ValueError("the diameters that were learned are missing")
        if self.direction is not None:
            length = math.hypot(*self.direction)
            if len(self.direction) != 3 or not abs(length - 1) < 0.01:
                raise ValueError(f"the direction {self.direction} has not the length 1")

    def doubt(
        self, doubt: NDArray[np.float64], colours: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Return the doubt of candidates with these own (n, 3) colours, calibrated if that is known.

        Parameters
        ----------
        doubt : ndarray of shape (n,)
            By the model alone.
        colours : ndarray of shape (n, 3)
            L*, a*, b* of each candidate.

        Returns
        -------
        ndarray of shape (n,)
        """
        eased = doubt if self.own_colour is None else self.own_colour.eased(doubt, colours)
        return eased if self.calibration is None else self.calibration.applied(eased)

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
        if self.sized and asked.diameter not in (None, self.diameter):
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


def told(taught: Taught) -> str:
    """Say in two sentences what was learned from what, and what it is worth."""
    lessons = taught.lessons
    photographs = len(lessons.photographs)
    parts = []
    if taught.own_colour is not None:
        parts.append("the weights of the doubt")
    if taught.sized:
        parts.append("the range of sizes")
    if taught.direction is not None:
        parts.append("the direction of colour")
    if taught.calibration is not None:
        parts.append("what a doubt is worth")
    more = (
        "" if taught.calibration is not None else " 30 spots are needed to learn more than sizes."
    )
    what = "nothing" if not parts else _listed(parts)
    return (
        f"Learned from {photographs} photograph{'' if photographs == 1 else 's'}"
        f" ({lessons.real} real spots, {lessons.placed} of them placed; {lessons.struck} struck):"
        f" {what}. F1 there was {lessons.f1_before:.3f}; where each part is judged by what the"
        f" others teach, it is {lessons.f1_after:.3f}.{more}"
    )


def _listed(parts: list[str]) -> str:
    """Put parts into one phrase."""
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}"
