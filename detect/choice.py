"""Which of the overlapping candidates is the object."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from detect.regions import Candidates

# Two regions are one object when either centre lies within this share (squared) of the other.
_SAME = 0.8


def choose(
    candidates: Candidates, doubt: NDArray[np.float64], *, highest_doubt: float
) -> NDArray[np.intp]:
    """Keep the least doubtful candidates, none of which has its centre inside another.

    Parameters
    ----------
    candidates : Candidates
        Overlapping regions of one photograph.
    doubt : ndarray of shape (n,)
        Probability that each is false.
    highest_doubt : float
        Candidates of more doubt than this are not kept.

    Returns
    -------
    ndarray of int
        Rows kept, least doubtful first.
    """
    order = np.argsort(doubt, kind="stable")
    order = order[doubt[order] <= highest_doubt]
    if order.size == 0:
        return order
    kept = candidates.where(order)
    centres = np.column_stack([kept.x, kept.y])
    half = 0.5 * (kept.sxx + kept.syy)
    root = np.sqrt(np.maximum((0.5 * (kept.sxx - kept.syy)) ** 2 + kept.sxy**2, 0.0))
    reach = 2.0 * np.sqrt(_SAME * (half + root))
    tree = cKDTree(centres)
    widest = float(reach.max())
    alive = np.ones(order.size, dtype=bool)
    for k in range(order.size):
        if not alive[k]:
            continue
        near = np.array(tree.query_ball_point(centres[k], widest), dtype=np.intp)
        near = near[near > k]
        d = centres[near] - centres[k]
        inside = (_ratio2(kept, k, d) < _SAME) | (_ratio2(kept, near, d) < _SAME)
        alive[near[inside]] = False
    return order[alive]


def _ratio2(
    regions: Candidates, row: int | NDArray[np.intp], d: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Squared distance in units of the row's ellipse: 1 on the ellipse of equal moments."""
    sxx, syy, sxy = regions.sxx[row], regions.syy[row], regions.sxy[row]
    determinant = np.maximum(sxx * syy - sxy**2, 1e-9)
    form = syy * d[:, 0] ** 2 - 2 * sxy * d[:, 0] * d[:, 1] + sxx * d[:, 1] ** 2
    return np.asarray(form / determinant / 4.0)
