"""What to look for: the choices a person makes, and their defaults."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, get_args

from detect.contrast import Colour, Polarity
from detect.errors import OptionWrong
from detect.lengths import Length

Kind = Literal["colonies", "seedlings", "lesions", "spots"]

# What the doubt model doubts more than this is left out unless a limit is given: where F1 on
# photographs with truth is level and the count nearest to the truth, false spots making up for
# missed ones. The limit is one on the model's own doubt, before its calibration: a limit on the
# calibrated doubt of 0.7 does as well (mean F1 of five subjects 0.774, as this one), lower ones worse.
_MOST_DOUBT: dict[Kind, float] = {
    "colonies": 0.43,
    "seedlings": 0.6,
    "lesions": 0.43,
    "spots": 0.51,
}


@dataclass(frozen=True, slots=True)
class DetectOptions:
    """What to look for.

    Parameters
    ----------
    kind : {"colonies", "seedlings", "lesions", "spots"}
        Preset of sizes and colour.
    diameter : pair of Length or None
        Smallest and largest diameter; None takes the kind's usual range where a scale is known,
        and learns it from the picture where not.
    colour : Colour
        Direction in which objects stand out; "auto" learns it (seedlings: green).
    polarity : {"auto", "dark", "bright"}
        Whether objects are darker or lighter than the ground.
    highest_doubt : float or None
        Spots of more (calibrated) doubt than this are not kept; None takes the kind's usual limit.

    Raises
    ------
    OptionWrong
        If a value is impossible.
    """

    kind: Kind = "spots"
    diameter: tuple[Length, Length] | None = None
    colour: Colour = "auto"
    polarity: Polarity = "auto"
    highest_doubt: float | None = None

    def __post_init__(self) -> None:
        for name, known in (("kind", Kind), ("colour", Colour), ("polarity", Polarity)):
            value = getattr(self, name)
            if value not in get_args(known):
                raise OptionWrong(
                    f"The {name} {value!r} is not known; use one of {', '.join(get_args(known))}."
                )
        if self.highest_doubt is not None and not 0.0 < self.highest_doubt <= 1.0:
            raise OptionWrong(
                f"The highest doubt must lie between 0 and 1, not {self.highest_doubt:g};"
                " 0.5 keeps what is more likely real than not."
            )
        if self.polarity != "auto" and self.colour not in ("auto", "grey"):
            raise OptionWrong(
                f"--polarity {self.polarity} cannot apply with --colour {self.colour}:"
                " a named colour says already which side is the object; leave one of them out."
            )

    @property
    def most_doubt(self) -> float:
        """The kind's usual limit of what is kept, on the model's doubt before calibration."""
        return _MOST_DOUBT[self.kind]
