"""Time what is done with a sheet of 100,000 spots: read, amend, write, tabulate, analyse.

    python tests/benchmarks/large_sheet.py [SPOTS]

Seconds of this process alone, so that other work on the computer has less say.
"""

from __future__ import annotations

import cProfile
import pstats
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from analyse.analysis import analyse_sheet
from analyse.grid_options import GridOptions
from analyse.plan import Trial
from detect.amended import current_state
from detect.amendments import Amendment
from detect.area import frame_area
from detect.scale import Scale
from detect.sheet import SCHEMA, PhotographIdentity, Sheet, points_csv, read_sheet, write_sheet
from detect.spots import Spots

Result = TypeVar("Result")
SIDE = 30_000


def timed(what: str, work: Callable[[], Result]) -> Result:
    begun = time.process_time()
    result = work()
    print(f"{what:34s}{time.process_time() - begun:7.2f} s", flush=True)
    return result


def a_sheet(n: int) -> Sheet:
    rng = np.random.default_rng(1)
    spots = Spots.found_at(
        rng.uniform(0, SIDE - 1, n),
        rng.uniform(0, SIDE - 1, n),
        rng.uniform(3, 9, n),
        contrast=rng.uniform(3, 30, n),
        fill=rng.uniform(0.9, 1, n),
        doubt=rng.uniform(0, 0.4, n),
    )
    identity = PhotographIdentity("field.tif", "0" * 64, SIDE, SIDE, None)
    settings = {"request": {}, "detector": {"kind": "spots"}, "notes": []}
    area, scale = frame_area(SIDE, SIDE), Scale.from_mm_per_pixel(2.0)
    return Sheet(SCHEMA, "benchmark", identity, scale, area, settings, spots)


def main() -> None:
    n = int(sys.argv[1]) if len(sys.argv) > 1 else 100_000
    sheet = a_sheet(n)
    strikes = tuple(
        Amendment(f"a{k}", "2026-01-01T00:00:00Z", "benchmark", "strike", str(7 * k + 1))
        for k in range(100)
    )
    with tempfile.TemporaryDirectory() as folder:
        path = timed(f"write a sheet of {n:,} spots", lambda: write_sheet(sheet, Path(folder)))
        again = timed("read it", lambda: read_sheet(path))
    timed("apply no amendments", lambda: current_state(again, ()))
    state = timed("apply 100 amendments", lambda: current_state(again, strikes))
    text = timed("its table of points", lambda: points_csv(state))
    assert text.count("struck") == len(strikes)
    profile = cProfile.Profile(time.process_time)
    begun = time.process_time()
    profile.runcall(analyse_sheet, state, (), None, grid=GridOptions(), trial=Trial())
    print(f"{'analyse it, pictures and report':34s}{time.process_time() - begun:7.2f} s (profiled)")
    print("slowest parts of it, each with what it calls:")
    stats = pstats.Stats(profile).sort_stats("cumulative")
    own = [(k, v) for k, v in stats.stats.items() if "/analyse/" in k[0] or "/detect/" in k[0]]  # type: ignore[attr-defined]
    for (file, _, name), (_, _, _, spent, _) in sorted(own, key=lambda e: -e[1][3])[:14]:
        print(f"  {spent:7.2f} s  {Path(file).name}: {name}")


if __name__ == "__main__":
    main()
