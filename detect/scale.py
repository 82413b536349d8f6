"""Pixels <-> millimetres: maps of the subject's plane, where they come from and how sure they are.

Coordinates are x right, y down, with pixel centres at whole numbers; points are (n, 2) as x, y.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from detect.errors import OptionWrong
from detect.lens import Lens
from detect.tilt import INVERSE_UNCERTAINTY, onto_circle

if TYPE_CHECKING:
    from detect.dish import Dish

ScaleSource = Literal[
    "mm-per-pixel",
    "line",
    "ruler",
    "dish",
    "corners",
    "plates",
    "fiducials",
    "height",
    "georeference",
]
Points = NDArray[np.float64]

DISH_UNCERTAINTY = 0.0012  # of a diameter: how well the agar's edge is told from its shading
NOTED_TILT_DEG = 5.0  # less is not told from no tilt, nor does it matter
_EIGHTH = math.pi / 4


@dataclass(frozen=True, slots=True, eq=False)
class Scale:
    """A map from pixels to millimetres on the plane of the subject.

    Parameters
    ----------
    matrix : ndarray of shape (3, 3)
        Homography from pixel x, y, 1 to millimetre x, y, w; a plain scale is diagonal.
    source : ScaleSource
        What the map was taken from.
    relative_uncertainty : float
        Standard uncertainty of a length, as a fraction of it.
    note : str
        The known length in words, as reports quote it.
    lens : Lens or None
        What the lens bends; `matrix` then holds for straightened pixels.

    Raises
    ------
    OptionWrong
        If the map is not finite, turns the plane over, or is singular.
    """

    matrix: NDArray[np.float64]
    source: ScaleSource
    relative_uncertainty: float
    note: str
    lens: Lens | None = None

    def __post_init__(self) -> None:
        matrix = np.array(self.matrix, dtype=np.float64).reshape(3, 3)
        determinant = float(np.linalg.det(matrix)) if np.isfinite(matrix).all() else np.nan
        if not determinant > 0 or matrix[2, 2] == 0:
            raise OptionWrong(
                f"The scale from the {self.source} is not a map of a plane;"
                " check the positions and lengths it was made from."
            )
        matrix /= matrix[2, 2]
        matrix.setflags(write=False)
        object.__setattr__(self, "matrix", matrix)

    @classmethod
    def from_mm_per_pixel(cls, mm_per_px: float, *, relative_uncertainty: float = 0.0) -> Scale:
        """Return the scale of a photograph with `mm_per_px` millimetres per pixel everywhere."""
        if not (np.isfinite(mm_per_px) and mm_per_px > 0):
            raise OptionWrong(
                f"Millimetres per pixel must be a positive number, not {mm_per_px:g};"
                " divide a known length by its length in pixels."
            )
        matrix = np.diag([mm_per_px, mm_per_px, 1.0])
        return cls(matrix, "mm-per-pixel", relative_uncertainty, f"{mm_per_px:.6g} mm per pixel")

    def to_mm(self, points_px: ArrayLike) -> Points:
        """Map (n, 2) pixel positions to millimetres."""
        return _apply(self.matrix, self._straight(points_px))

    def to_px(self, points_mm: ArrayLike) -> Points:
        """Map (n, 2) millimetre positions to pixels."""
        straight = _apply(np.linalg.inv(self.matrix), points_mm)
        return straight if self.lens is None else self.lens.bend(straight)

    def mm_per_px(self, points_px: ArrayLike) -> NDArray[np.float64]:
        """Return the local millimetres per pixel, the root of the area factor, at (n, 2) pixels."""
        w = self._straight(points_px) @ self.matrix[2, :2] + 1.0
        grown = 1.0 if self.lens is None else self.lens.area_factor(points_px)
        return np.asarray(np.sqrt(grown * np.linalg.det(self.matrix) / np.abs(w) ** 3))

    def _straight(self, points_px: ArrayLike) -> Points:
        """Return (n, 2) pixel positions as they would lie without the lens's distortion."""
        points = np.asarray(points_px, dtype=np.float64).reshape(-1, 2)
        return points if self.lens is None else self.lens.straighten(points)

    def as_dict(self) -> dict[str, Any]:
        """Return the scale as plain values for a file."""
        values = {
            "matrix": self.matrix.tolist(),
            "source": self.source,
            "relative_uncertainty": self.relative_uncertainty,
            "note": self.note,
        }
        return values if self.lens is None else {**values, "lens": self.lens.as_dict()}

    @classmethod
    def from_dict(cls, values: dict[str, Any]) -> Scale:
        """Return the scale a file holds."""
        return cls(
            np.asarray(values["matrix"], dtype=np.float64),
            values["source"],
            float(values["relative_uncertainty"]),
            str(values["note"]),
            None if values.get("lens") is None else Lens.from_dict(values["lens"]),
        )


