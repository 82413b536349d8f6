"""The rows of a plain table: read as they stand, with complaints that name the row and the cell."""

from __future__ import annotations

import csv
import io
import math
import re
from dataclasses import dataclass
from pathlib import Path

from analyse.errors import TableWrong

_WHOLE = re.compile(r"\+?[0-9]+(?:\.0*)?")
_REAL = re.compile(
    r"[-+]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:e[-+]?[0-9]+)?|[-+]?inf(?:inity)?|nan", re.I
)
MOST_COUNTED = 10**12  # a count above this is a slip, and would not fit the arithmetic


@dataclass(frozen=True, slots=True)
class Row:
    """One row of a table: file name, line number as a text editor shows it, cells."""

    file: str
    number: int
    cells: tuple[str, ...]

    @property
    def where(self) -> str:
        """Where the row is, in words."""
        return f"{self.file}, row {self.number}"


def read_rows(path: Path) -> list[Row]:
    """Return the rows of a CSV file that hold anything; lines that start with # are comments.

    Parameters
    ----------
    path : Path
        Text in UTF-8, its columns separated by commas.

    Returns
    -------
    list of Row
        At least one; cells are stripped of spaces.

    Raises
    ------
    TableWrong
        If the file cannot be read, is no text, holds nothing, or its columns are not separated
        by commas.
    """
    text = _text_of(path)
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    rows: list[Row] = []
    try:
        for cells in reader:
            stripped = tuple(cell.strip() for cell in cells)
            if any(stripped) and not stripped[0].startswith("#"):
                rows.append(Row(path.name, reader.line_num, stripped))
    except csv.Error as error:
        raise TableWrong(
            f"{path.name}, row {reader.line_num}, is not CSV ({error}); save the table as CSV again."
        ) from error
    if not rows:
        raise TableWrong(f"{path.name} is empty; it must hold a table.")
    if len(rows[0].cells) == 1 and any(mark in rows[0].cells[0] for mark in ";\t"):
        raise TableWrong(
            f"{path.name} separates its columns by semicolons or tabs;"
            " save it with commas, and a dot for decimals."
        )
    cells = rows[0].cells[0].split()
    if len(rows[0].cells) == 1 and len(cells) > 1 and all(_REAL.fullmatch(cell) for cell in cells):
        raise TableWrong(
            f"{path.name} separates its numbers by spaces; save it with commas, and a dot for"
            " decimals."
        )
    return rows


def real_in(row: Row, column: int, name: str) -> float:
    """Return a cell's finite number, or complain with its row, column and value.

    Parameters
    ----------
    row : Row
        A row of the table.
    column : int
        Which cell, from 0.
    name : str
        What its column is called in a complaint.

    Returns
    -------
    float

    Raises
    ------
    TableWrong
        If the cell is empty or holds anything else.
    """
    text = _cell(row, column, name)
    if not _REAL.fullmatch(text):
        raise TableWrong(
            f"{row.where}, column {name}: {text!r} is not a number; write it with a dot for decimals."
        )
    value = float(text)
    if not math.isfinite(value):
        raise TableWrong(
            f"{row.where}, column {name}: {text!r} is not finite; correct it or remove the row."
        )
    return value


def whole_in(row: Row, column: int, name: str) -> int:
    """Return a cell's whole number of 0 or more, or complain with its row, column and value.

    Parameters
    ----------
    row : Row
        A row of the table.
    column : int
        Which cell, from 0.
    name : str
        What its column is called in a complaint.

    Returns
    -------
    int

    Raises
    ------
    TableWrong
        If the cell is empty or holds anything else.
    """
    text = _cell(row, column, name)
    if not _WHOLE.fullmatch(text) or int(text.split(".")[0]) > MOST_COUNTED:
        raise TableWrong(
            f"{row.where}, column {name}: {text!r} is not a count;"
            f" counts are whole numbers from 0 to {MOST_COUNTED:.0e}."
        )
    return int(text.split(".")[0])


def _cell(row: Row, column: int, name: str) -> str:
    """Return the text of a cell that must not be empty."""
    text = row.cells[column] if column < len(row.cells) else ""
    if not text:
        raise TableWrong(f"{row.where}, column {name}, is empty; fill it in or remove the row.")
    return text


def _text_of(path: Path) -> str:
    """Return the text of a file in UTF-8, with or without a byte order mark."""
    try:
        text = path.read_bytes().decode("utf-8-sig")
    except OSError as error:
        raise TableWrong(f"{path} cannot be read ({error.strerror}); check the path.") from error
    except UnicodeDecodeError as error:
        raise TableWrong(f"{path.name} is no text in UTF-8; save it as CSV in UTF-8.") from error
    if "\0" in text:
        raise TableWrong(f"{path.name} is not a table but some other kind of file; save it as CSV.")
    return text
