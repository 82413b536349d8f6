"""How much of an area is left when it is laid over itself, moved by a step: the set covariance."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import lru_cache

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from scipy import fft
from shapely import affinity
from shapely.geometry.base import BaseGeometry

from analyse.coverage import covered

Floats = NDArray[np.float64]

_SIDES_OF_A_DISH = 32  # a polygon of fewer sides is no circle
_OUT_OF_ROUND = 0.002  # of the radius: how far the outline of a circle may stray
_CELLS = (512, 2048)  # fewest and most along the longer side, where there is no closed form
_CELLS_A_ROOT = 128  # in the root of the area, where an area is long or in scattered parts
_DIRECTIONS = 64
_STEPS = 200


@dataclass(frozen=True, slots=True)
class RectangleCovariance:
    """Set covariance of a rectangle with sides along x and y.

    Examples
    --------
    >>> RectangleCovariance(10.0, 6.0).at(np.array([1.0]), np.array([2.0])).tolist()
    [36.0]
    """

    width: float
    height: float

    def at(self, dx: Floats, dy: Floats) -> Floats:
        """Return the area shared with the copy moved by (dx, dy)."""
        across = np.maximum(self.width - np.abs(dx), 0.0)
        return np.asarray(across * np.maximum(self.height - np.abs(dy), 0.0))


@dataclass(frozen=True, slots=True)
class DiscCovariance:
    """Set covariance of a disc, which depends on the length of the step alone.

    Examples
    --------
    >>> DiscCovariance(1.0).along(np.array([0.0, 2.0])).round(6).tolist()
    [3.141593, 0.0]
    """

    radius: float

    def at(self, dx: Floats, dy: Floats) -> Floats:
        """Return the area shared with the copy moved by (dx, dy)."""
        return self.along(np.hypot(dx, dy))

    def along(self, distance: Floats) -> Floats:
        """Return the area shared with the copy moved by a distance in any direction."""
        half = np.minimum(distance / (2 * self.radius), 1.0)
        return np.asarray(2 * self.radius**2 * (np.arccos(half) - half * np.sqrt(1 - half**2)))


@dataclass(frozen=True, slots=True, eq=False)
class MaskCovariance:
    """Set covariance of any area, from a table of steps in whole cells.

    Parameters
    ----------
    cell : float
        Side of a cell.
    table : ndarray of shape (rows, 2 columns + 1)
        Shared area at dy = 0, 1, 2, ... cells and dx from -columns to columns cells.
    """

    cell: float
    table: Floats
    _middle: int = field(init=False, repr=False)

    def __post_init__(self) -> None:
        self.table.setflags(write=False)
        object.__setattr__(self, "_middle", self.table.shape[1] // 2)

    def __repr__(self) -> str:
        return f"MaskCovariance({self.table.shape[0]} x {self.table.shape[1]} steps)"

    def at(self, dx: Floats, dy: Floats) -> Floats:
        """Return the area shared with the copy moved by (dx, dy), linear between whole cells."""
        turn = np.where(np.asarray(dy) < 0, -1.0, 1.0)  # the same for a step and its opposite
        column = np.asarray(dx) * turn / self.cell + self._middle
        row = np.abs(dy) / self.cell
        rows, columns = self.table.shape
        beyond = (row >= rows - 1) | (column <= 0) | (column >= columns - 1)
        i = np.clip(row.astype(np.intp), 0, rows - 2)
        j = np.clip(column.astype(np.intp), 0, columns - 2)
        u, v = row - i, column - j
        t = self.table
        low = t[i, j] * (1 - v) + t[i, j + 1] * v
        high = t[i + 1, j] * (1 - v) + t[i + 1, j + 1] * v
        return np.where(beyond, 0.0, low * (1 - u) + high * u)


SetCovariance = RectangleCovariance | DiscCovariance | MaskCovariance


@lru_cache(maxsize=8)
def set_covariance(area: BaseGeometry) -> SetCovariance:
    """Return the set covariance of an area: in closed form for rectangles and dishes.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        Any polygon, with holes.

    Returns
    -------
    RectangleCovariance, DiscCovariance or MaskCovariance
        Each has ``at(dx, dy)``, the area of A and A moved by (dx, dy) together.

    Notes
    -----
    gamma(h) = area of (A and A + h). A rectangle has (a - |dx|)(b - |dy|), a disc that of two
    circles' lens. A polygon of 32 sides or more whose outline strays by at most 0.2 % of the
    radius from the circle of equal area counts as a disc. Any other area is laid on a grid of
    512 cells along its longer side (up to 2,048 for long or scattered areas), each cell with the exact share that is covered, and the sums
    of products at all steps come from one Fourier transform. The last few areas are remembered.

    References
    ----------
    Matheron, G. (1975). Random Sets and Integral Geometry. Wiley, New York (the geometric
    covariogram).
    Ohser, J. (1983). On estimators for the reduced second moment measure of point processes.
    Mathematische Operationsforschung und Statistik, Series Statistics 14, 63-71.

    Examples
    --------
    >>> import shapely
    >>> gamma = set_covariance(shapely.box(0, 0, 4, 2))
    >>> float(gamma.at(1.0, -0.5))
    4.5
    """
    sides = rectangle_sides(area)
    if sides is not None:
        return RectangleCovariance(*sides)
    disc = dish_circle(area)
    if disc is not None:
        return DiscCovariance(disc[2])
    return mask_covariance(area)


def mask_covariance(area: BaseGeometry) -> MaskCovariance:
    """Return the set covariance of an area from its mask, whatever its shape.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        Any polygon, with holes.

    Returns
    -------
    MaskCovariance

    Notes
    -----
    Products of cells that are partly covered fall short at steps below two cells, where gamma has
    its sharp top; there the value follows the straight line from the exact area at step 0 to the
    table at twice the step.

    Examples
    --------
    >>> leaf = shapely.Point(0, 0).buffer(10).difference(shapely.Point(3, 0).buffer(2))
    >>> shared = float(mask_covariance(leaf).at(np.array([0.0]), np.array([0.0]))[0])
    >>> abs(shared / leaf.area - 1) < 0.01
    True
    """
    x0, y0, x1, y1 = area.bounds
    longest = max(x1 - x0, y1 - y0)
    wanted = math.ceil(_CELLS_A_ROOT * longest / math.sqrt(area.area))
    cell = longest / min(max(wanted, _CELLS[0]), _CELLS[1])
    shape = (max(1, math.ceil((y1 - y0) / cell - 1e-9)), max(1, math.ceil((x1 - x0) / cell - 1e-9)))
    mask = covered(area, cell=cell, shape=shape)
    padded = [fft.next_fast_len(2 * size + 4, real=True) for size in shape]
    spectrum = fft.rfft2(mask, s=padded)
    shared = np.asarray(fft.irfft2(np.abs(spectrum) ** 2, s=padded)) * cell**2
    table = np.roll(shared, shape[1] + 1, axis=1)[: shape[0] + 2, : 2 * shape[1] + 3]
    table = np.maximum(table, 0.0)
    middle = shape[1] + 1
    rounded = table.copy()
    for i, j in ((0, 1), (0, -1), (1, -1), (1, 0), (1, 1)):
        if 2 * i < table.shape[0] and 0 <= middle + 2 * j < table.shape[1]:
            rounded[i, middle + j] = (area.area + table[2 * i, middle + 2 * j]) / 2
    rounded[0, middle] = area.area
    return MaskCovariance(cell, rounded)


def rectangle_sides(area: BaseGeometry) -> tuple[float, float] | None:
    """Return width and height of an area that is a rectangle along x and y, else None.

    Examples
    --------
    >>> rectangle_sides(shapely.box(0, 0, 10, 6))
    (10.0, 6.0)
    >>> rectangle_sides(shapely.Point(0, 0).buffer(1)) is None
    True
    """
    x0, y0, x1, y1 = area.bounds
    width, height = x1 - x0, y1 - y0
    return (width, height) if area.area >= width * height * (1 - 1e-9) else None


def dish_circle(area: BaseGeometry) -> tuple[float, float, float] | None:
    """Return centre and radius of the circle of equal area where an area is a disc, else None.

    Examples
    --------
    >>> x, y, radius = dish_circle(shapely.Point(43, 43).buffer(42, quad_segs=90))
    >>> round(x), round(y), round(radius, 2)
    (43, 43, 42.0)
    """
    parts = shapely.get_parts(area)
    if len(parts) != 1 or parts[0].interiors:
        return None
    outline = shapely.get_coordinates(parts[0].exterior)
    if len(outline) <= _SIDES_OF_A_DISH:
        return None
    centre, radius = np.array(area.centroid.coords[0]), math.sqrt(area.area / math.pi)
    along = np.concatenate([outline, (outline[1:] + outline[:-1]) / 2]) - centre
    stray = np.abs(np.hypot(along[:, 0], along[:, 1]) - radius).max()
    return (float(centre[0]), float(centre[1]), radius) if stray <= _OUT_OF_ROUND * radius else None


def longest_useful(area: BaseGeometry, covariance: SetCovariance, *, left: float) -> float:
    """Return the distance up to which a step in any direction leaves at least a share of the area.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        The area.
    covariance : set covariance
        Of that area.
    left : float
        Share that must be left, 0..1.

    Returns
    -------
    float
        In the unit of the area; at most its square root.

    Examples
    --------
    >>> square = shapely.box(0, 0, 10, 10)
    >>> round(longest_useful(square, set_covariance(square), left=0.5), 1)
    4.1
    """
    angle = np.pi * np.arange(_DIRECTIONS) / _DIRECTIONS
    distance = math.sqrt(area.area) * np.arange(1, _STEPS + 1) / _STEPS
    shared = covariance.at(np.outer(distance, np.cos(angle)), np.outer(distance, np.sin(angle)))
    enough = np.minimum.accumulate(shared.min(axis=1) >= left * area.area)
    return float(distance[max(int(enough.sum()) - 1, 0)])


def shared_with(area: BaseGeometry, steps: ArrayLike) -> Floats:
    """Return the set covariance at steps (n, 2) by cutting the polygons themselves: slow, exact.

    Examples
    --------
    >>> shared_with(shapely.box(0, 0, 10, 6), [(1, 2), (20, 0)]).tolist()
    [36.0, 0.0]
    """
    moved = [affinity.translate(area, dx, dy) for dx, dy in np.asarray(steps, dtype=np.float64)]
    return np.array([area.intersection(other).area for other in moved])
