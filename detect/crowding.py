"""How crowded objects lie: the distance to the neighbour that is nearest for their sizes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def distances_apart(xy: NDArray[np.float64], radius: NDArray[np.float64]) -> NDArray[np.float64]:
    """Measure how crowded objects lie.

    Parameters
    ----------
    xy : ndarray of shape (m, 2)
        Centres.
    radius : ndarray of shape (m,)
        Radii, positive, in the same unit.

    Returns
    -------
    ndarray of shape (m,)
        Least distance to another over the sum of both radii; infinite for a single object.

    Examples
    --------
    >>> distances_apart(np.array([[0.0, 0.0], [6.0, 0.0], [60.0, 0.0]]), np.array([2.0, 1.0, 1.0]))
    array([ 2.,  2., 20.])
    """
    from scipy.spatial import cKDTree

    if len(xy) < 2:
        return np.full(len(xy), np.inf)
    tree = cKDTree(xy)
    pairs = tree.query(xy, k=2)
    distance, nearest = np.asarray(pairs[0]), np.asarray(pairs[1])
    # Of coinciding centres either may come first; the other one is the neighbour.
    other = np.where(nearest[:, 1] == np.arange(len(xy)), nearest[:, 0], nearest[:, 1])
    least = distance[:, 1] / (radius + radius[other])
    # A larger object farther away may be nearer in sums of radii.
    for i, near in enumerate(tree.query_ball_point(xy, least * (radius + radius.max()))):
        those = np.setdiff1d(near, [i])
        apart = np.hypot(*(xy[those] - xy[i]).T) / (radius[those] + radius[i])
        least[i] = min(least[i], apart.min(initial=np.inf))
    return np.asarray(least)
