"""Print how often the tests over sides and distances reject: at random, and what else each of them sees.

    python tests/benchmarks/pattern_error_rates.py [--null 2000] [--whole 200] [--power 500]

Null patterns are complete spatial randomness in a square, a dish and a ragged leaf with a hole.
Under the null all patterns of one area and number have one law, so instead of drawing 199 for
each, each is judged against 199 drawn at random from 10,000 further ones, by the functions that
judge a pattern. As a check the whole function is then run from end to end, on fewer patterns with
99 simulations of their own each.

The last rows are the quadrat test as asked (simulated) and the classical chi-square, over the
default quadrats, with the flags that the outputs would carry.

Power is measured in a dish. With d = sqrt(area / n), the mean spacing: "Thomas" are clumps of 4
points on average, normal about their centres with the stated deviation; "Matern" the same within
discs of the stated radius; "hard core" are points laid one after the other, none nearer to another
than the stated distance; "gradient" is a density that rises evenly from left to right, to the
stated multiple. All have exactly n points.
"""

from __future__ import annotations

import argparse
import math
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.spatial import cKDTree
from shapely.geometry.base import BaseGeometry

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from analyse.count_chance import simulated_p
from analyse.departures import FAMILY
from analyse.dispersion import clipped_dispersion
from analyse.envelopes import Measure, global_envelope
from analyse.flags import count_flags
from analyse.global_tests import FEWEST_POINTS, Curves, global_tests, index_test
from analyse.holm import holm_adjusted
from analyse.nulls import CompleteRandomness
from analyse.pattern import Pattern
from analyse.quadrats import QuadratCounts, count_in_quadrats, lay_grid
from analyse.ruler import Ruler
from analyse.scales import Sides
from analyse.simulated_curves import simulate_curves
from tests.benchmarks.error_rates import AREAS

LEVEL, AGAINST, CLUMP = 0.05, 199, 4.0
POOL = 10_000  # further patterns that those to judge against are drawn from
LENGTH: Measure = "extreme rank length"
DEVIATION: Measure = "studentised maximum deviation"
Floats = NDArray[np.float64]
Law = Callable[[BaseGeometry, int, np.random.Generator], Floats]


def within(
    area: BaseGeometry, n: int, tries: Callable[[], Floats]
) -> Floats:  # fmt: skip
    """The first n of what is tried that lies in the area."""
    found = np.empty((0, 2))
    while len(found) < n:
        some = tries()
        found = np.concatenate([found, some[shapely.contains_xy(area, *some.T)]])
    return found[:n]


def clumps(reach: float, shape: str) -> Law:
    """Points about centres, which lie beyond the edge as well."""

    def law(area: BaseGeometry, n: int, rng: np.random.Generator) -> Floats:
        spacing = math.sqrt(area.area / n)
        around = area.buffer(4 * reach * spacing)
        number = max(1, rng.poisson(n / CLUMP * around.area / area.area))
        centres = CompleteRandomness(around).draw(number, rng)

        def tries() -> Floats:
            own = centres[rng.integers(number, size=2 * n)]
            if shape == "normal":
                return own + reach * spacing * rng.standard_normal((2 * n, 2))
            turn, far = rng.uniform(0, 2 * math.pi, 2 * n), np.sqrt(rng.random(2 * n))
            return own + reach * spacing * np.column_stack([far * np.cos(turn), far * np.sin(turn)])

        return within(area, n, tries)

    return law


def hard_core(apart: float) -> Law:
    """Points one after the other, none nearer to another than some spacings."""

    def law(area: BaseGeometry, n: int, rng: np.random.Generator) -> Floats:
        tries = CompleteRandomness(area).draw(60 * n, rng)
        near = cKDTree(tries).query_ball_point(tries, apart * math.sqrt(area.area / n))
        barred, kept = np.zeros(len(tries), dtype=bool), []
        for k in range(len(tries)):
            if not barred[k]:
                kept.append(k)
                barred[near[k]] = True
        assert len(kept) >= n, f"only {len(kept)} of {n} points found room"
        return tries[kept[:n]]

    return law


