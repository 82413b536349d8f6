"""How many further points lie within each distance of a point: K, L and the pair correlation.

One function per correction for what lies beyond the edge. All divide by the n (n - 1) ordered
pairs and count pairs at distance r itself (<=). With fewer than 2 points all are NaN.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.boundary import boundary_distance
from analyse.pair_distances import ordered_pairs, pairs_up_to, sums_up_to
from analyse.placed import Area, distances_given, placed
from analyse.set_covariance import longest_useful, set_covariance

Floats = NDArray[np.float64]

BANDWIDTH = 0.15  # of the kernel, times 1 / sqrt(density) (Stoyan and Stoyan 1994)
_LEAST_LEFT = 0.01  # of the area: a step that leaves less has no translation correction


def k_none(points: ArrayLike, area: Area, r: ArrayLike) -> Floats:
    """Return K without a correction for the edge: too small, the more so the longer the distance.

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
        A / (n (n - 1)) times the number of ordered pairs at most r apart; in squared units.

    Raises
    ------
    ValueError
        If a point is not finite or outside, or a distance negative.

    References
    ----------
    Ripley, B. D. (1976). The second-order analysis of stationary point processes. Journal of
    Applied Probability 13, 255-266.

    Examples
    --------
    >>> k_none([[1, 1], [1, 2]], (0, 0, 4, 4), [0.5, 1.0]).tolist()
    [0.0, 16.0]
    """
    xy, region = placed(points, area)
    distances = distances_given(r)
    found = sums_up_to(xy, distances, lambda step, _i, _j: np.full(len(step), 2.0))
    return found * (region.area / ordered_pairs(xy))


def k_translation(points: ArrayLike, area: Area, r: ArrayLike) -> Floats:
    """Return K with the translation correction, in an area of any shape.

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
        NaN at distances at which a step in some direction leaves less than 1 % of the area.

    Raises
    ------
    ValueError
        If a point is not finite or outside, or a distance negative.

    Notes
    -----
    K(r) = A^2 / (n (n - 1)) sum 1{d <= r} / gamma(x_j - x_i) over ordered pairs, where gamma is
    the set covariance (`analyse.set_covariance`).

    References
    ----------
    Ohser, J. and Stoyan, D. (1981). On the second-order and orientation analysis of planar
    stationary point processes. Biometrical Journal 23, 523-533.

    Examples
    --------
    >>> k_translation([[1, 1], [1, 2]], (0, 0, 4, 4), [1.0]).round(3).tolist()
    [21.333]
    """
    xy, region = placed(points, area)
    distances = distances_given(r)
    covariance = set_covariance(region)
    longest = longest_useful(region, covariance, left=_LEAST_LEFT)
    fit = distances <= longest
    found = np.full(len(distances), np.nan)
    found[fit] = sums_up_to(
        xy, distances[fit], lambda step, _i, _j: 2 / covariance.at(step[:, 0], step[:, 1])
    )
    return found * (region.area**2 / ordered_pairs(xy))


def k_border(points: ArrayLike, area: Area, r: ArrayLike) -> Floats:
    """Return K from those points alone whose whole circle of radius r lies in the area.

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
        NaN where no point is so far from the edge.

    Raises
    ------
    ValueError
        If a point is not finite or outside, or a distance negative.

    Notes
    -----
    K(r) = A / (n - 1) times the mean number of others within r of the points at least r from the
    edge (the reduced sample). The edges of holes count.

    References
    ----------
    Ripley, B. D. (1988). Statistical Inference for Spatial Processes. Cambridge University Press,
    chapter 3.

    Examples
    --------
    >>> k_border([[1, 1], [1, 2]], (0, 0, 4, 4), [1.0, 1.5]).tolist()
    [16.0, nan]
    """
    xy, region = placed(points, area)
    distances = distances_given(r)
    ordered = np.argsort(distances)
    rising = distances[ordered]
    depth = boundary_distance(xy, region)
    last = np.searchsorted(rising, depth, "right")  # a point serves for the distances before this
    change = np.zeros(len(rising) + 1)
    for i, j, d in pairs_up_to(xy, rising):
        first = np.searchsorted(rising, d, "left")
        for member in (i, j):
            serves = first < last[member]
            change += np.bincount(first[serves], minlength=len(change))
            change -= np.bincount(last[member][serves], minlength=len(change))
    serving = (depth[:, None] >= rising).sum(axis=0) if len(xy) else np.zeros(len(rising))
    mean = np.full(len(rising), np.nan)
    np.divide(np.cumsum(change)[:-1], serving, out=mean, where=serving > 0)
    found = np.empty(len(rising))
    found[ordered] = mean
    return found * (region.area * len(xy) / ordered_pairs(xy))


def l_of(k: ArrayLike) -> Floats:
    """Return L = sqrt(K / pi), which at random is the distance itself.

    Parameters
    ----------
    k : array_like of shape (m,)
        K at some distances.

    Returns
    -------
    ndarray of shape (m,)

    References
    ----------
    Besag, J. (1977). Contribution to the discussion of Ripley (1977). Journal of the Royal
    Statistical Society B 39, 193-195.

    Examples
    --------
    >>> l_of([np.pi, 4 * np.pi]).tolist()
    [1.0, 2.0]
    """
    return np.asarray(np.sqrt(np.asarray(k, dtype=np.float64) / math.pi))


def pair_correlation(
    points: ArrayLike, area: Area, r: ArrayLike, *, bandwidth: float | None = None
) -> Floats:
    """Return how many times as often as at random two points lie just r apart.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        Study area; four numbers are x0, y0, x1, y1 of a rectangle.
    r : array_like of shape (k,)
        Distances, above 0.
    bandwidth : float, optional
        Half width of the kernel; 0.15 / sqrt(density) where it is not said.

    Returns
    -------
    ndarray of shape (k,)
        About 1 at random. Below the bandwidth it is too small, as the kernel reaches below 0.

    Raises
    ------
    ValueError
        If a point is not finite or outside, or a distance or the bandwidth is not above 0.

    Notes
    -----
    g(r) = A^2 / (n (n - 1)) sum k(r - d) / (2 pi r gamma) over ordered pairs: Epanechnikov's
    kernel, the translation correction, and the divisor r (not each pair's own distance, which
    gives points that coincide an endless weight).

    References
    ----------
    Stoyan, D. and Stoyan, H. (1994). Fractals, Random Shapes and Point Fields. Wiley, Chichester,
    pages 284-285.

    Examples
    --------
    >>> pair_correlation([[1, 1], [1, 2]], (0, 0, 4, 4), [1.0, 3.0], bandwidth=0.5).round(3).tolist()
    [5.093, 0.0]
    """
    xy, region = placed(points, area)
    distances = distances_given(r, above=True)
    width = BANDWIDTH * math.sqrt(region.area / max(len(xy), 1)) if bandwidth is None else bandwidth
    if not (math.isfinite(width) and width > 0):
        raise ValueError(f"the bandwidth must be above 0, not {width}")
    covariance = set_covariance(region)
    reach = distances + width
    found = np.zeros(len(distances))
    for i, j, d in pairs_up_to(xy, reach):
        dx, dy = (xy[j] - xy[i]).T
        weight = 2 / np.maximum(covariance.at(dx, dy), _LEAST_LEFT * region.area)
        for k, at in enumerate(distances):
            close = np.abs(d - at) < width
            found[k] += float((0.75 / width * (1 - ((d[close] - at) / width) ** 2)) @ weight[close])
    longest = longest_useful(region, covariance, left=_LEAST_LEFT)
    found[reach > longest] = np.nan
    return found * (region.area**2 / ordered_pairs(xy)) / (2 * math.pi * distances)
