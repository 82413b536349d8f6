"""Pixels <-> millimetres: maps of the subject's plane, where they come from and how sure they are.

Coordinates are x right, y down, with pixel centres at whole numbers; points are (n, 2) as x, y.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from detect.errors import OptionWrong

ScaleSource = Literal["mm-per-pixel", "line", "dish", "corners"]
Points = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Scale:
    """A map from pixels to millimetres on the plane of the subject.

    Parameters
    ----------
    matrix : ndarray of shape (3, 3)
        Homography from pixel x, y, 1 to millimetre x, y, w; a plain scale is diagonal.
    source : {"mm-per-pixel", "line", "dish", "corners"}
        What the map was taken from.
    relative_uncertainty : float
        Standard uncertainty of a length, as a fraction of it.
    note : str
        The known length in words, as reports quote it.

    Raises
    ------
    OptionWrong
        If the map is not finite, turns the plane over, or is singular.
    """

    matrix: NDArray[np.float64]
    source: ScaleSource
    relative_uncertainty: float
    note: str

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
        return _apply(self.matrix, points_px)

    def to_px(self, points_mm: ArrayLike) -> Points:
        """Map (n, 2) millimetre positions to pixels."""
        return _apply(np.linalg.inv(self.matrix), points_mm)

    def mm_per_px(self, points_px: ArrayLike) -> NDArray[np.float64]:
        """Return the local millimetres per pixel, the root of the area factor, at (n, 2) pixels."""
        points = np.asarray(points_px, dtype=np.float64).reshape(-1, 2)
        w = points @ self.matrix[2, :2] + 1.0
        return np.asarray(np.sqrt(np.linalg.det(self.matrix) / np.abs(w) ** 3))

    def as_dict(self) -> dict[str, Any]:
        """Return the scale as plain values for a file."""
        return {
            "matrix": self.matrix.tolist(),
            "source": self.source,
            "relative_uncertainty": self.relative_uncertainty,
            "note": self.note,
        }

    @classmethod
    def from_dict(cls, values: dict[str, Any]) -> Scale:
        """Return the scale a file holds."""
        return cls(
            np.asarray(values["matrix"], dtype=np.float64),
            values["source"],
            float(values["relative_uncertainty"]),
            str(values["note"]),
        )


def _apply(matrix: NDArray[Any], points: ArrayLike) -> Points:
    """Map points through a homography."""
    points = np.asarray(points, dtype=np.float64).reshape(-1, 2)
    mapped = points @ matrix[:, :2].T + matrix[:, 2]
    return np.asarray(mapped[:, :2] / mapped[:, 2:])
