"""Print how often the verdict's test rejects: at random, among clumps, and among evenly laid points.

    python tests/benchmarks/error_rates.py [--null 1000] [--power 300]

Patterns are drawn in a square, a dish and a ragged leaf with a hole, their quadrats laid by the
default rule. At 5 % the simulated two-sided test is to reject 5 % of random patterns; where n is
small X2 takes few values, ties count as extreme, and it rejects fewer. The last column is the
exact share that it can reject at most, from 200,000 random sets of counts: what ties leave of the
5 %. "Clumped" are clumps of 5 points on average (Neyman and Scott 1958), each within a tenth of
the width of the area; "even" are points thrown one after the other and kept only where none lies
closer than 0.7 times the spacing of a square lattice as dense (simple sequential inhibition).
"""

from __future__ import annotations

import argparse
import math
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.spatial import cKDTree
from shapely.geometry.base import BaseGeometry

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from analyse.count_chance import simulated_chi2, simulated_p
from analyse.grid_options import GridOptions
from analyse.nulls import random_points
from analyse.quadrats import Grid, count_in_quadrats, lay_grid
from analyse.verdict import LEVEL

TURN = np.linspace(0, 2 * math.pi, 400, endpoint=False)
LOBES = 45 + 4 * np.sin(9 * TURN) + 2 * np.sin(31 * TURN + 1)
LEAF = shapely.Polygon(
    np.column_stack([LOBES * np.cos(TURN), 0.6 * LOBES * np.sin(TURN)]),
    [shapely.Point(8, 3).buffer(7).exterior.coords],
)
AREAS: dict[str, BaseGeometry] = {
    "square": shapely.box(0, 0, 86, 86),
    "dish": shapely.Point(0, 0).buffer(43, quad_segs=90),
    "ragged leaf": LEAF,
}
CLUMP, REACH, APART = 5.0, 0.1, 0.7
Law = Callable[[BaseGeometry, int, np.random.Generator], NDArray[np.float64]]


def clumped(area: BaseGeometry, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Exactly n points, each about one of n / 5 centres chosen at random."""
    centres = random_points(area, max(1, round(n / CLUMP)), rng)
    reach = REACH * math.sqrt(area.area)
    found = np.empty((0, 2))
    while len(found) < n:
        tries = centres[rng.integers(len(centres), size=4 * n)]
        tries = tries + reach * np.sqrt(rng.random((4 * n, 1))) * unit_vectors(4 * n, rng)
        found = np.concatenate([found, tries[shapely.contains_xy(area, *tries.T)]])
    return found[:n]


def unit_vectors(n: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Directions at random."""
    turn = rng.uniform(0, 2 * math.pi, n)
    return np.column_stack([np.cos(turn), np.sin(turn)])


def even(area: BaseGeometry, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Points, n of them where they find room, none closer to another than the rule allows."""
    apart = APART * math.sqrt(area.area / n)
    tries = random_points(area, 60 * n, rng)
    near = cKDTree(tries).query_ball_point(tries, apart)
    barred = np.zeros(len(tries), dtype=bool)
    kept: list[int] = []
    for k in range(len(tries)):
        if len(kept) == n:
            break
        if not barred[k]:
            kept.append(k)
            barred[near[k]] = True
    return tries[kept]


def rejected(law: Law, area: BaseGeometry, n: int, patterns: int, seed: int) -> tuple[float, ...]:
    """Share of patterns judged clumped, and judged even."""
    grids: dict[int, Grid] = {}
    clumps = evens = 0
    for k in range(patterns):
        rng = np.random.default_rng([seed, n, k])
        points = law(area, n, rng)
        grid = grids.setdefault(len(points), lay_grid(area, len(points), GridOptions()))
        test = simulated_p(count_in_quadrats(points, grid), grid.area, rng=rng)
        clumps += test.p_two_sided <= LEVEL and test.p_clumped < test.p_even
        evens += test.p_two_sided <= LEVEL and test.p_clumped >= test.p_even
    return clumps / patterns, evens / patterns


def most(area: BaseGeometry, n: int) -> float:
    """Share of random patterns that a test of exact p rejects at 5 %: less where values tie."""
    grid, rng = lay_grid(area, n), np.random.default_rng(0)
    chi2 = np.sort(np.concatenate([*simulated_chi2(n, grid.area, 200_000, rng)]))
    tie = 1e-9 * np.maximum(1.0, chi2)
    upper = 1 - np.searchsorted(chi2, chi2 - tie, side="left") / chi2.size
    lower = np.searchsorted(chi2, chi2 + tie, side="right") / chi2.size
    return float((2 * np.minimum(upper, lower) <= LEVEL).mean())


def main() -> None:
    """Print a line per area and number of points."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--null", type=int, default=1000, help="random patterns of each sort")
    parser.add_argument("--power", type=int, default=300, help="clumped and even ones of each sort")
    asked = parser.parse_args()
    print("share rejected at 5 %; in brackets: of those, on the wrong side")
    print(f"{'area':12} {'n':>4} {'quadrats':>8} {'random':>8} {'+-':>6} {'clumped':>15}"
          f" {'even':>15} {'at most':>8}")  # fmt: skip
    for name, area in AREAS.items():
        for n in (20, 60, 200):
            random = sum(rejected(random_points, area, n, asked.null, 1))
            error = 1.96 * math.sqrt(random * (1 - random) / asked.null)
            right, wrong = rejected(clumped, area, n, asked.power, 2)
            wrong_even, right_even = rejected(even, area, n, asked.power, 3)
            print(
                f"{name:12} {n:4} {len(lay_grid(area, n)):8} {random:8.3f} {error:6.3f}"
                f" {right:8.3f} ({wrong:.3f}) {wrong_even + right_even:7.3f} ({wrong_even:.3f})"
                f" {most(area, n):8.3f}",
                flush=True,
            )


if __name__ == "__main__":
    main()
