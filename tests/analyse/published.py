"""Published counts and point patterns, read from data/ where each file names its source."""

from __future__ import annotations

import csv
from collections.abc import Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

DATA = Path(__file__).parent / "data"
CELLS_WINDOW = (0.0, 0.0, 1.0, 1.0)
REDWOOD_WINDOW = (0.0, -1.0, 1.0, 0.0)


def rows_of(name: str) -> Iterator[list[str]]:
    """Yield the rows of a file in data/, without comments."""
    text = (DATA / name).read_text(encoding="utf-8").splitlines()
    return csv.reader(line for line in text if not line.startswith("#"))


def counts(series: str) -> NDArray[np.int64]:
    """Return the counts that a published table of frequencies stands for."""
    table = [(int(row[1]), int(row[2])) for row in rows_of("frequencies.csv") if row[0] == series]
    if not table:
        raise KeyError(series)
    return np.repeat(*np.array(table).T)


def student_grid() -> NDArray[np.int64]:
    """Return Student's map of yeast cells, (20, 20)."""
    return np.array([[int(cell) for cell in row] for row in rows_of("student_grid.csv")])


def points(name: str) -> NDArray[np.float64]:
    """Return the points of cells or redwood, (n, 2)."""
    return np.array([[float(cell) for cell in row] for row in list(rows_of(f"{name}.csv"))[1:]])


def garwood() -> NDArray[np.float64]:
    """Return count, then low and high at 90, 95 and 99 %, row by row."""
    return np.array([[float(cell) for cell in row] for row in list(rows_of("garwood.csv"))[1:]])
