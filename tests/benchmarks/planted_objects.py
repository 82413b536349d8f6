"""Print what planted objects say of recall and blind distance, against drawn truth.

    python tests/benchmarks/planted_objects.py FOLDER ... [--rounds 8] [--only dish] [--pairs 4]

Each FOLDER was drawn by `own_scenes.py`. Every scene is detected with the options of the sample's
recipe and measured with planted objects; the recall they give stands beside the true one, which is
the share found of the objects that were drawn within the study area. An interval is counted as
covering when it holds that very share (not the chance behind it).

The blind distance stands beside two measured with truth, each the half of the same curve: over
all pairs of mutually nearest true objects of the scenes of a kind, and over pairs drawn at known
separations into dishes, plots and leaves of this program's own (--pairs scenes a kind). For the
latter the same objects are drawn a second time, scattered at random, and the planted objects are
measured on those: a scene of nothing but pairs has few clear spots, many of them two seen as one.

Planted objects give the blind distance in sums of the radii that spots have. A spot's radius is
not the radius a thing is drawn with (a plant's takes in the gaps between its leaves, 1.2 times as
much), so true separations are divided by the scene's mean radius of the spots over that of the
true objects they are. --drawn keeps the scenes, and takes those that are there already.
"""

from __future__ import annotations

import argparse
import csv
import dataclasses
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager, nullcontext
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "sample_images"), str(ROOT / "tests" / "benchmarks")]

import dishes
import draw
import leaves
import own_scenes
import plots
import records
from light import jpeg
from patterns import Ground, Plan

from detect.accuracy import match_spots, read_truth
from detect.blind import blind_distance
from detect.errors import DetectError
from detect.planted import BlindDistance, Planted, PlantedOptions
from detect.requests import detect_photograph, parse_request
from detect.spots import Spots
from detect.truth import Truth

FEWEST_OBJECTS = 10
WIDEST = 1.6
MODULES = {"dish": dishes, "plot": plots, "leaf": leaves}


@dataclass
class Seen:
    """What one scene gave."""

    stem: str
    n: int
    recall: float
    planted: Planted
    apart: list[float] = field(default_factory=list)
    both: list[bool] = field(default_factory=list)
    ratio: float = float("nan")

    @property
    def kind(self) -> str:
        return self.stem.split("_")[0]


def asked(row: dict[str, str]) -> dict[str, str]:
    """The keys of the sample's recipe for one row of trial.csv."""
    if row["kind"] == "colonies":
        return {"kind": "colonies", "dish": "86mm", "inset": "1mm", "diameter": "1.2-6mm"}
    if row["kind"] == "seedlings":
        corners = ",".join(row[f"{axis}{k}"] for k in range(1, 5) for axis in "xy")
        size = f"{float(row['width_mm']):g}x{float(row['height_mm']):g}mm"
        return {"kind": "seedlings", "corners": corners, "plot": size, "diameter": "12-36mm"}
    line = ",".join(row[name] for name in ("bar_x1", "bar_y1", "bar_x2", "bar_y2"))
    length = f"{row['known_length_mm']}mm"
    leaf = {"kind": "lesions", "area": "leaf", "diameter": "1.4-5mm"}
    return leaf | {"line": line, "line_length": length}


def neighbours(truth: Truth) -> Iterator[tuple[int, int, float]]:
    """Mutually nearest true objects, and their separation in sums of radii."""
    if len(truth.xy) < 2:
        return
    apart = np.hypot(*(truth.xy[:, None] - truth.xy[None]).transpose(2, 0, 1))
    apart /= np.add.outer(truth.radius, truth.radius)
    np.fill_diagonal(apart, np.inf)
    nearest = apart.argmin(axis=1)
    for i, j in enumerate(nearest):
        if i < j and nearest[j] == i and apart[i, j] < WIDEST:
            yield i, int(j), float(apart[i, j])


def look(folder: Path, row: dict[str, str], rounds: int) -> Seen | None:
    """Detect and measure one scene; None where it holds next to nothing or cannot be done."""
    path = folder / row["photograph"]
    truth = read_truth(folder / "truth" / f"{path.stem}.csv")
    try:
        begun = time.process_time()
        detect_photograph(path, parse_request(asked(row)))
        middle = time.process_time()
        _, sheet = detect_photograph(path, parse_request(asked(row) | {"planted": rounds}))
        ended = time.process_time()
    except DetectError as trouble:
        print(path.stem, "left out:", trouble)
        return None
    inside = sheet.area.contains(truth.xy)
    found = np.zeros(len(truth.xy), dtype=bool)
    found[match_spots(sheet.spots.centres, truth.xy, truth.radius).truth] = True
    seen = Seen(path.stem, int(inside.sum()), 1.0, sheet.planted)
    seen.ratio = (ended - middle) / max(middle - begun, 1e-9)
    if seen.n:
        seen.recall = float(found[inside].mean())
    for i, j, separation in neighbours(truth):
        if inside[i] and inside[j]:
            seen.apart.append(separation / units(sheet.spots, truth))
            seen.both.append(bool(found[i] and found[j]))
    return seen


