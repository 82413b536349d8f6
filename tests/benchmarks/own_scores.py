"""Print how well drawn scenes are found, from the photograph on, against their exact truth.

    python tests/benchmarks/own_scores.py FOLDER [FOLDER ...]

The folders are drawn by `own_scenes.py`. Each photograph is detected as its kind of the sample
trial's recipe is: a dish is found and gives the scale, a plot is told its corners, a leaf is found
and told the bar beside it. A row per photograph, then all of a kind together.
"""

from __future__ import annotations

import csv
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from detect.accuracy import Accuracy, pooled
from detect.compared import compare_sheet
from detect.errors import DetectError
from detect.requests import detect_photograph, parse_request
from detect.truth import read_truth
from tests.benchmarks.fit_doubt import DIAMETERS


def asked(row: dict[str, str]) -> dict[str, Any]:
    """What the recipe would say of a photograph."""
    told: dict[str, Any] = {"kind": row["kind"], "diameter": DIAMETERS[row["kind"]]}
    if row["kind"] == "colonies":
        return told | {"dish": f"{row['known_length_mm']}mm", "area": "dish", "inset": "1mm"}
    if row["kind"] == "seedlings":
        corners = [[float(row[f"x{k}"]), float(row[f"y{k}"])] for k in (1, 2, 3, 4)]
        plot = f"{row['width_mm']}x{row['height_mm']}mm"
        return told | {"corners": corners, "plot": plot, "area": "plot"}
    line = [float(row[f"bar_{name}"]) for name in ("x1", "y1", "x2", "y2")]
    return told | {"line": line, "line_length": f"{row['known_length_mm']}mm", "area": "leaf"}


def scores_of(folder: Path) -> dict[str, list[Accuracy]]:
    """Scores of a folder's photographs by kind; one that fails finds nothing."""
    scores: dict[str, list[Accuracy]] = {}
    with (folder / "truth" / "trial.csv").open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    for row in rows:
        photo = folder / row["photograph"]
        truth = read_truth(folder / "truth" / f"{photo.stem}.csv")
        try:
            _, sheet = detect_photograph(photo, parse_request(asked(row)))
            score = compare_sheet(sheet, truth).accuracy
        except DetectError as trouble:
            print(f"{photo.name}: {trouble}", file=sys.stderr)
            score = Accuracy(photo.name, len(truth.xy), 0, 0)
        show(score, row["pattern"])
        scores.setdefault(row["kind"], []).append(score)
    return scores


def show(score: Accuracy, note: str) -> None:
    share = score.count_error / score.truth if score.truth else float("nan")
    print(
        f"{score.name:18} {note:8} {score.truth:6} {score.found:6} {score.precision:9.3f}"
        f" {score.recall:6.3f} {score.f1:6.3f} {share:+7.1%} {score.rmse_px:8.2f}",
        flush=True,
    )


def main() -> None:
    folders = [Path(name) for name in sys.argv[1:]]
    if not folders:
        sys.exit(__doc__)
    print(f"{'photograph':18} {'pattern':8}  truth  found precision recall     F1   count  RMSE px")
    by_kind: dict[str, list[Accuracy]] = {}
    for folder in folders:
        for kind, scores in scores_of(folder).items():
            by_kind.setdefault(kind, []).extend(scores)
    for kind, scores in by_kind.items():
        show(replace(pooled(scores), name=f"{len(scores)} {kind}"), "all")


if __name__ == "__main__":
    main()
