"""Power of the quadrat test at the smallest clusters and spacings that are said to be seen.

    python tests/benchmarks/power.py [--patterns 400]

Squares of n points in g x g quadrats. Of Thomas clusters (tight, about as wide as a quadrat, twice
as wide) and of points set one after the other that keep a distance, the share that the test of
X2 given n, two-sided at 5 %, calls by its right name; "-" where nothing is said to be seen.
"""

from __future__ import annotations

import argparse
import math
import sys
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).parents[2]))

from analyse.count_chance import simulated_chi2
from analyse.power import smallest_cluster, smallest_spacing
from tests.patterns import SQUARE, apart, thomas

SPREADS = (0.02, 0.25, 0.5)


def chi2_of(points: NDArray[np.float64], across: int) -> float:
    """X2 of points of the unit square in across x across quadrats."""
    counts, _, _ = np.histogram2d(*points.T, bins=across, range=[[0, 1]] * 2)
    mean = len(points) / across**2
    return float(((counts - mean) ** 2).sum() / mean)


def seen(chi2: NDArray[np.float64], null: NDArray[np.float64], *, clumped: bool) -> float:
    """Share of X2 with a one-sided p of at most 2.5 %."""
    at_least = null.size - np.searchsorted(null, chi2 - 1e-9)
    at_most = np.searchsorted(null, chi2 + 1e-9, side="right")
    p = (1 + (at_least if clumped else at_most)) / (null.size + 1)
    return float((p <= 0.025).mean())


def main() -> None:
    """Print a line per number of quadrats and mean count."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--patterns", type=int, default=400, help="patterns of each sort")
    patterns = parser.parse_args().patterns
    rng = np.random.default_rng(5)
    print(
        "quadrats mean    n | others and power, clusters of spread 0.02, 0.25, 0.5 sides | spacing"
    )
    for across in (3, 4, 5, 7, 10, 20):
        for mean in (0.5, 1, 2, 5, 10):
            q, n = across**2, int(across**2 * mean)
            if not 10 <= n <= 800:
                continue
            null = np.sort(np.concatenate([*simulated_chi2(n, np.ones(q), 20_000, rng)]))
            cells = []
            for spread in SPREADS:
                others = smallest_cluster(n, q, spread=spread)
                if math.isnan(others):
                    cells.append("     -     ")
                    continue
                drawn = [thomas(SQUARE, n, others, spread / across, rng) for _ in range(patterns)]
                chi2 = np.array([chi2_of(points, across) for points in drawn])
                cells.append(f"{others:5.2f} {seen(chi2, null, clumped=True):.3f}")
            spacing = smallest_spacing(n, q)
            cells.append("-")
            if math.isfinite(spacing):
                drawn = [apart(SQUARE, n, spacing / across, rng) for _ in range(patterns // 2)]
                chi2 = np.array([chi2_of(points, across) for points in drawn])
                cells[-1] = f"{spacing:.3f} {seen(chi2, null, clumped=False):.3f}"
            print(f"{q:8} {mean:4} {n:4} | {' | '.join(cells)}", flush=True)


if __name__ == "__main__":
    main()
