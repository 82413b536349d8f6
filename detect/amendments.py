"""What people changed on a sheet: an append-only log with one line per change."""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from io import FileIO
from pathlib import Path
from typing import Any

from detect.amendment import Amendment as Amendment
from detect.amendment import AmendmentKind as AmendmentKind
from detect.amendment import SchemaNewer
from detect.errors import FolderNotWritable, LogCorrupt, LogNewer, SheetUnreadable
from detect.locked import locked

SHEET_SUFFIX = ".sheet.json"
AMENDMENTS_SUFFIX = ".amendments.jsonl"


def amendments_path(sheet: Path) -> Path:
    """Return the log of amendments that belongs to a sheet's path."""
    return sheet.with_name(sheet.name.removesuffix(SHEET_SUFFIX) + AMENDMENTS_SUFFIX)


def read_record(path: Path) -> bytes:
    """Read a file's bytes, or say in a sentence why they cannot be read."""
    try:
        return path.read_bytes()
    except OSError as trouble:
        reason = (trouble.strerror or str(trouble)).lower()
        raise SheetUnreadable(f"{path.name} cannot be read ({reason}).") from trouble


def load_json(text: bytes) -> Any:
    """Read UTF-8 JSON in which NaN, infinities and endless nesting are refused (ValueError)."""
    try:
        return json.loads(text.decode("utf-8"), parse_constant=_refuse)
    except RecursionError as trouble:
        raise ValueError("it is nested too deeply") from trouble


def explain(trouble: Exception) -> str:
    """Say what a trouble found, as part of a sentence."""
    if isinstance(trouble, UnicodeDecodeError):
        return "it is not text"
    if isinstance(trouble, json.JSONDecodeError):
        return f"it is no JSON at character {trouble.colno}"
    if isinstance(trouble, KeyError):
        return f"{trouble.args[0]!r} is missing"
    return str(trouble).rstrip(".")


@dataclass(frozen=True, slots=True)
class LogPart:
    """What a log holds from one of its lines on.

    Parameters
    ----------
    amendments : tuple of Amendment
        In order, as they stand, repeats included.
    end : int
        Where the last whole line ends, in bytes.
    lines : int
        How many whole lines there are up to there.
    torn : bool
        Whether a last line was cut short in writing; it is left out.
    """

    amendments: tuple[Amendment, ...]
    end: int
    lines: int
    torn: bool


def read_amendments(path: Path) -> tuple[Amendment, ...]:
    """Read the log of amendments of a sheet.

    Parameters
    ----------
    path : Path
        The log (`<stem>.amendments.jsonl`), or the sheet it belongs to. No log: no amendments.

    Returns
    -------
    tuple of Amendment
        In order, each id once. A last line that was cut short in writing is left out.

    Raises
    ------
    LogCorrupt
        If a line cannot be read, with its number.
    LogNewer
        If a line was written by a later version.
    SheetUnreadable
        If the file cannot be opened.
    """
    path = amendments_path(path) if path.name.endswith(SHEET_SUFFIX) else path
    seen: dict[str, Amendment] = {}
    for number, amendment in enumerate(read_log(path).amendments, start=1):
        if not seen.setdefault(amendment.id, amendment).is_same_as(amendment):
            raise LogCorrupt(
                f"Line {number} of {path.name} repeats the id {amendment.id!r} for another change;"
                " put that line right or remove it."
            )
    return tuple(seen.values())


def read_log(path: Path, *, start: int = 0, lines: int = 0) -> LogPart:
    """Read a log from a byte on, at which a line begins and before which there are `lines` lines.

    Raises
    ------
    LogCorrupt, LogNewer, SheetUnreadable
        As `read_amendments` does.
    """
    try:
        with path.open("rb") as file:
            file.seek(start)
            text = file.read()
    except FileNotFoundError:
        return LogPart((), 0, 0, False)
    except OSError as trouble:
        reason = (trouble.strerror or str(trouble)).lower()
        raise SheetUnreadable(f"{path.name} cannot be read ({reason}).") from trouble
    found: list[Amendment] = []
    *whole, last = text.split(b"\n")
    end = start + len(text) - len(last)
    if start > 0 and whole[:1] == [b""]:
        del whole[0]  # the end of a line that was whole without it
    for number, piece in enumerate(whole, start=lines + 1):
        found.append(_amendment_at(piece, number, path.name))
    if last and _is_whole(last):
        found.append(_amendment_at(last, lines + len(found) + 1, path.name))
        return LogPart(tuple(found), end + len(last), lines + len(found), False)
    return LogPart(tuple(found), end, lines + len(found), bool(last))


