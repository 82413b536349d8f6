"""Print what a 12-megapixel dish costs, and how well it is found, against `skimage.feature.blob_log`.

    python tests/benchmarks/against_blob_log.py [--sigmas N]

Both look for the same sizes (colonies of 1.2 to 6 mm) in the same photograph: the crowded dish of
the sample (about 300 colonies) enlarged to 12 megapixels with fresh noise. `blob_log` gets the grey
picture at full resolution and in single precision, the right side of it, and the study area from
the truth; of many thresholds the one with the best F1 against the truth is taken, which nobody
could know beforehand. Its time is that of one call; the tool's is the whole step from the file to
sheet, points and overlay.

The published source of the method: Lindeberg, T. (1998), Feature detection with automatic scale
selection, International Journal of Computer Vision 30, 79-116.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))

import cv2
import numpy as np

from detect.accuracy import match_spots
from detect.outcome import write_detection
from detect.requests import detect_photograph, parse_request
from detect.truth import read_truth
from tests.benchmarks.speed import DISH, draw


def f1(found: np.ndarray, xy: np.ndarray, r: np.ndarray) -> float:
    return 2 * len(match_spots(found, xy, r)) / (len(found) + len(xy)) if len(found) else 0.0


def blobs(grey: np.ndarray, smallest: float, largest: float, sigmas: int) -> np.ndarray:
    """Centres and strengths of all blobs, bright on dark; a blob of sigma s measures 2 sqrt(2) s."""
    from skimage.feature import blob_log

    low, high = smallest / 8**0.5, largest / 8**0.5
    return blob_log(grey, min_sigma=low, max_sigma=high, num_sigma=sigmas, threshold=0.01)


def strengths(grey: np.ndarray, found: np.ndarray) -> np.ndarray:
    """Response of each blob, for choosing the threshold: blob_log does not return it."""
    from scipy.ndimage import gaussian_laplace

    values = np.empty(len(found))
    for sigma in np.unique(found[:, 2]):
        rows = np.flatnonzero(found[:, 2] == sigma)
        at = found[rows, :2].astype(int)
        values[rows] = -(sigma**2) * gaussian_laplace(grey, sigma)[at[:, 0], at[:, 1]]
    return values


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--sigmas", type=int, default=6, help="scales that blob_log looks at")
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        photo = Path(folder) / "dish.jpg"
        draw(photo)
        request = parse_request(DISH)
        spent = []
        for _ in range(4):
            begun = time.perf_counter()
            photograph, sheet = detect_photograph(photo, request)
            write_detection(photograph, sheet, photo.parent)
            spent.append(time.perf_counter() - begun)
    step = min(spent[1:])
    grown = photograph.width / cv2.imread(str(ROOT / "sample_images" / "dish_02.jpg")).shape[1]
    truth = read_truth(ROOT / "sample_images" / "truth" / "dish_02.csv")
    xy, r = (truth.xy + 0.5) * grown - 0.5, truth.radius * grown
    inside = sheet.area.contains(xy)
    xy, r = xy[inside], r[inside]
    smallest, largest = sheet.settings["detector"]["diameter_px"]
    print(f"{len(xy)} colonies in {photograph.width * photograph.height / 1e6:.1f} megapixels,")
    print(f"sizes looked for: {smallest:.0f} to {largest:.0f} px")
    print(f"strewn: whole step {step:.2f} s, F1 {f1(sheet.spots.centres, xy, r):.3f}", flush=True)
    grey = cv2.cvtColor(photograph.stored, cv2.COLOR_RGB2GRAY).astype(np.float32) / 255
    best = (-1.0, 0.0)
    for side, picture in (("bright", grey), ("dark", 1 - grey)):
        begun = time.perf_counter()
        found = blobs(picture, smallest, largest, asked.sigmas)
        seconds = time.perf_counter() - begun
        found = found[sheet.area.contains(found[:, 1::-1])]
        values = strengths(picture, found)
        scores = [
            (f1(found[values >= t, 1::-1], xy, r), t)
            for t in np.quantile(values, np.linspace(0, 1, 101))
        ]
        score, threshold = max(scores)
        print(
            f"blob_log, {side} side, {asked.sigmas} scales: {seconds:.1f} s = {seconds / step:.0f} times"
            f" as long; best F1 {score:.3f} at a threshold of {threshold:.3f}",
            flush=True,
        )
        best = max(best, (score, seconds))
    print(f"the better side: {best[1] / step:.0f} times as long, F1 {best[0]:.3f}")


if __name__ == "__main__":
    main()
