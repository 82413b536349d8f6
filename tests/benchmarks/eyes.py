"""Print how often dishes of known law are called even or clumped, with and without the detector's eyes.

    python tests/benchmarks/eyes.py CACHE [--simulations 119] [--most 220] [--planted 0] [--laws ...]

CACHE holds dishes drawn and detected by `eyes_dishes.py`. Two tests at the two-sided level of 5 %: the quadrat
test as asked (default quadrats, simulated), and Clark and Evans' index. Against three nulls:

plain     points placed at random
default   as the detector sees them, with the usual blind distance of colonies and its spread
measured  the same with the blind distance measured on the dishes named fit (pairs alone, logistic)
planted   the same with what planted objects gave, as the median of the first few dishes (--planted)
contact   discs that cannot overlap (for the dishes drawn so, and to see what it costs)
"""

from __future__ import annotations

import argparse
import math
import sys
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from analyse.eyes import CONTACT, DEFAULTS, Eyes
from analyse.global_tests import index_test
from analyse.nulls import CompleteRandomness, Null
from analyse.quadrats import count_in_quadrats, lay_grid
from analyse.seen_randomness import SeenRandomness
from analyse.simulated_curves import simulate_curves
from detect.blind import blind_distance
from detect.planted import BlindDistance, PlantedOptions
from detect.rounds import measure_planted
from tests.benchmarks.eyes_dishes import AREA, DISH, NUMBERS, OPTIONS, Dish, detected, kept

LEVEL, ALONE, WIDEST = 0.05, 1.3, 1.6
Floats = NDArray[np.float64]
PLAIN = CompleteRandomness(DISH)


def pairs_alone(dish: Dish) -> tuple[list[float], list[bool]]:
    """Pairs clear of all others: how far apart in sums of radii, and whether seen as two."""
    apart = np.hypot(*(dish.xy[:, None] - dish.xy[None]).transpose(2, 0, 1))
    apart /= np.add.outer(dish.radius, dish.radius)
    np.fill_diagonal(apart, np.inf)
    nearest, tree = apart.argmin(axis=1), cKDTree(dish.seen_xy)
    separation, both = [], []
    for i, j in enumerate(nearest):
        if not (i < j and nearest[j] == i and apart[i, j] < WIDEST):
            continue
        others = np.delete(np.concatenate([apart[i], apart[j]]), [j, len(apart) + i])
        if others.min() > ALONE:
            seen = {
                row for k in (i, j) for row in tree.query_ball_point(dish.xy[k], dish.radius[k])
            }
            separation.append(float(apart[i, j]))
            both.append(len(seen) >= 2)
    return separation, both


def measured(cache: Path) -> BlindDistance | None:
    """The blind distance of the dishes named fit."""
    separation: list[float] = []
    both: list[bool] = []
    for n in NUMBERS:
        for dish in kept(cache, "random", n, "fit"):
            some, seen = pairs_alone(dish)
            separation += some
            both += seen
    found = blind_distance(separation, both)
    print(f"pairs alone on the dishes named fit: {len(both)}, blind distance {found}")
    return found


def planted(dishes: int) -> BlindDistance | None:
    """What planted objects give on the first few dishes of each number, as the median of both."""
    seen = []
    for n in NUMBERS:
        for k in range(dishes):
            _, photograph, found = detected("random", n, k, "fit")
            record = measure_planted(photograph, AREA, OPTIONS, found, planted=PlantedOptions())
            if record.blind is not None:
                seen.append(record.blind)
                print(f"planted objects, dish {k} of {n}: {record.blind}", flush=True)
    if not seen:
        return None
    return BlindDistance(
        float(np.median([one.value for one in seen])),
        float(np.median([one.standard_error for one in seen])),
    )


def nulls(found: dict[str, BlindDistance | None]) -> dict[str, Eyes]:
    """The eyes to be tried, by name."""
    eyes = {"default": Eyes(*DEFAULTS["colonies"], math.nan, "default")}
    for name, blind in found.items():
        if blind is not None:
            eyes[name] = Eyes(blind.value, blind.standard_error, math.nan, "planted")
    return eyes | {"contact": Eyes(CONTACT, 0.0, math.nan, "contact")}


def nearest(points: Floats) -> float:
    """Mean distance to the nearest neighbour."""
    return float(cKDTree(points).query(points, k=2)[0][:, 1].mean())


def judge(dish: Dish, k: int, law: Null, simulations: int) -> tuple[float, ...]:
    """p of the even and the clumped side, of quadrats and of neighbours."""
    n, grid = len(dish.seen_xy), lay_grid(DISH, len(dish.seen_xy))
    expected = n * grid.area / grid.area.sum()

    def both(points: Floats) -> Floats:
        off = count_in_quadrats(points, grid) - expected
        return np.append((off * off / expected).sum(), nearest(points))

    own, drawn = (
        both(dish.seen_xy),
        simulate_curves(both, law, n=n, simulations=simulations, seed=k),
    )
    quadrats = index_test(own[0], drawn[:, 0], grows_with_evenness=False)
    evans = index_test(own[1], drawn[:, 1], grows_with_evenness=True)
    return quadrats.p_even, quadrats.p_clumped, evans.p_even, evans.p_clumped


def main() -> None:
    """Print a row for every law, number and null."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("cache", type=Path)
    parser.add_argument("--simulations", type=int, default=119)
    parser.add_argument("--most", type=int, default=220)
    parser.add_argument("--planted", type=int, default=0)
    parser.add_argument("--blind", type=float, nargs=2, action="append", metavar=("BLIND", "SE"))
    parser.add_argument("--laws", nargs="+", default=["random", "even", "clumped", "contact"])
    parser.add_argument("--numbers", nargs="+", type=int, default=NUMBERS)
    parser.add_argument("--nulls", nargs="+")
    asked = parser.parse_args()
    found = {"measured": measured(asked.cache)}
    if asked.planted:
        found["planted"] = planted(asked.planted)
    eyes = nulls(found)
    for value, error in asked.blind or []:
        eyes[f"blind {value:g} ({error:g})"] = Eyes(value, error, math.nan, "planted")
    print("law n null dishes | quadrats: even clumped either | neighbours: even clumped either")
    for law in asked.laws:
        for n in asked.numbers:
            dishes = list(kept(asked.cache, law, n, "measure"))[: asked.most]
            for name in asked.nulls or ["plain", *eyes]:
                if not dishes:
                    continue
                p = np.array(
                    [
                        judge(
                            dish,
                            k,
                            PLAIN
                            if name == "plain"
                            else SeenRandomness(DISH, dish.seen_radius, eyes[name]),
                            asked.simulations,
                        )
                        for k, dish in enumerate(dishes)
                    ]
                )
                out = 2 * p <= LEVEL
                rates = (
                    f"{100 * out[:, a].mean():5.1f} {100 * out[:, b].mean():5.1f}"
                    f" {100 * (out[:, a] | out[:, b]).mean():5.1f}"
                    for a, b in ((0, 1), (2, 3))
                )
                print(f"{law} {n} {name} {len(dishes)} | {' | '.join(rates)}", flush=True)


if __name__ == "__main__":
    main()
