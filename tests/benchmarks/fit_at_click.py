"""How well the circle at a click fits objects of drawn scenes, beside taking the usual radius.

    python tests/benchmarks/fit_at_click.py FOLDER...

A folder holds NAME.jpg and truth/NAME.csv (x,y,r), as `own_scenes.py` draws them. Clicks lie 0.15
radii from the true centre, each way (standard deviation); up to 40 objects and 30 empty places each.
"""

from __future__ import annotations

import csv
import sys
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from detect.photograph import read_photograph
from detect.review.fit import fit_circle

RIGHT = 0.25  # of the true radius


def measure(truth: Path, total: dict[str, list[float]]) -> None:
    """Click on the objects of one scene, and beside them."""
    rows = list(csv.DictReader(truth.open(encoding="utf-8")))
    if len(rows) < 5:
        return
    objects = np.array([[float(row[name]) for name in ("x", "y", "r")] for row in rows])
    photograph = read_photograph(truth.parents[1] / f"{truth.stem}.jpg")
    size = np.array([photograph.width, photograph.height])
    rng = np.random.default_rng(1)
    usual = float(np.median(objects[:, 2]))
    for k in rng.choice(len(objects), min(40, len(objects)), replace=False):
        x, y, r = objects[k]
        at = np.clip(objects[k, :2] + rng.normal(0, 0.15 * r, 2), 1, size - 2)
        start = time.perf_counter()
        found = fit_circle(photograph, at[0], at[1], usual)
        total["ms"].append(1000 * (time.perf_counter() - start))
        total["fitted"].append(found.fitted)
        total["right"].append(abs(found.radius / r - 1) < RIGHT)
        total["right of fitted"] += [abs(found.radius / r - 1) < RIGHT] * found.fitted
        total["usual right"].append(abs(usual / r - 1) < RIGHT)
        total["centre off, radii"].append(np.hypot(found.x - x, found.y - y) / r)
    empty = 0
    while empty < 30:
        place = rng.uniform([20, 20], size - 20)
        if np.hypot(*(objects[:, :2] - place).T).min() > 3 * usual:
            total["fitted on empty ground"].append(
                fit_circle(photograph, place[0], place[1], usual).fitted
            )
            empty += 1


def main() -> None:
    """Print a line for each kind of scene."""
    for kind in ("dish", "plot", "leaf"):
        names = ["fitted", "right", "right of fitted", "usual right", "centre off, radii"]
        total: dict[str, list[float]] = {n: [] for n in [*names, "fitted on empty ground", "ms"]}
        scenes = [t for f in sys.argv[1:] for t in sorted(Path(f).glob(f"truth/{kind}_*.csv"))]
        for truth in scenes:
            measure(truth, total)
        if total["ms"]:
            means = ", ".join(
                f"{n} {np.mean(total[n] or [np.nan]):.2f}" for n in total if n != "ms"
            )
            clicks = len(total["ms"])
            print(
                f"{kind}: {len(scenes)} scenes, {clicks} clicks: {means},"
                f" {np.median(total['ms']):.0f} ms"
            )


if __name__ == "__main__":
    main()