def scale_from_line(
    p: ArrayLike, q: ArrayLike, length_mm: float, *, end_uncertainty_px: float = 1.0
) -> Scale:
    """Take the scale from a line of known length.

    Parameters
    ----------
    p, q : array_like of shape (2,)
        Its ends in pixels, x and y.
    length_mm : float
        Its true length in millimetres.
    end_uncertainty_px : float
        Standard uncertainty of each end along the line, in pixels.

    Returns
    -------
    Scale
        The same number of millimetres per pixel everywhere.

    Raises
    ------
    OptionWrong
        If an end is not finite, both ends are the same, or the length is not positive.

    Notes
    -----
    With u for each end and L pixels between them, the relative standard uncertainty is
    sqrt(2) u / L: the two ends are read independently.

    References
    ----------
    JCGM 100:2008, "Guide to the expression of uncertainty in measurement", section 5.1.2.

    Examples
    --------
    >>> scale_from_line((10, 20), (410, 320), 50.0).to_mm([[10, 0]]).tolist()
    [[1.0, 0.0]]
    """
    ends = _positions((p, q), 2, "The line's ends")
    length_mm = _length_mm(length_mm, "The line's length")
    length_px = float(np.hypot(*(ends[1] - ends[0])))
    if length_px < 1.0:
        raise OptionWrong(
            f"The line's ends are {length_px:.2g} pixels apart; mark two ends that lie far apart."
        )
    mm_per_px = length_mm / length_px
    return Scale(
        np.diag([mm_per_px, mm_per_px, 1.0]),
        "line",
        math.sqrt(2) * end_uncertainty_px / length_px,
        f"a line of {length_mm:g} mm, {length_px:.1f} pixels long",
    )


def scale_from_dish(dish: Dish, diameter_mm: float) -> Scale:
    """Take the scale from a dish whose inner diameter is known.

    Parameters
    ----------
    dish : Dish
        The dish as found.
    diameter_mm : float
        Its inner diameter, where the agar meets the wall.

    Returns
    -------
    Scale
        The map that makes the inner ellipse a circle of that diameter, its true centre where the
        tilt puts it; it turns nothing, so x stays right and y stays down.

    Raises
    ------
    OptionWrong
        If the diameter is not positive.

    Notes
    -----
    The relative standard uncertainty is that of the diameter, sqrt(0.0012^2 + s^2 + d^2): s is the
    scatter of the edge about the ellipse over its radius, not divided by the number of edge points
    since neighbouring ones err together; d is how far apart the readings lie of where in its shading
    the edge is; 0.12 % is what is left open even where all of this is small (our own measurements on
    drawn dishes, `tests/benchmarks/scale_dishes.py`). Under tilt, single lengths err more, by up to
    2 sin(tilt) u(R/D) at the edge, as the camera's distance D is assumed; the note says how much.
    """
    diameter_mm = _length_mm(diameter_mm, "The dish's inner diameter")
    inner = dish.inner
    half = 0.5 * diameter_mm
    back = inner.axes @ np.diag([half / inner.semi_a, half / inner.semi_b]) @ inner.axes.T
    centred = np.eye(3)
    centred[:2, :2] = back / half
    centred[:2, 2] = -centred[:2, :2] @ [inner.cx, inner.cy]
    matrix = np.diag([half, half, 1.0]) @ onto_circle(dish.far) @ centred
    corner = matrix[:2, 2] / matrix[2, 2]  # millimetres count from the picture's first pixel
    matrix = np.array([[1, 0, -corner[0]], [0, 1, -corner[1]], [0, 0, 1]]) @ matrix
    relative = math.hypot(DISH_UNCERTAINTY, dish.scatter_px / inner.mean_radius, dish.spread)
    note = (
        f"the dish's inner diameter of {diameter_mm:g} mm, {2 * inner.semi_a:.1f} by"
        f" {2 * inner.semi_b:.1f} pixels"
    )
    at_edge = 200 * math.sin(math.radians(dish.tilt_deg)) * INVERSE_UNCERTAINTY
    if dish.tilt_deg >= NOTED_TILT_DEG:
        note += (
            f", seen {dish.tilt_deg:.0f} degrees aslant, so that short lengths near its edge"
            f" are sure to {at_edge:.1f} %"
        )
    return Scale(matrix, "dish", relative, note)


