"""How often limits of a density cover it: Poisson, negative binomial profile, bootstrap of quadrats.

    python tests/benchmarks/density_limits.py [draws]

Equal quadrats with negative binomial counts of known mean and k, and clumps of points scattered over
a dish (Matern: parents at random, children in a disc) whose quadrats are clipped by its rim. Prints;
passes or fails nothing.
"""

from __future__ import annotations

import math
import sys
from pathlib import Path

import numpy as np
import shapely

sys.path.insert(0, str(Path(__file__).parents[2]))

from analyse.clumped_density import ClumpedLimits, clumped_limits
from analyse.clumped_quadrats import clumped_in_quadrats
from analyse.density import garwood_limits
from analyse.grid_options import GridOptions
from analyse.quadrats import QuadratCounts, count_in_quadrats, lay_grid

DISH_MM = 43.0
CLUMPS = [(10, 8, 3.0), (30, 8, 3.0), (60, 8, 3.0), (30, 40, 3.0), (30, 40, 6.0), (100, 20, 3.0)]


def covers(limits: ClumpedLimits, mean: float) -> list[bool]:
    """Whether the profile and the bootstrap cover a mean."""
    return [
        each is not None and each.low <= mean <= each.high
        for each in (limits.profile, limits.bootstrap)
    ]


def equal_quadrats(draws: int, rng: np.random.Generator) -> None:
    """Counts drawn from the law itself."""
    print("\n| quadrats | mean | k | Poisson | profile | bootstrap |\n|---|---|---|---|---|---|")
    for q in (16, 36, 100):
        for mean in (1.0, 5.0):
            for k in (0.5, 2.0, math.inf):
                hits = np.zeros(3)
                for _ in range(draws):
                    law = rng.poisson(mean, q) if math.isinf(k) else None
                    x = rng.negative_binomial(k, k / (k + mean), q) if law is None else law
                    poisson = garwood_limits(int(x.sum()))
                    plain = poisson.low <= mean * q <= poisson.high
                    hits += [plain, *covers(clumped_limits(x, rng=rng), mean)]
                name = "random" if math.isinf(k) else f"{k:g}"
                shares = " | ".join(f"{100 * share:.1f} %" for share in hits / draws)
                print(f"| {q} | {mean:g} | {name} | {shares} |", flush=True)


def clumps_in_a_dish(draws: int, rng: np.random.Generator) -> None:
    """Matern clumps in a dish of 86 mm, quadrats by the rule."""
    print("| clumps | points each | radius, mm | Poisson | profile | bootstrap |")
    print("|---|---|---|---|---|---|")
    dish = shapely.Point(0, 0).buffer(DISH_MM, quad_segs=64)
    for clumps, children, radius in CLUMPS:
        density = clumps * children / (math.pi * DISH_MM**2)
        hits = np.zeros(3)
        for _ in range(draws):
            points = matern(clumps, children, radius, rng)
            grid = lay_grid(dish, len(points), GridOptions(), "mm", None)
            counts = QuadratCounts(
                count_in_quadrats(points, grid),
                grid.area,
                grid.whole,
                grid,
                grid.row,
                grid.column,
            )
            limits = clumped_in_quadrats(counts, rng=rng, relative_uncertainty=0.0)[1]
            poisson = garwood_limits(len(points))
            area = dish.area
            plain = poisson.low / area <= density <= poisson.high / area
            hits += [plain, *([False, False] if limits is None else covers(limits, 100 * density))]
        shares = " | ".join(f"{100 * share:.1f} %" for share in hits / draws)
        print(f"| {clumps} | {children} | {radius:g} | {shares} |", flush=True)


def matern(clumps: float, children: float, radius: float, rng: np.random.Generator) -> np.ndarray:
    """Return points of a Matern cluster process in the dish; parents also beyond its rim."""
    reach = DISH_MM + radius
    parents = rng.uniform(
        -reach, reach, (rng.poisson(clumps * (2 * reach) ** 2 / (math.pi * DISH_MM**2)), 2)
    )
    homes = np.repeat(np.arange(len(parents)), rng.poisson(children, len(parents)))
    angle, away = (
        rng.uniform(0, 2 * math.pi, homes.size),
        radius * np.sqrt(rng.uniform(size=homes.size)),
    )
    points = parents[homes] + np.column_stack((away * np.cos(angle), away * np.sin(angle)))
    return points[np.hypot(*points.T) <= DISH_MM * 0.9999]


if __name__ == "__main__":
    wanted = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    source = np.random.default_rng(1)
    clumps_in_a_dish(wanted, source)
    equal_quadrats(wanted, source)
