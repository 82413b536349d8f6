"""Print what all tests of a pattern cost: seconds, memory, growth with n, and beside a plain loop.

    python tests/benchmarks/all_statistics.py [--workers 2] [--quick]

Each size runs in a process of its own. "wall" is what a user waits, and means little on a busy
machine; "processor" is the time spent on all cores. The plain loop is astropy's estimate of K with
translation correction, at the same distances, for some of the same simulated patterns, in a square.
"""

from __future__ import annotations

import argparse
import math
import resource
import subprocess
import sys
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

import numpy as np
from astropy.stats import RipleysKEstimator

from analyse.global_tests import Curves, global_tests
from analyse.nulls import CompleteRandomness
from analyse.pattern import Pattern
from analyse.ruler import Ruler
from analyse.scales import Sides
from analyse.simulated_curves import stream_of
from tests.benchmarks.error_rates import AREAS

RUNS = [
    ("dish", 1_000, 999, "5 s"),
    ("ragged leaf", 1_000, 999, ""),
    ("dish", 10_000, 999, "40 s"),
    ("ragged leaf", 10_000, 999, ""),
    ("dish", 100_000, 199, "60 s and 2 GB"),
]
SIZES = [300, 1_000, 3_000, 10_000, 30_000, 100_000]


def spent(who: int) -> float:
    """Seconds of a processor."""
    used = resource.getrusage(who)
    return used.ru_utime + used.ru_stime


def one(name: str, n: int, simulations: int, workers: int) -> None:
    """Print a line for one size."""
    area = AREAS[name]
    points = CompleteRandomness(area).draw(n, np.random.default_rng(1))
    pattern = Pattern.of(points, area)
    here, wall = spent(resource.RUSAGE_SELF), time.perf_counter()
    tests = global_tests(pattern, simulations=simulations, seed=1, workers=workers)
    assert tests is not None
    wall = time.perf_counter() - wall
    processor = spent(resource.RUSAGE_SELF) - here + spent(resource.RUSAGE_CHILDREN)
    memory = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
    other = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1e6
    print(f"{name:12} {n:8,} {simulations:6} {wall:8.1f} {processor:10.1f} {memory:8.2f}"
          f" {other:8.2f}", end="", flush=True)  # fmt: skip


def per_simulation(curves: Curves, null: CompleteRandomness, n: int, many: int) -> float:
    """Seconds of a processor that one simulation takes."""
    curves(null.draw(n, stream_of(1, 0)))
    start = time.process_time()
    for i in range(many):
        curves(null.draw(n, stream_of(1, i)))
    return (time.process_time() - start) / many


def growth() -> None:
    """Print how the time of one simulation grows."""
    area, seconds = AREAS["dish"], []
    null = CompleteRandomness(area)
    print("\nn          milliseconds a simulation   over n log n (of the first)")
    for n in SIZES:
        curves = Curves(Ruler.of(area, n), Sides.of(area, n))
        seconds.append(per_simulation(curves, null, n, max(3, 200_000 // n)))
        share = seconds[-1] / (n * math.log(n)) / (seconds[0] / (SIZES[0] * math.log(SIZES[0])))
        print(f"{n:<10,} {1000 * seconds[-1]:12.2f} {share:28.2f}", flush=True)
    slope = np.polyfit(np.log(SIZES), np.log(seconds), 1)[0]
    top = np.polyfit(np.log(SIZES[3:]), np.log(seconds[3:]), 1)[0]
    print(f"fitted exponent of n: {slope:.2f} over all, {top:.2f} from 10,000 on")


def beside_a_loop(patterns: int) -> None:
    """Print how long the plain loop takes, over the time of all our curves."""
    area, n = AREAS["square"], 1_000
    null, curves = CompleteRandomness(area), Curves(Ruler.of(area, n), Sides.of(area, n))
    x0, y0, x1, y1 = area.bounds
    plain = RipleysKEstimator(area.area, x_max=x1, y_max=y1, x_min=x0, y_min=y0)
    r = np.asarray(curves.x["l_function"])
    ours, theirs, off = per_simulation(curves, null, n, 100), 0.0, 0.0
    for i in range(patterns):
        points = null.draw(n, stream_of(1, i))
        start = time.process_time()
        k = plain.evaluate(points, r, mode="translation")
        theirs += (time.process_time() - start) / patterns
        own = curves.split(curves(points))["l_function"] + r
        off = max(off, float(np.abs(np.sqrt(k / math.pi) - own).max()))
    print(f"\n1,000 points in a square, {len(r)} distances, {patterns} patterns: the plain loop over"
          f" K takes {1000 * theirs:.0f} ms each, all our curves {1000 * ours:.1f} ms:"
          f" {theirs / ours:.0f} times; L differs by {off:.1e} at most")  # fmt: skip


def main() -> None:
    """Print everything."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--quick", action="store_true", help="neither 10,000 nor 100,000 points")
    parser.add_argument("--one", nargs=3, metavar=("AREA", "N", "SIMULATIONS"))
    asked = parser.parse_args()
    if asked.one:
        one(asked.one[0], int(asked.one[1]), int(asked.one[2]), asked.workers)
        return
    print("area           points  simul.  wall s  processor s  GB here  GB other   asked for")
    for name, n, simulations, bound in RUNS:
        if n > 1_000 and asked.quick:
            continue
        words = ["--workers", str(asked.workers), "--one", name, str(n), str(simulations)]
        subprocess.run([sys.executable, __file__, *words], check=True)
        print(f"   {bound}", flush=True)
    beside_a_loop(3 if asked.quick else 10)
    if not asked.quick:
        growth()


if __name__ == "__main__":
    main()
