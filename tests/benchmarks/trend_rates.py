"""How often a gradient is found where there is none, and where there is one.

    python tests/benchmarks/trend_rates.py [--patterns 300]

In a square, a circle and a ragged area with a hole: random points, Thomas clusters without a
gradient (others of its cluster beside a point; spread in parts of the side of a square of the same
area), and a density that rises five times from side to side. Share rejected at 5 % by the
likelihood ratio alone, and by the test that allows for clumping; plane and radial trend.
"""

from __future__ import annotations

import argparse
import math
import sys
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

sys.path.insert(0, str(Path(__file__).parents[2]))

from analyse.nulls import random_points
from analyse.trend import TrendModel
from tests.analyse.areas import AREAS
from tests.patterns import thomas

SORTS = ((0, 0.0), (4, 0.02), (4, 0.05), (8, 0.05), (4, 0.1))


def rising(area: BaseGeometry, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Points whose density rises five times from left to right."""
    x0, _, x1, _ = area.bounds
    points = random_points(area, 12 * n, rng)
    kept = rng.random(len(points)) < 5 ** ((points[:, 0] - x1) / (x1 - x0))
    return points[kept][:n]


def main() -> None:
    """Print a line per area, number and sort of pattern."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--patterns", type=int, default=300, help="patterns of each sort")
    patterns = parser.parse_args().patterns
    print(f"{'area':20} {'n':>4} {'pattern':24} {'plane':>14} {'radial':>14}")
    for name, area in AREAS.items():
        models = [TrendModel.of(area, kind=kind) for kind in ("plane", "radial")]
        side = math.sqrt(area.area)
        shapely.prepare(area)
        for n in (30, 100, 400):
            for sort in (*SORTS, None):
                p = []
                for k in range(patterns):
                    rng = np.random.default_rng([n, k, 7])
                    if sort is None:
                        points, words = rising(area, n, rng), "rises five times"
                    elif sort[0] == 0:
                        points, words = random_points(area, n, rng), "random"
                    else:
                        points = thomas(area, n, sort[0], sort[1] * side, rng)
                        words = f"{sort[0]} others, spread {sort[1]:g}"
                    fits = [model.fit(points) for model in models]
                    p.append([value for fit in fits for value in (fit.p_poisson, fit.p)])
                low = (np.array(p) <= 0.05).mean(axis=0)
                cells = "  ".join(f"{100 * share:5.1f}%" for share in low)
                print(f"{name:20} {n:4} {words:24} {cells}", flush=True)


if __name__ == "__main__":
    main()
