"""How does the variance-to-mean ratio change with the side of the quadrats."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from shapely.geometry.base import BaseGeometry

from analyse.cells import Lattice
from analyse.columns import hold_columns
from analyse.errors import GridWrong
from analyse.grid_options import GridOptions
from analyse.quadrats import Grid, count_in_quadrats, lay_grid
from detect.lengths import Length

STEPS = (1, 1.1, 1.25, 1.4, 1.6, 1.8, 2, 2.2, 2.5, 2.8, 3.2, 3.6, 4, 4.5, 5, 5.6, 6.3, 7, 8, 9)
FINE = 20  # sides from which every other step is left out
FEWEST_QUADRATS = 6  # left at the largest side; fewer say little of variation
_LEAST_EXPECTED = 0.5  # points a quadrat at the smallest side
_INDICES_AT_ONCE = 400_000


@dataclass(frozen=True, slots=True, eq=False)
class Sides:
    """Square quadrats of many sides, laid over one study area and ready for counting.

    Parameters
    ----------
    x : ndarray of shape (k,)
        Sides, increasing, in the unit of the area.
    quadrats : ndarray of int, shape (k,)
        How many quadrats each side gives.
    area : shapely Polygon or MultiPolygon
        The study area.

    Notes
    -----
    Make one with `Sides.of`. Each grid is centred on the bounding box of the area, its quadrats
    are clipped by the area, and clipped ones with less than a quarter of a full one are joined to
    neighbours, all as in `lay_grid`.
    """

    x: NDArray[np.float64]
    quadrats: NDArray[np.int64]
    area: BaseGeometry
    _start: NDArray[np.float64]
    _span: NDArray[np.float64]
    _cells: NDArray[np.float64]
    _first_cell: NDArray[np.int64]
    _home: NDArray[np.int64]
    _first: NDArray[np.int64]
    _share: NDArray[np.float64]

    def __post_init__(self) -> None:
        hold_columns(self, ("x", "quadrats"), length=len(self.x))
        hold_columns(self, ("_start", "_span", "_cells", "_first_cell", "_first"))
        hold_columns(self, ("_home", "_share"))

    def __len__(self) -> int:
        return len(self.x)

    def __repr__(self) -> str:
        return f"<Sides: {len(self)} from {self.x[0]:g} to {self.x[-1]:g}>"

    @classmethod
    def of(cls, area: BaseGeometry, n: int) -> Sides:
        """Lay quadrats of all sides that suit an area and a number of points.

        Parameters
        ----------
        area : shapely Polygon or MultiPolygon
            Study area, with holes.
        n : int
            Points in it.

        Returns
        -------
        Sides

        Raises
        ------
        GridWrong
            If no side leaves enough quadrats.

        Notes
        -----
        A rule of the area A and the number n alone, so that a test given n stays valid: the sides
        are round figures from sqrt(A / 2n), where a quadrat expects half a point, to that of 6
        quadrats; twenty in a power of ten, or ten where that would be more than 20 sides.
        Sides that leave fewer than 6 quadrats after joining, or would cut the box around the
        area into more than can be laid, are left out.
        """
        grids = []
        for side in _round_sides(area, n):
            try:
                grid = _grid(area, side)
            except GridWrong:  # more quadrats than can be laid
                continue
            if len(grid) >= FEWEST_QUADRATS:
                grids.append(grid)
        if not grids:
            raise GridWrong(
                f"No side of quadrats leaves {FEWEST_QUADRATS} of them for {n} points here;"
                " dispersion against side needs more points."
            )
        return _prepared(grids, area)

    def counts(self, points: ArrayLike) -> tuple[NDArray[np.int64], ...]:
        """Return the counts in the quadrats of each side.

        Parameters
        ----------
        points : array_like of shape (n, 2)
            Points in the area.

        Returns
        -------
        tuple of ndarray of int
            One array per side; each sums to n.
        """
        xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
        ends = zip(self._first, self._stops, strict=True)
        every = self._counted(xy)
        return tuple(every[first : stop - 1] for first, stop in ends)

    def vmr(self, points: ArrayLike) -> NDArray[np.float64]:
        """Return the variance-to-mean ratio at each side.

        Parameters
        ----------
        points : array_like of shape (n, 2)
            Points in the area, at least one.

        Returns
        -------
        ndarray of shape (k,)
            X2 / (q - 1) over all quadrats, with expected counts by area, as in
            `clipped_dispersion`; NaN without points.

        References
        ----------
        Greig-Smith, P. (1952). The use of random and contiguous quadrats in the study of the
        structure of plant communities. Annals of Botany 16, 293-316.

        Examples
        --------
        >>> import shapely
        >>> points = [(x + 0.5, y + 0.5) for x in range(10) for y in range(10)]
        >>> sides = Sides.of(shapely.box(0, 0, 10, 10), 100)
        >>> sides, sides.vmr(points)[sides.x == 2].round(2).tolist()
        (<Sides: 15 from 0.8 to 4>, [0.0])
        """
        xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
        n = len(xy)
        if n == 0:
            return np.full(len(self), np.nan)
        counts = self._counted(xy)
        squares = np.add.reduceat(counts * counts / self._share, self._first)
        return np.asarray((squares / n - n) / (self.quadrats - 1))

    @property
    def _stops(self) -> NDArray[np.int64]:
        """Where the counts of each side end; the last of each are points in no quadrat."""
        return np.append(self._first[1:], len(self._share))

    def _counted(self, xy: NDArray[np.float64]) -> NDArray[np.int64]:
        """Return the counts in all quadrats of all sides, one side after the other.

        A point of the area's very edge can lie in a cell of no quadrat; its side is counted anew.
        """
        total = np.zeros(len(self._share), dtype=np.int64)
        step = max(1, _INDICES_AT_ONCE // len(self))
        for start in range(0, len(xy), step):
            part = xy[start : start + step]
            column, row = (
                np.clip(
                    np.floor((part[:, d] - self._start[:, d, None]) / self._span[:, d, None]
                             * self._cells[:, d, None]),
                    0, self._cells[:, d, None] - 1)
                for d in (0, 1)
            )  # fmt: skip
            cell = (row * self._cells[:, :1] + column).astype(np.int64)
            cell += self._first_cell[:, None]
            total += np.bincount(self._home[cell].ravel(), minlength=len(total))
        for k in np.flatnonzero(total[self._stops - 1]):
            first, stop = self._first[k], self._stops[k]
            anew = count_in_quadrats(xy, _grid(self.area, float(self.x[k])))
            total[first:stop] = [*anew, 0]
        return total


def _round_sides(area: BaseGeometry, n: int) -> list[float]:
    """Return round sides from that of half a point to that of the fewest quadrats."""
    least = math.sqrt(_LEAST_EXPECTED * area.area / max(n, 1)) * (1 - 1e-9)
    most = math.sqrt(area.area / FEWEST_QUADRATS) * (1 + 1e-9)
    powers = range(math.floor(math.log10(least)), math.floor(math.log10(most)) + 1)
    for steps in (STEPS, STEPS[::2]):
        figures = [float(f"{step * 10.0**power:.12g}") for power in powers for step in steps]
        sides = [side for side in figures if least <= side <= most]
        if len(sides) <= FINE:
            break
    return sides


def _grid(area: BaseGeometry, side: float) -> Grid:
    """Return the grid of one side, laid as anywhere else."""
    return lay_grid(area, 0, GridOptions(side=Length(side, "mm")))


def _prepared(grids: list[Grid], area: BaseGeometry) -> Sides:
    """Return the sides with their look-ups one after the other in common arrays.

    Each side has one more place than quadrats, for points in cells of no quadrat.
    """
    first = np.cumsum([0, *(len(grid) + 1 for grid in grids)])[:-1]
    first_cell = np.cumsum([0, *(len(grid.home) for grid in grids)])[:-1]
    homes = [np.where(g.home < 0, len(g), g.home) + f for g, f in zip(grids, first, strict=True)]
    cells = [grid.cells for grid in grids if isinstance(grid.cells, Lattice)]
    return Sides(
        np.array([grid.side for grid in grids]),
        np.array([len(grid) for grid in grids]),
        area,
        np.array([[c.x0, c.y0] for c in cells]),
        np.array([[c.width * c.columns, c.height * c.rows] for c in cells]),
        np.array([[c.columns, c.rows] for c in cells], dtype=np.float64),
        first_cell,
        np.concatenate(homes),
        first,
        np.concatenate([np.append(grid.area / grid.area.sum(), 1.0) for grid in grids]),
    )