def gradient(times: float) -> Law:
    """A density that rises evenly across the area."""

    def law(area: BaseGeometry, n: int, rng: np.random.Generator) -> Floats:
        null, (x0, _, x1, _) = CompleteRandomness(area), area.bounds

        def tries() -> Floats:
            some = null.draw(2 * n, rng)
            density = 1 + (times - 1) * (some[:, 0] - x0) / (x1 - x0)
            return some[rng.random(2 * n) * times < density]

        return within(area, n, tries)

    return law


LAWS: dict[str, Law] = {
    "Thomas, 0.3 d": clumps(0.3, "normal"),
    "Thomas, 0.7 d": clumps(0.7, "normal"),
    "Matern, 0.6 d": clumps(0.6, "disc"),
    "Matern, 1.5 d": clumps(1.5, "disc"),
    "hard core, 0.3 d": hard_core(0.3),
    "hard core, 0.5 d": hard_core(0.5),
    "gradient, 3 times": gradient(3),
    "gradient, 10 times": gradient(10),
}


def p_values(curves: Curves, own: Floats, others: Floats) -> dict[str, float]:
    """The p of every simulated test over sides and distances, of one pattern against others."""
    seen, drawn = curves.split(own), curves.split(others)
    p = {}
    for name, x in curves.x.items():
        for measure, ending in ((LENGTH, ""), (DEVIATION, ", deviation")):
            test = global_envelope(seen[name], drawn[name], x, name=name, measure=measure)
            p[name + ending] = test.p
    for ending in ("", ", deviation"):
        family = [p[name + ending] for name in FAMILY]
        p["family after Holm" + ending] = float(holm_adjusted(family).min())
    for name, even in (("mean_nearest", True), ("hopkins_skellam", False)):
        p[name] = index_test(seen[name], drawn[name], grows_with_evenness=even).p_two_sided
    return p


class Setting:
    """One area and number of points, with what many null patterns of it look like."""

    def __init__(self, area: BaseGeometry, n: int, seed: int, pool: int) -> None:
        self.area, self.n, self.null = area, n, CompleteRandomness(area)
        self.curves = Curves(Ruler.of(area, n), Sides.of(area, n))
        self.grid = lay_grid(area, n)
        self.rng = np.random.default_rng([seed, n, round(area.area)])
        self.pool = simulate_curves(self.curves, self.null, n=n, simulations=pool, seed=seed)

    def judged(self, points: Floats) -> dict[str, float]:
        """Every p of a pattern."""
        chosen = self.rng.choice(len(self.pool), AGAINST, replace=False)
        p = p_values(self.curves, self.curves(points), self.pool[chosen])
        counts = count_in_quadrats(points, self.grid)
        test = simulated_p(counts, self.grid.area, simulations=AGAINST, rng=self.rng)
        p["quadrats, simulated"] = test.p_two_sided
        p["quadrats, chi-square"] = clipped_dispersion(counts, self.grid.area).p_two_sided
        return p

    @property
    def flags(self) -> tuple[str, ...]:
        """What the outputs say of the quadrats of every pattern alike."""
        zeros = np.zeros(len(self.grid), dtype=int)
        clipped = QuadratCounts(zeros, self.grid.area, self.grid.whole, self.grid).clipped_share
        return count_flags({
            "n": self.n,
            "q": len(self.grid),
            "whole": int(self.grid.whole.sum()),
            "mean_expected": self.n / len(self.grid),
            "clipped_percent": 100 * clipped,
        })  # fmt: skip


def rates(found: list[dict[str, float]]) -> dict[str, float]:
    """Share of patterns that each test rejects."""
    return {name: float(np.mean([p[name] <= LEVEL for p in found])) for name in found[0]}


