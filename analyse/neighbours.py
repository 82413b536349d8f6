"""How far is the nearest other point on average, against what chance gives: Clark and Evans.

One function per correction for the edge. Where a method needs more points than there are, its
values are NaN and `reason` says why.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special
from scipy.spatial import cKDTree
from shapely.geometry.base import BaseGeometry

from analyse.errors import AreaUnfit
from analyse.hopkins_skellam import HopkinsSkellam as HopkinsSkellam
from analyse.hopkins_skellam import hopkins_skellam as hopkins_skellam
from analyse.nearest import mean_nearest as mean_nearest
from analyse.nearest import nearest_distances as nearest_distances
from analyse.nearest import too_few
from analyse.placed import Area, placed
from analyse.set_covariance import rectangle_sides

Floats = NDArray[np.float64]
EdgeCorrection = Literal["none", "Donnelly", "torus"]

# Standard error of the mean of n independent distances, times sqrt(n lambda), as Clark and Evans
# (1954) print it; exactly it is sqrt((4 - pi) / (4 pi)) = .2613614.
_SPREAD = 0.26136


@dataclass(frozen=True, slots=True)
class ClarkEvans:
    """The mean distance to the nearest neighbour against that at random.

    Parameters
    ----------
    n : int
        Points.
    mean : float
        Mean distance to the nearest other point, in the unit of the area.
    expected : float
        The same at random.
    ratio : float
        R, mean over expected: about 1 at random, below clumped, above even.
    z : float
        (mean - expected) / standard error, near standard normal at random.
    p_clumped, p_even, p_two_sided : float
        Normal p: lower tail, upper tail, and twice the smaller (at most 1).
    correction : {"none", "Donnelly", "torus"}
        How the edge was allowed for.
    reason : str
        Why the values are NaN; empty where they are not.
    """

    n: int
    mean: float
    expected: float
    ratio: float
    z: float
    p_clumped: float
    p_even: float
    p_two_sided: float
    correction: EdgeCorrection
    reason: str = ""

    def __repr__(self) -> str:
        if self.reason:
            return f"<ClarkEvans: {self.reason}>"
        return f"<ClarkEvans R = {self.ratio:.4g}, z = {self.z:.3g}, {self.n} points, edge {self.correction}>"


def clark_evans(points: ArrayLike, area: Area) -> ClarkEvans:
    """Return Clark and Evans' R without a correction for the edge.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        Study area; four numbers are x0, y0, x1, y1 of a rectangle.

    Returns
    -------
    ClarkEvans
        NaN with a reason for fewer than 2 points.

    Raises
    ------
    AreaWrong
        If the area is unusable.
    ValueError
        If a point is not finite or outside.

    Notes
    -----
    Expected at random is 1 / (2 sqrt(lambda)), standard error 0.26136 / sqrt(n lambda), with
    lambda = n / A. Neighbours beyond the edge are not seen, so R is too large and even patterns
    are found too often, the more so the fewer the points; use `donnelly` in a rectangle, and a
    simulated p elsewhere.

    References
    ----------
    Clark, P. J. and Evans, F. C. (1954). Distance to nearest neighbor as a measure of spatial
    relationships in populations. Ecology 35, 445-453.

    Examples
    --------
    >>> from analyse.neighbours import clark_evans
    >>> clark_evans([[1, 1], [1, 3], [3, 1], [3, 3]], (0, 0, 4, 4))
    <ClarkEvans R = 2, z = 3.83, 4 points, edge none>
    """
    xy, region = placed(points, area)
    return _judged(len(xy), mean_nearest(xy), *_at_random(len(xy), region.area), "none")


def clark_evans_torus(points: ArrayLike, area: Area) -> ClarkEvans:
    """Return Clark and Evans' R with opposite sides of a rectangle joined, as a check.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        A rectangle along x and y.

    Returns
    -------
    ClarkEvans
        NaN with a reason for fewer than 2 points.

    Raises
    ------
    AreaUnfit
        If the area is no rectangle along x and y.
    ValueError
        If a point is not finite or outside.

    References
    ----------
    Clark, P. J. and Evans, F. C. (1954). Distance to nearest neighbor as a measure of spatial
    relationships in populations. Ecology 35, 445-453.
    Ripley, B. D. (1981). Spatial Statistics. Wiley, New York (the torus).

    Examples
    --------
    >>> clark_evans_torus([[1, 1], [1, 3], [3, 1], [3, 3]], (0, 0, 4, 4)).ratio
    2.0
    """
    xy, region = placed(points, area)
    sides = _rectangle(region, "The torus")
    mean = math.nan
    if len(xy) > 1:
        wrapped = np.mod(xy - region.bounds[:2], sides)
        wrapped[wrapped >= sides] = 0.0
        tree = cKDTree(wrapped, boxsize=np.array(sides))
        mean = float(np.asarray(tree.query(wrapped, k=[2])[0]).mean())
    return _judged(len(xy), mean, *_at_random(len(xy), region.area), "torus")


def donnelly(points: ArrayLike, area: Area) -> ClarkEvans:
    """Return Clark and Evans' R with Donnelly's correction for the edge of a rectangle.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        A rectangle along x and y.

    Returns
    -------
    ClarkEvans
        NaN with a reason for fewer than 2 points.

    Raises
    ------
    AreaUnfit
        If the area is no rectangle along x and y.
    ValueError
        If a point is not finite or outside.

    Notes
    -----
    With perimeter P the mean at random is .5 sqrt(A/n) + (.0514 + .041/sqrt(n)) P/n, and its
    variance .0703 A/n^2 + .037 P sqrt(A/n^5), which is that of the mean already.

    References
    ----------
    Donnelly, K. P. (1978). Simulations to determine the variance and edge effect of total nearest
    neighbour distance. In: Hodder, I. (ed.), Simulation Methods in Archaeology. Cambridge
    University Press, 91-95.

    Examples
    --------
    >>> donnelly([[1, 1], [1, 3], [3, 1], [3, 3]], (0, 0, 4, 4))
    <ClarkEvans R = 1.553, z = 1.88, 4 points, edge Donnelly>
    """
    xy, region = placed(points, area)
    width, height = _rectangle(region, "Donnelly's correction")
    n, perimeter, size = max(len(xy), 1), 2 * (width + height), width * height
    expected = 0.5 * math.sqrt(size / n) + (0.0514 + 0.041 / math.sqrt(n)) * perimeter / n
    variance = 0.0703 * size / n**2 + 0.037 * perimeter * math.sqrt(size / n**5)
    return _judged(len(xy), mean_nearest(xy), expected, math.sqrt(variance), "Donnelly")


def _rectangle(region: BaseGeometry, method: str) -> tuple[float, float]:
    """Return width and height of a rectangle, or refuse any other area."""
    sides = rectangle_sides(region)
    if sides is None:
        raise AreaUnfit(
            f"{method} is for rectangles along x and y, not for other areas; use a simulated p there."
        )
    return sides


def _at_random(n: int, size: float) -> tuple[float, float]:
    """Return the mean distance at random without an edge, and its standard error."""
    density = max(n, 1) / size
    return 0.5 / math.sqrt(density), _SPREAD / math.sqrt(max(n, 1) * density)


def _judged(
    n: int, mean: float, expected: float, error: float, correction: EdgeCorrection
) -> ClarkEvans:
    """Return the mean distance with its z and normal p."""
    if n < 2:
        nothing = (math.nan,) * 7
        return ClarkEvans(n, *nothing, correction, too_few(n))
    z = (mean - expected) / error
    low, high = float(special.ndtr(z)), float(special.ndtr(-z))
    two_sided = min(1.0, 2 * min(low, high))
    return ClarkEvans(n, mean, expected, mean / expected, z, low, high, two_sided, correction)
