"""The cells a grid is cut into, squares or sectors, and the joining of those that are too small."""

from __future__ import annotations

import heapq
import math
from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

_ARC_STEPS = 720  # straight pieces per full circle: areas right to 2 parts in 100,000
_TOUCH = 1e-6  # of a cell: differences below this are rounding and break no tie


@dataclass(frozen=True, slots=True)
class Lattice:
    """Rectangles of one size side by side, numbered row by row from the top.

    Parameters
    ----------
    x0, y0 : float
        Corner with the smallest x and y.
    width, height : float
        Size of a cell.
    rows, columns : int
        How many there are.

    Examples
    --------
    >>> cells = Lattice(0, 0, 5, 5, rows=2, columns=3)
    >>> cells.cell(np.array([[12.0, 1.0], [1.0, 9.0]])).tolist()
    [2, 3]
    """

    x0: float
    y0: float
    width: float
    height: float
    rows: int
    columns: int

    def cell(self, points: NDArray[np.float64]) -> NDArray[np.int64]:
        """Return the number of the cell each point falls in; the last edges belong to the last cells."""
        column = _index(points[:, 0], self.x0, self.width, self.columns)
        row = _index(points[:, 1], self.y0, self.height, self.rows)
        return row * self.columns + column

    def shapes(self, area: BaseGeometry) -> NDArray[np.object_]:
        """Return the cells as boxes; the outermost reach to the edge of the area."""
        bounds = area.bounds
        x = _edges(self.x0, self.width, self.columns, bounds[0], bounds[2])
        y = _edges(self.y0, self.height, self.rows, bounds[1], bounds[3])
        left, top = np.meshgrid(x[:-1], y[:-1])
        right, bottom = np.meshgrid(x[1:], y[1:])
        return np.asarray(shapely.box(left, top, right, bottom)).reshape(-1)

    def centres(self) -> NDArray[np.float64]:
        """Return the centre of each cell as (rows * columns, 2)."""
        x = self.x0 + (np.arange(self.columns) + 0.5) * self.width
        y = self.y0 + (np.arange(self.rows) + 0.5) * self.height
        return np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2)

    def sides(self, cell: int) -> list[tuple[int, BaseGeometry]]:
        """Return the neighbours of a cell, each with the edge between them."""
        row, column = divmod(cell, self.columns)
        x, y = self.x0 + column * self.width, self.y0 + row * self.height
        right, bottom = x + self.width, y + self.height
        around = {
            (row - 1, column): ((x, y), (right, y)),
            (row, column - 1): ((x, y), (x, bottom)),
            (row, column + 1): ((right, y), (right, bottom)),
            (row + 1, column): ((x, bottom), (right, bottom)),
        }
        return [
            (r * self.columns + c, shapely.LineString(edge))
            for (r, c), edge in around.items()
            if 0 <= r < self.rows and 0 <= c < self.columns
        ]


@dataclass(frozen=True, slots=True)
class Sectors:
    """Sectors of equal area in rings about a centre, numbered ring by ring from the middle.

    Parameters
    ----------
    x, y, radius : float
        The circle.
    rows, columns : int
        Rings, and sectors in each.

    Examples
    --------
    >>> sectors = Sectors(0, 0, 10, rows=2, columns=4)
    >>> sectors.cell(np.array([[1.0, 1.0], [9.0, -1.0]])).tolist()
    [0, 7]
    """

    x: float
    y: float
    radius: float
    rows: int
    columns: int

    def cell(self, points: NDArray[np.float64]) -> NDArray[np.int64]:
        """Return the number of the sector each point falls in; beyond the circle, in the last ring."""
        dx, dy = points[:, 0] - self.x, points[:, 1] - self.y
        share = (dx * dx + dy * dy) / self.radius**2
        ring = np.clip(np.floor(share * self.rows), 0, self.rows - 1).astype(np.int64)
        turn = np.mod(np.arctan2(dy, dx) / (2 * math.pi), 1.0)
        sector = np.minimum(np.floor(turn * self.columns), self.columns - 1).astype(np.int64)
        return np.asarray(ring * self.columns + sector)

    def shapes(self, area: BaseGeometry) -> NDArray[np.object_]:
        """Return the sectors as polygons; those of the last ring reach beyond the area."""
        far = shapely.get_coordinates(area) - (self.x, self.y)
        reach = 1.01 * max(self.radius, float(np.hypot(far[:, 0], far[:, 1]).max()))
        radii = self.radius * np.sqrt(np.arange(self.rows + 1) / self.rows)
        radii[-1] = reach / math.cos(math.pi / _ARC_STEPS)
        steps = max(1, math.ceil(_ARC_STEPS / self.columns))
        shapes = [
            self._sector(radii[ring], radii[ring + 1], column, steps)
            for ring in range(self.rows)
            for column in range(self.columns)
        ]
        return np.array(shapes, dtype=object)

    def _sector(self, inner: float, outer: float, column: int, steps: int) -> BaseGeometry:
        """Return one sector between two radii."""
        turn = 2 * math.pi * (column + np.linspace(0.0, 1.0, steps + 1)) / self.columns
        around = np.column_stack([np.cos(turn), np.sin(turn)])
        centre = np.array([self.x, self.y])
        outwards, inwards = centre + outer * around, centre + inner * around[::-1]
        if self.columns == 1:
            return shapely.Polygon(outwards, [inwards] if inner > 0 else None)
        return shapely.Polygon(np.concatenate([outwards, inwards if inner > 0 else inwards[:1]]))

    def centres(self) -> NDArray[np.float64]:
        """Return a middle point of each sector as (rows * columns, 2)."""
        ring = np.repeat(np.arange(self.rows), self.columns)
        radius = self.radius * np.sqrt((ring + 0.5) / self.rows)
        if self.columns == 1:
            radius = np.where(ring == 0, 0.0, radius)
        turn = 2 * math.pi * (np.tile(np.arange(self.columns), self.rows) + 0.5) / self.columns
        return np.column_stack([self.x + radius * np.cos(turn), self.y + radius * np.sin(turn)])