def show(columns: dict[str, dict[str, float]], title: str) -> None:
    """Print a table with a row per test."""
    names, wide = list(next(iter(columns.values()))), 30
    print(f"\n{title}\n{'':{wide}}" + "".join(f"{name:>12}" for name in columns))
    for name in names:
        print(f"{name:{wide}}" + "".join(f"{column[name]:12.3f}" for column in columns.values()))
    sys.stdout.flush()


def null_rates(patterns: int, numbers: list[int]) -> None:
    """Print the rates at random."""
    error = 1.96 * math.sqrt(LEVEL * (1 - LEVEL) / patterns)
    for area_name, area in AREAS.items():
        columns = {}
        for n in numbers:
            setting = Setting(area, n, 1, POOL)
            drawn = (setting.null.draw(n, setting.rng) for _ in range(patterns))
            found = [setting.judged(points) for points in drawn]
            columns[f"n = {n}"] = rates(found)
            print(f"# {area_name}, n = {n}: {setting.curves.sides},"
                  f" {len(setting.grid)} quadrats by default, flags {setting.flags}")  # fmt: skip
        show(columns, f"{area_name}: rejected at 5 % at random (give or take {error:.3f})")


def whole_rates(patterns: int) -> None:
    """Print the rates of the function itself, simulations and all."""
    columns = {}
    for place, (area_name, area) in enumerate(AREAS.items()):
        null, found = CompleteRandomness(area), []
        for k in range(patterns):
            points = null.draw(60, np.random.default_rng([9, place, k]))
            tests = global_tests(Pattern.of(points, area), simulations=99, seed=k + 1)
            assert tests is not None
            p = {name: envelope.p for name, envelope in tests.envelopes.items()}
            p["family after Holm"] = float(holm_adjusted([p[name] for name in FAMILY]).min())
            p["mean_nearest"] = tests.clark_evans.p_two_sided
            p["hopkins_skellam"] = tests.hopkins_skellam.p_two_sided
            found.append(p)
        columns[area_name[:11]] = rates(found)
    error = 1.96 * math.sqrt(LEVEL * (1 - LEVEL) / patterns)
    show(columns, f"The whole function, n = 60, 99 simulations (give or take {error:.3f})")


def power(patterns: int, numbers: list[int]) -> None:
    """Print the rates of patterns that are not random."""
    for n in numbers:
        setting, columns = Setting(AREAS["dish"], n, 2, POOL // 10), {}
        for name, law in LAWS.items():
            found = []
            for k in range(patterns):
                points = law(setting.area, n, np.random.default_rng([3, n, k]))
                found.append(setting.judged(points))
            columns[name] = rates(found)
        print(f"\ndish, n = {n}: share rejected at 5 %, {patterns} patterns each")
        for ending in ("", ", deviation"):
            tests = [test for test in rates([found[0]]) if ending in test]
            tests = tests if ending else [test for test in tests if "deviation" not in test]
            print(f"{'':20}" + "".join(f"{test.removesuffix(ending)[:12]:>13}" for test in tests))
            for name, column in columns.items():
                print(f"{name:20}" + "".join(f"{column[test]:13.2f}" for test in tests), flush=True)


def main() -> None:
    """Print the tables."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--null", type=int, default=2000, help="random patterns of each sort")
    parser.add_argument("--whole", type=int, default=200, help="patterns for the whole function")
    parser.add_argument("--power", type=int, default=500, help="patterns of each other law")
    parser.add_argument("--n", type=int, nargs="+", default=[20, 100, 500], help="points")
    asked = parser.parse_args()
    assert min(asked.n) >= FEWEST_POINTS
    if asked.null:
        null_rates(asked.null, asked.n)
    if asked.whole:
        whole_rates(asked.whole)
    if asked.power:
        power(asked.power, asked.n)


if __name__ == "__main__":
    main()
