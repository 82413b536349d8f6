"""Which share of points has a neighbour within each distance (G), which share of places a point (F).

One function per correction for the edge; the edges of holes count. All are NaN where nothing is
left to estimate from.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import cKDTree
from shapely.geometry.base import BaseGeometry

from analyse.boundary import boundary_distance, eroded_area
from analyse.nearest import nearest_distances
from analyse.nulls import CompleteRandomness
from analyse.placed import Area, distances_given, placed

Floats = NDArray[np.float64]


def g_function(points: ArrayLike, area: Area, r: ArrayLike) -> Floats:
    """Return the nearest-neighbour function G with Hanisch's correction.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        Study area; four numbers are x0, y0, x1, y1 of a rectangle.
    r : array_like of shape (k,)
        Distances, 0 or more.

    Returns
    -------
    ndarray of shape (k,)
        0 to 1; NaN with fewer than 2 points, and where no point lies nearer to a neighbour than
        to the edge.

    Raises
    ------
    ValueError
        If a point is not finite or outside, or a distance negative.

    Notes
    -----
    Points nearer to the edge than to a neighbour do not count, as an unseen one may be nearer.
    A point whose neighbour is at d counts 1 / (area that lies at least d from the edge); G is the
    share of that sum with d <= r.

    References
    ----------
    Hanisch, K.-H. (1984). Some remarks on estimators of the distribution function of nearest
    neighbour distance in stationary spatial point processes. Mathematische Operationsforschung
    und Statistik, Series Statistics 15, 409-412.

    Examples
    --------
    >>> g_function([[4, 4], [4, 5], [6, 5]], (0, 0, 10, 10), [0.5, 1, 2]).round(3).tolist()
    [0.0, 0.529, 1.0]
    """
    xy, region = placed(points, area)
    distances = distances_given(r)
    nearest = nearest_distances(xy)
    inner = nearest[nearest <= boundary_distance(xy, region)]
    if not len(inner):
        return np.full(len(distances), np.nan)
    left = np.array([eroded_area(region, depth) for depth in inner])
    weight = 1 / np.maximum(left, 1e-9 * region.area)
    found = _up_to(np.append(distances, np.inf), inner, weight)
    return np.asarray(found[:-1] / found[-1])


def g_border(points: ArrayLike, area: Area, r: ArrayLike) -> Floats:
    """Return G from those points alone that lie at least r from the edge (the reduced sample).

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        Study area; four numbers are x0, y0, x1, y1 of a rectangle.
    r : array_like of shape (k,)
        Distances, 0 or more.

    Returns
    -------
    ndarray of shape (k,)
        NaN where no point is so far from the edge; it may fall as r grows.

    Raises
    ------
    ValueError
        If a point is not finite or outside, or a distance negative.

    References
    ----------
    Ripley, B. D. (1988). Statistical Inference for Spatial Processes. Cambridge University Press,
    chapter 3.

    Examples
    --------
    >>> g_border([[4, 4], [4, 5], [6, 5]], (0, 0, 10, 10), [0.5, 1, 2]).round(3).tolist()
    [0.0, 0.667, 1.0]
    """
    xy, region = placed(points, area)
    if len(xy) < 2:
        return np.full(len(distances_given(r)), np.nan)
    return _reduced(distances_given(r), nearest_distances(xy), boundary_distance(xy, region))


def f_function(
    points: ArrayLike, area: Area, r: ArrayLike, *, places: ArrayLike | int = 10_000, seed: int = 1
) -> Floats:
    """Return the empty-space function F with Chiu and Stoyan's correction.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        Study area; four numbers are x0, y0, x1, y1 of a rectangle.
    r : array_like of shape (k,)
        Distances, 0 or more.
    places : array_like of shape (m, 2) or int
        Places from which the nearest point is looked for, or how many to draw at random.
    seed : int
        Of the places, where they are drawn.

    Returns
    -------
    ndarray of shape (k,)
        NaN without points.

    Raises
    ------
    ValueError
        If a point or a place is not finite or outside, a distance negative, or there is no place.

    Notes
    -----
    Places nearer to the edge than to a point do not count. A place whose point is at e counts
    1 / (number of places that lie at least e from the edge), which estimates the area there.

    References
    ----------
    Chiu, S. N. and Stoyan, D. (1998). Estimators of distance distributions for spatial patterns.
    Statistica Neerlandica 52, 239-246.

    Examples
    --------
    >>> f_function([[5, 5]], (0, 0, 10, 10), [2], places=[[4, 5], [5, 9], [7, 7]]).round(3).tolist()
    [0.333]
    """
    xy, region = placed(points, area)
    distances = distances_given(r)
    where, empty = _places(xy, region, places, seed)
    depth = boundary_distance(where, region)
    inner = empty[empty <= depth]
    rising = np.sort(depth)
    deeper = len(rising) - np.searchsorted(rising, inner, "left")
    found = _up_to(distances, inner, 1 / deeper)
    return found if len(xy) else np.full(len(distances), math.nan)


def f_border(
    points: ArrayLike, area: Area, r: ArrayLike, *, places: ArrayLike | int = 10_000, seed: int = 1
) -> Floats:
    """Return F from those places alone that lie at least r from the edge (the reduced sample).

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        Study area; four numbers are x0, y0, x1, y1 of a rectangle.
    r : array_like of shape (k,)
        Distances, 0 or more.
    places : array_like of shape (m, 2) or int
        Places from which the nearest point is looked for, or how many to draw at random.
    seed : int
        Of the places, where they are drawn.

    Returns
    -------
    ndarray of shape (k,)
        NaN without points, and where no place is so far from the edge; it may fall as r grows.

    Raises
    ------
    ValueError
        If a point or a place is not finite or outside, a distance negative, or there is no place.

    References
    ----------
    Ripley, B. D. (1988). Statistical Inference for Spatial Processes. Cambridge University Press,
    chapter 3.

    Examples
    --------
    >>> f_border([[5, 5]], (0, 0, 10, 10), [2.0], places=[[4, 5], [5, 9], [7, 7]]).tolist()
    [0.5]
    """
    xy, region = placed(points, area)
    distances = distances_given(r)
    where, empty = _places(xy, region, places, seed)
    found = _reduced(distances, empty, boundary_distance(where, region))
    return found if len(xy) else np.full(len(distances), math.nan)


def _places(
    xy: Floats, region: BaseGeometry, places: ArrayLike | int, seed: int
) -> tuple[Floats, Floats]:
    """Return the places, checked or drawn, and the distance of each to its nearest point."""
    if isinstance(places, int):
        where = CompleteRandomness(region).draw(places, np.random.default_rng(seed))
    else:
        where, _ = placed(places, region)
    if not len(where):
        raise ValueError("the empty-space function needs at least 1 place")
    if not len(xy):
        return where, np.full(len(where), np.inf)
    return where, np.asarray(cKDTree(xy).query(where)[0])


def _up_to(r: Floats, distance: Floats, weight: Floats) -> Floats:
    """Return the sum of the weights of distances up to each r."""
    order = np.argsort(distance)
    total = np.concatenate([[0.0], np.cumsum(weight[order])])
    return np.asarray(total[np.searchsorted(distance[order], r, "right")])


def _reduced(r: Floats, distance: Floats, depth: Floats) -> Floats:
    """Return the share with a distance of at most r among those at least r from the edge."""
    found = np.full(len(r), np.nan)
    for k, at in enumerate(r):
        serving = depth >= at
        if serving.any():
            found[k] = (distance[serving] <= at).mean()
    return found
