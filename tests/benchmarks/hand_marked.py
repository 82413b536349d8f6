"""The hand-marked photographs of five subjects that lie beside the checkout, where they are present.

Each set is a folder of images/ and truth/<stem>.csv (x, y, r in pixels, r blank where unknown).
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

ROOT = Path(__file__).resolve().parents[2].parent / "shared" / "real"


@dataclass(frozen=True)
class MarkedSet:
    """One subject: its folder, what the tool is told, and how its marks are read.

    `usual_radius` stands in where the marks have none; unmatched spots nearer to the frame than
    `margin` are no errors, because objects there are often unmarked.
    """

    name: str
    told: tuple[str, ...]
    diameter: tuple[float, float]
    colour: str = "auto"
    usual_radius: float = 6.0
    margin: float = 0.0

    @property
    def images(self) -> list[Path]:
        return sorted((ROOT / self.name / "images").iterdir())

    def truth(self, stem: str) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Centres (n, 2) and radii (n,), NaN where unknown."""
        with (ROOT / self.name / "truth" / f"{stem}.csv").open(newline="") as file:
            rows = [row for row in csv.reader(file) if row and row[0] != "x"]
        xy = np.array([[float(row[0]), float(row[1])] for row in rows]).reshape(-1, 2)
        r = np.array([float(row[2]) if len(row) > 2 and row[2].strip() else np.nan for row in rows])
        return xy, r


SETS = (
    MarkedSet("chula", ("--diameter", "24-48px"), (24, 48), usual_radius=32.0, margin=20.0),
    MarkedSet("dsb_fluo", ("--diameter", "10-40px"), (10, 40)),
    MarkedSet("dsb_stain", ("--diameter", "10-36px"), (10, 36)),
    MarkedSet("bccd", ("--diameter", "50-140px"), (50, 140), margin=30.0),
    MarkedSet(
        "trees",
        ("--diameter", "7-30px", "--colour", "green"),
        (7, 30),
        colour="green",
        usual_radius=12.0,
    ),
    MarkedSet("coins", ("--diameter", "24-60px"), (24, 60)),
)
