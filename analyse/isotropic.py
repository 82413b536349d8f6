"""K in a rectangle, each pair weighed by how much of its circle lies inside: a check on the others."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.errors import AreaUnfit
from analyse.pair_distances import ordered_pairs, sums_up_to
from analyse.placed import Area, distances_given, placed
from analyse.set_covariance import rectangle_sides

Floats = NDArray[np.float64]
Index = NDArray[np.intp]


def k_isotropic(points: ArrayLike, area: Area, r: ArrayLike) -> Floats:
    """Return K with Ripley's isotropic correction, in a rectangle.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in the unit of the area.
    area : shapely geometry or four numbers
        A rectangle along x and y; four numbers are x0, y0, x1, y1.
    r : array_like of shape (k,)
        Distances, 0 or more; up to half the shorter side is usual.

    Returns
    -------
    ndarray of shape (k,)

    Raises
    ------
    AreaUnfit
        If the area is no rectangle along x and y.
    ValueError
        If a point is not finite or outside, or a distance negative.

    Notes
    -----
    Each ordered pair weighs 1 / (share of the circle about i through j that lies in the area).

    References
    ----------
    Ripley, B. D. (1977). Modelling spatial patterns. Journal of the Royal Statistical Society B
    39, 172-212.
    Diggle, P. J. (1983). Statistical Analysis of Spatial Point Patterns. Academic Press, London
    (the arcs).

    Examples
    --------
    >>> k_isotropic([[1, 1], [1, 2]], (0, 0, 4, 4), [1.0]).tolist()
    [16.0]
    """
    xy, region = placed(points, area)
    distances = distances_given(r)
    if rectangle_sides(region) is None:
        raise AreaUnfit(
            f"Ripley's isotropic correction is for rectangles, not for this {region.geom_type};"
            " use the translation correction."
        )
    x0, y0, x1, y1 = region.bounds
    low, high = xy - (x0, y0), (x1, y1) - xy

    def weight(step: Floats, i: Index, j: Index) -> Floats:
        d = np.hypot(step[:, 0], step[:, 1])
        return _inverse_share(low[i], high[i], d) + _inverse_share(low[j], high[j], d)

    return sums_up_to(xy, distances, weight) * (region.area / ordered_pairs(xy))


def _inverse_share(low: Floats, high: Floats, d: Floats) -> Floats:
    """Return 1 / (share of the circle of radius d inside), from the distances to the four sides."""
    radius = np.where(d > 0, d, 1.0)
    nearness = [np.minimum(side / radius, 1.0) for side in (*low.T, *high.T)]
    left, bottom, right, top = (np.arccos(np.where(d > 0, side, 1.0)) for side in nearness)
    outside = 2 * (left + bottom + right + top)
    for one, other in ((left, bottom), (left, top), (right, bottom), (right, top)):
        outside -= np.maximum(one + other - math.pi / 2, 0.0)  # beyond a corner counts once
    return np.asarray(1 / (1 - outside / (2 * math.pi)))
