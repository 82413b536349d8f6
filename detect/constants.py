"""What of a picture holds everywhere in it: the constants its contrast is measured with.

They are learned once, from the whole picture or from pieces of it, and then hold for any part; so a
raster judged part by part is judged with one measure.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

Mask = NDArray[np.bool_]
Value = TypeVar("Value")
_SAMPLE = 60_000


@dataclass(frozen=True, slots=True, eq=False)
class Constants:
    """What is learned of a picture, in L*, a*, b*.

    Parameters
    ----------
    commonest : ndarray of shape (3,)
        The ground's commonest colour.
    reaches : tuple of float
        How far from the ground a colour may lie to have a say in it, for each round.
    direction : ndarray of shape (3,)
        Unit direction from ground to object.
    sureness : float
        How plainly objects are told from ground; infinite where the side was given.
    first_threshold : float
        Threshold of the first look.
    second_look : bool
        Whether the ground is then averaged once more, over what lies below half that threshold.
    noise, grain, threshold : float
        As in `Contrast`.
    across : float
        Usual departure across the direction; 0 where it is not looked at.
    """

    commonest: NDArray[np.float32]
    reaches: tuple[float, ...]
    direction: NDArray[np.float64]
    sureness: float
    first_threshold: float
    second_look: bool
    noise: float
    grain: float
    threshold: float
    across: float = 0.0

    def __post_init__(self) -> None:
        self.commonest.setflags(write=False)
        self.direction.setflags(write=False)


@dataclass(frozen=True, slots=True)
class Settling:
    """Constants in the making: known already, or learned one by one.

    Parameters
    ----------
    known : Constants or None
        What was learned before; None learns.
    """

    known: Constants | None = None
    _values: dict[str, Any] = field(default_factory=dict)

    def settle(self, name: str, learn: Callable[[], Value]) -> Value:
        """Return the constant as it is known, or learn it and keep it."""
        value: Value = learn() if self.known is None else getattr(self.known, name)
        self._values[name] = value
        return value

    def settle_both(self, first: str, second: str, learn: Callable[[], tuple[Any, Any]]) -> Any:
        """Return two constants as they are known, or learn them together and keep them."""
        known = self.known
        values = learn() if known is None else (getattr(known, first), getattr(known, second))
        self._values[first], self._values[second] = values
        return values

    def settled(self, name: str) -> Any:
        """Return a constant that has been settled."""
        return self._values[name]

    def constants(self) -> Constants:
        """Return all constants; those never settled keep their default."""
        return self.known or Constants(**self._values)


def thinned(parts: Sequence[NDArray[np.float32]]) -> NDArray[np.float32]:
    """Put parts below one another, every so many rows of them, so that about 60,000 stay."""
    step = max(1, sum(len(part) for part in parts) // _SAMPLE)
    return np.concatenate([part[::step] for part in parts])


def pooled(maps: Sequence[NDArray[np.float32]], insides: Sequence[Mask]) -> NDArray[np.float32]:
    """Return the values of all maps within their areas, thinned."""
    return thinned([values[inside] for values, inside in zip(maps, insides, strict=True)])
