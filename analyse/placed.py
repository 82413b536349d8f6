"""Which points, in which area, are fit to be measured."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry.base import BaseGeometry

from analyse.region import check_area, rectangle

Area = BaseGeometry | Sequence[float]


def placed(points: ArrayLike, area: Area) -> tuple[NDArray[np.float64], BaseGeometry]:
    """Return points and their area, checked.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area; none are taken as a table of length 0.
    area : shapely Polygon or MultiPolygon, or four numbers
        Four numbers are x0, y0, x1, y1 of a rectangle.

    Returns
    -------
    tuple of ndarray and shapely geometry

    Raises
    ------
    AreaWrong
        If the area is unusable.
    ValueError
        If the points are no pairs of finite numbers, or one lies outside the area.

    Examples
    --------
    >>> points, area = placed([[1, 1]], (0, 0, 2, 2))
    >>> points.shape, area.area
    ((1, 2), 4.0)
    """
    region = area if isinstance(area, BaseGeometry) else rectangle([float(v) for v in area])
    check_area(region)
    given = np.asarray(points, dtype=np.float64)
    if given.size and (given.ndim != 2 or given.shape[1] != 2):
        raise ValueError(f"points must be rows of x and y, not of shape {given.shape}")
    xy = given.reshape(-1, 2)
    if not np.isfinite(xy).all():
        raise ValueError("a point is not finite")
    shapely.prepare(region)
    outside = int((~shapely.intersects_xy(region, xy[:, 0], xy[:, 1])).sum())
    if outside:
        raise ValueError(
            f"{outside} of {len(xy)} points lie outside the area; leave them out first"
        )
    return xy, region


def distances_given(r: ArrayLike, *, above: bool = False) -> NDArray[np.float64]:
    """Return distances as a column of finite numbers of 0 or more, or above 0, or refuse them.

    Examples
    --------
    >>> distances_given(2).tolist(), distances_given([0, 1.5]).tolist()
    ([2.0], [0.0, 1.5])
    """
    distances = np.atleast_1d(np.asarray(r, dtype=np.float64))
    fit = np.isfinite(distances) & ((distances > 0) if above else (distances >= 0))
    if distances.ndim != 1 or not fit.all():
        raise ValueError(f"distances must be finite and {'above 0' if above else '0 or more'}")
    return distances
