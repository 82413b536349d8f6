"""Point patterns of known law in any area, given the number: clustered, spaced, rising."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from analyse.nulls import random_points

SQUARE = shapely.box(0, 0, 1, 1)
_TRIES = 200_000


def thomas(
    area: BaseGeometry, n: int, others: float, spread: float, rng: np.random.Generator
) -> NDArray[np.float64]:
    """Return the first n points of a Thomas process: Poisson clusters, normally spread."""
    x0, y0, x1, y1 = area.bounds
    reach = 4 * spread
    share = area.area / ((x1 - x0 + 2 * reach) * (y1 - y0 + 2 * reach))
    clusters = int(2 * n / others / share) + 60
    found = np.empty((0, 2))
    while len(found) < n:
        low, high = (x0 - reach, y0 - reach), (x1 + reach, y1 + reach)
        middles = rng.uniform(low, high, (clusters, 2))
        points = np.repeat(middles, rng.poisson(others, clusters), axis=0)
        points = points + rng.normal(0, spread, points.shape)
        found = np.concatenate([found, points[shapely.contains_xy(area, *points.T)]])
    return found[:n]


def apart(
    area: BaseGeometry, n: int, spacing: float, rng: np.random.Generator
) -> NDArray[np.float64]:
    """Return n points set one after the other, none nearer than the spacing to an earlier one."""
    points, kept = np.empty((n, 2)), 0
    for _ in range(_TRIES // 1000):
        for tried in random_points(area, 1000, rng):
            if not kept or ((points[:kept] - tried) ** 2).sum(axis=1).min() >= spacing**2:
                points[kept] = tried
                kept += 1
                if kept == n:
                    return points
    raise RuntimeError(f"{n} points do not fit at a spacing of {spacing}")


def sloping(
    area: BaseGeometry, n: int, slope: tuple[float, float], rng: np.random.Generator
) -> NDArray[np.float64]:
    """Return n points with log density linear in x and y, per unit, by plain rejection."""
    points = random_points(area, 40 * n, rng)
    height = points @ slope
    points = points[np.log(rng.random(len(points))) < height - height.max()]
    assert len(points) >= n
    return points[:n]
