"""How right scales from marks found in drawn photographs are, and whether their stated uncertainty covers it.

    python tests/benchmarks/scale_marks.py --first 2300 --count 60

Each seed is drawn three times: with plates, with fiducial marks, with a bar. Cameras are tilted by 0 to
20 degrees; there is soil, shade, worn print, crumbs, leaves, blur, noise and JPEG. The uncertainty was
calibrated on the seeds 1200-1259; 2300-2359 are for measuring only.
"""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))

from detect.corner_marks import find_corner_marks, scale_from_marks
from detect.errors import ScaleNotFound
from detect.ruler import find_bar, scale_from_bar
from tests.marked_scenes import bar_scene, plot_scene, seen


def plot_errors(seed: int, kind: str) -> tuple[np.ndarray, float, np.ndarray]:
    """Relative errors of 30 lengths within the plot, stated uncertainty, errors of the centres."""
    scene, matrix = plot_scene(seed, kind)
    marks = find_corner_marks(scene.draw(), kind, 1000.0, 750.0)
    scale = scale_from_marks(marks, 1000.0, 750.0)
    rng = np.random.default_rng([seed, 14])
    ends = rng.uniform((-480, -355), (480, 355), (400, 2, 2))
    true = np.hypot(*(ends[:, 0] - ends[:, 1]).T)
    ends, true = ends[true > 188][:30], true[true > 188][:30]
    a, b = (scale.to_mm(seen(matrix, ends[:, k])) for k in (0, 1))
    centres = seen(matrix, np.array([[-500.0, -375], [500, -375], [500, 375], [-500, 375]]))
    off = (marks.centres - centres) / marks.uncertainty_px[:, None]
    return np.hypot(*(a - b).T) / true - 1, scale.relative_uncertainty, off.ravel()


def bar_errors(seed: int) -> tuple[np.ndarray, float, np.ndarray]:
    """Relative error of the bar's own length, and its stated uncertainty."""
    scene, ends = bar_scene(seed)
    scale = scale_from_bar(find_bar(scene.draw()), 50.0)
    a, b = scale.to_mm(ends)
    error = np.array([np.hypot(*(a - b)) / 50 - 1])
    return error, scale.relative_uncertainty, error / scale.relative_uncertainty


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("--first", type=int, default=2300)
    parser.add_argument("--count", type=int, default=60)
    parser.add_argument("--each", action="store_true", help="print every photograph")
    chosen = parser.parse_args()
    print("kind       refused  max %   95 % of lengths within %  covered %  rms of error/u (marks)")
    for kind in ("plates", "fiducials", "bar"):
        errors, covered, offs, refused = [], [], [], 0
        for seed in range(chosen.first, chosen.first + chosen.count):
            try:
                error, u, off = bar_errors(seed) if kind == "bar" else plot_errors(seed, kind)
            except ScaleNotFound as trouble:
                refused += 1
                print(f"  {kind} {seed} refused: {trouble}", flush=True)
                continue
            if chosen.each:
                print(
                    f"  {kind} {seed} max {100 * np.abs(error).max():.3f} % u {100 * u:.3f} %"
                    f" mark rms/u {np.sqrt((off**2).mean()):.2f}",
                    flush=True,
                )
            errors.append(np.abs(error))
            covered.append(np.abs(error) <= 1.96 * u)
            offs.append(off)
        if not errors:
            continue
        all_errors, offs = np.concatenate(errors), np.concatenate(offs)
        print(
            f"{kind:<10} {refused:7d}  {100 * all_errors.max():.3f}  {100 * np.quantile(all_errors, 0.95):22.3f}"
            f"  {100 * np.concatenate(covered).mean():18.1f}  {np.sqrt((offs**2).mean()):12.2f}",
            flush=True,
        )


if __name__ == "__main__":
    main()
