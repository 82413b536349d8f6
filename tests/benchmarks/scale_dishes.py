"""Print how well dishes are measured on drawn photographs: diameter, centre, distances, uncertainty.

    python tests/benchmarks/scale_dishes.py --first 1100 --count 60 [--keep DIR]

Tilts go evenly from 0 to 20 degrees; colour and black-and-white, five benches, five fillings, with
and without lid, and the camera from 250 to 700 mm away take turns by chance. Scenes of the seeds
1100-1159 served to build and calibrate; 2200-2259 are for measuring only. With --keep the pictures
are kept in a folder, and used again if they are there.
"""

from __future__ import annotations

import argparse
import math
import sys
import tempfile
import time
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import cv2
import numpy as np

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT / "sample_images"))
sys.path.insert(0, str(ROOT))

import dishes
import trial
from bench import GROUND
from camera import Camera
from light import jpeg

from detect.dish import Dish, find_dish
from detect.errors import DetectError
from detect.photograph import read_photograph
from detect.scale import Scale, scale_from_dish

MOST_TILT = 20.0
MOST_OFF = 0.7  # percent of a diameter
FILLINGS = {  # light scattered back, light let through
    "yellow": ((0.20, 0.140, 0.062), (0.62, 0.54, 0.38)),
    "red": ((0.19, 0.075, 0.055), (0.6, 0.3, 0.25)),
    "clear": ((0.045, 0.044, 0.040), (0.80, 0.79, 0.75)),
    "white": ((0.40, 0.39, 0.36), (0.35, 0.35, 0.33)),
    "brown": ((0.10, 0.055, 0.022), (0.5, 0.36, 0.18)),
}


@dataclass(frozen=True)
class Shot:
    """A photograph to draw."""

    dish: dishes.Dish
    grey: bool
    faint: float  # how far its contrast is kept, 0..1
    filling: str

    def draw(self) -> np.ndarray:
        picture = dishes.draw(self.dish)
        if self.grey:
            picture = np.dstack([cv2.cvtColor(picture, cv2.COLOR_RGB2GRAY)] * 3)
        if self.faint < 1:
            middle = float(picture.mean())
            picture = np.round(middle + self.faint * (picture - middle)).astype(np.uint8)
        return picture

    def __str__(self) -> str:
        camera = self.dish.camera
        words = (
            f"{camera.tilt_deg:4.1f} deg at {camera.distance_mm:3.0f} mm",
            f"{self.filling:6} on {self.dish.bench:10}",
            "lid" if self.dish.lid else "   ",
            "grey" if self.grey else "    ",
            "faint" if self.faint < 1 else "     ",
        )
        return "  ".join(words)


def camera_of(rng: np.random.Generator, tilt_deg: float) -> Camera:
    """A camera that has the whole dish in its frame, at any distance of use."""
    scale = float(rng.uniform(10.5, 12.0))
    return Camera(
        width=1400,
        height=1240,
        px_per_mm=scale,
        distance_mm=float(np.exp(rng.uniform(math.log(250), math.log(700)))),
        tilt_deg=tilt_deg,
        towards_deg=float(rng.uniform(0, 360)),
        roll_deg=float(rng.uniform(-10, 10)),
        aim_x=float(rng.uniform(-60, 60)),
        aim_y=float(rng.uniform(-25, 25)),
    )


def shot_of(seed: int, tilt_deg: float) -> Shot:
    """The photograph of a seed."""
    rng = np.random.default_rng([seed, 7])
    base = rng.choice(list(trial.dishes().values()))
    filling = str(rng.choice(list(FILLINGS)))
    agar, clear = FILLINGS[filling]
    n = int(rng.choice([0, 25, 60, 120]))
    sizes = np.clip(np.exp(rng.normal(math.log(1.1), 0.3, n)), 0.62, 2.4)
    sizes.flags.writeable = False
    clutter = replace(
        base.clutter,
        glare=str(rng.choice(["window", "lamp", "tubes"])),
        glare_at=tuple(float(v) for v in rng.uniform(-20, 20, 2)),
        glare_level=float(rng.uniform(0.1, 0.35)),
        bubbles=int(rng.integers(0, 8)),
        fibres=int(rng.integers(0, 6)),
        drops=int(rng.choice([0, 40])),
    )
    bench = str(rng.choice(list(GROUND)))
    dish = replace(
        base,
        seed=seed,
        bench=bench,
        camera=camera_of(rng, tilt_deg),
        sun=replace(
            base.sun, from_deg=float(rng.uniform(0, 360)), elevation_deg=float(rng.uniform(40, 60))
        ),
        exposure=replace(base.exposure, gain=1.12 if bench == "pale cloth" else 1.5),
        clutter=clutter,
        plan=replace(base.plan, kind="random" if n else "none", radii_mm=sizes),
        agar=agar,
        clear=clear,
        lid=bool(rng.random() < 0.5),
    )
    grey, faint = bool(rng.random() < 0.5), bool(rng.random() < 0.25)
    return Shot(dish, grey, 0.5 if faint else 1.0, filling)


def drawn(shot: Shot, path: Path) -> Path:
    """Draw a photograph unless it is there."""
    if not path.exists():
        path.write_bytes(jpeg(shot.draw(), 88))
    return path


