"""What copies of a photograph's own spots, set into it at known places, tell of what is missed."""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass, fields
from typing import Any

from detect.errors import OptionWrong

FEWEST_ROUNDS, MOST_ROUNDS = 2, 1000
_MOST_SEED = 2**63 - 1


@dataclass(frozen=True, slots=True)
class PlantedOptions:
    """How often the photograph is looked at again with copies in it.

    Parameters
    ----------
    rounds : int
        Each sets some copies into the photograph and detects once more.
    seed : int
        Seed of which spots are copied and where to, 0 or more.

    Raises
    ------
    OptionWrong
        If a value is impossible.
    """

    rounds: int = 8
    seed: int = 1

    def __post_init__(self) -> None:
        if not FEWEST_ROUNDS <= self.rounds <= MOST_ROUNDS:
            raise OptionWrong(
                f"Planted objects take {FEWEST_ROUNDS} to {MOST_ROUNDS:,} rounds, not {self.rounds};"
                " 8 is usual."
            )
        if not 0 <= self.seed <= _MOST_SEED:
            raise OptionWrong(f"The seed must be a whole number of 0 or more, not {self.seed}.")


@dataclass(frozen=True, slots=True)
class Share:
    """How many copies of one class were found: from `low` up to `high` of a measure."""

    low: float
    high: float
    copies: int
    found: int

    def __post_init__(self) -> None:
        if not 0 <= self.found <= self.copies:
            raise ValueError(f"{self.found} found of {self.copies} copies")
        if not self.low <= self.high:
            raise ValueError(f"a class from {self.low} to {self.high}")


@dataclass(frozen=True, slots=True)
class Recall:
    """Share of the objects that is found, with its 95 % interval and standard error."""

    value: float
    low: float
    high: float
    standard_error: float

    def __post_init__(self) -> None:
        if not 0 <= self.low <= self.value <= self.high <= 1:
            raise ValueError(f"a recall of {self.value} within {self.low} to {self.high}")
        if not (math.isfinite(self.standard_error) and self.standard_error >= 0):
            raise ValueError(f"a standard error of {self.standard_error}")


@dataclass(frozen=True, slots=True)
class BlindDistance:
    """The separation at which half of the pairs are found as two, in sums of both radii.

    Parameters
    ----------
    value : float
        Sums of both radii.
    standard_error : float
        Its standard error.

    Raises
    ------
    ValueError
        If one of them is no finite number above 0.
    """

    value: float
    standard_error: float

    def __post_init__(self) -> None:
        for number in (self.value, self.standard_error):
            if not (math.isfinite(number) and number > 0):
                raise ValueError(f"a blind distance of {self.value}, give or take {number}")


@dataclass(frozen=True, slots=True)
class Planted:
    """What planted objects showed in one photograph.

    Parameters
    ----------
    rounds, seed : int
        How often it was looked at again, and the seed of what was set where.
    copies, found : int
        Copies set alone, and how many of them were found again.
    recall : Recall or None
        Share of the objects like those seen that is found; None where it could not be measured.
    by_radius_px, by_contrast, by_separation : tuple of Share
        The same copies by their radius, by their contrast in units of noise, and by the distance
        to the nearest spot in sums of both radii.
    pairs, pairs_as_two : int
        Pairs of copies set near each other, and how many were found as two.
    blind : BlindDistance or None
        None where it could not be measured.
    both_radii_px : float
        Usual sum of both radii, in pixels.
    note : str
        Why something was not measured; empty where all was.

    Raises
    ------
    ValueError
        If the numbers contradict each other.
    """

    rounds: int
    seed: int
    copies: int = 0
    found: int = 0
    recall: Recall | None = None
    by_radius_px: tuple[Share, ...] = ()
    by_contrast: tuple[Share, ...] = ()
    by_separation: tuple[Share, ...] = ()
    pairs: int = 0
    pairs_as_two: int = 0
    blind: BlindDistance | None = None
    both_radii_px: float = 1.0
    note: str = ""

    def __post_init__(self) -> None:
        for part, whole in (("found", "copies"), ("pairs_as_two", "pairs")):
            if not 0 <= getattr(self, part) <= getattr(self, whole):
                raise ValueError(f"{part} {getattr(self, part)} of {getattr(self, whole)} {whole}")
        if self.rounds < 0 or self.seed < 0:
            raise ValueError(f"{self.rounds} rounds with seed {self.seed}")
        if not (math.isfinite(self.both_radii_px) and self.both_radii_px > 0):
            raise ValueError(f"both radii of {self.both_radii_px} pixels")
        if self.recall is not None and self.copies == 0:
            raise ValueError("a recall without copies")
        if self.blind is not None and self.pairs == 0:
            raise ValueError("a blind distance without pairs")

    @property
    def blind_px(self) -> float:
        """Blind distance in pixels between usual spots; NaN where not measured."""
        return math.nan if self.blind is None else self.blind.value * self.both_radii_px

    def as_dict(self) -> dict[str, Any]:
        """Return plain values for a file, None for what has no upper bound."""
        values = asdict(self)
        for name in _TABLES:
            values[name] = [
                [None if value == math.inf else value for value in row.values()]
                for row in values[name]
            ]
        return values

    @classmethod
    def from_dict(cls, values: dict[str, Any]) -> Planted:
        """Return what a file holds.

        Raises
        ------
        ValueError, TypeError, KeyError
            If it is no such record.
        """
        read = {name: values[name] for name in (entry.name for entry in fields(cls))}
        for name in _TABLES:
            read[name] = tuple(
                Share(low, math.inf if high is None else high, _whole(copies), _whole(found))
                for low, high, copies, found in read[name]
            )
        for name in ("rounds", "seed", "copies", "found", "pairs", "pairs_as_two"):
            read[name] = _whole(read[name])
        for name, part in (("recall", Recall), ("blind", BlindDistance)):
            read[name] = None if read[name] is None else part(**read[name])
        return cls(**(read | {"note": str(read["note"])}))


_TABLES = ("by_radius_px", "by_contrast", "by_separation")


def _whole(value: Any) -> int:
    """Refuse what is no whole number."""
    if isinstance(value, bool) or not isinstance(value, int):
        raise ValueError(f"{value!r} is no whole number")
    return value
