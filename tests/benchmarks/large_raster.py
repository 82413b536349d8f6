"""Detect on rasters of 50 megapixels and of one gigapixel: memory, processor time, errors.

    python tests/benchmarks/large_raster.py [--keep FOLDER] [MEGAPIXELS ...]

Green plants are drawn on textured soil that never repeats at one offset; the tiled, compressed
GeoTIFF is written block by block, so that this script stays small, and removed at the end. Each
detection runs in a process of its own, by the command that people type.
"""

from __future__ import annotations

import argparse
import csv
import json
import resource
import subprocess
import sys
import tempfile
from pathlib import Path

import cv2
import numpy as np

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))

from detect.matching import match_spots

BLOCK, CELL = 512, 128  # pixels; one plant at most in each cell, so no block needs to know others
RADIUS = (13.0, 22.0)
SHARE = 0.7  # of the cells that hold a plant


def soil(rng: np.random.Generator, side: int = 1499) -> np.ndarray:
    """A texture of crumbs and shades that goes on across its own edges."""
    layers = np.zeros((side, side), np.float32)
    for size, strength in ((1.2, 9.0), (5.0, 7.0), (24.0, 5.0)):
        noise = rng.normal(size=(side, side)).astype(np.float32)
        noise = cv2.GaussianBlur(np.tile(noise, (2, 2)), (0, 0), size)[:side, :side]
        layers += strength * noise / noise.std()
    return np.clip(np.float32([128, 104, 78]) + layers[..., None], 0, 255).astype(np.uint8)


def plants(side: int, rng: np.random.Generator) -> np.ndarray:
    """Positions and radii (n, 3), each well within a cell of its own."""
    cells = side // CELL
    y, x = np.nonzero(rng.uniform(size=(cells, cells)) < SHARE)
    radius = rng.uniform(*RADIUS, x.size)
    room = CELL / 2 - radius - 2
    place = np.column_stack([x, y]) * CELL + CELL / 2 - 0.5
    return np.column_stack([place + rng.uniform(-1, 1, (x.size, 2)) * room[:, None], radius])


def draw(block: np.ndarray, truth: np.ndarray, left: int, top: int) -> None:
    """Draw plants as leaves about a centre, in a block whose corner is at left, top."""
    for number, (x, y, radius) in enumerate(truth):
        tint = np.array([70, 118, 48]) + 14 * np.sin([number, 2.0 * number, 3.0 * number])
        for leaf in range(5):
            turn = 72 * leaf + 37 * number
            way = np.array([np.cos(np.radians(turn)), np.sin(np.radians(turn))])
            middle = np.array([x - left, y - top]) + 0.45 * radius * way
            axes = (int(radius * 0.55 * 16), int(radius * 0.34 * 16))
            at = tuple(int(v) for v in np.rint(middle * 16))
            box = (at, axes, turn, 0, 360, tint.tolist(), -1, cv2.LINE_AA, 4)
            cv2.ellipse(block, *box)


def write(path: Path, side: int, truth: np.ndarray, rng: np.random.Generator) -> None:
    """Write the raster block by block."""
    import rasterio
    from rasterio.windows import Window

    texture = soil(rng)
    column = (truth[:, 0] // BLOCK).astype(int)
    row = (truth[:, 1] // BLOCK).astype(int)
    order = np.lexsort((column, row))
    truth, key = truth[order], (row * 100_000 + column)[order]
    profile = {
        "driver": "GTiff",
        "width": side,
        "height": side,
        "count": 3,
        "dtype": "uint8",
        "tiled": True,
        "blockxsize": BLOCK,
        "blockysize": BLOCK,
        "compress": "deflate",
        "zlevel": 1,
        "BIGTIFF": "YES",
        "crs": "EPSG:32632",
        "transform": rasterio.transform.from_origin(500_000, 5_200_000, 0.002, 0.002),
    }
    with rasterio.Env(GDAL_CACHEMAX=64), rasterio.open(path, "w", **profile) as file:
        for top in range(0, side, BLOCK):
            for left in range(0, side, BLOCK):
                height, width = min(BLOCK, side - top), min(BLOCK, side - left)
                shift = rng.integers(0, texture.shape[0], 2)
                rows = (np.arange(height) + shift[0]) % texture.shape[0]
                columns = (np.arange(width) + shift[1]) % texture.shape[1]
                block = np.ascontiguousarray(texture[rows][:, columns])
                here = top // BLOCK * 100_000 + left // BLOCK
                first, last = np.searchsorted(key, [here, here + 1])
                draw(block, truth[first:last], left, top)
                light = 1 + 0.12 * np.sin((left + top) / side * 5)
                block = np.clip(block * np.float32(light), 0, 255).astype(np.uint8)
                file.write(block.transpose(2, 0, 1), window=Window(left, top, width, height))


def detect(path: Path, out: Path) -> tuple[float, float]:
    """Run the command in a fresh process: its own seconds, and the peak of its memory in MB.

    Seconds are those a processor worked for it, so that other work on the computer has less say.
    """
    told = ["--kind", "spots", "--colour", "green", "--diameter", "24-48px", "--out", str(out)]
    code = (
        "import resource, sys; from analyse.cli import main\n"
        "try: main()\n"
        "finally:\n"
        "  used = resource.getrusage(resource.RUSAGE_SELF)\n"
        "  print('used', used.ru_utime + used.ru_stime, used.ru_maxrss, file=sys.stderr)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, "detect", str(path), *told],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )
    if done.returncode:
        sys.exit(done.stdout + done.stderr)
    seconds, peak = (float(word) for word in done.stderr.split("used ")[1].split()[:2])
    return seconds, peak / 1024  # kilobytes, as Linux counts them


def accuracy(out: Path, stem: str, truth: np.ndarray) -> tuple[int, float]:
    """Number of spots, and F1 against the plants drawn."""
    with (out / f"{stem}.points.csv").open() as file:
        found = np.array([(float(r["x_px"]), float(r["y_px"])) for r in csv.DictReader(file)])
    match = match_spots(found.reshape(-1, 2), truth[:, :2], truth[:, 2])
    return len(found), 2 * len(match.found) / (len(found) + len(truth))


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("megapixels", nargs="*", type=float, default=[50, 1000])
    parser.add_argument("--keep", type=Path)
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as temporary:
        folder = asked.keep or Path(temporary)
        pace = []
        for megapixels in asked.megapixels:
            side = round((megapixels * 1e6) ** 0.5)
            rng = np.random.default_rng(2500)
            truth = plants(side, rng)
            path = folder / f"field_{megapixels:g}.tif"
            write(path, side, truth, rng)
            size = path.stat().st_size / 1e6
            seconds, peak = detect(path, folder)
            found, f1 = accuracy(folder, path.stem, truth)
            sheet = json.loads((folder / f"{path.stem}.sheet.json").read_text())
            pace.append(seconds / (side * side / 1e6))
            print(
                f"{side * side / 1e6:7.1f} Mpx, {size:6.0f} MB on disk,"
                f" {sheet['settings']['detector'].get('tiles', 1)} tiles:"
                f" peak {peak:5.0f} MB, {seconds:6.1f} s of a processor, {pace[-1]:.3f} s/Mpx,"
                f" {found} spots of {len(truth)}, F1 {f1:.4f}",
                flush=True,
            )
            if asked.keep is None:
                path.unlink()
        if len(pace) > 1:
            print(f"time per megapixel, last over first: {pace[-1] / pace[0]:.2f}")
        own = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
        print(f"this script itself: peak {own:.0f} MB")


if __name__ == "__main__":
    main()
