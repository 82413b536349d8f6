"""Counts of a table that has no points: a column, a table of frequencies, or a grid of quadrats."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from analyse.errors import TableWrong
from analyse.rows import Row, read_rows, whole_in
from detect.errors import OptionWrong
from detect.lengths import Length

FREQUENCY_COLUMNS = ("frequency", "frequencies", "freq", "f", "observed", "number of quadrats")
_FEWEST_CLASSES = 3  # of values 0, 1, 2, ... that make one think of frequencies
MOST_COUNTED_QUADRATS = 1_000_000  # a table of frequencies that stands for more is a slip


@dataclass(frozen=True, slots=True, eq=False)
class CountTable:
    """Counts of a table that has no points.

    Parameters
    ----------
    name : str
        File name of the table.
    counts : ndarray of int, shape (q,)
        One count per quadrat, row by row for a rectangle.
    rows, columns : int or None
        Shape of the rectangle the quadrats form, where they form one.
    side : Length or None
        Side of a quadrat, where it is known.
    like_frequencies : bool
        Whether the table could as well be one of frequencies whose columns are not named so.

    Raises
    ------
    ValueError
        If the shape does not hold the counts or a count is negative.
    """

    name: str
    counts: NDArray[np.int64]
    rows: int | None = None
    columns: int | None = None
    side: Length | None = None
    like_frequencies: bool = False

    def __post_init__(self) -> None:
        counts = np.array(self.counts, dtype=np.int64).reshape(-1)
        if (counts < 0).any():
            raise ValueError("a count is negative")
        if self.rows is not None and self.rows * (self.columns or 0) != counts.size:
            raise ValueError(
                f"{self.rows} x {self.columns} quadrats cannot hold {counts.size} counts"
            )
        counts.setflags(write=False)
        object.__setattr__(self, "counts", counts)


def read_counts(path: Path, *, side: Length | None = None, transect: bool = False) -> CountTable:
    r"""Read a table of counts: a column `count`, also with `frequency`, or a bare rectangle.

    Parameters
    ----------
    path : Path
        A CSV file. With a column `count` alone, one row per quadrat; with `frequency` (or another
        of `FREQUENCY_COLUMNS`) beside it, one row per value and how many quadrats held it; without
        a header, contiguous quadrats. Of two columns of which one is of frequencies the other holds
        the counts, whatever its name.
    side : Length or None
        Side of a quadrat, where it is known.
    transect : bool
        Whether the rows of a column `count` are contiguous quadrats in their order along a line,
        which makes them a rectangle of one row.

    Returns
    -------
    CountTable

    Raises
    ------
    OptionWrong
        If a rectangle of several rows and columns, or a table of frequencies, is called a
        transect.
    TableWrong
        If a count is no whole number of 0 or more, a value stands twice in a table of
        frequencies, rows differ in length, or there are fewer than 2 quadrats.

    Examples
    --------
    >>> from tempfile import TemporaryDirectory
    >>> with TemporaryDirectory() as folder:
    ...     path = Path(folder) / "counts.csv"
    ...     _ = path.write_text("count,frequency\n0,3\n2,1\n")
    ...     table = read_counts(path)
    >>> table.counts.tolist()
    [0, 0, 0, 2]
    """
    rows = read_rows(path)
    names = [cell.lower() for cell in rows[0].cells]
    often = next((name for name in FREQUENCY_COLUMNS if name in names), None)
    shape: tuple[int, int] | None = None
    if often is not None:
        if transect:
            raise OptionWrong(
                f"--transect cannot apply to {path.name}, a table of frequencies, which does not"
                " tell the order of its quadrats; leave it out."
            )
        counts = _counts_from_frequencies(path, rows, names, often)
    elif "count" in names:
        column = names.index("count")
        counts = [whole_in(row, column, "count") for row in rows[1:]]
        shape = (1, len(counts)) if transect else None
    else:
        counts, shape = _rectangle_of_counts(path, rows)
        if transect and 1 not in shape:
            raise OptionWrong(
                f"--transect cannot apply to {path.name}, a grid of {shape[0]} x {shape[1]}"
                " contiguous quadrats; leave it out."
            )
    if len(counts) < 2:
        raise TableWrong(
            f"{path.name} holds {len(counts)} quadrat{'s' * (len(counts) != 1)};"
            " dispersion needs counts of at least 2."
        )
    columns = None if shape is None else shape[1]
    doubtful = often is None and _like_frequencies(rows, names)
    return CountTable(path.name, np.array(counts), shape and shape[0], columns, side, doubtful)


def _like_frequencies(rows: Sequence[Row], names: Sequence[str]) -> bool:
    """Tell whether a column of values 0, 1, 2, ... stands beside another of whole numbers."""
    named = "count" in names
    body = rows[1:] if named else rows
    if len(body) < _FEWEST_CLASSES or len(names) < 2 or (not named and len(names) != 2):
        return False
    column = names.index("count") if named else 0
    columns = [
        [row.cells[k] if k < len(row.cells) else "" for row in body] for k in range(len(names))
    ]
    values = columns.pop(column)
    return (
        values[0] in ("0", "1")
        and _numbered(values)
        and any(all(map(str.isdecimal, cells)) and not _numbered(cells) for cells in columns)
    )


def _numbered(cells: Sequence[str]) -> bool:
    """Tell whether cells are whole numbers that go up by 1."""
    return all(map(str.isdecimal, cells)) and all(
        int(later) == int(cell) + 1 for cell, later in pairwise(cells)
    )


def _counts_from_frequencies(
    path: Path, rows: Sequence[Row], names: Sequence[str], often: str
) -> list[int]:
    """Return the counts that a table of frequencies stands for, in rising order."""
    values = "count" if "count" in names else _only_other(path, rows[0], names, often)
    column = names.index(values)
    seen: dict[int, int] = {}
    for row in rows[1:]:
        count = whole_in(row, column, values)
        if count in seen:
            raise TableWrong(
                f"{row.where}, column {values}: {count} stands twice; give each count one row with"
                " all its quadrats."
            )
        seen[count] = whole_in(row, names.index(often), often)
    quadrats = sum(seen.values())
    if quadrats > MOST_COUNTED_QUADRATS:
        raise TableWrong(
            f"{path.name} stands for {quadrats:,} quadrats, more than {MOST_COUNTED_QUADRATS:,};"
            f" check the column {often}."
        )
    return [count for count in sorted(seen) for _ in range(seen[count])]


def _only_other(path: Path, first: Row, names: Sequence[str], often: str) -> str:
    """Return the name of the one column beside that of the frequencies, or complain."""
    others = [name for name in names if name != often]
    if len(names) != 2 or len(others) != 1:
        raise TableWrong(
            f"{path.name} has a column {often!r} but no column 'count' (its columns:"
            f" {', '.join(first.cells)}); name the column of values count."
        )
    return others[0]


def _rectangle_of_counts(path: Path, rows: Sequence[Row]) -> tuple[list[int], tuple[int, int]]:
    """Return the counts of contiguous quadrats row by row, and the shape they form."""
    first = rows[0]
    if not any(_is_number(cell) for cell in first.cells):
        raise TableWrong(
            f"{path.name} has no column 'count' (its columns: {', '.join(first.cells)});"
            " name the column count, or give a bare rectangle of whole numbers."
        )
    for row in rows:
        if len(row.cells) != len(first.cells):
            raise TableWrong(
                f"{row.where} holds {len(row.cells)} counts, but row {first.number} holds"
                f" {len(first.cells)}; a grid of quadrats needs rows of one length."
            )
    counts = [whole_in(row, k, str(k + 1)) for row in rows for k in range(len(first.cells))]
    return counts, (len(rows), len(first.cells))


def _is_number(text: str) -> bool:
    """Tell whether a cell reads as a number of any kind."""
    try:
        float(text)
    except ValueError:
        return False
    return True
