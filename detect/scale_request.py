"""What is known about lengths in a photograph, and the scale that follows from it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields

import numpy as np

from detect.dish import Dish
from detect.errors import OptionWrong
from detect.lengths import Length
from detect.photograph import Photograph
from detect.readers import Corners, Four
from detect.scale import Scale, scale_from_corners, scale_from_dish, scale_from_line

_SOURCES = ("mm_per_pixel", "dish", "line", "corners")
_TOGETHER = (("line", "line_length"), ("corners", "plot"))


@dataclass(frozen=True, slots=True)
class ScaleRequest:
    """What is known about lengths; nothing means that everything stays in pixels.

    Parameters
    ----------
    mm_per_pixel : float or None
        Millimetres per pixel.
    dish : Length or None
        Inner diameter of the dish.
    line, line_length : tuple of four floats, Length, or None
        Both ends of a line (x1, y1, x2, y2 in pixels) and its true length.
    corners, plot : tuple of four points, two Lengths, or None
        The corners of a rectangle (top left, top right, bottom right, bottom left, in pixels)
        and its width and height.

    Raises
    ------
    OptionWrong
        If two sources are given, or one half of a source without the other.
    """

    mm_per_pixel: float | None = None
    dish: Length | None = None
    line: Four | None = None
    line_length: Length | None = None
    corners: Corners | None = None
    plot: tuple[Length, Length] | None = None

    def __post_init__(self) -> None:
        check_one_scale({entry.name: getattr(self, entry.name) for entry in fields(self)}, str)
        for length in (self.dish, self.line_length, *(self.plot or ())):
            if length is not None:
                length.to_mm()

    def resolve(self, dish: Dish | None) -> Scale | None:
        """Return the scale of a photograph in which `dish` was found if it was needed."""
        if self.mm_per_pixel is not None:
            return Scale.from_mm_per_pixel(self.mm_per_pixel)
        if self.dish is not None and dish is not None:
            return scale_from_dish(dish, self.dish.to_mm())
        if self.line is not None and self.line_length is not None:
            return scale_from_line(self.line[:2], self.line[2:], self.line_length.to_mm())
        if self.corners is not None and self.plot is not None:
            width, height = self.plot
            return scale_from_corners(np.array(self.corners), width.to_mm(), height.to_mm())
        return None

    def check_positions(self, photograph: Photograph) -> None:
        """Refuse positions outside the picture, where nothing can have been seen."""
        ends = () if self.line is None else (self.line[:2], self.line[2:])
        for x, y in (*ends, *(self.corners or ())):
            if not (-1 <= x <= photograph.width and -1 <= y <= photograph.height):
                raise OptionWrong(
                    f"The position {x:g},{y:g} lies outside the picture of {photograph.width} x"
                    f" {photograph.height} pixels; give x and y as seen in the upright picture."
                )


def check_one_scale(values: Mapping[str, object], named: Callable[[str], str]) -> None:
    """Refuse two sources of the scale, and one half of a source without the other."""
    sources = [key for key in _SOURCES if values.get(key) is not None]
    if len(sources) > 1:
        raise OptionWrong(
            f"{named(sources[0])} and {named(sources[1])} both tell the scale; keep one of them."
        )
    for first, second in _TOGETHER:
        lacking = [key for key in (first, second) if values.get(key) is None]
        if len(lacking) == 1:
            given = second if lacking == [first] else first
            raise OptionWrong(f"{named(given)} needs {named(lacking[0])} beside it; give both.")
