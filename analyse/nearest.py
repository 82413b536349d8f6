"""How far each point lies from the nearest other one."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import cKDTree

Floats = NDArray[np.float64]


def nearest_distances(points: ArrayLike) -> Floats:
    """Return the distance of each point to its nearest neighbour.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in any unit.

    Returns
    -------
    ndarray of shape (n,)
        Infinite for a point that is alone.

    Examples
    --------
    >>> nearest_distances([[0, 0], [3, 4], [3, 5]]).tolist()
    [5.0, 1.0, 1.0]
    """
    xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
    if len(xy) < 2:
        return np.full(len(xy), np.inf)
    return np.asarray(cKDTree(xy).query(xy, k=[2])[0])[:, 0]


def mean_nearest(points: ArrayLike) -> float:
    """Return the mean distance to the nearest neighbour; NaN with fewer than 2 points.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in any unit.

    Returns
    -------
    float

    Examples
    --------
    >>> mean_nearest([[0, 0], [3, 4]])
    5.0
    """
    found = nearest_distances(points)
    return float(found.mean()) if len(found) > 1 else math.nan


def too_few(n: int) -> str:
    """Return why there is no distance to a neighbour.

    Examples
    --------
    >>> too_few(1)
    '1 point, and at least 2 are needed'
    """
    return f"{n} point{'' if n == 1 else 's'}, and at least 2 are needed"
