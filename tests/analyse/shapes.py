"""Named study areas for tests, and a slow plain way to random ones."""

from __future__ import annotations

import numpy as np
import shapely
from shapely.geometry.base import BaseGeometry

SQUARE = shapely.box(0, 0, 10, 10)
OBLONG = shapely.box(-3, 2, 9, 6)
DISH = shapely.Point(43, 41).buffer(43, quad_segs=90)
LEAF = shapely.Polygon(
    [(0, 0), (10, -1), (14, 5), (9, 6), (12, 11), (4, 12), (-2, 7), (3, 5)],
    [[(4, 2), (6, 2), (5, 4)], [(5, 8), (7, 9), (6, 10)]],
)
PARTS = shapely.MultiPolygon([shapely.box(0, 0, 3, 5), shapely.Point(7, 4).buffer(2.2)])
AREAS = {"square": SQUARE, "oblong": OBLONG, "dish": DISH, "leaf": LEAF, "parts": PARTS}


def ragged(seed: int) -> BaseGeometry:
    """Return a star-shaped area of a few corners, often with a hole."""
    rng = np.random.default_rng(seed)
    corners = int(rng.integers(5, 14))
    angle = 2 * np.pi * (np.arange(corners) + rng.uniform(-0.3, 0.3, corners)) / corners
    reach = rng.uniform(0.5, 1.0, corners)
    outline = np.column_stack([reach * np.cos(angle), reach * np.sin(angle)])
    hole = 0.3 * outline[::-1] if seed % 2 else None
    area = shapely.Polygon(outline, [] if hole is None else [hole])
    return shapely.transform(area, lambda xy: xy * rng.uniform(0.5, 50) + rng.uniform(-9, 9, 2))
