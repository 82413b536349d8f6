"""Draw small dishes of known law, run the detector on them, and keep what it saw.

    python tests/benchmarks/eyes_dishes.py CACHE [--dishes 220] [--power 100] [--fit 30]

CACHE is a folder; each dish is drawn and detected once and kept there as one .npz of true centres
and radii and of seen ones, in millimetres. Dishes are 86 mm wide at 0.14 mm a pixel; colonies are
opaque domes with radii of 0.5 to 1.8 mm about 0.85 mm, drawn one over the other. `eyes.py` judges
what is kept here. Dishes named fit serve to look at what the detector makes of overlaps; those
named measure are for the figures.
"""

from __future__ import annotations

import argparse
import math
import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from analyse.nulls import random_points
from detect.area import StudyArea
from detect.find import Found, find_spots
from detect.lengths import Length
from detect.photograph import Photograph
from detect.wanted import DetectOptions
from tests.patterns import apart, thomas
from tests.scenes import cloud, cover, developed, lay

MM_PER_PX, RADIUS_MM, MARGIN_MM = 0.14, 43.0, 3.0
SIZE = int(2 * (RADIUS_MM + MARGIN_MM) / MM_PER_PX)
MIDDLE = (SIZE - 1) / 2
AGAR, COLONY = (0.50, 0.36, 0.27), (0.86, 0.82, 0.70)
USUAL_MM, SPREAD, SMALLEST_MM, LARGEST_MM = 0.85, 0.25, 0.5, 1.8
DISH = shapely.Point(0, 0).buffer(RADIUS_MM, quad_segs=64)
AREA = StudyArea(
    shapely.Point(MIDDLE, MIDDLE).buffer(RADIUS_MM / MM_PER_PX, quad_segs=64), "dish", "given"
)
OPTIONS = DetectOptions(
    kind="colonies", diameter=(Length(1.0 / MM_PER_PX, "px"), Length(4.0 / MM_PER_PX, "px"))
)
NUMBERS = (100, 200, 400)
Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Dish:
    """One dish: what lies on it and what the detector saw, in millimetres about its middle."""

    xy: Floats
    radius: Floats
    seen_xy: Floats
    seen_radius: Floats


def radii(n: int, rng: np.random.Generator) -> Floats:
    """Radii of colonies."""
    return np.clip(USUAL_MM * np.exp(rng.normal(0, SPREAD, n)), SMALLEST_MM, LARGEST_MM)


def touching_at_most(radius: Floats, rng: np.random.Generator) -> Floats:
    """Centres set one after the other so that no two overlap."""
    points = np.empty((len(radius), 2))
    order = np.argsort(-radius)
    for k, i in enumerate(order):
        before = order[:k]
        while True:
            tried = random_points(DISH, 1, rng)[0]
            far = np.hypot(*(points[before] - tried).T)
            if (far >= radius[before] + radius[i]).all():
                points[i] = tried
                break
    return points


def _spacing(n: int) -> float:
    return math.sqrt(DISH.area / n)


LAWS: dict[str, Callable[[Floats, np.random.Generator], Floats]] = {
    "random": lambda radius, rng: random_points(DISH, len(radius), rng),
    "even": lambda radius, rng: apart(DISH, len(radius), 0.6 * _spacing(len(radius)), rng),
    "clumped": lambda radius, rng: thomas(DISH, len(radius), 3.0, 0.5 * _spacing(len(radius)), rng),
    "contact": touching_at_most,
}


def draw(xy: Floats, radius: Floats, rng: np.random.Generator) -> Photograph:
    """Draw colonies on agar, one over the other."""
    shape = (SIZE, SIZE)
    image = np.ones((*shape, 3), np.float32) * np.asarray(AGAR, np.float32)
    uneven = 0.03 * cloud(shape, rng, size=60) + 0.015 * cloud(shape, rng, size=8)
    image *= (1 + uneven)[..., None]
    for (x, y), r in zip(xy / MM_PER_PX + MIDDLE, radius / MM_PER_PX, strict=True):
        reach = int(r + 3)
        rows = slice(max(int(y) - reach, 0), int(y) + reach + 2)
        columns = slice(max(int(x) - reach, 0), int(x) + reach + 2)
        down, right = np.mgrid[rows, columns].astype(np.float32)
        away = np.hypot(right - x, down - y).astype(np.float32)
        dome = 0.78 + 0.24 * np.sqrt(np.clip(1 - (away / r) ** 2, 0, 1))
        own = np.asarray(COLONY, np.float32) * (1 + 0.05 * rng.normal())
        lay(
            image[rows, columns],
            (own * dome[..., None]).astype(np.float32),
            cover((away - r).astype(np.float32)),
        )
    image *= (1 + 0.1 * np.linspace(-0.5, 0.5, SIZE, dtype=np.float32))[None, :, None]
    return developed(image, rng, blur=0.8, noise=0.012)


def laid_out(law: str, n: int, k: int, part: str) -> tuple[Floats, Floats, np.random.Generator]:
    """True centres and radii of one dish, and the source of its picture's noise."""
    seed = [{"fit": 1, "measure": 2}[part], list(LAWS).index(law), n, k]
    rng = np.random.default_rng(seed)
    radius = radii(n, rng)
    return LAWS[law](radius, rng), radius, rng


def detected(law: str, n: int, k: int, part: str) -> tuple[Dish, Photograph, Found]:
    """Draw and detect one dish."""
    xy, radius, rng = laid_out(law, n, k, part)
    photograph = draw(xy, radius, rng)
    found = find_spots(photograph, AREA, OPTIONS)
    seen = (found.spots.centres - MIDDLE) * MM_PER_PX
    return Dish(xy, radius, seen, found.spots.radius * MM_PER_PX), photograph, found


def kept(cache: Path, law: str, n: int, part: str) -> Iterator[Dish]:
    """What is kept of one law and number, in the order of the dishes."""
    for path in sorted((cache / f"{part}_{law}_{n}").glob("[0-9][0-9][0-9][0-9].npz")):
        with np.load(path) as held:
            yield Dish(*(held[name] for name in ("xy", "radius", "seen_xy", "seen_radius")))


def keep(cache: Path, law: str, n: int, part: str, dishes: int) -> None:
    """Draw, detect and keep what is not kept yet."""
    folder = cache / f"{part}_{law}_{n}"
    folder.mkdir(parents=True, exist_ok=True)
    start = time.process_time()
    for k in range(dishes):
        path = folder / f"{k:04d}.npz"
        if not path.exists():
            dish, _, _ = detected(law, n, k, part)
            beside = path.with_suffix(".part.npz")
            np.savez(
                beside,
                xy=dish.xy,
                radius=dish.radius,
                seen_xy=dish.seen_xy,
                seen_radius=dish.seen_radius,
            )
            beside.rename(path)
    print(f"{folder.name}: {dishes} dishes, {time.process_time() - start:.0f} s", flush=True)


def main() -> None:
    """Draw and detect everything."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("cache", type=Path)
    parser.add_argument("--dishes", type=int, default=220)
    parser.add_argument("--power", type=int, default=100)
    parser.add_argument("--fit", type=int, default=30)
    asked = parser.parse_args()
    for n in NUMBERS:
        keep(asked.cache, "random", n, "fit", asked.fit)
    for n in reversed(NUMBERS):
        keep(asked.cache, "random", n, "measure", asked.dishes)
    for n in reversed(NUMBERS):
        for law in ("even", "clumped"):
            keep(asked.cache, law, n, "measure", asked.power)
    keep(asked.cache, "contact", 400, "measure", asked.power)


if __name__ == "__main__":
    main()
