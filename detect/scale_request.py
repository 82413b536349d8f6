"""What is known about lengths in a photograph, and the scale that follows from it."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields, replace

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.corner_marks import find_corner_marks, scale_from_centres
from detect.dish import Dish, Ellipse
from detect.errors import OptionWrong
from detect.flight import HEIGHT_UNCERTAINTY, scale_from_height
from detect.lengths import Length
from detect.lens import Lens
from detect.photograph import Photograph
from detect.readers import Corners, Four, MarkKind
from detect.ruler import find_bar, scale_from_bar
from detect.scale import Scale, scale_from_corners, scale_from_dish, scale_from_line

_SOURCES = ("mm_per_pixel", "dish", "line", "ruler", "corners", "height")
_PIECES = 96  # of each edge of a plot that a lens bends
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
    lens : Lens or None
        What the camera's lens bends.
    scale_uncertainty : float or None
        Standard uncertainty of the known length, as a fraction of it; None for what goes with the
        source: `HEIGHT_UNCERTAINTY` for a height, else 0.

    Raises
    ------
    OptionWrong
        If two sources are given, one part of a source without the others, or an uncertainty or a
        lens without a source.
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
    lens: Lens | None = None
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
        lens = None
        if self.lens is not None:
            lens = self.lens.fitted_to(photograph.width, photograph.height)
        scale = self._measured(photograph, dish, lens)
        if scale is None:
            return None
        if self.scale_uncertainty is not None and self.height is None:
            relative = math.hypot(scale.relative_uncertainty, self.scale_uncertainty)
            scale = replace(scale, relative_uncertainty=relative)
        if lens is not None:
            scale = replace(scale, lens=lens, note=f"{scale.note}; lens straightened")
        return scale

    def _measured(
        self, photograph: Photograph, dish: Dish | None, lens: Lens | None
    ) -> Scale | None:
        """Return the scale of straightened pixels, with the uncertainty of what was measured."""
        if self.mm_per_pixel is not None:
            return Scale.from_mm_per_pixel(self.mm_per_pixel)
        if self.dish is not None and dish is not None:
            return scale_from_dish(_straight_dish(dish, lens), self.dish.to_mm())
        if self.line is not None and self.line_length is not None:
            p, q = _straight(np.reshape(self.line, (2, 2)), lens)
            return scale_from_line(p, q, self.line_length.to_mm())
        if self.ruler is not None:
            bar = find_bar(photograph)
            return scale_from_bar(replace(bar, ends=_straight(bar.ends, lens)), self.ruler.to_mm())
        if self.corners is not None and self.plot is not None:
            return self._from_corners(photograph, self.corners, lens)
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

    def _from_corners(
        self, photograph: Photograph, corners: Corners | MarkKind, lens: Lens | None
    ) -> Scale:
        """Return the scale of a rectangle whose corners are given, or marked in the picture."""
        width, height = self._sides_mm()
        if not isinstance(corners, str):
            return scale_from_corners(_straight(np.array(corners), lens), width, height)
        marks = find_corner_marks(photograph, corners, width, height)
        centres = _straight(marks.centres, lens)
        return scale_from_centres(centres, marks.uncertainty_px, marks.kind, width, height)

    def _sides_mm(self) -> tuple[float, float]:
        width, height = self.plot or (Length(1, "mm"), Length(1, "mm"))
        return width.to_mm(), height.to_mm()

    def plot_outline(self, scale: Scale) -> NDArray[np.float64]:
        """Return the outline of the plot in pixels, as its scale puts it.

        Four corners, or, where the lens bends straight edges, `_PIECES` points along each.
        """
        pieces = 1 if scale.lens is None else _PIECES
        corners = np.array([[0, 0], [1, 0], [1, 1], [0, 1]]) * self._sides_mm()
        along = np.arange(pieces)[:, None] / pieces
        edges = zip(corners, np.roll(corners, -1, axis=0), strict=True)
        return scale.to_px(np.concatenate([p + along * (q - p) for p, q in edges]))

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
    for key in ("scale_uncertainty", "lens"):
        if not sources and values.get(key) is not None:
            raise OptionWrong(
                f"{named(key)} says more about a scale, but none is given; give a known length too."
            )


def _straight(points: NDArray[np.float64], lens: Lens | None) -> NDArray[np.float64]:
    """Return points as they would lie without the lens's distortion."""
    return points if lens is None else lens.straighten(points)


def _straight_dish(dish: Dish, lens: Lens | None) -> Dish:
    """Return a dish with its inner edge as it would look without the lens's distortion."""
    if lens is None:
        return dish
    outline = lens.straighten(dish.inner.outline()).astype(np.float32)
    (cx, cy), across, angle = cv2.fitEllipse(outline)
    short, long = sorted(across)
    turned = angle if across[0] >= across[1] else angle + 90.0
    return replace(dish, inner=Ellipse(cx, cy, 0.5 * long, 0.5 * short, turned % 180.0))
