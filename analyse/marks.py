"""Where the marks of a picture go: outlines of areas, signs of spots, places of numbers."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

if TYPE_CHECKING:
    from analyse.findings import Findings

Points = NDArray[np.float64]
_WIDEST, _TALLEST = 10.5, 8.2  # inches, at 96 pixels an inch on a screen
_MOVE, _LINE, _CURVE = 1, 2, 4  # how a drawn path goes on at each of its points
_K = 4.0 / 3.0 * np.tan(np.pi / 8.0)  # handles that make four cubic curves a circle, to 0.03 %
CIRCLE = (
    np.array([
        [1, 0], [1, _K], [_K, 1], [0, 1], [-_K, 1], [-1, _K], [-1, 0],
        [-1, -_K], [-_K, -1], [0, -1], [_K, -1], [1, -_K], [1, 0],
    ]),
    np.array([_MOVE] + [_CURVE] * 12),
)  # fmt: skip
DIAMOND = (
    np.array([[0, -1.25], [1.25, 0], [0, 1.25], [-1.25, 0], [0, -1.25]]),
    np.array([_MOVE] + [_LINE] * 4),
)
CROSS = (
    np.array([[-0.8, -0.8], [0.8, 0.8], [-0.8, 0.8], [0.8, -0.8]]),
    np.array([_MOVE, _LINE, _MOVE, _LINE]),
)


def stamped(
    shape: tuple[Points, NDArray[np.int64]], centres: Points, radii: Points
) -> tuple[Points, NDArray[np.int64]]:
    """Return one path with a copy of a shape of radius 1 at every centre, as large as its radius.

    Parameters
    ----------
    shape : (vertices, codes)
        One of `CIRCLE`, `DIAMOND` and `CROSS`.
    centres : ndarray of shape (n, 2)
        Where.
    radii : ndarray of shape (n,)
        How large.

    Returns
    -------
    (vertices, codes)
        Of shapes (n k, 2) and (n k,) for a shape of k points.
    """
    vertices = shape[0][None] * radii[:, None, None] + centres[:, None, :]
    return vertices.reshape(-1, 2), np.tile(shape[1], len(radii))


def rings(areas: Iterable[BaseGeometry]) -> list[Points]:
    """Return every outline, outer and inner, of polygons as (m, 2) arrays."""
    polygons = shapely.get_parts(np.array(list(areas), dtype=object))
    return [shapely.get_coordinates(ring) for ring in shapely.get_rings(polygons)]


def cells(findings: Findings) -> list[BaseGeometry]:
    """Return the outlines of quadrats; for a table, squares at their rows and columns.

    Parameters
    ----------
    findings : Findings
        Any result.

    Returns
    -------
    list of shapely geometries
        In the unit of the findings, or in sides of a quadrat where no unit is known.

    Raises
    ------
    ValueError
        If a table does not tell where its quadrats lie.
    """
    counts = findings.counts
    if counts.grid is not None:
        return list(counts.grid.polygons)
    if counts.row is None or counts.column is None:
        raise ValueError(f"{findings.name} does not tell where its quadrats lie")
    side = findings.settings["side"]
    first, side = (0.0, side) if side else (0.5, 1.0)  # so that row 1 lies around 1
    x, y = first + side * counts.column, first + side * counts.row
    return list(shapely.box(x, y, x + side, y + side))


def label_place(
    cell: BaseGeometry, width: float, height: float, *, spots: Points | None = None
) -> tuple[float, float]:
    """Return the middle of a label in a cell: a corner, the upper left first, clear of spots.

    Parameters
    ----------
    cell : shapely geometry
        A quadrat, y downwards.
    width, height : float
        Size of the label in the unit of the cell.
    spots : ndarray of shape (n, 3) or None
        Centres and radii of what the label should not hide.

    Returns
    -------
    (x, y) : tuple of float
        In the cell. The first corner that holds the label, if every one of them hides a spot;
        the middle, if no corner holds it.
    """
    x0, y0, x1, y1 = cell.bounds
    side, half = min(x1 - x0, y1 - y0), np.array([width, height]) / 2
    shapely.prepare(cell)
    fitting = []
    for right, low in ((0, 0), (1, 0), (0, 1), (1, 1)):
        for inset in (0.04 * side, 0.1 * side, 0.17 * side):
            x = x1 - inset - half[0] if right else x0 + inset + half[0]
            y = y1 - inset - half[1] if low else y0 + inset + half[1]
            if not cell.contains(shapely.box(x - half[0], y - half[1], x + half[0], y + half[1])):
                continue
            fitting.append((float(x), float(y)))
            if spots is None or not _hides(fitting[-1], half, spots):
                return fitting[-1]
            break
    return fitting[0] if fitting else middle(cell)


def middle(cell: BaseGeometry) -> tuple[float, float]:
    """Return the point of a cell that lies deepest inside it."""
    x0, y0, x1, y1 = cell.bounds
    if cell.area > 0.999 * (x1 - x0) * (y1 - y0):
        return (x0 + x1) / 2, (y0 + y1) / 2
    tolerance = 0.02 * min(x1 - x0, y1 - y0)
    spokes = shapely.maximum_inscribed_circle(np.array([cell]), tolerance=tolerance)
    x, y = shapely.get_coordinates(spokes)[0]
    return float(x), float(y)


def _hides(place: tuple[float, float], half: Points, spots: Points) -> bool:
    """Tell whether a label there would lie over a spot."""
    away = np.abs(spots[:, :2] - place) - half
    return bool((away < spots[:, 2:]).all(axis=1).any())


def photograph_inches(width: int, height: int) -> tuple[float, float]:
    """Return the size of a photograph in a report: as wide as the page, unless that is too tall."""
    inches = _WIDEST * min(1.0, _TALLEST / _WIDEST * width / height)
    return inches, inches * height / width
