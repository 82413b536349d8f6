"""The part of a photograph that holds the study area, on a grid small enough to work on."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
import shapely
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.contrast import Mask, to_lab
from detect.errors import AreaWrong
from detect.photograph import Photograph


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
    left, top : int
        The photograph's pixel at the working grid's corner.
    """

    lab: NDArray[np.float32]
    inside: Mask
    shrink_x: float
    shrink_y: float
    left: int
    top: int

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


def view_of(photograph: Photograph, area: StudyArea, *, shrink: float) -> View:
    """Cut out the study area's box and reduce it, in L*, a*, b*.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    shrink : float
        Working pixels per photograph pixel wanted, from 0 (excluded) to 1; whole working pixels
        make the true one differ a little, which the view records.

    Returns
    -------
    View

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
    lab = to_lab(photograph.pixels(shrink=shrink, box=(left, top, right, bottom)))
    height, width = lab.shape[:2]
    shrink_x, shrink_y = width / (right - left), height / (bottom - top)
    inside = _mask(area, width, height, shrink_x, shrink_y, left, top)
    return View(lab, inside, shrink_x, shrink_y, left, top)


def _mask(
    area: StudyArea, width: int, height: int, sx: float, sy: float, left: int, top: int
) -> Mask:
    """Which working pixels' centres lie in the area (polygon filling in 1/16 pixels)."""
    mask = np.zeros((height, width), dtype=np.uint8)
    polygons = getattr(area.polygon, "geoms", [area.polygon])
    for polygon in polygons:
        for value, rings in ((1, [polygon.exterior]), (0, polygon.interiors)):
            for ring in rings:
                points = (shapely.get_coordinates(ring) - (left, top) + 0.5) * (sx, sy) - 0.5
                fixed = np.rint(points * 16).astype(np.int32)
                cv2.fillPoly(mask, [fixed], value, lineType=cv2.LINE_8, shift=4)
    return mask > 0
