"""Print milliseconds per pattern by number of points, area and way of measuring pairs.

Run: python tests/benchmarks/distances.py [most points]

Only ratios within one run count. The last part loops astropy's K over the same random patterns of
1,000 points in a square.
"""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import shapely

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from analyse.nulls import CompleteRandomness
from analyse.ruler import Ruler

LEAF = shapely.Polygon(
    [(0, 0), (10, -1), (14, 5), (9, 6), (12, 11), (4, 12), (-2, 7), (3, 5)],
    [[(4, 2), (6, 2), (5, 4)], [(5, 8), (7, 9), (6, 10)]],
)
AREAS = {
    "square": shapely.box(0, 0, 10, 10),
    "dish": shapely.Point(43, 43).buffer(43, quad_segs=90),
    "leaf": LEAF,
}
NUMBERS = (100, 300, 1_000, 1_500, 2_000, 3_000, 10_000, 30_000, 100_000)
MOST_DIRECT = 10_000


def quickest(work: Callable[[], object], tries: int = 9) -> float:
    """Milliseconds of the quickest of several tries."""
    spent = []
    for _ in range(tries):
        start = time.perf_counter()
        work()
        spent.append(time.perf_counter() - start)
    return 1000 * min(spent)


def by_number(most: int) -> None:
    """Time drawing, preparing, and all curves, each way."""
    print("area    points  prepare    draw  direct  binned  (pairs: direct, binned)  (ms)")
    rng = np.random.default_rng(1)
    for name, area in AREAS.items():
        null = CompleteRandomness(area)
        for n in (each for each in NUMBERS if each <= most):
            points = null.draw(n, rng)
            draw = quickest(lambda n=n, null=null: null.draw(n, rng))
            prepare = quickest(lambda n=n, area=area: Ruler.of(area, n), 1)
            whole, pairs = [], []
            for way in ("direct", "binned"):
                if way == "direct" and n > MOST_DIRECT:
                    whole.append(np.nan)
                    pairs.append(np.nan)
                    continue
                ruler = Ruler.of(area, n, pairs=way)
                whole.append(quickest(lambda r=ruler, p=points: r.curves(p)))
                pairs.append(quickest(lambda r=ruler, p=points: r.pairs.sums(p)))
            print(
                f"{name:7} {n:6} {prepare:8.1f} {draw:7.2f} {whole[0]:7.2f} {whole[1]:7.2f}"
                f"  ({pairs[0]:.2f}, {pairs[1]:.2f})"
            )


def against_astropy() -> None:
    """Compare with the K of a general-purpose library, looped over the same patterns."""
    from astropy.stats import RipleysKEstimator

    rng = np.random.default_rng(2)
    patterns = [rng.uniform(0, 10, (1_000, 2)) for _ in range(20)]
    ruler = Ruler.of(AREAS["square"], 1_000)
    other = RipleysKEstimator(100.0, x_max=10.0, y_max=10.0, x_min=0.0, y_min=0.0)
    r = ruler.x["l_function"]
    ours = np.mean([quickest(lambda p=each: ruler.curves(p), 9) for each in patterns])
    theirs = np.mean(
        [
            quickest(lambda p=each: other(data=p, radii=r, mode="translation"), 2)
            for each in patterns[:4]
        ]
    )
    print(f"1,000 points in a square: all curves {ours:.2f} ms a pattern, astropy's K alone")
    print(f"{theirs:.1f} ms, {theirs / ours:.0f} times as long")


def main() -> None:
    """Print all."""
    by_number(int(sys.argv[1]) if len(sys.argv) > 1 else NUMBERS[-1])
    against_astropy()
    print(f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6:.2f} GB")


if __name__ == "__main__":
    main()
