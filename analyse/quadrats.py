"""Grids of quadrats over a study area, their clipped areas, and the points counted in them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry.base import BaseGeometry

from analyse.cells import Lattice, Sectors, joined
from analyse.columns import hold_columns
from analyse.errors import GridWrong
from analyse.grid_options import MOST_QUADRATS, side_in
from analyse.grid_options import GridOptions as GridOptions
from analyse.grid_options import default_side as default_side
from analyse.pattern import Circle, Unit

GridShape = Literal["square", "rectangle", "sectors"]
_SLACK = 1e-3  # of a cell: how far an area may overhang the last cell before another is laid
_ROUNDED = 1 - 1e-9  # what keeps just the share below which cells are joined is left alone
_NEARLY_WHOLE = 0.998  # share of a full cell from which a cell is called whole
_EQUAL_SECTORS = 0.01  # how far a whole sector may differ from its share of the dish


@dataclass(frozen=True, slots=True, eq=False)
class Grid:
    """Quadrats laid over a study area; together they are the area, without overlap.

    Parameters
    ----------
    polygons : tuple of shapely geometries
        What each quadrat holds of the area; q of them, row by row from the top.
    row, column : ndarray of int, shape (q,)
        Place in the grid from 0, of the largest part of a joined quadrat. For sectors: ring and
        sector, clockwise on the picture from the right.
    x, y : ndarray of shape (q,)
        Centre of the full cell.
    area : ndarray of shape (q,)
        Area inside the study area.
    whole : ndarray of bool, shape (q,)
        Whether nothing is cut from it and nothing joined to it.
    side : float or None
        Side of square quadrats.
    shape : {"square", "rectangle", "sectors"}
        What a full quadrat is.
    full_area : float
        Area of a full quadrat.
    unit : {"mm", "px"}
        Unit of the lengths; areas are in its square.
    rows, columns : int
        Size of the grid.
    joined : int
        How many cells were joined to neighbours.
    cells : Lattice or Sectors
        How a point finds its cell.
    home : ndarray of int, shape (rows * columns,)
        The quadrat each cell belongs to, -1 for none.
    """

    polygons: tuple[BaseGeometry, ...]
    row: NDArray[np.int64]
    column: NDArray[np.int64]
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    area: NDArray[np.float64]
    whole: NDArray[np.bool_]
    side: float | None
    shape: GridShape
    full_area: float
    unit: Unit
    rows: int
    columns: int
    joined: int
    cells: Lattice | Sectors
    home: NDArray[np.int64]

    def __post_init__(self) -> None:
        hold_columns(self, ("row", "column", "x", "y", "area", "whole"), length=len(self))
        hold_columns(self, ["home"])

    def __len__(self) -> int:
        return len(self.polygons)

    def __repr__(self) -> str:
        made = f"{self.rows} x {self.columns} {self.shape}"
        side = "" if self.side is None else f" of {self.side:g} {self.unit}"
        return f"<Grid {made}{side}: {len(self)} quadrats, {int(self.whole.sum())} whole>"


@dataclass(frozen=True, slots=True, eq=False)
class QuadratCounts:
    """Counts in quadrats, with what is known of the quadrats.

    Parameters
    ----------
    counts : ndarray of int, shape (q,)
        Points in each quadrat.
    area : ndarray of shape (q,), or None
        Area of each; None where a table gives counts only.
    whole : ndarray of bool, shape (q,)
        Which quadrats are whole; all of them in a table of counts.
    grid : Grid or None
        The grid, where points were counted in one.
    row, column : ndarray of int, shape (q,), or None
        Places in the grid from 0, where they are known.

    Examples
    --------
    >>> QuadratCounts(np.array([2, 0, 3]), None, np.ones(3, bool))
    <QuadratCounts: 5 points in 3 quadrats, 3 whole>
    """

    counts: NDArray[np.int64]
    area: NDArray[np.float64] | None
    whole: NDArray[np.bool_]
    grid: Grid | None = None
    row: NDArray[np.int64] | None = None
    column: NDArray[np.int64] | None = None

    def __post_init__(self) -> None:
        names = ("counts", "area", "whole", "row", "column")
        known = [name for name in names if getattr(self, name) is not None]
        hold_columns(self, known, length=len(self))

    def __len__(self) -> int:
        return len(self.counts)

    def __repr__(self) -> str:
        return (
            f"<QuadratCounts: {int(self.counts.sum())} points in {len(self)} quadrats,"
            f" {int(self.whole.sum())} whole>"
        )

    @property
    def clipped_share(self) -> float:
        """Return the share of the study area that lies in quadrats that are not whole."""
        if self.area is None:
            return 0.0
        return float(self.area[~self.whole].sum() / self.area.sum())


def lay_grid(
    area: BaseGeometry,
    n: int,
    options: GridOptions | None = None,
    unit: Unit = "mm",
    dish: Circle | None = None,
) -> Grid:
    """Lay quadrats over a study area.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        In `unit`.
    n : int
        Points in the area, for the default side.
    options : GridOptions or None
        How to cut; None for the defaults.
    unit : {"mm", "px"}
        Unit of the area.
    dish : Circle or None
        Needed for rings.

    Returns
    -------
    Grid

    Raises
    ------
    GridWrong
        If the quadrats do not fit: larger than the area, too many, a side in the wrong unit, or
        rings without a dish.

    Notes
    -----
    Squares are centred on the bounding box of the area; with a number of rows and columns the box
    is divided exactly. Each quadrat is clipped by the area, and a clipped one that keeps less
    than a quarter (`join_below`) of a full one is joined to a neighbour: no point is lost, and no
    quadrat expects next to nothing.

    Examples
    --------
    >>> import shapely
    >>> grid = lay_grid(shapely.box(0, 0, 100, 60), 30, GridOptions(shape=(3, 5)))
    >>> len(grid), grid.full_area, bool(grid.whole.all())
    (15, 400.0, True)
    """
    options = options or GridOptions()
    if options.rings is not None:
        return _lay_sectors(area, options.rings, unit, dish)
    x0, y0, x1, y1 = area.bounds
    if options.shape is not None:
        rows, columns = options.shape
        lattice = Lattice(x0, y0, (x1 - x0) / columns, (y1 - y0) / rows, rows, columns)
        return _clipped(lattice, area, options, unit, None)
    side = default_side(area.area, n) if options.side is None else side_in(options.side, unit)
    columns, rows = (max(1, math.ceil(span / side - _SLACK)) for span in (x1 - x0, y1 - y0))
    if rows * columns == 1:
        raise GridWrong(
            f"A quadrat of {side:g} {unit} covers the whole study area"
            f" ({x1 - x0:.4g} x {y1 - y0:.4g} {unit}); give a smaller --quadrat."
        )
    if rows * columns > MOST_QUADRATS:
        raise GridWrong(
            f"Quadrats of {side:g} {unit} would cut the box around the study area into"
            f" {rows * columns:,} cells, more than {MOST_QUADRATS:,}; give a larger --quadrat."
        )
    start = ((x0 + x1 - columns * side) / 2, (y0 + y1 - rows * side) / 2)
    return _clipped(Lattice(*start, side, side, rows, columns), area, options, unit, side)


def count_in_quadrats(points: ArrayLike, grid: Grid) -> NDArray[np.int64]:
    """Count points in the quadrats of a grid.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        Points in the study area, x, y in the unit of the grid.
    grid : Grid
        The quadrats.

    Returns
    -------
    ndarray of int, shape (q,)
        They sum to n.

    Notes
    -----
    A point on the line between two quadrats belongs to the right or lower one; on the last edge,
    to the last. A point of the area's very edge whose cell holds none of the area belongs to the
    nearest quadrat.

    Examples
    --------
    >>> import shapely
    >>> grid = lay_grid(shapely.box(0, 0, 2, 1), 2, GridOptions(shape=(1, 2)))
    >>> count_in_quadrats([[0, 0], [1, 1], [2, 1]], grid).tolist()
    [1, 2]
    """
    return np.bincount(quadrats_of(points, grid), minlength=len(grid)).astype(np.int64)


def quadrats_of(points: ArrayLike, grid: Grid) -> NDArray[np.int64]:
    """Return which quadrat each point lies in, as `count_in_quadrats` counts it.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        Points in the study area, x, y in the unit of the grid.
    grid : Grid
        The quadrats.

    Returns
    -------
    ndarray of int, shape (n,)
        Positions in the grid, from 0.

    Examples
    --------
    >>> import shapely
    >>> grid = lay_grid(shapely.box(0, 0, 2, 1), 2, GridOptions(shape=(1, 2)))
    >>> quadrats_of([[0, 0], [1, 1], [2, 1]], grid).tolist()
    [0, 1, 1]
    """
    xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
    quadrat = grid.home[grid.cells.cell(xy)]
    for i in np.flatnonzero(quadrat < 0):
        away = shapely.distance(shapely.Point(xy[i]), np.array(grid.polygons, dtype=object))
        quadrat[i] = int(np.argmin(away))
    return np.asarray(quadrat, dtype=np.int64)


def _clipped(
    lattice: Lattice, area: BaseGeometry, options: GridOptions, unit: Unit, side: float | None
) -> Grid:
    """Clip the cells of a lattice by the area and join the small ones."""
    shapes = _inside(lattice.shapes(area), area)
    full = lattice.width * lattice.height
    sizes = shapely.area(shapes)
    sizes[sizes < 1e-9 * full] = 0.0
    whole = sizes >= _NEARLY_WHOLE * full
    home = joined(lattice, area, sizes, whole, options.join_below * full * _ROUNDED)
    kind: GridShape = "rectangle" if side is None else "square"
    return _assembled(lattice, shapes, home, whole, side, kind, full, unit)


def _lay_sectors(
    area: BaseGeometry, rings: tuple[int, int], unit: Unit, dish: Circle | None
) -> Grid:
    """Lay rings and sectors over a dish."""
    if dish is None:
        raise GridWrong(
            "--rings needs a dish, and this study area is none; use --quadrat or --grid."
        )
    sectors = Sectors(dish.x, dish.y, dish.radius, *rings)
    shapes = _inside(sectors.shapes(area), area)
    sizes, share = shapely.area(shapes), area.area / math.prod(rings)
    whole = np.abs(sizes - share) <= _EQUAL_SECTORS * share
    home = np.where(sizes > 0, np.arange(sizes.size), -1)
    return _assembled(sectors, shapes, home, whole, None, "sectors", share, unit)


def _inside(shapes: NDArray[np.object_], area: BaseGeometry) -> NDArray[np.object_]:
    """Return what each shape holds of the area, polygons only."""
    shapely.prepare(area)
    inside = shapes.copy()
    cut = ~shapely.covers(area, shapes)
    inside[cut] = shapely.intersection(shapes[cut], area)
    mixed = np.flatnonzero(shapely.get_type_id(inside) == shapely.GeometryType.GEOMETRYCOLLECTION)
    for k in mixed:
        parts = shapely.get_parts(inside[k])
        inside[k] = shapely.union_all(parts[shapely.area(parts) > 0])
    return inside


def _assembled(
    cells: Lattice | Sectors,
    shapes: NDArray[np.object_],
    home: NDArray[np.int64],
    whole: NDArray[np.bool_],
    side: float | None,
    kind: GridShape,
    full: float,
    unit: Unit,
) -> Grid:
    """Put the quadrats of a grid together from its cells."""
    names = np.unique(home[home >= 0])
    if len(names) < 2:
        raise GridWrong(
            "The grid leaves only 1 quadrat in the study area; choose smaller quadrats."
        )
    order = np.argsort(home, kind="stable")
    members = np.split(order, np.searchsorted(home[order], names))[1:]
    polygons = tuple(shapes[m[0]] if len(m) == 1 else shapely.union_all(shapes[m]) for m in members)
    alone = np.array([len(m) == 1 for m in members])
    centres = cells.centres()[names]
    return Grid(
        polygons,
        names // cells.columns,
        names % cells.columns,
        centres[:, 0],
        centres[:, 1],
        np.array([shapely.area(shapes[m]).sum() for m in members]),
        whole[names] & alone,
        side,
        kind,
        full,
        unit,
        cells.rows,
        cells.columns,
        int((home >= 0).sum()) - len(names),
        cells,
        np.where(home >= 0, np.searchsorted(names, home), -1),
    )
