"""Hand-marked truth: the objects of a photograph as a person saw them, read from a table."""

from __future__ import annotations

import csv
import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from detect.errors import RequestWrong


@dataclass(frozen=True, slots=True, eq=False)
class Truth:
    """Hand-marked objects of one photograph.

    Parameters
    ----------
    xy : ndarray of shape (n, 2)
        Centres, in pixels.
    radius : ndarray of shape (n,)
        Radii in pixels; NaN where none was marked.
    """

    xy: NDArray[np.float64]
    radius: NDArray[np.float64]

    def __post_init__(self) -> None:
        if self.xy.shape != (self.radius.size, 2):
            raise ValueError(f"{self.radius.size} radii for centres of shape {self.xy.shape}")
        self.xy.setflags(write=False)
        self.radius.setflags(write=False)

    @property
    def known(self) -> NDArray[np.bool_]:
        """Which radii were marked."""
        return ~np.isnan(self.radius)

    @property
    def usual_radius(self) -> float:
        """Median of the radii that were marked; NaN where none was."""
        return float(np.median(self.radius[self.known])) if self.known.any() else math.nan


def read_truth(path: Path) -> Truth:
    """Read hand-marked objects.

    Parameters
    ----------
    path : Path
        CSV with the columns x and y in pixels, and r (radius in pixels) where sizes were marked; a
        cell of r may be empty. Further columns are left aside.

    Returns
    -------
    Truth

    Raises
    ------
    RequestWrong
        If the file cannot be read, x or y is missing, or a cell is no usable number.
    """
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as trouble:
        raise RequestWrong(
            f"The truth {path.name} cannot be read as text; save it as a CSV file."
        ) from trouble
    reader = csv.DictReader(text.splitlines())
    columns = reader.fieldnames or ()
    for name in ("x", "y"):
        if name not in columns:
            raise RequestWrong(
                f"The truth {path.name} has no column {name!r}; it needs x and y, and r where"
                " radii are known, in pixels."
            )
    rows = [
        (
            _number(row["x"], "x", number, path),
            _number(row["y"], "y", number, path),
            _radius(row.get("r"), number, path),
        )
        for number, row in enumerate(reader, start=2)
    ]
    table = np.array(rows, dtype=np.float64).reshape(-1, 3)
    return Truth(table[:, :2].copy(), table[:, 2].copy())


def _radius(text: str | None, row: int, path: Path) -> float:
    """Read a radius, or NaN from an empty cell."""
    return math.nan if not (text or "").strip() else _number(text, "r", row, path)


def _number(text: str | None, column: str, row: int, path: Path) -> float:
    """Read one cell of a table of truth."""
    try:
        value = float(text or "")
    except ValueError:
        value = math.nan
    if not math.isfinite(value) or (column == "r" and value <= 0):
        raise RequestWrong(
            f"Row {row} of the truth {path.name} has {text!r} in the column {column!r};"
            f" write a {'radius above 0' if column == 'r' else 'number'} in pixels."
        )
    return value
