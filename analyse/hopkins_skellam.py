"""How empty random places are, against how near points lie to each other: Hopkins and Skellam."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import cKDTree

from analyse.nearest import nearest_distances, too_few
from analyse.nulls import CompleteRandomness
from analyse.placed import Area, placed

Floats = NDArray[np.float64]

_COINCIDE = "every point coincides with another"


@dataclass(frozen=True, slots=True)
class HopkinsSkellam:
    """Distances from random places to points against those from points to points.

    Parameters
    ----------
    n : int
        Points.
    tests : int
        Random places.
    value : float
        A: about 1 at random, above clumped, below even.
    reason : str
        Why the value is NaN; empty where it is not.
    """

    n: int
    tests: int
    value: float
    reason: str = ""

    def __repr__(self) -> str:
        if self.reason:
            return f"<HopkinsSkellam: {self.reason}>"
        return f"<HopkinsSkellam A = {self.value:.4g}, {self.n} points, {self.tests} places>"


def hopkins_skellam(points: ArrayLike, area: Area, rng: np.random.Generator) -> HopkinsSkellam:
    """Return Hopkins and Skellam's A: how empty random places are against how near points lie.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        Study area; four numbers are x0, y0, x1, y1 of a rectangle.
    rng : numpy.random.Generator
        Source of the random places, of which there are as many as points.

    Returns
    -------
    HopkinsSkellam
        NaN with a reason for fewer than 2 points, and where every point coincides with another.

    Raises
    ------
    AreaWrong
        If the area is unusable.
    ValueError
        If a point is not finite or outside.

    Notes
    -----
    A = sum of squared distances from random places to the nearest point / the same from points to
    their nearest neighbours. Its law at random as published supposes no edge and distances that
    are independent, so p is simulated here.

    References
    ----------
    Hopkins, B. and Skellam, J. G. (1954). A new method for determining the type of distribution
    of plant individuals. Annals of Botany 18, 213-227.

    Examples
    --------
    >>> import numpy as np
    >>> grid = np.stack(np.meshgrid(range(9), range(9)), axis=-1).reshape(-1, 2)
    >>> hopkins_skellam(grid, (-0.5, -0.5, 8.5, 8.5), np.random.default_rng(1))
    <HopkinsSkellam A = 0.1477, 81 points, 81 places>
    """
    xy, region = placed(points, area)
    n = len(xy)
    if n < 2:
        return HopkinsSkellam(n, 0, math.nan, too_few(n))
    places = CompleteRandomness(region).draw(n, rng)
    empty = np.asarray(cKDTree(xy).query(places)[0])
    value, reason = against_neighbours(empty, nearest_distances(xy)), ""
    if math.isinf(value):
        value, reason = math.nan, _COINCIDE
    return HopkinsSkellam(n, n, value, reason)


def against_neighbours(empty: Floats, nearest: Floats) -> float:
    """Return the mean square of distances from places over that from points; infinite over 0.

    Examples
    --------
    >>> against_neighbours(np.array([1.0, 3.0]), np.array([1.0, 2.0]))
    2.0
    """
    apart = float(np.mean(nearest**2))
    return float(np.mean(empty**2)) / apart if apart > 0 else math.inf