def distances_off(scale: Scale, camera: Camera) -> tuple[float, float]:
    """Root mean square and 95th percentile, in percent, of errors of distances on the plate."""
    rng = np.random.default_rng(1)
    turn, out = rng.uniform(0, 2 * np.pi, 800), 42 * np.sqrt(rng.uniform(0, 1, 800))
    true = np.column_stack([out * np.cos(turn), out * np.sin(turn)])
    seen = scale.to_mm(camera.to_pixels(true, z_mm=dishes.AGAR_MM))
    apart = np.hypot(*(true[::2] - true[1::2]).T)
    off = 100 * (np.hypot(*(seen[::2] - seen[1::2]).T) / apart - 1)[apart > 5]
    return float(np.sqrt((off**2).mean())), float(np.percentile(np.abs(off), 95))


def measured(shot: Shot, dish: Dish) -> dict[str, Any]:
    """Errors of one dish: diameter in percent, centre in percent of the radius, distances."""
    camera = shot.dish.camera
    true = camera.circle(dishes.INNER_MM, z_mm=dishes.AGAR_MM)
    radius = math.sqrt(true.semi_a * true.semi_b)
    scale = scale_from_dish(dish, 2 * dishes.INNER_MM)
    rms, most = distances_off(scale, camera)
    flat, _ = distances_off(scale_from_dish(replace(dish, far=(0.0, 0.0)), 86.0), camera)
    return {
        "diameter": 100 * (dish.inner.mean_radius / radius - 1),
        "u": 100 * scale.relative_uncertainty,
        "centre": 100 * math.hypot(dish.inner.cx - true.cx, dish.inner.cy - true.cy) / radius,
        "rms": rms,
        "most": most,
        "flat": flat,
        "tilt": camera.tilt_deg,
        "notes": "; ".join(dish.notes),
    }


def report(rows: list[dict[str, Any]], refused: int) -> None:
    """Print the whole in a few lines."""
    for name, kind in (
        ("all", rows),
        ("colour", _where(rows, False)),
        ("grey", _where(rows, True)),
    ):
        if not kind:
            continue
        off = np.abs([row["diameter"] for row in kind])
        u = np.array([row["u"] for row in kind])
        print(
            f"{name}: {len(kind)} dishes; diameter off by at most {off.max():.2f} %,"
            f" 95th percentile {np.percentile(off, 95):.2f} %, median {np.median(off):.2f} %,"
            f" mean {np.mean([row['diameter'] for row in kind]):+.2f} %;"
            f" within {MOST_OFF} %: {int((off <= MOST_OFF).sum())};"
            f" within 1.96 u: {100 * (off <= 1.96 * u).mean():.0f} % (median u {np.median(u):.2f} %)"
        )
        centre = np.array([row["centre"] for row in kind])
        print(
            f"    centre off by at most {centre.max():.2f} % of the radius, median"
            f" {np.median(centre):.2f} %; distances: rms {np.median([r['rms'] for r in kind]):.2f} %"
            f" (median dish), {max(r['rms'] for r in kind):.2f} % (worst dish)"
        )
    for low, high in ((0, 7), (7, 14), (14, 20)):
        part = [row for row in rows if low <= row["tilt"] < high]
        if part:
            print(
                f"tilt {low} to {high} degrees: {len(part)} dishes; distances rms"
                f" {np.median([r['rms'] for r in part]):.2f} % (median dish),"
                f" {np.median([r['flat'] for r in part]):.2f} % without the tilt's perspective"
            )
    print(f"refused or not found: {refused}")


def _where(rows: list[dict[str, Any]], grey: bool) -> list[dict[str, Any]]:
    return [row for row in rows if row["grey"] == grey]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--first", type=int, default=2200)
    parser.add_argument("--count", type=int, default=60)
    parser.add_argument("--every", type=int, default=1, help="take every so many-th of them")
    parser.add_argument("--keep", type=Path, help="folder for the pictures")
    parser.add_argument("--draw-only", action="store_true")
    asked = parser.parse_args()
    folder = asked.keep or Path(tempfile.mkdtemp())
    folder.mkdir(parents=True, exist_ok=True)
    tilts = MOST_TILT * (np.random.default_rng(5).permutation(asked.count) + 0.5) / asked.count
    rows, refused, spent = [], 0, 0.0
    for k in range(0, asked.count, asked.every):
        shot = shot_of(asked.first + k, float(tilts[k]))
        path = drawn(shot, folder / f"{asked.first + k}.jpg")
        if asked.draw_only:
            continue
        photograph = read_photograph(path)
        begun = time.perf_counter()
        try:
            dish = find_dish(photograph)
        except DetectError as trouble:
            print(asked.first + k, shot, "REFUSED:", trouble)
            refused += 1
            continue
        finally:
            spent += time.perf_counter() - begun
        row = {**measured(shot, dish), "grey": shot.grey}
        rows.append(row)
        mark = "  " if abs(row["diameter"]) <= MOST_OFF else "!!"
        print(
            f"{asked.first + k} {shot}  {mark} diameter {row['diameter']:+5.2f} % (u {row['u']:.2f})"
            f"  centre {row['centre']:.2f}  distances {row['rms']:.2f} {row['most']:.2f}"
            f"  {row['notes']}",
            flush=True,
        )
    if rows:
        report(rows, refused)
        print(f"find_dish took {1000 * spent / (len(rows) + refused):.0f} ms a photograph")


if __name__ == "__main__":
    main()
