"""Point patterns of known law in the unit square, given the number: clustered and spaced."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_TRIES = 200_000


def thomas(n: int, others: float, spread: float, rng: np.random.Generator) -> NDArray[np.float64]:
    """Return the first n points of a Thomas process: Poisson clusters, normally spread."""
    found = np.empty((0, 2))
    while len(found) < n:
        clusters = int(3 * n / others + 60)
        middles = rng.uniform(-4 * spread, 1 + 4 * spread, (clusters, 2))
        points = np.repeat(middles, rng.poisson(others, clusters), axis=0)
        points = points + rng.normal(0, spread, points.shape)
        found = np.concatenate([found, points[((points > 0) & (points < 1)).all(axis=1)]])
    return found[:n]


def apart(n: int, spacing: float, rng: np.random.Generator) -> NDArray[np.float64]:
    """Return n points set one after the other, none nearer than the spacing to an earlier one."""
    points, kept = np.empty((n, 2)), 0
    for tried in rng.random((_TRIES, 2)):
        if not kept or ((points[:kept] - tried) ** 2).sum(axis=1).min() >= spacing**2:
            points[kept] = tried
            kept += 1
            if kept == n:
                return points
    raise RuntimeError(f"{n} points do not fit at a spacing of {spacing}")
