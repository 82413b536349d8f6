"""Study areas: the region of a photograph in which spots count."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry import mapping, shape
from shapely.geometry.base import BaseGeometry

from detect.errors import AreaWrong

AreaKind = Literal["dish", "plot", "leaf", "frame", "polygon"]


@dataclass(frozen=True, slots=True, eq=False)
class StudyArea:
    """The region in which spots count, in pixels.

    Parameters
    ----------
    polygon : shapely Polygon or MultiPolygon
        Outline with holes, in pixels (x right, y down, pixel centres at whole numbers).
    kind : {"dish", "plot", "leaf", "frame", "polygon"}
        What the outline is.
    note : str
        How it was found, as reports quote it.

    Raises
    ------
    AreaWrong
        If the outline crosses itself or encloses nothing.
    """

    polygon: BaseGeometry
    kind: AreaKind
    note: str

    def __post_init__(self) -> None:
        if self.polygon.geom_type not in ("Polygon", "MultiPolygon"):
            raise AreaWrong(
                f"A study area must be a polygon, not a {self.polygon.geom_type}; draw a closed outline."
            )
        if not self.polygon.is_valid:
            reason = shapely.is_valid_reason(self.polygon)
            raise AreaWrong(
                f"The study area's outline is not usable ({reason}); draw it without crossings."
            )
        if not self.polygon.area > 0:
            raise AreaWrong(
                "The study area encloses nothing (0 square pixels); draw a larger outline."
            )

    def contains(self, points_px: ArrayLike) -> NDArray[np.bool_]:
        """Tell which of (n, 2) pixel positions lie in the area, its edge included."""
        points = np.asarray(points_px, dtype=np.float64).reshape(-1, 2)
        shapely.prepare(self.polygon)
        return np.asarray(shapely.intersects_xy(self.polygon, points[:, 0], points[:, 1]))

    def as_dict(self) -> dict[str, Any]:
        """Return the area as plain values for a file (geometry as in GeoJSON)."""
        return {"kind": self.kind, "note": self.note, "geometry": mapping(self.polygon)}

    @classmethod
    def from_dict(cls, values: dict[str, Any]) -> StudyArea:
        """Return the area a file holds."""
        return cls(shape(values["geometry"]), values["kind"], str(values["note"]))
