"""Print how long `strewn --help` takes, as a multiple of Python doing nothing. Run: python tests/benchmarks/startup.py"""

from __future__ import annotations

import statistics
import subprocess
import sys
import time
from pathlib import Path

RUNS = 9
COMMAND = Path(sys.executable).with_name("strewn")


def median_seconds(command: list[str]) -> float:
    """Median of `RUNS` runs after one that warms the disk."""
    spent = []
    for _ in range(RUNS + 1):
        begun = time.perf_counter()
        subprocess.run(command, check=True, capture_output=True)
        spent.append(time.perf_counter() - begun)
    return statistics.median(spent[1:])


def main() -> None:
    nothing = median_seconds([sys.executable, "-c", "pass"])
    print(f"python -c pass        {nothing:.3f} s (median of {RUNS})")
    for arguments in (["--help"], ["detect", "--help"], ["--version"]):
        seconds = median_seconds([str(COMMAND), *arguments])
        print(f"strewn {' '.join(arguments):14} {seconds:.3f} s, {seconds / nothing:.1f} times")


if __name__ == "__main__":
    main()