def joined(
    lattice: Lattice,
    area: BaseGeometry,
    sizes: NDArray[np.float64],
    whole: NDArray[np.bool_],
    smallest: float,
) -> NDArray[np.int64]:
    """Join cells that are too small to neighbours, so that no quadrat expects next to nothing.

    Parameters
    ----------
    lattice : Lattice
        The cells.
    area : shapely geometry
        The study area that clips them.
    sizes : ndarray of shape (rows * columns,)
        Area of each cell within the study area; 0 where it holds nothing of it.
    whole : ndarray of bool, same shape
        Which cells nothing is cut from.
    smallest : float
        Cells below this area are joined.

    Returns
    -------
    ndarray of int, same shape
        The cell each cell now belongs to, which is the largest of its group; -1 for no quadrat.

    Notes
    -----
    The smallest goes first. It is joined to a clipped neighbour before a whole one, among these to
    that with the longest common edge, then to the smaller, then to the first; an island without
    neighbour to the nearest.

    Examples
    --------
    >>> lattice, area = Lattice(0, 0, 5, 5, rows=1, columns=3), shapely.box(0, 0, 11, 5)
    >>> whole = np.array([True, True, False])
    >>> joined(lattice, area, np.array([25.0, 25.0, 5.0]), whole, 10.0).tolist()
    [0, 1, 1]
    """
    groups = {int(k): [int(k)] for k in np.flatnonzero(sizes > 0)}
    home = np.where(sizes > 0, np.arange(sizes.size), -1)
    total: list[float] = sizes.tolist()
    queue = [(total[k], k) for k in groups if total[k] < smallest]
    heapq.heapify(queue)
    while queue and len(groups) > 1:
        size, name = heapq.heappop(queue)
        if name not in groups or total[name] != size:
            continue
        other = _partner(lattice, area, groups, home, whole, total, name)
        keep, gone = sorted((name, other), key=lambda k: (-sizes[k], k))
        groups[keep] += groups.pop(gone)
        total[keep] += total[gone]
        home[groups[keep]] = keep
        if total[keep] < smallest:
            heapq.heappush(queue, (total[keep], keep))
    return home


def _partner(
    lattice: Lattice,
    area: BaseGeometry,
    groups: dict[int, list[int]],
    home: NDArray[np.int64],
    whole: NDArray[np.bool_],
    total: list[float],
    name: int,
) -> int:
    """Return the group that a small group is joined to."""
    common: dict[int, float] = {}
    for member in groups[name]:
        for cell, edge in lattice.sides(member):
            other = int(home[cell])
            if other not in (-1, name):
                common[other] = common.get(other, 0.0) + _shared(edge, area)
    unit = max(lattice.width, lattice.height)
    touching = [k for k, length in common.items() if length > _TOUCH * unit]
    if touching:
        return min(
            touching,
            key=lambda k: (
                len(groups[k]) == 1 and bool(whole[k]),
                -round(common[k] / unit / _TOUCH),
                round(total[k] / unit**2 / _TOUCH),
                k,
            ),
        )
    centres = lattice.centres()
    others = [k for k in groups if k != name]
    far = np.hypot(*(centres[others] - centres[name]).T)
    return others[int(np.argmin(far))]


def _shared(edge: BaseGeometry, area: BaseGeometry) -> float:
    """Return the length of an edge with the area on both sides of it."""
    along = shapely.intersection(edge, area.boundary)
    return float(shapely.intersection(edge, area).length - along.length)


def _index(
    values: NDArray[np.float64], start: float, step: float, number: int
) -> NDArray[np.int64]:
    """Return which of `number` half-open steps each value falls in, the outermost ones open-ended.

    The share of the whole span is taken first: 0.6 of 1 is 3 fifths, while 0.6 / 0.2 falls short
    of 3 in binary.
    """
    share = (values - start) / (step * number)
    return np.clip(np.floor(share * number), 0, number - 1).astype(np.int64)


def _edges(start: float, step: float, number: int, low: float, high: float) -> NDArray[np.float64]:
    """Return the edges of steps, the outermost moved out as far as the area reaches."""
    edges = start + step * np.arange(number + 1, dtype=np.float64)
    edges[0], edges[-1] = min(edges[0], low), max(edges[-1], high)
    return edges
