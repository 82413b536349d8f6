"""Where objects lie: at random, clumped or evenly, in any area; and the test that picks clear examples."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree
from scipy.stats import chi2

Points = npt.NDArray[np.float64]
Inside = Callable[[Points], npt.NDArray[np.bool_]]
Kind = Literal["random", "clumped", "even", "none", "few"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Ground:
    """The area in which centres may lie, and the study area in which they count, in millimetres."""

    bounds: tuple[float, float, float, float]
    inside: Inside
    study: Inside

    def __post_init__(self) -> None:
        x0, y0, x1, y1 = self.bounds
        if not (x1 > x0 and y1 > y0):
            raise ValueError(
                f"The bounds are {self.bounds}; give left, top, right, bottom in rising order."
            )

    def scatter(self, n: int, rng: np.random.Generator) -> Points:
        """Give `n` independent uniform points of the area, (n, 2)."""
        x0, y0, x1, y1 = self.bounds
        kept = np.empty((0, 2))
        while len(kept) < n:
            more = rng.uniform((x0, y0), (x1, y1), (2 * n + 50, 2))
            kept = np.vstack([kept, more[self.inside(more)]])
        return kept[:n]


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """What to place: a kind of pattern, radii in mm (one per object), and how near two may lie.

    `nearest` is the least distance of two centres in units of the larger radius. `clumps` and
    `clump_mm` are the number of clumps and their standard deviation. `shake` is how far even
    points are shaken after they have spread, in units of their mean distance.
    """

    kind: Kind
    radii_mm: Points
    nearest: float = 1.12
    clumps: int = 9
    clump_mm: float = 5.0
    shake: float = 0.12

    def __post_init__(self) -> None:
        if self.nearest < 0.9:
            raise ValueError(
                f"The least distance is {self.nearest} radii; give at least 0.9, or objects hide."
            )


def _candidates(plan: Plan, ground: Ground, rng: np.random.Generator) -> Callable[[], Points]:
    if plan.kind != "clumped":
        return lambda: ground.scatter(1, rng)[0]
    parents = ground.scatter(plan.clumps, rng)
    weights = rng.gamma(2.0, 1.0, plan.clumps) + 0.4
    weights /= weights.sum()

    def near_a_parent() -> Points:
        while True:
            if rng.random() < 0.08:
                return np.asarray(ground.scatter(1, rng)[0])
            parent = parents[rng.choice(plan.clumps, p=weights)]
            point = parent + rng.normal(0, plan.clump_mm, 2)
            if ground.inside(point[None])[0]:
                return np.asarray(point)

    return near_a_parent


def _to_nearest(points: Points) -> Points:
    """Give each point's distance to its nearest neighbour, (n,)."""
    distance, _ = cKDTree(points).query(points, k=2)
    return np.asarray(distance, dtype=np.float64)[:, 1]


def _spread(n: int, plan: Plan, ground: Ground, rng: np.random.Generator) -> Points:
    points = ground.scatter(n, rng)
    probe = ground.scatter(250 * n, rng)
    for _ in range(25):
        _, owner = cKDTree(points).query(probe)
        total = np.bincount(owner, minlength=n).clip(1)
        centre = np.column_stack(
            [np.bincount(owner, probe[:, k], minlength=n) / total for k in (0, 1)]
        )
        points = np.where(ground.inside(centre)[:, None], centre, points)
    gap = float(np.median(_to_nearest(points)))
    shaken = points + rng.normal(0, plan.shake * gap, points.shape)
    return np.asarray(np.where(ground.inside(shaken)[:, None], shaken, points))


def place(plan: Plan, ground: Ground, rng: np.random.Generator) -> Points:
    """Place all objects of a plan once, largest first, none nearer than allowed; (n, 2) in mm."""
    radii = plan.radii_mm
    n = len(radii)
    if plan.kind == "even":
        return _spread(n, plan, ground, rng)
    draw = _candidates(plan, ground, rng)
    placed = np.empty((n, 2))
    done = np.zeros(n, dtype=bool)
    for k in np.argsort(-radii, kind="stable"):
        for _ in range(500):
            point = draw()
            apart = np.linalg.norm(placed[done] - point, axis=1) / np.maximum(radii[done], radii[k])
            if not done.any() or apart.min() >= plan.nearest:
                break
        else:
            raise ValueError(f"No room for object {k} of {n}; use fewer or smaller objects.")
        placed[k], done[k] = point, True
    return placed


def dispersion(
    points: Points, ground: Ground, *, side: float, offset: float
) -> tuple[float, float]:
    """Test counts in quadrats clipped by the study area; give p for clumped and p for even.

    The sum of (count - expected)^2 / expected over quadrats, expected counts going by area,
    against chi-squared with one degree of freedom fewer than quadrats.
    """
    x0, y0, x1, y1 = ground.bounds
    fine = max(x1 - x0, y1 - y0) / 500
    probe = np.stack(
        np.meshgrid(np.arange(x0, x1, fine), np.arange(y0, y1, fine)), axis=-1
    ).reshape(-1, 2)
    probe = probe[ground.study(probe)]
    start = np.array([x0, y0]) - offset * side
    columns = math.ceil((x1 - start[0]) / side) + 1

    def cell(at: Points) -> npt.NDArray[np.int64]:
        index = np.floor((at - start) / side).astype(np.int64)
        return np.asarray(index[:, 1] * columns + index[:, 0])

    where = cell(probe)
    size = int(max(where.max(), cell(points).max())) + 1
    expected = np.bincount(where, minlength=size) * (len(points) / len(probe))
    counts = np.bincount(cell(points), minlength=size)
    used = expected > 1e-9
    statistic = float((((counts - expected)[used]) ** 2 / expected[used]).sum())
    df = int(used.sum()) - 1
    return float(chi2.sf(statistic, df)), float(chi2.cdf(statistic, df))


def _clear(points: Points, plan: Plan, ground: Ground) -> bool:
    x0, y0, x1, y1 = ground.bounds
    probe = np.random.default_rng(7).uniform((x0, y0), (x1, y1), (60000, 2))
    area = (x1 - x0) * (y1 - y0) * float(ground.study(probe).mean())
    side = math.sqrt(2 * area / len(points))
    for factor in (1.0, 0.9, 1.1):
        for offset in (0.0, 0.5):
            clumped, even = dispersion(points, ground, side=side * factor, offset=offset)
            if plan.kind == "random" and min(clumped, even) < 0.12:
                return False
            if plan.kind == "clumped" and clumped > 2e-4:
                return False
            if plan.kind == "even" and even > 2e-4:
                return False
    if plan.kind == "random":  # neighbours too should lie as far as chance has them
        near = float(_to_nearest(points).mean()) * 2 * math.sqrt(len(points) / area)
        return bool(abs(near - 1.03) < 0.06)
    return True


def place_clearly(plan: Plan, ground: Ground, seed: int) -> Points:
    """Place a plan so that it is a clear example of its kind: the first of many tries that is.

    A sample picture stands for its kind, so a random pattern that happens to look clumped (one in
    twenty would) is thrown away. This is a choice of examples, not evidence about any test.
    """
    if plan.kind in ("none", "few"):
        return (
            place(plan, ground, np.random.default_rng(seed))
            if len(plan.radii_mm)
            else np.empty((0, 2))
        )
    for k in range(600):
        points = place(plan, ground, np.random.default_rng([seed, k]))
        if _clear(points, plan, ground):
            return points
    raise ValueError(
        f"No clear {plan.kind} pattern in 600 tries; change the number or size of objects."
    )
