"""Files written whole or not at all, and tables a spreadsheet cannot be tricked by."""

from __future__ import annotations

import csv
import io
import math
import os
import re
import tempfile
from collections.abc import Iterable, Sequence
from pathlib import Path

import numpy as np

from detect.errors import FolderNotWritable

Cell = str | int | float | bool | np.generic | None
_PLAIN_NUMBER = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?")
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\n")


def make_folder(path: Path) -> Path:
    """Make the folder results go to, and make sure that it can be written to.

    Parameters
    ----------
    path : Path
        The folder; folders above it are made too.

    Returns
    -------
    Path
        `path`.

    Raises
    ------
    FolderNotWritable
        If a file stands in its place, or nothing can be written there.
    """
    if path.exists() and not path.is_dir():
        raise FolderNotWritable(f"{path} is a file, not a folder; name another folder for --out.")
    try:
        path.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=path):
            pass
    except OSError as trouble:
        raise FolderNotWritable(
            f"Nothing can be written to the folder {path} ({_reason(trouble)});"
            " name another folder for --out."
        ) from trouble
    return path


def write_bytes_atomically(path: Path, data: bytes) -> None:
    """Write a file beside its place, force it to the disk, and rename it.

    Parameters
    ----------
    path : Path
        The file; an older one is replaced only once the new one is complete.
    data : bytes
        What it shall hold.

    Raises
    ------
    FolderNotWritable
        If the disk is full or the folder cannot be written to; no part of a file is left.
    """
    beside = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        with beside.open("wb") as file:
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        beside.replace(path)
    except OSError as trouble:
        raise FolderNotWritable(
            f"{path.name} cannot be written to {path.parent} ({_reason(trouble)});"
            " make room, or name another folder for --out."
        ) from trouble
    finally:
        beside.unlink(missing_ok=True)


def write_text_atomically(path: Path, text: str) -> None:
    """Write UTF-8 text as `write_bytes_atomically` does.

    Parameters
    ----------
    path : Path
        The file.
    text : str
        What it shall hold; line ends are kept as they are. Of a file name that is no proper
        text, the odd bytes are written as escapes.
    """
    write_bytes_atomically(path, text.encode("utf-8", errors="backslashreplace"))


def csv_text(
    header: Sequence[str], rows: Iterable[Sequence[Cell]], *, digits: int | None = None
) -> str:
    r"""Return a table as CSV text: a dot for decimals, ``\n`` line ends, nothing for unknown.

    Parameters
    ----------
    header : sequence of str
        Names of the columns.
    rows : iterable of sequences
        Cells. None and NaN become empty; truth values become true and false.
    digits : int or None
        Significant digits of floating point numbers; None writes each as the shortest text that
        reads back as the same number.

    Returns
    -------
    str

    Raises
    ------
    ValueError
        If a row has not as many cells as the header.

    Notes
    -----
    A text cell that a spreadsheet would take for a formula gets an apostrophe before it, unless
    it is a plain number.

    Examples
    --------
    >>> print(csv_text(["name", "vmr"], [["=1+1", 1.5], ["-2", None]]), end="")
    name,vmr
    '=1+1,1.5
    -2,
    """
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([_cell(name, digits) for name in header])
    for row in rows:
        if len(row) != len(header):
            raise ValueError(f"a row has {len(row)} cells for {len(header)} columns")
        writer.writerow([_cell(cell, digits) for cell in row])
    return text.getvalue()


def _cell(value: Cell, digits: int | None) -> str:
    """Write one cell as text."""
    if type(value) is float:  # first, for large tables are made of them
        return _number(value, digits)
    if isinstance(value, np.generic):
        return _cell(value.item(), digits)
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return _number(value, digits)
    if isinstance(value, int):
        return str(value)
    return _harmless(str(value))


def _number(value: float, digits: int | None) -> str:
    """Write a floating point number as text; nothing for NaN, no sign for zero."""
    if digits is not None:
        text = f"{value:.{digits}g}"  # mostly enough, and faster than to read it back
        if digits <= 15 and "." in text and "e" not in text:
            return text
    if math.isnan(value):
        return ""
    if digits is not None and math.isfinite(value):
        value = float(text)
    return repr(value + 0.0)


def _harmless(text: str) -> str:
    """Return text that no spreadsheet takes for a formula, nor a reader for two rows."""
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    if text.startswith(_FORMULA_STARTS) and not _PLAIN_NUMBER.fullmatch(text):
        return f"'{text}"
    return text


def _reason(trouble: OSError) -> str:
    """Return what the operating system said, in its own words without codes."""
    return (trouble.strerror or str(trouble)).lower()
