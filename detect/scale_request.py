"""What is known about lengths in a photograph, and the scale that follows from it."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from detect.corner_marks import find_corner_marks, scale_from_marks
from detect.dish import Dish
from detect.errors import OptionWrong
from detect.flight import HEIGHT_UNCERTAINTY, scale_from_height
from detect.lengths import Length
from detect.photograph import Photograph
from detect.readers import Corners, Four, MarkKind
from detect.ruler import find_bar, scale_from_bar
from detect.scale import Scale, scale_from_corners, scale_from_dish, scale_from_line

_SOURCES = ("mm_per_pixel", "dish", "line", "ruler", "corners", "height")
_TOGETHER = (
    ("line", "line_length"),
    ("corners", "plot"),
    ("height", "focal_length", "sensor_width"),
)


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
    ruler : Length or None
        True length of a banded bar that is to be found in the picture.
    corners, plot : tuple of four points or a kind of marks, two Lengths, or None
        The corners of a rectangle (top left, top right, bottom right, bottom left, in pixels), or
        the marks that are to be found there; and its width and height.
    height, focal_length, sensor_width : Length or None
        Of a camera that looked straight down: how high, through which lens, onto which sensor.
    scale_uncertainty : float or None
        Standard uncertainty of the known length, as a fraction of it; None for what goes with the
        source: `HEIGHT_UNCERTAINTY` for a height, else 0.

    Raises
    ------
    OptionWrong
        If two sources are given, one part of a source without the others, or an uncertainty
        without a source.
    """

    mm_per_pixel: float | None = None
    dish: Length | None = None
    line: Four | None = None
    line_length: Length | None = None
    ruler: Length | None = None
    corners: Corners | MarkKind | None = None
    plot: tuple[Length, Length] | None = None
    height: Length | None = None
    focal_length: Length | None = None
    sensor_width: Length | None = None
    scale_uncertainty: float | None = None

    def __post_init__(self) -> None:
        check_one_scale({entry.name: getattr(self, entry.name) for entry in fields(self)}, str)
        lengths = (self.dish, self.line_length, self.ruler, *(self.plot or ()))
        for length in (*lengths, self.height, self.focal_length, self.sensor_width):
            if length is not None:
                length.to_mm()

    def resolve(self, photograph: Photograph, dish: Dish | None) -> Scale | None:
        """Return the scale of a photograph in which `dish` was found if it was needed.

        Raises
        ------
        ScaleNotFound
            If the marks or the bar it is to be taken from cannot be found.
        """
        scale = self._measured(photograph, dish)
        if scale is None or self.scale_uncertainty is None or self.height is not None:
            return scale
        relative = math.hypot(scale.relative_uncertainty, self.scale_uncertainty)
        return replace(scale, relative_uncertainty=relative)

    def _measured(self, photograph: Photograph, dish: Dish | None) -> Scale | None:
        """Return the scale with the uncertainty of what was measured in the picture."""
        if self.mm_per_pixel is not None:
            return Scale.from_mm_per_pixel(self.mm_per_pixel)
        if self.dish is not None and dish is not None:
            return scale_from_dish(dish, self.dish.to_mm())
        if self.line is not None and self.line_length is not None:
            return scale_from_line(self.line[:2], self.line[2:], self.line_length.to_mm())
        if self.ruler is not None:
            return scale_from_bar(find_bar(photograph), self.ruler.to_mm())
        if self.corners is not None and self.plot is not None:
            return self._from_corners(photograph, self.corners)
        if (
            self.height is not None
            and self.focal_length is not None
            and self.sensor_width is not None
        ):
            return scale_from_height(
                self.height.to_mm(),
                self.focal_length.to_mm(),
                self.sensor_width.to_mm(),
                longer_side_px=max(photograph.width, photograph.height),
                height_uncertainty=self.scale_uncertainty or HEIGHT_UNCERTAINTY,
            )
        return None

    def _from_corners(self, photograph: Photograph, corners: Corners | MarkKind) -> Scale:
        """Return the scale of a rectangle whose corners are given, or marked in the picture."""
        width, height = self._sides_mm()
        if isinstance(corners, str):
            return scale_from_marks(
                find_corner_marks(photograph, corners, width, height), width, height
            )
        return scale_from_corners(np.array(corners), width, height)

    def _sides_mm(self) -> tuple[float, float]:
        width, height = self.plot or (Length(1, "mm"), Length(1, "mm"))
        return width.to_mm(), height.to_mm()

    def plot_outline(self, scale: Scale) -> NDArray[np.float64]:
        """Return the corners of the plot in pixels, (4, 2), as its scale puts them."""
        width, height = self._sides_mm()
        return scale.to_px(np.array([[0, 0], [width, 0], [width, height], [0, height]]))

    def check_positions(self, photograph: Photograph) -> None:
        """Refuse positions outside the picture, where nothing can have been seen."""
        ends = () if self.line is None else (self.line[:2], self.line[2:])
        corners = () if self.corners is None or isinstance(self.corners, str) else self.corners
        for x, y in (*ends, *corners):
            if not (-1 <= x <= photograph.width and -1 <= y <= photograph.height):
                raise OptionWrong(
                    f"The position {x:g},{y:g} lies outside the picture of {photograph.width} x"
                    f" {photograph.height} pixels; give x and y as seen in the upright picture."
                )


def check_one_scale(values: Mapping[str, object], named: Callable[[str], str]) -> None:
    """Refuse two sources of the scale, a part of one without the others, and what needs a source."""
    sources = [key for key in _SOURCES if values.get(key) is not None]
    if len(sources) > 1:
        raise OptionWrong(
            f"{named(sources[0])} and {named(sources[1])} both tell the scale; keep one of them."
        )
    for parts in _TOGETHER:
        lacking = [named(key) for key in parts if values.get(key) is None]
        given = [named(key) for key in parts if values.get(key) is not None]
        if given and lacking:
            both = "both" if len(parts) == 2 else "all three"
            raise OptionWrong(f"{given[0]} needs {' and '.join(lacking)} beside it; give {both}.")
    if not sources and values.get("scale_uncertainty") is not None:
        raise OptionWrong(
            f"{named('scale_uncertainty')} has no scale to be the uncertainty of; give a known length."
        )
