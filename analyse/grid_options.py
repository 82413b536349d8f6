"""How a study area is to be cut into quadrats, and the rule for their side."""

from __future__ import annotations

import math
from dataclasses import dataclass

from analyse.errors import GridWrong
from analyse.pattern import Unit
from detect.lengths import Length

SENSIBLE = (1.0, 1.2, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0)
MOST_QUADRATS = 100_000
FEWEST_POINTS = 8  # fewer count as this many in the rule for the side, so that a grid exists


@dataclass(frozen=True, slots=True)
class GridOptions:
    """How the study area is cut into quadrats; with nothing chosen, squares by `default_side`.

    Parameters
    ----------
    side : Length or None
        Side of square quadrats.
    shape : (rows, columns) or None
        Divide the bounding box of the area into this many equal rectangles.
    rings : (rings, sectors) or None
        Divide a dish into rings and sectors of equal area.
    join_below : float
        A clipped square or rectangle with less than this share of a full one is joined to a
        neighbour; sectors, which are of one size, are never joined.

    Raises
    ------
    GridWrong
        If two ways are chosen at once, or a number is impossible.

    Examples
    --------
    >>> GridOptions(shape=(5, 5)).shape
    (5, 5)
    >>> GridOptions(shape=(1, 1))
    Traceback (most recent call last):
        ...
    analyse.errors.GridWrong: --grid 1x1 makes no grid of at least 2 quadrats; give two numbers such as 5x5.
    """

    side: Length | None = None
    shape: tuple[int, int] | None = None
    rings: tuple[int, int] | None = None
    join_below: float = 0.25

    def __post_init__(self) -> None:
        chosen = [way for way in (self.side, self.shape, self.rings) if way is not None]
        if len(chosen) > 1:
            raise GridWrong(
                "Only one of --quadrat, --grid and --rings can lay the quadrats; choose one."
            )
        for option, pair in (("--grid", self.shape), ("--rings", self.rings)):
            if pair is not None and not (min(pair) >= 1 and math.prod(pair) >= 2):
                raise GridWrong(
                    f"{option} {pair[0]}x{pair[1]} makes no grid of at least 2 quadrats;"
                    f" give two numbers such as {'5x5' if option == '--grid' else '3x8'}."
                )
            if pair is not None and math.prod(pair) > MOST_QUADRATS:
                raise GridWrong(
                    f"{option} {pair[0]}x{pair[1]} makes more than {MOST_QUADRATS:,} quadrats;"
                    " give fewer."
                )
        if not 0 <= self.join_below < 1:
            raise GridWrong(
                f"The share below which quadrats are joined must lie from 0 to below 1, not at {self.join_below:g}."
            )


def default_side(area: float, n: int) -> float:
    """Return the side of square quadrats by rule: about sqrt(2 A / n), a sensible figure.

    Parameters
    ----------
    area : float
        Study area A.
    n : int
        Points in it; fewer than 8 count as 8.

    Returns
    -------
    float
        The nearest, in ratio, of 1, 1.2, 1.5, 2, 2.5, 3, 4, 5, 6 and 8 times a power of ten; the
        smaller of two that are as near.

    Notes
    -----
    A rule of the area and the number alone: where the points lie has no say, so a test given n
    stays valid. It puts about two points in a quadrat (common practice).

    Examples
    --------
    >>> default_side(750_000.0, 120)
    120.0
    """
    wished = math.sqrt(2 * area / max(n, FEWEST_POINTS))
    power = math.floor(math.log10(wished))
    figures = [s * 10.0**p for p in (power - 1, power, power + 1) for s in SENSIBLE]
    nearest = min(figures, key=lambda side: (round(abs(math.log(side / wished)), 9), side))
    return float(f"{nearest:.12g}")


def side_in(side: Length, unit: Unit) -> float:
    """Return a side in the unit of the area, or refuse one that cannot be turned into it.

    Parameters
    ----------
    side : Length
        In pixels or a metric unit.
    unit : {"mm", "px"}
        Unit of the area.

    Returns
    -------
    float

    Raises
    ------
    GridWrong
        If the side is in pixels and the area in millimetres, or the other way round.

    Examples
    --------
    >>> side_in(Length(2, "cm"), "mm")
    20.0
    """
    if side.in_pixels and unit == "mm":
        raise GridWrong(f"--quadrat {side} is in pixels, but the scale is known; give it in mm.")
    if not side.in_pixels and unit == "px":
        raise GridWrong(
            f"--quadrat {side} needs a scale, and none is known; give a scale, or the side in px."
        )
    return side.value if side.in_pixels else side.to_mm()
