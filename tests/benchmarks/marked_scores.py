"""Run the command on a set of hand-marked photographs, and score what it wrote against the marks."""

from __future__ import annotations

import csv
import json
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from typer.testing import CliRunner

from analyse.cli import app
from detect.accuracy import match_spots
from tests.benchmarks.hand_marked import MarkedSet


@dataclass(frozen=True)
class MarkedScore:
    """One set, all its photographs together; unmatched spots near the frame are left aside."""

    truth: int
    found: int
    matched: int

    @property
    def precision(self) -> float:
        return self.matched / self.found if self.found else 0.0

    @property
    def recall(self) -> float:
        return self.matched / self.truth

    @property
    def f1(self) -> float:
        return 2 * self.matched / (self.truth + self.found)

    @property
    def count_error(self) -> float:
        return self.found / self.truth - 1


def detect_set(marked: MarkedSet, out: Path, *, hint: bool = True, workers: int = 2) -> None:
    """Run one `strewn detect` on all images of a set, told what its table tells and no more.

    Without the hint the diameters are left for the tool to learn.
    """
    told = list(marked.told)
    if not hint:
        at = told.index("--diameter")
        del told[at : at + 2]
    arguments = ["detect", str(marked.images[0].parent), *told, "--out", str(out)]
    result = CliRunner().invoke(app, [*arguments, "--workers", str(workers)])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    assert result.exit_code == 0, result.stderr


def found_in(folder: Path, stem: str) -> NDArray[np.float64]:
    """Centres (n, 2) of the counted spots of a photograph."""
    with (folder / f"{stem}.points.csv").open(encoding="utf-8", newline="") as file:
        rows = [row for row in csv.DictReader(file) if row["standing"] == "counted"]
    return np.array([[float(row["x_px"]), float(row["y_px"])] for row in rows]).reshape(-1, 2)


def size_of(folder: Path, stem: str) -> tuple[int, int]:
    """Width and height of a photograph, from its sheet."""
    sheet = json.loads((folder / f"{stem}.sheet.json").read_text(encoding="utf-8"))
    return sheet["photograph"]["width"], sheet["photograph"]["height"]


def score_set(marked: MarkedSet, folder: Path) -> MarkedScore:
    """Pair spots and marks one to one within half a radius, at least 3 px."""
    truth = found = matched = 0
    for image in marked.images:
        xy, r = marked.truth(image.stem)
        spots = found_in(folder, image.stem)
        pairs = match_spots(spots, xy, np.where(np.isnan(r), marked.usual_radius, r))
        alone = np.delete(spots, pairs.found, axis=0)
        edge = np.minimum(alone, np.array(size_of(folder, image.stem)) - 1 - alone).min(axis=1)
        truth += len(xy)
        matched += len(pairs)
        found += len(pairs) + int((edge >= marked.margin).sum() if marked.margin else len(alone))
    return MarkedScore(truth, found, matched)