def units(spots: Spots, truth: Truth) -> float:
    """Mean radius of the spots over that of the true objects they are."""
    match = match_spots(spots.centres, truth.xy, truth.radius)
    return float(spots.radius[match.found].mean() / truth.radius[match.truth].mean())


def pairs_found(folder: Path, row: dict[str, str]) -> Seen:
    """Detect one scene of pairs and tell which are seen as two; nothing is planted."""
    path = folder / row["photograph"]
    truth = read_truth(folder / "truth" / f"{path.stem}.csv")
    _, sheet = detect_photograph(path, parse_request(asked(row)))
    inside = sheet.area.contains(truth.xy)
    found = np.zeros(len(truth.xy), dtype=bool)
    found[match_spots(sheet.spots.centres, truth.xy, truth.radius).truth] = True
    seen = Seen(path.stem, int(inside.sum()), float(found[inside].mean()), Planted(0, 0))
    for i, j, separation in neighbours(truth):
        if inside[i] and inside[j]:
            seen.apart.append(separation / units(sheet.spots, truth))
            seen.both.append(bool(found[i] and found[j]))
    return seen


@contextmanager
def in_pairs(module: object, separations: np.ndarray) -> Iterator[None]:
    """Let a scene's objects lie in pairs at these separations, and the rest apart."""
    kept = module.place_clearly

    def placed(plan: Plan, ground: Ground, seed: int) -> np.ndarray:
        rng = np.random.default_rng(seed)
        radii, points, n = plan.radii_mm, np.empty((0, 2)), len(plan.radii_mm)
        free = 4.5 * float(radii.max())
        while len(points) < n:
            k, middle = len(points), ground.scatter(1, rng)[0]
            if len(points) and np.hypot(*(points - middle).T).min() < free:
                continue
            new = middle[None]
            if k // 2 < len(separations):
                turn = rng.uniform(0, 2 * np.pi)
                step = separations[k // 2] * (radii[k] + radii[k + 1]) / 2
                way = step * np.array([np.cos(turn), np.sin(turn)])
                new = np.stack([middle - way, middle + way])
            if ground.inside(new).all():
                points = np.vstack([points, new])
        return points[:n]

    module.place_clearly = placed
    try:
        yield
    finally:
        module.place_clearly = kept


def draw_objects(folder: Path, kind: str, count: int, first: int, *, paired: bool) -> None:
    """Draw scenes of pairs at known separations, or of the same objects scattered at random."""
    (folder / "truth").mkdir(parents=True, exist_ok=True)
    rows = []
    many = {"dish": (24, 16), "plot": (36, 20), "leaf": (10, 9)}[kind]
    for k in range(count):
        seed = first + k
        shot = getattr(own_scenes, kind)(seed)
        rng = np.random.default_rng([seed, 9])
        usual, spread, least, most = {
            "dish": (1.2, 0.25, 0.7, 1.8),
            "plot": (10.0, 0.2, 7.0, 14.0),
            "leaf": (1.3, 0.25, 0.8, 2.0),
        }[kind]
        sizes = own_scenes.radii(rng, 2 * many[0] + many[1], usual, spread, least, most)
        plan = dataclasses.replace(shot.plan, kind="random" if paired else "few", radii_mm=sizes)
        shot = dataclasses.replace(shot, seed=seed, plan=plan)
        separation = rng.permutation(np.linspace(0.35, 1.55, many[0] * count))[k::count]
        stem = f"{kind}_{seed}"
        try:
            with in_pairs(MODULES[kind], separation) if paired else nullcontext():
                objects = records.true_objects(shot)
                picture = draw.draw(shot)
        except ValueError as trouble:
            print(stem, "left out:", trouble)
            continue
        (folder / f"{stem}.jpg").write_bytes(jpeg(picture, shot.exposure.quality))
        records.write_objects(folder / "truth" / f"{stem}.csv", objects)
        rows.append(records.trial_row(stem, shot, len(objects), "pairs" if paired else "few"))
        records.write_trial(folder / "truth" / "trial.csv", rows)


def drawn_pairs(at: Path, kind: str, count: int, first: int, rounds: int) -> None:
    """Print the blind distance over drawn pairs, and what planted objects say of the same kind."""
    for name, paired in (("pairs", True), ("scattered", False)):
        if not (at / f"{name}_{kind}").exists():
            draw_objects(at / f"{name}_{kind}", kind, count, first, paired=paired)
    true = [pairs_found(at / f"pairs_{kind}", row) for row in rows_of(at / f"pairs_{kind}", "")]
    told = []
    for row in rows_of(at / f"scattered_{kind}", ""):
        result = look(at / f"scattered_{kind}", row, rounds)
        if result is not None:
            show(result)
            told.append(dataclasses.replace(result, apart=[], both=[]))
    compare_blind(f"{kind}, pairs drawn", true + told)


def rows_of(folder: Path, only: str) -> Iterator[dict[str, str]]:
    with (folder / "truth" / "trial.csv").open(newline="", encoding="utf-8") as file:
        yield from (row for row in csv.DictReader(file) if row["photograph"].startswith(only))


def show(seen: Seen) -> None:
    planted, blind = seen.planted, seen.planted.blind
    line = f"{seen.stem:10} n {seen.n:3d} true {seen.recall:.3f}"
    if planted.recall is not None:
        r = planted.recall
        covers = "covers" if r.low <= seen.recall <= r.high else "MISSES"
        line += f" planted {r.value:.3f} ({r.low:.3f}..{r.high:.3f}) {covers}"
    if blind is not None:
        line += f" blind {blind.value:.3f} +- {blind.standard_error:.3f}"
    print(f"{line} cost {seen.ratio:.1f} {planted.note}", flush=True)


def pooled_blind(seen: list[Seen]) -> BlindDistance | None:
    """Mean of the scenes' planted blind distances, each weighing by its precision."""
    blinds = [s.planted.blind for s in seen if s.planted.blind is not None]
    if not blinds:
        return None
    weight = np.array([b.standard_error**-2 for b in blinds])
    value = float(np.average([b.value for b in blinds], weights=weight))
    return BlindDistance(value, float(weight.sum() ** -0.5))


def compare_blind(name: str, seen: list[Seen]) -> None:
    apart = [a for s in seen for a in s.apart]
    both = [b for s in seen for b in s.both]
    true, planted = blind_distance(apart, both), pooled_blind(seen)
    if true is None or planted is None:
        print(f"{name}: {sum(both)} of {len(both)} true pairs seen as two: no blind distance")
        return
    print(
        f"{name}: blind distance by truth {true.value:.3f} +- {true.standard_error:.3f}"
        f" ({len(both)} pairs), planted {planted.value:.3f} +- {planted.standard_error:.3f},"
        f" off by {100 * (planted.value / true.value - 1):+.0f} %"
    )


def summary(seen: list[Seen]) -> None:
    for kind in ("dish", "plot", "leaf", ""):
        rows = [s for s in seen if s.kind.startswith(kind) and s.planted.recall is not None]
        if not rows:
            continue
        off = np.array([s.planted.recall.value - s.recall for s in rows])
        covered = np.mean([s.planted.recall.low <= s.recall <= s.planted.recall.high for s in rows])
        print(
            f"{kind or 'all'}: {len(rows)} scenes, true recall {np.mean([s.recall for s in rows]):.3f},"
            f" mean error {off.mean():+.3f}, mean absolute error {np.abs(off).mean():.3f},"
            f" covered {100 * covered:.0f} %, median cost {np.median([s.ratio for s in rows]):.1f}"
        )
        if kind:
            compare_blind(f"{kind}, true neighbours", rows)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("folders", type=Path, nargs="*")
    parser.add_argument("--rounds", type=int, default=PlantedOptions().rounds)
    parser.add_argument("--only", default="")
    parser.add_argument("--pairs", type=int, default=0, help="scenes of pairs drawn, of each kind")
    parser.add_argument("--first", type=int, default=2900, help="first seed of the scenes of pairs")
    parser.add_argument("--drawn", type=Path, help="where scenes of pairs are kept")
    parser.add_argument("--leave-out", default="", help="kind of scene that is passed over")
    chosen = parser.parse_args()
    seen = []
    for folder in chosen.folders:
        for row in rows_of(folder, chosen.only):
            if chosen.leave_out and row["photograph"].startswith(chosen.leave_out):
                continue
            result = look(folder, row, chosen.rounds)
            if result is not None and result.n >= FEWEST_OBJECTS:
                seen.append(result)
                show(result)
    summary(seen)
    for kind in ("dish", "plot", "leaf"):
        if chosen.pairs and kind.startswith(chosen.only):
            with tempfile.TemporaryDirectory() as at:
                folder = chosen.drawn or Path(at)
                drawn_pairs(folder, kind, chosen.pairs, chosen.first, chosen.rounds)


if __name__ == "__main__":
    main()
