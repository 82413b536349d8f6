"""Print how much faster two workers do a folder than one.

    python tests/benchmarks/workers.py [--photographs N] [--runs N]

The folder holds N copies of the sample's crowded dish enlarged to 6 megapixels, each with noise of
its own. What is timed is `strewn detect FOLDER` as a person runs it, in a process of its own, start
and end included. A worker is one core, to which OpenCV's threads keep too, as `--workers` says.
Runs with one and two workers take turns, so that a busy machine harms both. Below it stands what
the machine itself allows: the same ratio for two processes that only decode.
"""

from __future__ import annotations

import argparse
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
DECODE = "import cv2, sys; cv2.setNumThreads(1)\nfor _ in range({}): cv2.imread(sys.argv[1])".format


def draw(folder: Path, n: int) -> None:
    import cv2
    import numpy as np

    small = cv2.imread(str(ROOT / "sample_images" / "dish_02.jpg"))
    grown = (6e6 / (small.shape[0] * small.shape[1])) ** 0.5
    large = cv2.resize(small, None, fx=grown, fy=grown, interpolation=cv2.INTER_CUBIC)
    for i in range(n):
        noise = np.random.default_rng(i).normal(0, 3.0, large.shape).astype(np.float32)
        noisy = np.clip(np.round(large + noise), 0, 255).astype(np.uint8)
        assert cv2.imwrite(str(folder / f"dish_{i}.jpg"), noisy, [cv2.IMWRITE_JPEG_QUALITY, 90])


def detect(folder: Path, workers: int) -> float:
    """Seconds of one command."""
    told = ["--kind", "colonies", "--dish-mm", "86", "--inset", "1mm", "--diameter", "1.2-6mm"]
    where = ["--out", str(folder / "out"), "--workers", str(workers)]
    command = [sys.executable, "-m", "analyse", "detect", str(folder), *told, *where]
    begun = time.perf_counter()
    subprocess.run(command, cwd=ROOT, check=True, capture_output=True)
    return time.perf_counter() - begun


def decode(photo: Path, processes: int, times: int) -> float:
    """Seconds of decoding one photograph again and again, shared by some processes."""
    begun = time.perf_counter()
    command = [sys.executable, "-c", DECODE(times // processes), str(photo)]
    running = [subprocess.Popen(command) for _ in range(processes)]
    assert not any(process.wait() for process in running)
    return time.perf_counter() - begun


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--photographs", type=int, default=80)
    parser.add_argument("--runs", type=int, default=3)
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        draw(folder, asked.photographs)
        one, two, alone, shared = [], [], [], []
        for _ in range(asked.runs):
            one.append(detect(folder, 1))
            two.append(detect(folder, 2))
            alone.append(decode(folder / "dish_0.jpg", 1, 200))
            shared.append(decode(folder / "dish_0.jpg", 2, 200))
    for what, a, b in (("strewn detect", one, two), ("decoding only", alone, shared)):
        a_s, b_s = statistics.median(a), statistics.median(b)
        print(f"{what}: 1 worker {a_s:.1f} s, 2 workers {b_s:.1f} s, {a_s / b_s:.2f} times as fast")


if __name__ == "__main__":
    main()
