"""Study areas that many tests use."""

from __future__ import annotations

import shapely
from shapely.geometry.base import BaseGeometry

RAGGED = shapely.Polygon(
    [(0, 0), (40, 8), (90, -10), (100, 50), (70, 60), (95, 100), (30, 90), (10, 60), (-15, 40)],
    [[(40, 30), (60, 30), (60, 55), (40, 50)]],
)
AREAS: dict[str, BaseGeometry] = {
    "square": shapely.box(0, 0, 100, 100),
    "circle": shapely.Point(50, 50).buffer(50, quad_segs=90),
    "ragged with a hole": RAGGED,
}