def scale_from_corners(
    corners_px: ArrayLike, width_mm: float, height_mm: float, *, end_uncertainty_px: float = 1.0
) -> Scale:
    """Take the scale from the four corners of a rectangle of known sides.

    Parameters
    ----------
    corners_px : array_like of shape (4, 2)
        Top left, top right, bottom right, bottom left, as they are seen, in pixels.
    width_mm, height_mm : float
        True length of the top and of the left side.
    end_uncertainty_px : float
        Standard uncertainty of each corner along a side, in pixels.

    Returns
    -------
    Scale
        The homography of the rectangle's plane, with millimetres counted from the top left corner.

    Raises
    ------
    OptionWrong
        If a corner is not finite, the corners do not make an outline that bulges everywhere, are
        in another order, or a side is not positive.

    Notes
    -----
    The relative standard uncertainty is that of the shortest side, sqrt(2) u / L, as for a line.

    References
    ----------
    R. Hartley and A. Zisserman, "Multiple view geometry in computer vision", 2nd ed. (2004),
    section 4.1: a homography from four points.
    """
    corners = _positions(corners_px, 4, "The corners")
    width_mm = _length_mm(width_mm, "The plot's width")
    height_mm = _length_mm(height_mm, "The plot's height")
    _check_corners(corners)
    true = np.array([[0, 0], [width_mm, 0], [width_mm, height_mm], [0, height_mm]])
    sides = np.hypot(*(np.roll(corners, -1, axis=0) - corners).T)
    return Scale(
        _homography(corners, true),
        "corners",
        float(math.sqrt(2) * end_uncertainty_px / sides.min()),
        f"four corners of a rectangle of {width_mm:g} x {height_mm:g} mm",
    )


def _positions(values: Any, n: int, name: str) -> Points:
    """Check that there are `n` finite positions."""
    points = np.asarray(values, dtype=np.float64)
    if points.shape != (n, 2):
        raise OptionWrong(
            f"{name} must be {n} positions of x and y, not {points.size} numbers; give them in pixels."
        )
    if not np.isfinite(points).all():
        raise OptionWrong(f"{name} must be finite numbers, not {points.tolist()}; give pixels.")
    return points


def _length_mm(value: float, name: str) -> float:
    """Check that a known length is positive and finite."""
    if not (math.isfinite(value) and value > 0):
        raise OptionWrong(f"{name} must be a positive number of millimetres, not {value:g}.")
    return float(value)


def _check_corners(corners: Points) -> None:
    """Refuse corners on a line, crossing sides, and any order but top left, right, bottom, left."""
    sides = np.roll(corners, -1, axis=0) - corners
    after = np.roll(sides, -1, axis=0)
    turns = sides[:, 0] * after[:, 1] - sides[:, 1] * after[:, 0]
    flat = np.abs(turns) < 1e-3 * np.hypot(*sides.T) * np.hypot(*after.T) + 1e-9
    if flat.any():
        raise OptionWrong(
            "Three of the corners lie on one line or coincide; mark the four corners of the plot."
        )
    if not (turns > 0).all() and not (turns < 0).all():
        raise OptionWrong(
            "The corners make an outline that crosses itself or is dented;"
            " give top left, top right, bottom right, bottom left."
        )
    across = corners[1] + corners[2] - corners[0] - corners[3]
    if (turns < 0).any() or not abs(math.atan2(across[1], across[0])) <= _EIGHTH:
        raise OptionWrong(
            "The corners are in another order than top left, top right, bottom right, bottom left"
            f" as seen in the picture: {corners.tolist()}; put them in that order."
        )


def _homography(seen: Points, true: Points) -> NDArray[np.float64]:
    """Solve for the map of four points, about their centre so that the numbers stay of one size."""
    middle, size = seen.mean(axis=0), np.ptp(seen)
    rows, values = [], []
    for (x, y), (u, v) in zip((seen - middle) / size, true, strict=True):
        rows += [[x, y, 1, 0, 0, 0, -u * x, -u * y], [0, 0, 0, x, y, 1, -v * x, -v * y]]
        values += [u, v]
    solved = np.append(np.linalg.solve(np.array(rows), np.array(values)), 1.0).reshape(3, 3)
    centred = np.array(
        [[1 / size, 0, -middle[0] / size], [0, 1 / size, -middle[1] / size], [0, 0, 1]]
    )
    return np.asarray(solved @ centred)


def _apply(matrix: NDArray[Any], points: ArrayLike) -> Points:
    """Map points through a homography."""
    points = np.asarray(points, dtype=np.float64).reshape(-1, 2)
    mapped = points @ matrix[:, :2].T + matrix[:, 2]
    return np.asarray(mapped[:, :2] / mapped[:, 2:])
