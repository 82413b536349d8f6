"""Print how well hand-marked photographs are found, by one command a set.

    python tests/benchmarks/real_images.py [--hint | --no-hint] [--workers N] [SET ...]

Both with the diameters of the set's table and without any, unless one is asked for. The sets lie in
../shared/real beside the checkout; the rule is that of the score.py among them.
"""

from __future__ import annotations

import argparse
import importlib.util
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.benchmarks.hand_marked import ROOT, SETS
from tests.benchmarks.marked_scores import detect_set, found_in, score_set


def rule() -> Any:
    """The score.py beside the photographs, or None."""
    path = ROOT / "score.py"
    spec = importlib.util.spec_from_file_location("score", path) if path.is_file() else None
    if spec is None or spec.loader is None:
        return None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("sets", nargs="*", help="only these")
    parser.add_argument("--hint", action=argparse.BooleanOptionalAction, default=None)
    parser.add_argument("--workers", type=int, default=2)
    asked = parser.parse_args()
    chosen = [marked for marked in SETS if not asked.sets or marked.name in asked.sets]
    if not ROOT.is_dir() or not chosen:
        sys.exit(f"no such photographs: {', '.join(asked.sets) or ROOT}")
    score_py = rule()
    print(f"{'set':10} images {'told':22} precision recall     F1  count  s/image")
    for hint in (True, False) if asked.hint is None else (asked.hint,):
        for marked in chosen:
            with tempfile.TemporaryDirectory() as name:
                begun = time.perf_counter()
                detect_set(marked, Path(name), hint=hint, workers=asked.workers)
                spent = (time.perf_counter() - begun) / len(marked.images)
                score = score_set(marked, Path(name))
                if score_py is not None:
                    found = {p.stem: found_in(Path(name), p.stem) for p in marked.images}
                    other = score_py.summary(score_py.score_set(marked.name, found))["f1"]
                    assert abs(other - score.f1) < 1e-12, (other, score.f1)
            told = [] if not hint else [marked.told[1]]
            told += [] if marked.colour == "auto" else [marked.colour]
            print(
                f"{marked.name:10} {len(marked.images):6} {' '.join(told) or 'nothing':22}"
                f" {score.precision:9.3f} {score.recall:6.3f} {score.f1:6.3f}"
                f" {score.count_error:+6.1%} {spent:8.2f}",
                flush=True,
            )


if __name__ == "__main__":
    main()
