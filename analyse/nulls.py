"""What points chance alone would give in any area."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from analyse.columns import hold_columns

_POINTS_AT_ONCE = 1_000_000
_COARSEST, _FINEST = 6, 11  # halvings of the bounding box
_MOST_EDGE = 0.04  # share of cells on the edge of the area with which halving ends
_MOST_CELLS = 120_000


class Null(Protocol):
    """A law of point patterns to be judged against: its name, and a way to draw n points.

    Examples
    --------
    >>> isinstance(CompleteRandomness(shapely.box(0, 0, 1, 1)).name, str)
    True
    """

    @property
    def name(self) -> str:
        """What the law is called in outputs."""
        ...

    def draw(self, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
        """Return n points as (n, 2), from this source of randomness alone."""
        ...


@dataclass(frozen=True, slots=True, eq=False)
class CompleteRandomness:
    """Points placed independently and uniformly in an area: complete spatial randomness given n.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        Any polygon, with holes.

    Raises
    ------
    ValueError
        If the area encloses nothing.

    Notes
    -----
    The area is cut into cells once. A point is uniform in a cell drawn among those that hold any
    of the area, and only in a cell that the outline crosses it is asked whether it lies within.
    That is exactly uniform, like `random_points`, and many times as fast.

    References
    ----------
    Diggle, P. J. (1983). Statistical Analysis of Spatial Point Patterns. Academic Press, London,
    section 2.1: the binomial process, complete spatial randomness given the number of points.

    Examples
    --------
    >>> import shapely
    >>> null = CompleteRandomness(shapely.Point(0, 0).buffer(43))
    >>> null, null.draw(3, np.random.default_rng(1)).shape
    (<CompleteRandomness in an area of 5799>, (3, 2))
    """

    area: BaseGeometry
    _corners: NDArray[np.float64] = field(init=False)
    _cell: NDArray[np.float64] = field(init=False)
    _inner: int = field(init=False)

    def __post_init__(self) -> None:
        _check_encloses(self.area)
        corners, cell, inner = _cells_of(self.area)
        for name, value in (("_corners", corners), ("_cell", cell), ("_inner", inner)):
            object.__setattr__(self, name, value)
        hold_columns(self, ("_corners", "_cell"))

    def __repr__(self) -> str:
        return f"<CompleteRandomness in an area of {self.area.area:.4g}>"

    @property
    def name(self) -> str:
        """What the law is called in outputs."""
        return "complete spatial randomness"

    def draw(self, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
        """Return n random points.

        Parameters
        ----------
        n : int
            How many points, 0 or more.
        rng : numpy.random.Generator
            Source of randomness.

        Returns
        -------
        ndarray of shape (n, 2)
            x, y in the unit of the area.
        """
        _check_number(n)
        shapely.prepare(self.area)
        share = self.area.area / (len(self._corners) * self._cell.prod())
        found, missing = [np.empty((0, 2))], n
        while missing > 0:
            tries = min(_POINTS_AT_ONCE, math.ceil(missing / share + 2 * math.sqrt(missing)))
            cells = rng.integers(len(self._corners), size=tries)
            xy = rng.random((tries, 2))
            xy *= self._cell
            xy += self._corners[cells]
            found.append(self._within(xy, cells)[:missing])
            missing -= len(found[-1])
        return np.concatenate(found)

    def _within(self, xy: NDArray[np.float64], cells: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return the points that lie in the area; those in inner cells do."""
        asked = np.flatnonzero(cells >= self._inner)
        inside = shapely.contains_xy(self.area, xy[asked, 0], xy[asked, 1])
        return np.delete(xy, asked[~inside], axis=0)


def random_points(area: BaseGeometry, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Return points placed uniformly at random in an area.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        Any polygon, with holes.
    n : int
        How many points.
    rng : numpy.random.Generator
        Source of randomness.

    Returns
    -------
    ndarray of shape (n, 2)
        x, y in the unit of the area.

    Raises
    ------
    ValueError
        If `n` is negative or the area encloses nothing.

    Notes
    -----
    Points are drawn in the bounding box and kept where they fall in the area, which is exactly
    uniform. For many patterns in one area `CompleteRandomness` is faster.

    Examples
    --------
    >>> import shapely
    >>> random_points(shapely.box(0, 0, 2, 1), 3, np.random.default_rng(1)).shape
    (3, 2)
    """
    _check_number(n)
    _check_encloses(area)
    x0, y0, x1, y1 = area.bounds
    share = area.area / ((x1 - x0) * (y1 - y0))
    shapely.prepare(area)
    found, missing = [np.empty((0, 2))], n
    while missing > 0:
        tries = min(_POINTS_AT_ONCE, math.ceil(missing / share * 1.1) + 8)
        xy = rng.uniform((x0, y0), (x1, y1), (tries, 2))
        found.append(xy[shapely.contains_xy(area, xy[:, 0], xy[:, 1])][:missing])
        missing -= len(found[-1])
    return np.concatenate(found)


def _cells_of(area: BaseGeometry) -> tuple[NDArray[np.float64], NDArray[np.float64], int]:
    """Return the corners of the cells that hold any of the area, their size, and how many are inner.

    The bounding box is halved both ways until few cells lie on the edge; inner cells come first.
    """
    shapely.prepare(area)
    bounds = np.array(area.bounds).reshape(2, 2)
    inner, edge = np.empty((0, 2), dtype=np.int64), np.zeros((1, 2), dtype=np.int64)
    halvings = 0
    while True:
        cell = (bounds[1] - bounds[0]) / 2.0**halvings
        low = bounds[0] + edge * cell
        boxes = shapely.box(*low.T, *np.minimum(low + cell, bounds[1]).T)
        covered = shapely.covers(area, boxes)
        inner = np.concatenate([inner, edge[covered]])
        edge = edge[~covered & shapely.intersects(area, boxes)]
        few = len(edge) <= _MOST_EDGE * len(inner) and halvings >= _COARSEST
        full = 4 * (len(inner) + len(edge)) > _MOST_CELLS
        if not len(edge) or few or full or halvings == _FINEST:
            corners = bounds[0] + np.concatenate([inner, edge]) * cell
            return corners, cell, len(inner)
        inner, edge, halvings = _halved(inner), _halved(edge), halvings + 1


def _halved(cells: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the four cells that each cell is cut into."""
    quarters = np.array([[0, 0], [0, 1], [1, 0], [1, 1]])
    return np.asarray((2 * cells[:, None, :] + quarters).reshape(-1, 2))


def _check_number(n: int) -> None:
    """Refuse a negative number of points."""
    if n < 0:
        raise ValueError(f"the number of points must be 0 or more, not {n}")


def _check_encloses(area: BaseGeometry) -> None:
    """Refuse an area of no extent."""
    if not area.area > 0:
        raise ValueError("the area encloses nothing")
