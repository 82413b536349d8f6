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
    """Hand-marked objects of one photograph: centres (n, 2) and radii (n,), in pixels."""

    xy: NDArray[np.float64]
    radius: NDArray[np.float64]

    def __post_init__(self) -> None:
        self.xy.setflags(write=False)
        self.radius.setflags(write=False)


def read_truth(path: Path) -> Truth:
    """Read hand-marked objects.

    Parameters
    ----------
    path : Path
        CSV with the columns x, y and r in pixels; further columns are left aside.

    Returns
    -------
    Truth

    Raises
    ------
    RequestWrong
        If the file cannot be read, a column is missing, or a cell is no usable number.
    """
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as trouble:
        raise RequestWrong(
            f"The truth {path.name} cannot be read as text; save it as a CSV file."
        ) from trouble
    reader = csv.DictReader(text.splitlines())
    missing = [name for name in ("x", "y", "r") if name not in (reader.fieldnames or ())]
    if missing:
        raise RequestWrong(
            f"The truth {path.name} has no column {missing[0]!r}; it needs x, y and r in pixels."
        )
    rows = [
        [_truth_number(row[name], name, number, path) for name in ("x", "y", "r")]
        for number, row in enumerate(reader, start=2)
    ]
    table = np.array(rows, dtype=np.float64).reshape(-1, 3)
    return Truth(table[:, :2].copy(), table[:, 2].copy())


def _truth_number(text: str | None, column: str, row: int, path: Path) -> float:
    """Read one cell of a table of truth."""
    try:
        value = float(text or "")
    except ValueError:
        value = math.nan
    if not math.isfinite(value) or (column == "r" and value < 0):
        raise RequestWrong(
            f"Row {row} of the truth {path.name} has {text!r} in the column {column!r};"
            " write a number in pixels."
        )
    return value
