"""Print seconds per grid, per 1,000 simulations and per analysis. Run: python tests/benchmarks/simulations.py"""

from __future__ import annotations

import time

import numpy as np
import shapely

from analyse.count_chance import simulated_p
from analyse.findings import analyse_points
from analyse.nulls import random_points
from analyse.quadrats import lay_grid


def main() -> None:
    """Time a round dish of 86 mm with more and more points."""
    rng = np.random.default_rng(1)
    dish = shapely.Point(43, 43).buffer(43, quad_segs=90)
    print("points quadrats  grid  1000 simulations  analysis (seconds)")
    for n in (60, 300, 1000, 5000):
        points = random_points(dish, n, rng)
        times = [time.perf_counter()]
        grid = lay_grid(dish, n)
        times.append(time.perf_counter())
        counts = rng.multinomial(n, grid.area / grid.area.sum())
        simulated_p(counts, grid.area, simulations=1000, rng=rng)
        times.append(time.perf_counter())
        analyse_points(points, dish)
        times.append(time.perf_counter())
        spent = np.diff(times)
        print(f"{n:6} {len(grid):8} {spent[0]:5.3f} {spent[1]:17.3f} {spent[2]:9.3f}")


if __name__ == "__main__":
    main()
