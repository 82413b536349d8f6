"""How much of each cell of a grid does an area cover, exactly."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

Floats = NDArray[np.float64]


def covered(area: BaseGeometry, *, cell: float, shape: tuple[int, int]) -> Floats:
    """Return the share of every square cell that lies in an area.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        With holes; its lower left corner of the bounding box is the corner of the grid.
    cell : float
        Side of a cell, in the unit of the area.
    shape : tuple of int
        Rows and columns; they must hold the whole area.

    Returns
    -------
    ndarray of shape `shape`
        0 to 1, row by y and column by x; the sum times cell^2 is the area, to rounding.

    Notes
    -----
    The outline is cut at every grid line. Each piece adds its height to the cells at its right
    (Green's theorem: the integral of x dy round the outline is the area), and the running sum
    along a row is the share covered. Nothing is sampled.

    Examples
    --------
    >>> covered(shapely.box(0, 0, 1.5, 1), cell=1.0, shape=(1, 2)).tolist()
    [[1.0, 0.5]]
    """
    rows, columns = shape
    start, end = _edges(area, cell)
    start, end = _cut(start, end, axis=0)
    start, end = _cut(start, end, axis=1)
    middle = (start + end) / 2
    column = np.clip(np.floor(middle[:, 0]).astype(np.intp), 0, columns - 1)
    row = np.clip(np.floor(middle[:, 1]).astype(np.intp), 0, rows - 1)
    rise = end[:, 1] - start[:, 1]
    right = middle[:, 0] - column  # how far into its cell a piece lies
    at = row * (columns + 1) + column
    size = rows * (columns + 1)
    steps = np.bincount(at, rise * (1 - right), size) + np.bincount(at + 1, rise * right, size)
    share = -np.cumsum(steps.reshape(rows, columns + 1), axis=1)[:, :columns]
    return np.clip(share, 0.0, 1.0)


def _edges(area: BaseGeometry, cell: float) -> tuple[Floats, Floats]:
    """Return both ends of every edge in cells, outlines anticlockwise and holes clockwise."""
    corner = np.array(area.bounds[:2])
    starts, ends = [], []
    for part in shapely.get_parts(area):
        for k, ring in enumerate([part.exterior, *part.interiors]):
            xy = (shapely.get_coordinates(ring) - corner) / cell
            if bool(shapely.is_ccw(ring)) == (k > 0):
                xy = xy[::-1]
            starts.append(xy[:-1])
            ends.append(xy[1:])
    return np.concatenate(starts), np.concatenate(ends)


def _cut(start: Floats, end: Floats, *, axis: int) -> tuple[Floats, Floats]:
    """Return the edges, cut where they cross a whole number along one axis."""
    a, b = start[:, axis], end[:, axis]
    first = np.floor(np.minimum(a, b)) + 1
    crossings = np.maximum(np.ceil(np.maximum(a, b)) - first, 0).astype(np.intp)
    owner = np.repeat(np.arange(len(a)), crossings + 1)
    number = np.arange(owner.size) - np.repeat(
        np.cumsum(crossings + 1) - crossings - 1, crossings + 1
    )
    rising = (b >= a)[owner]
    many = crossings[owner]
    span = (b - a)[owner]
    reach = np.where(span == 0, 1.0, span)

    def share(k: NDArray[np.intp]) -> Floats:
        """Return how far along its edge the k-th cut lies; 0 is the start and the last one the end."""
        line = np.where(rising, first[owner] + k - 1, first[owner] + many - k)
        inner = np.clip((line - a[owner]) / reach, 0.0, 1.0)
        return np.where(k <= 0, 0.0, np.where(k > many, 1.0, inner))

    step = (end - start)[owner]
    return (
        start[owner] + share(number)[:, None] * step,
        start[owner] + share(number + 1)[:, None] * step,
    )
