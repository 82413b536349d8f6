"""How often the limits of a spot check's corrected total hold, and how wide they are.

    python tests/benchmarks/spot_check.py [--detectors 2000] [--first 2000] [--figure FILE.png]

Simulated detectors: recall 0.7 to 1, precision 0.8 to 1; half of them err anywhere, half in clusters
(objects are missed in a part of the area, false spots come in clumps of four). Objects lie at random
or clumped, 40 to 300 of them, in 16 to 144 quadrats, of which 5 to 30 are drawn.
"""

from __future__ import annotations

import argparse
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from analyse.double_sampling import (
    DoubleSample,
    difference_limits,
    difference_total,
    ratio_limits,
    ratio_total,
)
from analyse.quadrat_draw import SpotCheckOptions, draw_quadrats

DRAWN = (5, 8, 10, 15, 20, 30)


@dataclass(frozen=True)
class Trial:
    """A simulated photograph, what a detector counts in each quadrat, and what is there."""

    quick: np.ndarray
    careful: np.ndarray
    recall: float
    precision: float
    clustered: bool


def simulate(rng: np.random.Generator) -> Trial:
    """Objects in the unit square, and a detector's errors."""
    n, side = int(rng.choice([40, 80, 150, 300])), int(rng.integers(4, 13))
    points = rng.random((n, 2))
    if rng.random() < 0.5:
        centres = rng.random((max(3, n // 10), 2))
        points = (centres[rng.integers(len(centres), size=n)] + rng.normal(0, 0.05, (n, 2))) % 1
    recall, precision = float(rng.uniform(0.7, 1)), float(rng.uniform(0.8, 1))
    clustered = bool(rng.random() < 0.5)
    seen = _seen(points, recall, clustered, rng)
    invented = rng.poisson(seen.sum() * (1 - precision) / precision)
    false = rng.random((invented, 2))
    if clustered and invented:
        clumps = rng.random((max(1, invented // 4), 2))
        false = clumps[rng.integers(len(clumps), size=invented)]
        false = (false + rng.normal(0, 0.03, (invented, 2))) % 1
    careful = _counted(points, side)
    quick = _counted(points[seen], side) + _counted(false, side)
    return Trial(quick, careful, recall, precision, clustered)


def _seen(
    points: np.ndarray, recall: float, clustered: bool, rng: np.random.Generator
) -> np.ndarray:
    """Which objects are found: each alike, or all but those in some ninths of the area."""
    if not clustered:
        return rng.random(len(points)) < recall
    ninth = (points * 3 // 1).astype(int) @ [3, 1]
    bad = np.isin(ninth, rng.permutation(9)[: max(1, round(9 * rng.uniform(0.15, 0.5)))])
    here = 1 - (1 - recall) / max(bad.mean(), 0.05)
    return rng.random(len(points)) < np.where(bad, max(0.0, here), 1.0)


def _counted(points: np.ndarray, side: int) -> np.ndarray:
    """Points in each of side x side quadrats."""
    if not len(points):
        return np.zeros(side * side, dtype=int)
    place = np.minimum(points * side // 1, side - 1).astype(int) @ [side, 1]
    return np.bincount(place, minlength=side * side)


def checked(trial: Trial, drawn: int, seed: int) -> DoubleSample:
    """The sample of a spot check by a person who errs nowhere."""
    options = SpotCheckOptions(quadrats=min(drawn, trial.quick.size), seed=seed)
    places, stratum = draw_quadrats(trial.quick, options)
    return DoubleSample(
        stratum[places],
        trial.quick[places].astype(float),
        trial.careful[places].astype(float),
        np.bincount(stratum),
        float(trial.quick.sum()),
    )


def limits_of(sample: DoubleSample) -> dict[str, object]:
    """Every way of giving limits."""
    plain = ratio_total(sample)
    return {
        "difference": difference_limits(sample),
        "ratio": ratio_limits(sample),
        "difference, plain t": difference_total(sample).limits(),
        "ratio, plain t": None if plain is None else plain.limits(),
    }


def measure(detectors: int, first: int) -> list[dict[str, object]]:
    """A row per detector and way: whether the truth was covered, how wide the limits were."""
    rows = []
    for number in range(detectors):
        rng = np.random.default_rng([first, number])
        trial = simulate(rng)
        sample = checked(trial, int(rng.choice(DRAWN)), number)
        truth, errors = trial.careful.sum(), int((sample.careful != sample.quick).sum())
        for way, limits in limits_of(sample).items():
            if limits is not None:
                rows.append(
                    {
                        "way": way,
                        "covered": limits.low - 1e-9 <= truth <= limits.high + 1e-9,
                        "too_low": truth > limits.high + 1e-9,
                        "width": (limits.high - limits.low) / truth,
                        "off": (limits.value - truth) / truth,
                        "drawn": len(sample),
                        "errors": errors,
                        "clustered": trial.clustered,
                        "recall": trial.recall,
                        "precision": trial.precision,
                    }
                )
    return rows


CORNERS = {
    "all": lambda row: True,
    "5 or 8 drawn": lambda row: row["drawn"] <= 8,
    "10 or 15": lambda row: 8 < row["drawn"] <= 15,
    "20 or 30": lambda row: row["drawn"] > 15,
    "errors anywhere": lambda row: not row["clustered"],
    "in clusters": lambda row: row["clustered"],
    "recall below 0.8": lambda row: row["recall"] < 0.8,
    "recall above 0.95": lambda row: row["recall"] > 0.95,
    "precision above 0.97": lambda row: row["precision"] > 0.97,
    "no difference seen": lambda row: row["errors"] == 0,
    "1 or 2 quadrats differ": lambda row: 1 <= row["errors"] <= 2,
}


def widths(first: int, trials: int) -> dict[str, dict[int, float]]:
    """Median half width by quadrats drawn: 100 objects in 100 quadrats, half as many, and so on."""
    numbers = (5, 7, 10, 14, 20, 28, 40, 60)
    found: dict[str, dict[int, float]] = {}
    for words, recall, precision in (
        ("recall 0.80, precision 0.90", 0.8, 0.9),
        ("recall 0.90, precision 0.95", 0.9, 0.95),
        ("recall 0.98, precision 0.98", 0.98, 0.98),
    ):
        found[words] = {}
        for drawn in numbers:
            halves = []
            for number in range(trials):
                rng = np.random.default_rng([first, drawn, number])
                points = rng.random((200, 2))
                seen = points[rng.random(200) < recall]
                false = rng.random((rng.poisson(len(seen) * (1 - precision) / precision), 2))
                quick = _counted(seen, 10) + _counted(false, 10)
                trial = Trial(quick, _counted(points, 10), recall, precision, False)
                limits = difference_limits(checked(trial, drawn, number))
                halves.append((limits.high - limits.low) / 2 / 200)
            found[words][drawn] = float(np.median(halves))
    return found


def draw(found: dict[str, dict[int, float]], path: Path) -> None:
    """Draw width against the number of quadrats checked."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(6.4, 4.2), layout="constrained")
    axes = figure.add_subplot()
    for (words, curve), mark in zip(found.items(), "osD", strict=True):
        axes.plot(list(curve), [100 * half for half in curve.values()], mark + "-", label=words)
    axes.axhline(10, color="0.5", lw=1, ls="--")
    axes.annotate("10 %", (60, 10.6), ha="right", color="0.35")
    axes.set(
        xlabel="quadrats checked, of 100 with 2 objects each",
        ylabel="half width of the 95 % limits, % of the objects",
        ylim=(0, None),
        xscale="log",
    )
    axes.set_xticks(list(curve), [str(number) for number in curve])
    axes.minorticks_off()
    axes.legend(frameon=False)
    figure.savefig(path, dpi=140)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--detectors", type=int, default=2000)
    parser.add_argument("--first", type=int, default=2000, help="seed")
    parser.add_argument("--figure", type=Path)
    chosen = parser.parse_args()
    rows = measure(chosen.detectors, chosen.first)
    for way in dict.fromkeys(row["way"] for row in rows):
        print(f"\n{way}")
        for corner, belongs in CORNERS.items():
            mine = [row for row in rows if row["way"] == way and belongs(row)]
            if mine:
                covered, low, width, off = (
                    np.mean([row[name] for row in mine])
                    for name in ("covered", "too_low", "width", "off")
                )
                print(
                    f"  {corner:24s} covered {100 * covered:5.1f} % of {len(mine):5d}"
                    f"  (truth above {100 * low:4.1f} %), width {width:.3f}, off {off:+.3f}"
                )
    found = widths(chosen.first, max(20, chosen.detectors // 10))
    print("\nhalf width by quadrats drawn (of 100 with 2 objects each)")
    for words, curve in found.items():
        print(f"  {words}: " + ", ".join(f"{k} {100 * v:.0f} %" for k, v in curve.items()))
    if chosen.figure is not None:
        draw(found, chosen.figure)


if __name__ == "__main__":
    main()
