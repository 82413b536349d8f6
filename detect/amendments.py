"""What people changed on a sheet: an append-only log with one line per change."""

from __future__ import annotations

import json
import math
import os
from dataclasses import dataclass, fields
from datetime import datetime
from pathlib import Path
from typing import Any, Literal, get_args

from detect.errors import SheetUnreadable

SHEET_SUFFIX = ".sheet.json"
AMENDMENTS_SUFFIX = ".amendments.jsonl"
AmendmentKind = Literal["strike", "restore", "place", "move", "resize"]
_NEEDED: dict[AmendmentKind, tuple[str, ...]] = {
    "strike": (),
    "restore": (),
    "place": ("x", "y", "radius"),
    "move": ("x", "y"),
    "resize": ("radius",),
}


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
    """Read UTF-8 JSON in which NaN and infinities are refused (ValueError)."""
    return json.loads(text.decode("utf-8"), parse_constant=_refuse)


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
class Amendment:
    """One change a person made to a sheet.

    Parameters
    ----------
    id : str
        Name of this change, made by whoever makes it; a repeated id is one change.
    time : str
        When, as ISO 8601.
    who : str
        The person.
    what : {"strike", "restore", "place", "move", "resize"}
        The kind of change.
    spot : str
        Id of the spot changed; for "place", the new spot's own.
    x, y : float or None
        New centre in pixels, for "place" and "move".
    radius : float or None
        New radius in pixels, for "place" and "resize".

    Raises
    ------
    ValueError
        If a value is missing, impossible, or does not belong to the kind of change.
    """

    id: str
    time: str
    who: str
    what: AmendmentKind
    spot: str
    x: float | None = None
    y: float | None = None
    radius: float | None = None

    def __post_init__(self) -> None:
        for name in ("id", "time", "who", "spot"):
            text = getattr(self, name)
            if not (isinstance(text, str) and text.strip()):
                raise ValueError(f"{name} must be a text in quotes, not {text!r}")
        if self.what not in get_args(AmendmentKind):
            raise ValueError(f"the change {self.what!r} is not known")
        try:
            datetime.fromisoformat(self.time)
        except ValueError as trouble:
            raise ValueError(
                f"time must be a date and time such as 2026-05-04T10:00, not {self.time!r}"
            ) from trouble
        for name in ("x", "y", "radius"):
            _check_number(self.what, name, getattr(self, name))

    def line(self) -> str:
        """Return the amendment as one line of the log."""
        values = {field.name: getattr(self, field.name) for field in fields(self)}
        known = {name: value for name, value in values.items() if value is not None}
        return json.dumps(known, ensure_ascii=False, allow_nan=False) + "\n"


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
    SheetUnreadable
        If a line cannot be read, with its number.
    """
    path = amendments_path(path) if path.name.endswith(SHEET_SUFFIX) else path
    if not path.exists():
        return ()
    seen: dict[str, Amendment] = {}
    pieces = read_record(path).split(b"\n")
    for number, piece in enumerate(pieces, start=1):
        try:
            amendment = _amendment_from(piece)
        except (ValueError, TypeError) as trouble:
            if number == len(pieces):
                break
            raise SheetUnreadable(
                f"Line {number} of {path.name} cannot be read ({explain(trouble)});"
                " put that line right or remove it."
            ) from trouble
        if seen.setdefault(amendment.id, amendment) != amendment:
            raise SheetUnreadable(
                f"Line {number} of {path.name} repeats the id {amendment.id!r} for another change;"
                " put that line right or remove it."
            )
    return tuple(seen.values())


def append_amendment(path: Path, amendment: Amendment) -> None:
    """Add one amendment to the log and force it to the disk before returning.

    Parameters
    ----------
    path : Path
        The log; made if it does not exist. A last line that was cut short is cut away.
    amendment : Amendment
        The change; `current_state` tells beforehand whether it can be applied.
    """
    descriptor = os.open(path, os.O_RDWR | os.O_CREAT | getattr(os, "O_BINARY", 0), 0o666)
    with os.fdopen(descriptor, "r+b") as file:
        before = file.read()
        whole, torn = before[: before.rfind(b"\n") + 1], before[before.rfind(b"\n") + 1 :]
        if torn:
            whole += _completed(torn)
            file.seek(0)
            file.truncate()
            file.write(whole)
        file.write(amendment.line().encode("utf-8"))
        file.flush()
        os.fsync(file.fileno())


def _check_number(what: AmendmentKind, name: str, value: float | None) -> None:
    """Refuse a number that is missing, impossible, or does not belong to the kind of change."""
    needed = name in _NEEDED[what]
    if needed != (value is not None):
        raise ValueError(f"{what!r} {'needs' if needed else 'takes no'} {name}")
    if value is None:
        return
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise ValueError(f"{name} must be a number, not {value!r}")
    if name == "radius" and not value > 0:
        raise ValueError(f"radius must be positive, not {value!r}")


def _amendment_from(line: bytes) -> Amendment:
    """Read one line of the log."""
    values = load_json(line)
    if not isinstance(values, dict):
        raise ValueError("not an amendment")
    return Amendment(**values)


def _completed(torn: bytes) -> bytes:
    """Return a last line that has no end, ended if it is whole, else nothing."""
    try:
        _amendment_from(torn)
    except (ValueError, TypeError):
        return b""
    return torn + b"\n"


def _refuse(constant: str) -> float:
    """Refuse NaN and infinities, which are no JSON."""
    raise ValueError(f"{constant} is not a number")
