"""Print and draw how many spots must be looked at until the verdict is that of the truth.

    python tests/benchmarks/review_order.py DIR [--picture order.png]

DIR holds the scenes of `small_scenes.py`. Spots are looked at in three orders: by doubt times
influence (`analyse.influence`), by doubt alone, and at random (the mean of 20 orders). A false one is
struck, as a person would; missed objects stay missed. Each scene is cut into quadrats of five sizes,
around the size by the rule, and each of these is a case. The verdict of the truth is that of the true
objects in the same quadrats, by the plain test, 399 simulations. Cases in which nothing is to be reached, because the verdict as found is
that of the truth and stays so in every order, tell nothing and are only counted; so are those that
looking at spots cannot bring there, because of what is missed.
"""

from __future__ import annotations

import argparse
from collections.abc import Iterator
from pathlib import Path

import numpy as np
from small_scenes import Scene, kept

from analyse.breaking_point import Judge
from analyse.count_chance import simulated_p
from analyse.findings import stream
from analyse.grid_options import GridOptions, default_side
from analyse.influence import influence
from analyse.pattern import pattern_from_sheet
from analyse.quadrats import count_in_quadrats, lay_grid, quadrats_of
from detect.lengths import Length

SIZES = (0.7, 0.85, 1.0, 1.2, 1.45)
RANDOM_ORDERS = 20


def looks_needed(order: np.ndarray, false: np.ndarray, where: np.ndarray, case: Case) -> int:
    """How many looks it takes until the verdict is that of the truth and stays so."""
    counts, needed = case.counts.copy(), 0
    if case.judge.verdict(counts, case.area) != case.truth:
        needed = 1
    for k, spot in enumerate(order, start=1):
        if false[spot]:
            counts[where[spot]] -= 1
            if case.judge.verdict(counts, case.area) != case.truth:
                needed = k + 1
        elif needed == k:
            needed = k + 1
    return needed


class Case:
    """One scene in quadrats of one size."""

    def __init__(self, scene: Scene, times: float) -> None:
        pattern = pattern_from_sheet(scene.sheet)
        side = times * default_side(pattern.area.area, len(pattern))
        options = GridOptions(side=Length(round(side, 4), pattern.unit))
        grid = lay_grid(pattern.area, len(pattern), options, pattern.unit, pattern.dish)
        self.counts, self.area = count_in_quadrats(pattern.points, grid), grid.area
        rng = stream(1, pattern.name)
        test = simulated_p(self.counts, self.area, simulations=399, rng=rng)
        self.judge = Judge.of(self.counts, self.area, test)
        there = (
            scene.objects if scene.sheet.scale is None else scene.sheet.scale.to_mm(scene.objects)
        )
        self.truth = self.judge.verdict(count_in_quadrats(there, grid), self.area)
        self.where = quadrats_of(pattern.points, grid)
        ids = {name: k for k, name in enumerate(scene.sheet.spots.id)}
        self.false = ~scene.real[[ids[name] for name in pattern.spots]]
        self.doubt = pattern.doubt
        self.weight = influence(self.counts, self.area, self.where)

    def looks(self, rng: np.random.Generator) -> dict[str, float]:
        """Looks needed by each order; n + 1 where none brings it there."""
        n = self.doubt.size
        orders = {
            "doubt times influence": np.lexsort((-self.doubt, -self.doubt * self.weight)),
            "doubt alone": np.argsort(-self.doubt, kind="stable"),
        }
        needed = {
            name: float(looks_needed(order, self.false, self.where, self))
            for name, order in orders.items()
        }
        needed["at random"] = float(
            np.mean(
                [
                    looks_needed(rng.permutation(n), self.false, self.where, self)
                    for _ in range(RANDOM_ORDERS)
                ]
            )
        )
        return needed


def all_cases(folder: Path) -> Iterator[Case]:
    for scene in kept(folder):
        for times in SIZES:
            yield Case(scene, times)


def draw(needed: dict[str, np.ndarray], path: Path) -> None:
    """The share of the telling cases that are there after so many looks."""
    from matplotlib.figure import Figure

    figure = Figure((5.6, 3.6), layout="constrained")
    axes = figure.subplots()
    looks = np.arange(0, 151)
    styles = {"doubt times influence": "-", "doubt alone": "--", "at random": ":"}
    for name, values in needed.items():
        share = [(values <= k).mean() for k in looks]
        axes.plot(looks, share, styles[name], color="#1b2429", lw=1.8, label=name)
    axes.set(xlabel="spots looked at", ylabel="cases with the verdict of the truth", ylim=(0, 1.02))
    axes.legend(frameon=False, loc="lower right")
    figure.savefig(path, dpi=120)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("folder", type=Path)
    parser.add_argument("--picture", type=Path)
    chosen = parser.parse_args()
    rng = np.random.default_rng(1)
    rows, beyond, idle = [], 0, 0
    for case in all_cases(chosen.folder):
        needed = case.looks(rng)
        if max(needed.values()) > case.doubt.size:
            beyond += 1
        elif max(needed.values()) == 0:
            idle += 1
        else:
            rows.append(needed)
    print(f"{len(rows)} telling cases; {idle} with nothing to be reached, {beyond} out of reach")
    if not rows:
        return
    table = {name: np.array([row[name] for row in rows]) for name in rows[0]}
    for name, values in table.items():
        print(f"{name}: looks needed, mean {values.mean():.1f}, median {np.median(values):.1f}")
    best = table["doubt times influence"]
    for other in ("doubt alone", "at random"):
        fewer, more = (best < table[other]).sum(), (best > table[other]).sum()
        print(f"fewer looks than {other} in {fewer} cases, more in {more}")
    if chosen.picture:
        draw(table, chosen.picture)


if __name__ == "__main__":
    main()