def append_amendment(path: Path, amendment: Amendment) -> None:
    """Add one amendment to the log and force it to the disk before returning.

    Parameters
    ----------
    path : Path
        The log; made if it does not exist. A last line that was cut short is cut away.
    amendment : Amendment
        The change; `detect.amended` tells beforehand whether it can be applied.

    Raises
    ------
    FolderNotWritable
        If the disk is full or the log cannot be written; it is as it was before.
    """
    with opened_log(path) as file:
        append_to(file, path, amendment)


@contextmanager
def opened_log(path: Path) -> Iterator[FileIO]:
    """Open a log for adding, and keep all other processes from it meanwhile.

    Raises
    ------
    FolderNotWritable
        If it cannot be opened.
    """
    flags = os.O_RDWR | os.O_CREAT | getattr(os, "O_BINARY", 0)
    try:
        # Without a buffer, which would try again to write what a full disk has refused.
        file = FileIO(os.open(path, flags, 0o666), "r+b")
    except OSError as trouble:
        raise _not_written(path, trouble) from trouble
    with file, locked(file):
        if not _is_still(file, path):  # put right by hand in the very moment
            raise FolderNotWritable(
                f"{path.name} was replaced while it was written to; nothing was changed. Try again."
            )
        yield file


def _is_still(file: FileIO, path: Path) -> bool:
    """Whether a path still names the file that was opened."""
    try:
        return os.path.samestat(os.fstat(file.fileno()), path.stat())
    except OSError:
        return False


def append_to(file: FileIO, path: Path, amendment: Amendment) -> int:
    """Add one amendment to an opened log, force it to the disk, and return where it ends.

    Raises
    ------
    FolderNotWritable
        If the disk is full or the log cannot be written; it is as it was before.
    """
    line = amendment.line_of_log().encode("utf-8")
    end = file.seek(0, os.SEEK_END)
    try:
        torn = _last_line(file, end)
        if torn and _is_whole(torn):
            line = b"\n" + line
        elif torn:
            end -= len(torn)
            file.truncate(end)
        file.seek(end)
        left = memoryview(line)
        while left:
            left = left[file.write(left) :]
        os.fsync(file.fileno())
        if end == 0:
            _keep_name(path.parent)
    except OSError as trouble:
        _take_back(file, end)
        raise _not_written(path, trouble) from trouble
    return end + len(line)


def _keep_name(folder: Path) -> None:
    """Force to the disk that there is a new file in a folder, where that can be asked for."""
    if sys.platform == "win32":
        return
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _take_back(file: FileIO, end: int) -> None:
    """Cut away what was written of a line; if that fails as well, the line is torn, and known as such."""
    try:
        os.ftruncate(file.fileno(), end)
    except OSError:
        return


def _last_line(file: FileIO, end: int) -> bytes:
    """Return what stands after the last line's end."""
    found, at, step = b"", end, 4096
    while at > 0 and b"\n" not in found:
        at = max(0, at - step)
        file.seek(at)
        found = file.read(end - at)
        step *= 4
    return found[found.rfind(b"\n") + 1 :]


def _amendment_at(line: bytes, number: int, name: str) -> Amendment:
    """Read one line of the log."""
    try:
        return Amendment.from_dict(load_json(line))
    except SchemaNewer as trouble:
        raise LogNewer(
            f"Line {number} of {name} was written by a later version of strewn ({trouble});"
            " use that version."
        ) from trouble
    except (ValueError, TypeError) as trouble:
        raise LogCorrupt(
            f"Line {number} of {name} cannot be read ({explain(trouble)});"
            " put that line right or remove it."
        ) from trouble


def _is_whole(line: bytes) -> bool:
    """Tell whether a last line that has no end lacks nothing else."""
    try:
        Amendment.from_dict(load_json(line))
    except SchemaNewer:
        return True
    except (ValueError, TypeError):
        return False
    return True


def _not_written(path: Path, trouble: OSError) -> FolderNotWritable:
    """Say that a change could not be written, and why."""
    reason = (trouble.strerror or str(trouble)).lower()
    return FolderNotWritable(
        f"{path.name} cannot be written to {path.parent} ({reason}); this change is not saved."
        " Make room, or make the folder writable."
    )


def _refuse(constant: str) -> float:
    """Refuse NaN and infinities, which are no JSON."""
    raise ValueError(f"{constant} is not a number")
