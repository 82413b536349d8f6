"""How far a point lies from the edge of its area, and how much area lies farther than that."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry.base import BaseGeometry

from analyse.set_covariance import dish_circle, rectangle_sides

Floats = NDArray[np.float64]

_NODES = 256  # along the longer side of the table of distances
_DEPTHS = 200
_ROUND = 32  # pieces to a quarter turn where an eroded outline turns round a corner


def boundary_distance(points: ArrayLike, area: BaseGeometry) -> Floats:
    """Return the distance of each point to the edge of an area; holes have edges too.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area, inside or outside of it.
    area : shapely Polygon or MultiPolygon
        Any polygon, with holes.

    Returns
    -------
    ndarray of shape (n,)

    Examples
    --------
    >>> boundary_distance([[1, 1], [2, 3]], shapely.box(0, 0, 4, 4)).tolist()
    [1.0, 1.0]
    """
    xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
    if not len(xy):
        return np.zeros(0)
    corners, ring = shapely.get_coordinates(
        shapely.get_rings(shapely.get_parts(area)), return_index=True
    )
    kept = ring[1:] == ring[:-1]
    edges: Any = shapely.linestrings(np.stack([corners[:-1][kept], corners[1:][kept]], axis=1))
    _, found = shapely.STRtree(edges).query_nearest(
        shapely.points(xy), return_distance=True, all_matches=False
    )
    return np.asarray(found, dtype=np.float64)


def eroded_area(area: BaseGeometry, depth: float) -> float:
    """Return how much of an area lies at least `depth` from its edge.

    Examples
    --------
    >>> eroded_area(shapely.box(0, 0, 10, 6), 1.0)
    32.0
    """
    sides = rectangle_sides(area)
    if sides is not None:
        return max(sides[0] - 2 * depth, 0.0) * max(sides[1] - 2 * depth, 0.0)
    return float(area.buffer(-depth, quad_segs=_ROUND).area) if depth > 0 else float(area.area)


@dataclass(frozen=True, slots=True, eq=False)
class Boundary:
    """The edge of one area, prepared for many patterns of points.

    Parameters
    ----------
    depths, left : ndarray of shape (k,)
        Distances from 0 to the deepest point, and the area that lies at least so far from the
        edge.
    corner : tuple of float
        Lower left corner of the bounding box.
    sides : tuple of float or None
        Width and height of a rectangle.
    circle : tuple of float or None
        Centre and radius of a disc.
    cell : float
        Distance between nodes of `table`.
    table : ndarray of shape (rows, columns)
        Distance to the edge at the nodes, negative outside; empty where there is a closed form.

    Examples
    --------
    >>> edge = Boundary.of(shapely.box(0, 0, 10, 6))
    >>> edge
    Boundary(rectangle, deepest point at 3)
    >>> edge.distance(np.array([[5.0, 3.0], [1.0, 2.0]])).tolist()
    [3.0, 1.0]
    """

    depths: Floats
    left: Floats
    corner: tuple[float, float]
    sides: tuple[float, float] | None
    circle: tuple[float, float, float] | None
    cell: float
    table: Floats

    def __post_init__(self) -> None:
        for column in (self.depths, self.left, self.table):
            column.setflags(write=False)

    def __repr__(self) -> str:
        shape = "rectangle" if self.sides else "disc" if self.circle else "table"
        return f"Boundary({shape}, deepest point at {self.depths[-1]:.4g})"

    @classmethod
    def of(cls, area: BaseGeometry) -> Boundary:
        """Prepare the edge of an area.

        Notes
        -----
        Rectangles and discs have closed forms. Elsewhere the exact distance is held at the nodes
        of a grid, 256 along the longer side, and is linear between them.
        """
        sides = rectangle_sides(area)
        circle = None if sides else dish_circle(area)
        x0, y0, x1, y1 = area.bounds
        cell, table = max(x1 - x0, y1 - y0) / _NODES, np.zeros((0, 0))
        if sides is not None:
            deepest = min(sides) / 2
        elif circle is not None:
            deepest = circle[2]
        else:
            table = _distances_at_nodes(area, cell)
            deepest = float(table.max())
        depths = np.linspace(0.0, deepest, _DEPTHS)
        left = np.array([_eroded(area, circle, depth) for depth in depths])
        return cls(depths, left, (x0, y0), sides, circle, cell, table)

    def distance(self, points: Floats) -> Floats:
        """Return the distance of points (n, 2) inside the area to its edge."""
        x, y = points[:, 0], points[:, 1]
        if self.circle is not None:
            cx, cy, radius = self.circle
            return np.asarray(np.maximum(radius - np.hypot(x - cx, y - cy), 0.0))
        u, v = x - self.corner[0], y - self.corner[1]
        if self.sides is not None:
            width, height = self.sides
            nearest = np.minimum(np.minimum(u, width - u), np.minimum(v, height - v))
            return np.asarray(np.maximum(nearest, 0.0))
        return self._between_nodes(u / self.cell, v / self.cell)

    def area_beyond(self, depth: Floats) -> Floats:
        """Return the area that lies at least `depth` from the edge, linear between known depths."""
        return np.asarray(np.interp(depth, self.depths, self.left))

    def _between_nodes(self, u: Floats, v: Floats) -> Floats:
        """Return the distance at places given in cells from the corner."""
        rows, columns = self.table.shape
        j = np.clip(u.astype(np.intp), 0, columns - 2)
        i = np.clip(v.astype(np.intp), 0, rows - 2)
        u, v, t = u - j, v - i, self.table
        low = t[i, j] * (1 - u) + t[i, j + 1] * u
        high = t[i + 1, j] * (1 - u) + t[i + 1, j + 1] * u
        return np.asarray(np.maximum(low * (1 - v) + high * v, 0.0))


def _eroded(area: BaseGeometry, circle: tuple[float, float, float] | None, depth: float) -> float:
    """Return how much of an area lies at least `depth` from its edge, in closed form on a disc."""
    if circle is not None:
        return math.pi * max(circle[2] - depth, 0.0) ** 2
    return eroded_area(area, depth)


def _distances_at_nodes(area: BaseGeometry, cell: float) -> Floats:
    """Return the signed distance to the edge at the nodes of a grid over the bounding box."""
    x0, y0, x1, y1 = area.bounds
    columns, rows = math.ceil((x1 - x0) / cell) + 2, math.ceil((y1 - y0) / cell) + 2
    x, y = np.meshgrid(x0 + cell * np.arange(columns), y0 + cell * np.arange(rows))
    nodes = np.column_stack([x.ravel(), y.ravel()])
    shapely.prepare(area)
    inside = shapely.contains_xy(area, nodes[:, 0], nodes[:, 1])
    distance = boundary_distance(nodes, area)
    return np.where(inside, distance, -distance).reshape(rows, columns)
