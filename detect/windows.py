"""From which parts a picture is learned: the whole, or windows spread over it."""

from __future__ import annotations

import numpy as np

from detect.area import StudyArea
from detect.photograph import Photograph
from detect.view import View, WorkingGrid, grid_of, part_of_view, view_of

# Windows that teach are this many of the largest diameters wide, within limits.
_WINDOW, _WINDOW_SIDES = 8.0, (448, 1024)


def views_that_teach(
    photograph: Photograph, area: StudyArea, shrink: float, largest_px: float, taught_by: int
) -> list[View]:
    """Return the views a picture is learned from: the whole, or windows spread evenly over it.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    shrink : float
        Working pixels per photograph pixel.
    largest_px : float
        Largest diameter in working pixels.
    taught_by : int
        Working pixels above which windows stand for the whole, and which they then have together.

    Returns
    -------
    list of View
    """
    grid = grid_of(photograph, area, shrink=shrink)
    if grid.pixels <= taught_by:
        return [view_of(photograph, area, shrink=shrink)]
    side = int(np.clip(_WINDOW * largest_px, *_WINDOW_SIDES))
    side = min(side, grid.width, grid.height)
    corners = _spread(area, grid, side, max(4, taught_by // side**2))
    return [part_of_view(photograph, area, grid, (x, x + side), (y, y + side)) for x, y in corners]


def _spread(area: StudyArea, grid: WorkingGrid, side: int, count: int) -> list[tuple[int, int]]:
    """Corners of windows on an even lattice: as many in the study area as wanted at most, or fit."""
    most = (max(1, grid.width // side), max(1, grid.height // side))
    usable: list[tuple[int, int]] = []
    for lattice in range(1, 1 + max(most)):
        across, down = (min(lattice, n) for n in most)
        # Each window lies in the middle of its cell of the lattice.
        xs = ((np.arange(across) + 0.5) / across * grid.width - 0.5 * side).astype(int)
        ys = ((np.arange(down) + 0.5) / down * grid.height - 0.5 * side).astype(int)
        corners = [(int(x), int(y)) for y in ys for x in xs]
        middle = (np.array(corners) + 0.5 * side) / (grid.shrink_x, grid.shrink_y)
        within = area.contains(middle + np.array([grid.left, grid.top]))
        more = [corner for corner, inside in zip(corners, within, strict=True) if inside]
        if len(more) > count and usable:
            break
        usable = more or usable
    return usable or corners
