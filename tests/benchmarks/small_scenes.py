"""Draw small scenes with known truth, detect them with planted objects, and keep sheets and truth.

    python tests/benchmarks/small_scenes.py --out DIR --first 2400 --dishes 140 --plots 35 --leaves 25

The scenes are those of `own_scenes.py`, photographed with fewer pixels, so that hundreds of them can
be detected in minutes. DIR keeps <stem>.sheet.json and <stem>.truth.csv (x, y, r in pixels) and no
picture; what is there already is not done again, so a run may be broken off and taken up. Fitting
seeds are 1000-1099, measuring seeds 2000-2999.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "sample_images"), str(ROOT / "tests" / "benchmarks")]

import draw
import own_scenes
import records
from light import jpeg
from planted_objects import asked

from detect.accuracy import match_spots, read_truth
from detect.errors import DetectError
from detect.requests import detect_photograph, parse_request
from detect.sheet import Sheet, read_sheet, write_sheet
from detect.truth import Truth

SHRINK = {"dish": 0.42, "plot": 0.5, "leaf": 0.45}
ROUNDS = 4
FEWEST_OBJECTS = 10


@dataclass(frozen=True)
class Scene:
    """A detected scene and what is in it."""

    stem: str
    sheet: Sheet
    truth: Truth

    @property
    def kind(self) -> str:
        return self.stem.split("_")[0]

    @property
    def objects(self) -> np.ndarray:
        """True objects in the study area, x and y in pixels."""
        xy = self.truth.xy
        return xy[self.sheet.area.contains(xy)]

    @property
    def real(self) -> np.ndarray:
        """For each spot whether it is a true object."""
        real = np.zeros(len(self.sheet.spots), dtype=bool)
        matched = match_spots(self.sheet.spots.centres, self.truth.xy, self.truth.radius)
        real[matched.found] = True
        return real


def kept(folder: Path, *, fewest: int = FEWEST_OBJECTS) -> Iterator[Scene]:
    """The scenes of a folder that hold enough objects, in the order of their names."""
    for path in sorted(folder.glob("*.sheet.json")):
        stem = path.name.removesuffix(".sheet.json")
        scene = Scene(stem, read_sheet(path), read_truth(folder / f"{stem}.truth.csv"))
        if len(scene.objects) >= fewest:
            yield scene


def make(folder: Path, name: str, seed: int, rounds: int) -> str:
    """Draw, detect and keep one scene, and say what came of it."""
    stem = f"{name}_{seed}"
    if (folder / f"{stem}.sheet.json").exists():
        return "kept before"
    shot = getattr(own_scenes, name)(seed)
    shot = replace(shot, camera=shot.camera.shrunk(SHRINK[name]))
    objects = records.true_objects(shot)
    if len(objects) < FEWEST_OBJECTS:
        return f"only {len(objects)} objects: left out"
    row = records.trial_row(stem, shot, len(objects), "small scene")
    planted = {"planted": rounds} if rounds else {}
    with tempfile.TemporaryDirectory() as at:
        path = Path(at) / f"{stem}.jpg"
        path.write_bytes(jpeg(draw.draw(shot), shot.exposure.quality))
        _, sheet = detect_photograph(path, parse_request(asked(row) | planted))
    records.write_objects(folder / f"{stem}.truth.csv", objects)
    write_sheet(sheet, folder)
    return f"{len(objects)} objects, {len(sheet.spots)} spots"


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--out", type=Path, required=True)
    parser.add_argument("--first", type=int, required=True)
    parser.add_argument("--rounds", type=int, default=ROUNDS, help="of planted objects; 0 for none")
    for name in ("dishes", "plots", "leaves"):
        parser.add_argument(f"--{name}", type=int, default=0)
    chosen = parser.parse_args()
    chosen.out.mkdir(parents=True, exist_ok=True)
    wanted = [
        (k / max(count, 1), name, chosen.first + k)
        for name, count in (
            ("dish", chosen.dishes),
            ("plot", chosen.plots),
            ("leaf", chosen.leaves),
        )
        for k in range(count)
    ]
    for _, name, seed in sorted(wanted):  # kinds in turn, so that a part of a run is mixed as well
        try:
            print(f"{name}_{seed}", make(chosen.out, name, seed, chosen.rounds), flush=True)
        except (DetectError, RuntimeError, ValueError) as trouble:
            print(f"{name}_{seed} left out: {trouble}", flush=True)


if __name__ == "__main__":
    main()
