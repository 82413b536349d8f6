"""Print what detecting one 12-megapixel photograph of a dish costs, against decoding its JPEG.

    python tests/benchmarks/speed.py [--profile N]

The photograph is the crowded dish of the sample (about 300 colonies) enlarged to 12 megapixels,
with fresh noise. Every figure comes from a fresh process, so that none inherits another's memory
or threads. The step timed is all that `strewn detect` does with a photograph: read it, find the
dish, detect, write sheet, points and overlay. Peak memory is what the process took beyond one
that only imports the same modules, in multiples of the decoded pixels (3 bytes each).
"""

from __future__ import annotations

import argparse
import json
import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))
MEGAPIXELS = 12.0
MOST_TIMES_DECODING, MOST_TIMES_PIXELS = 12.0, 8.0
DISH = {"kind": "colonies", "dish": "86mm", "inset": "1mm", "diameter": "1.2-6mm"}


def draw(photo: Path) -> None:
    """Enlarge the crowded dish, and give the larger pixels noise of their own."""
    import cv2
    import numpy as np

    small = cv2.imread(str(ROOT / "sample_images" / "dish_02.jpg"))
    grown = (MEGAPIXELS * 1e6 / (small.shape[0] * small.shape[1])) ** 0.5
    sides = [16 * round(grown * n / 16) for n in small.shape[1::-1]]  # as cameras' are
    large = cv2.resize(small, sides, interpolation=cv2.INTER_CUBIC)
    noise = np.random.default_rng(1).normal(0, 3.0, large.shape).astype(np.float32)
    noisy = np.clip(np.round(large + noise), 0, 255).astype(np.uint8)
    assert cv2.imwrite(str(photo), noisy, [cv2.IMWRITE_JPEG_QUALITY, 90])


def step(photo: Path) -> int:
    """Do with a photograph what `strewn detect` does; return the number of spots."""
    from detect.outcome import write_detection
    from detect.requests import detect_photograph, parse_request

    photograph, sheet = detect_photograph(photo, parse_request(DISH))
    write_detection(photograph, sheet, photo.parent)
    return len(sheet.spots)


def median_seconds(work: Callable[[], object], runs: int) -> float:
    """Median of some runs after one that warms up."""
    spent = []
    for _ in range(runs + 1):
        begun = time.perf_counter()
        work()
        spent.append(time.perf_counter() - begun)
    return statistics.median(spent[1:])


def times(photo: Path, threads: int) -> dict[str, float]:
    """Seconds of decoding and of the whole step, in this process."""
    import cv2
    import numpy as np

    cv2.setNumThreads(threads or -1)
    data = np.frombuffer(photo.read_bytes(), np.uint8)
    decoding = median_seconds(lambda: cv2.imdecode(data, cv2.IMREAD_COLOR), 7)
    return {"decoding": decoding, "step": median_seconds(lambda: step(photo), 5)}


def peak_bytes() -> int:
    """Most memory this process has held."""
    status = Path("/proc/self/status")
    if status.is_file():  # getrusage would count the parent's share from before this program began
        fields = dict(line.split(":", 1) for line in status.read_text().splitlines())
        return int(fields["VmHWM"].split()[0]) * 1024
    import resource

    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak if sys.platform == "darwin" else peak * 1024


def memory(photo: Path, *, idle: bool) -> dict[str, int]:
    """Peak memory of the step, or of its imports alone."""
    import detect.find
    import detect.outcome
    import detect.requests  # noqa: F401

    spots = 0 if idle else step(photo)
    return {"peak": peak_bytes(), "spots": spots}


def profile(photo: Path, lines: int) -> None:
    """Print where the second run spends its time: seconds within each function of detect/."""
    import cProfile
    import pstats

    step(photo)
    with cProfile.Profile() as seen:
        step(photo)
    pstats.Stats(seen).sort_stats("cumulative").print_stats(r"/detect/|method|built-in", lines)


def part(photo: Path, name: str, *more: str, threads: int = 0) -> dict[str, float]:
    """Run one part in a process of its own."""
    settings = {"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"} if threads == 1 else {}
    done = subprocess.run(
        [sys.executable, __file__, "--part", name, "--photo", str(photo), *more],
        env={**os.environ, **settings},
        check=True,
        capture_output=True,
        text=True,
    )
    return json.loads(done.stdout) if done.stdout else {}


def measure(photo: Path) -> bool:
    """Print all figures; tell whether they keep within the bounds."""
    part(photo, "draw")
    kept = True
    print(f"a JPEG of {MEGAPIXELS:g} megapixels and {photo.stat().st_size / 1e6:.1f} MB")
    print("threads  decoding s  step s  step / decoding")
    for threads, shown in ((1, "1"), (0, "default")):
        seconds = part(photo, "times", "--threads", str(threads), threads=threads)
        ratio = seconds["step"] / seconds["decoding"]
        kept &= ratio <= MOST_TIMES_DECODING
        print(f"{shown:7} {seconds['decoding']:11.3f} {seconds['step']:7.3f} {ratio:10.1f}")
    idle, busy = part(photo, "idle"), part(photo, "busy")
    taken = (busy["peak"] - idle["peak"]) / (3 * MEGAPIXELS * 1e6)
    kept &= taken < MOST_TIMES_PIXELS
    print(f"spots found {busy['spots']:.0f}; imports alone hold {idle['peak'] / 1e6:.0f} MB")
    print(f"peak memory beyond them {taken:.1f} times the decoded pixels")
    print(f"bounds: at most {MOST_TIMES_DECODING:g} times decoding, under {MOST_TIMES_PIXELS:g}")
    return kept


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--profile", type=int, metavar="N", help="print the N costliest functions")
    for hidden in ("--part", "--photo"):
        parser.add_argument(hidden, help=argparse.SUPPRESS)
    parser.add_argument("--threads", type=int, default=0, help=argparse.SUPPRESS)
    asked = parser.parse_args()
    if asked.part is None:
        with tempfile.TemporaryDirectory() as folder:
            photo = Path(folder) / "dish.jpg"
            kept = measure(photo)
            if asked.profile:
                profile(photo, asked.profile)
        sys.exit(not kept)
    photo = Path(asked.photo)
    if asked.part == "draw":
        draw(photo)
        return
    parts = {
        "times": lambda: times(photo, asked.threads),
        "idle": lambda: memory(photo, idle=True),
        "busy": lambda: memory(photo, idle=False),
    }
    print(json.dumps(parts[asked.part]()))


if __name__ == "__main__":
    main()
