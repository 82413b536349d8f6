"""The part of a photograph that holds the study area, on a grid small enough to work on."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
import shapely
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.averages import averaged
from detect.contrast import Mask, to_lab
from detect.errors import AreaWrong
from detect.photograph import Photograph

Span = tuple[int, int]


@dataclass(frozen=True, slots=True)
class WorkingGrid:
    """Where the working pixels of a photograph lie.

    Parameters
    ----------
    left, top, right, bottom : int
        The part of the photograph that is worked on, in its pixels; right and bottom excluded.
    width, height : int
        Working pixels across and down it.
    wanted : float
        Working pixels per photograph pixel asked for; whole ones make the true one differ a little.
    """

    left: int
    top: int
    right: int
    bottom: int
    width: int
    height: int
    wanted: float

    @property
    def shrink_x(self) -> float:
        """Working pixels per photograph pixel, across."""
        return self.width / (self.right - self.left)

    @property
    def shrink_y(self) -> float:
        """Working pixels per photograph pixel, down."""
        return self.height / (self.bottom - self.top)

    @property
    def shrink(self) -> float:
        """Working pixels per photograph pixel, the mean of both directions."""
        return float(np.sqrt(self.shrink_x * self.shrink_y))

    @property
    def pixels(self) -> int:
        """Number of working pixels."""
        return self.width * self.height


@dataclass(frozen=True, slots=True, eq=False)
class View:
    """The part of a photograph that holds the study area, on a working grid.

    Parameters
    ----------
    lab : ndarray of shape (height, width, 3), float32
        L* (0..100), a* and b* of each working pixel.
    inside : ndarray of bool, shape (height, width)
        Which working pixels' centres lie in the study area.
    shrink_x, shrink_y : float
        Working pixels per photograph pixel.
    left, top : float
        Where in the photograph the view's corner lies, in whole photograph pixels or parts of one.
    """

    lab: NDArray[np.float32]
    inside: Mask
    shrink_x: float
    shrink_y: float
    left: float
    top: float

    @property
    def shrink(self) -> float:
        """Working pixels per photograph pixel, the mean of both directions."""
        return float(np.sqrt(self.shrink_x * self.shrink_y))

    def to_photograph(
        self, x: NDArray[np.float64], y: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Map working positions to the photograph.

        Parameters
        ----------
        x, y : ndarray of shape (n,)
            Positions in working pixels, centres at whole numbers.

        Returns
        -------
        x, y : ndarray of shape (n,)
            The same positions in photograph pixels, centres at whole numbers.
        """
        return (
            (x + 0.5) / self.shrink_x - 0.5 + self.left,
            (y + 0.5) / self.shrink_y - 0.5 + self.top,
        )


def grid_of(photograph: Photograph, area: StudyArea, *, shrink: float) -> WorkingGrid:
    """Lay the working grid over the study area's box.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    shrink : float
        Working pixels per photograph pixel wanted, from 0 (excluded) to 1; whole working pixels
        make the true one differ a little.

    Returns
    -------
    WorkingGrid

    Raises
    ------
    AreaWrong
        If fewer than three columns or rows of the photograph lie in the area's box.
    """
    x0, y0, x1, y1 = area.polygon.bounds
    # Pixel k reaches from k - 0.5 to k + 0.5; what only touches the box stays out.
    left, top = max(0, int(np.floor(x0 + 0.5))), max(0, int(np.floor(y0 + 0.5)))
    right = min(photograph.width, int(np.ceil(x1 - 0.5)) + 1)
    bottom = min(photograph.height, int(np.ceil(y1 - 0.5)) + 1)
    if right - left < 3 or bottom - top < 3:
        raise AreaWrong("The study area lies outside the photograph; check its coordinates.")
    if shrink <= 0.25:  # sides of an even number are averaged several times as fast
        right = min(photograph.width, right + (right - left) % 2)
        bottom = min(photograph.height, bottom + (bottom - top) % 2)
    width, height = right - left, bottom - top
    if shrink < 1.0:
        width, height = max(1, round(width * shrink)), max(1, round(height * shrink))
    return WorkingGrid(left, top, right, bottom, width, height, shrink)


def view_of(photograph: Photograph, area: StudyArea, *, shrink: float) -> View:
    """Cut out the study area's box and reduce it, in L*, a*, b*.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    shrink : float
        Working pixels per photograph pixel wanted, as for `grid_of`.

    Returns
    -------
    View

    Raises
    ------
    AreaWrong
        If fewer than three columns or rows of the photograph lie in the area's box.
    """
    grid = grid_of(photograph, area, shrink=shrink)
    box = (grid.left, grid.top, grid.right, grid.bottom)
    return _view(to_lab(photograph.pixels(shrink=shrink, box=box)), area, grid, (0, 0))


def part_of_view(
    photograph: Photograph, area: StudyArea, grid: WorkingGrid, columns: Span, rows: Span
) -> View:
    """Return a part of the view that `view_of` would return, reading no more than that part.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    grid : WorkingGrid
        Of the whole view.
    columns, rows : tuple of int
        First working column or row of the part, and the one after its last.

    Returns
    -------
    View
        Its pixels are those of the whole view, but for rounding.
    """
    shape = (grid.right - grid.left, grid.bottom - grid.top, grid.width, grid.height)
    pixels = averaged(photograph, (grid.left, grid.top), shape, columns, rows)
    return _view(to_lab(pixels), area, grid, (columns[0], rows[0]))


def _view(
    lab: NDArray[np.float32], area: StudyArea, grid: WorkingGrid, corner: tuple[int, int]
) -> View:
    """Lay the study area over working pixels whose first is at `corner` of the grid."""
    height, width = lab.shape[:2]
    left, top = grid.left + corner[0] / grid.shrink_x, grid.top + corner[1] / grid.shrink_y
    inside = _mask(area, width, height, grid.shrink_x, grid.shrink_y, left, top)
    return View(lab, inside, grid.shrink_x, grid.shrink_y, left, top)


def _mask(
    area: StudyArea, width: int, height: int, sx: float, sy: float, left: float, top: float
) -> Mask:
    """Which working pixels' centres lie in the area (polygon filling in 1/16 pixels)."""
    mask = np.zeros((height, width), dtype=np.uint8)
    # What lies far outside would not fit into the numbers of the filling.
    near = shapely.box(
        left - 4 / sx - 1, top - 4 / sy - 1, left + (width + 4) / sx, top + (height + 4) / sy
    )
    for polygon in shapely.get_parts(area.polygon.intersection(near)):
        if polygon.geom_type != "Polygon":
            continue
        for value, rings in ((1, [polygon.exterior]), (0, polygon.interiors)):
            for ring in rings:
                points = (shapely.get_coordinates(ring) - (left, top) + 0.5) * (sx, sy) - 0.5
                fixed = np.rint(points * 16).astype(np.int32)
                cv2.fillPoly(mask, [fixed], value, lineType=cv2.LINE_8, shift=4)
    return mask > 0
