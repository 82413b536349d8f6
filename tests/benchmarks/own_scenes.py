"""Draw photographs with known truth, like the sample trial's but of other seeds, sizes and clutter.

    python tests/benchmarks/own_scenes.py --out DIR --first 1000 --dishes 12 --plots 8 --leaves 8

Scenes of the seeds 1000-1099 may serve to fit the detector; 2000-2999 are for measuring only.
"""

from __future__ import annotations

import argparse
import sys
from dataclasses import replace
from functools import partial
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT / "sample_images"))

import draw
import records
import trial
from light import jpeg


def radii(
    rng: np.random.Generator, n: int, median: float, spread: float, least: float, most: float
) -> np.ndarray:
    values = np.clip(np.exp(rng.normal(np.log(median), spread, n)), least, most)
    values.flags.writeable = False
    return values


def dish(seed: int, crowd: int | None = None) -> object:
    """A dish of a drawn number of colonies, or of `crowd` small ones at random."""
    rng = np.random.default_rng([seed, 1])
    base = rng.choice(list(trial.dishes().values()))
    n = int(
        rng.choice(
            [0, 20, 40, 60, 80, 120, 180, 240, 300],
            p=[0.1, 0.1, 0.1, 0.15, 0.15, 0.1, 0.1, 0.1, 0.1],
        )
    )
    n = n if crowd is None else crowd
    median = float(rng.uniform(0.8, 1.6)) if n <= 120 else float(rng.uniform(0.72, 0.85))
    kind = str(rng.choice(["random", "clumped", "even"])) if n else "none"
    if n > 120:
        kind = "random" if crowd is None else "few"  # so many never pass for a clear example
    sizes = radii(rng, n, median, float(rng.uniform(0.15, 0.35)), 0.62, 2.6 if n <= 120 else 1.2)
    plan = replace(base.plan, kind=kind, radii_mm=sizes, clumps=9, clump_mm=5.2)
    clutter = replace(
        base.clutter,
        glare=str(rng.choice(["window", "lamp", "tubes"])),
        glare_at=tuple(float(v) for v in rng.uniform(-18, 18, 2)),
        glare_level=float(rng.uniform(0.15, 0.3)),
        bubbles=int(rng.integers(0, 10)),
        fibres=int(rng.integers(0, 8)),
        drops=int(rng.choice([0, 40, 80])),
    )
    camera = replace(
        base.camera, tilt_deg=float(rng.uniform(0, 7)), towards_deg=float(rng.uniform(0, 360))
    )
    sorts = rng.dirichlet([4, 2, 1.5, 0.6, 0.6])
    return replace(
        base,
        seed=seed,
        plan=plan,
        clutter=clutter,
        camera=camera,
        sorts=tuple(float(v) for v in sorts),
    )


def plot(seed: int) -> object:
    rng = np.random.default_rng([seed, 2])
    base = rng.choice(list(trial.plots().values()))
    n = int(rng.integers(40, 150))
    kind = str(rng.choice(["random", "clumped", "even"]))
    if kind == "even":
        n = min(n, 85)
    sizes = radii(rng, n, float(rng.uniform(8, 11)), 0.22, 6, 16)
    plan = replace(
        base.plan,
        kind=kind,
        radii_mm=sizes,
        clumps=9,
        clump_mm=62,
        nearest=float(rng.uniform(1.4, 2.4)),
    )
    camera = replace(
        base.camera, tilt_deg=float(rng.uniform(1, 10)), towards_deg=float(rng.uniform(60, 110))
    )
    return replace(base, seed=seed, plan=plan, camera=camera)


def leaf(seed: int) -> object:
    rng = np.random.default_rng([seed, 3])
    base = rng.choice(list(trial.leaves().values()))
    n = int(rng.integers(20, 90))
    kind = str(rng.choice(["random", "clumped", "even"]))
    if kind == "even":
        n = min(n, 60)
    sizes = radii(rng, n, float(rng.uniform(1.1, 1.5)), 0.3, 0.75, 2.4)
    plan = replace(base.plan, kind=kind, radii_mm=sizes, clumps=8, clump_mm=7.5)
    return replace(base, seed=seed, plan=plan)


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("--out", type=Path, required=True)
    parser.add_argument("--first", type=int, required=True)
    for name in ("dishes", "plots", "leaves"):
        parser.add_argument(f"--{name}", type=int, default=0)
    parser.add_argument("--crowded", type=int, help="colonies on every dish")
    chosen = parser.parse_args()
    truth = chosen.out / "truth"
    (truth / "outlines").mkdir(parents=True, exist_ok=True)
    rows = []
    for name, make, count in (
        ("dish", partial(dish, crowd=chosen.crowded), chosen.dishes),
        ("plot", plot, chosen.plots),
        ("leaf", leaf, chosen.leaves),
    ):
        for k in range(count):
            stem = f"{name}_{chosen.first + k}"
            try:
                shot = make(chosen.first + k)
                objects = records.true_objects(shot)
                picture = draw.draw(shot)
            except (RuntimeError, ValueError) as trouble:
                print(stem, "left out:", trouble)
                continue
            (chosen.out / f"{stem}.jpg").write_bytes(jpeg(picture, shot.exposure.quality))
            records.write_objects(truth / f"{stem}.csv", objects)
            if name == "leaf":
                records.write_outline(truth / "outlines" / f"{stem}.csv", shot)
            rows.append(records.trial_row(stem, shot, len(objects), "own scene"))
            print(stem, len(objects), flush=True)
            records.write_trial(truth / "trial.csv", rows)


if __name__ == "__main__":
    main()
