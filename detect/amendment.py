"""One change that a person made on a sheet: which kinds there are, and what each of them needs."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass, fields, replace
from datetime import datetime
from typing import Any, Literal, get_args

from detect.spot_check import MOST_MARKS, SPOT_CHECK_KINDS, Draw

SCHEMA = 3  # 1 knew the first five kinds alone and did not write its number; 2 no spot checks
AmendmentKind = Literal[
    "strike",
    "restore",
    "place",
    "move",
    "resize",
    "split",
    "merge",
    "set_area",
    "set_scale",
    "note",
    "checked",
    "unchecked",
    "undo",
    "redo",
    "spot_check_drawn",
    "spot_check_marked",
]
_NEEDED: dict[str, tuple[str, ...]] = {
    "strike": (),
    "restore": (),
    "place": ("spot", "x", "y", "radius"),
    "move": ("spot", "x", "y"),
    "resize": ("spot", "radius"),
    "split": ("spot", "parts"),
    "merge": ("spots", "into"),
    "set_area": ("area",),
    "set_scale": ("line", "mm"),
    "note": ("text",),
    "checked": (),
    "unchecked": (),
    "undo": ("of",),
    "redo": ("of",),
    "spot_check_drawn": ("draw",),
    "spot_check_marked": ("of", "quadrat", "count"),
}
_ALLOWED: dict[str, tuple[str, ...]] = {
    "strike": ("spot", "spots"),
    "restore": ("spot", "spots"),
    "note": ("spot",),
    "spot_check_marked": ("marks",),
}
_SINCE = dict.fromkeys(SPOT_CHECK_KINDS, 3)  # schema of a line; of all other kinds 2 still
_REMARKS = ("note", "checked", "unchecked", *SPOT_CHECK_KINDS)  # change nothing that is counted


class SchemaNewer(ValueError):
    """A line of a log was written by a later version."""


@dataclass(frozen=True, slots=True)
class NewSpot:
    """A spot that splitting or merging puts in the place of others.

    Parameters
    ----------
    spot : str
        Its id, never used before on the sheet.
    x, y : float
        Centre in pixels.
    radius : float
        In pixels.

    Raises
    ------
    ValueError
        If a value is no number, or the radius not positive.
    """

    spot: str
    x: float
    y: float
    radius: float

    def __post_init__(self) -> None:
        _check_text("spot", self.spot)
        for name in ("x", "y", "radius"):
            _check_number(name, getattr(self, name))

    def as_dict(self) -> dict[str, Any]:
        """Return plain values for a file."""
        return {field.name: getattr(self, field.name) for field in fields(self)}


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
    what : AmendmentKind
        The kind of change.
    spot : str or None
        Id of the spot changed; for "place", the new spot's own.
    x, y : float or None
        New centre in pixels, for "place" and "move".
    radius : float or None
        New radius in pixels, for "place" and "resize".
    spots : tuple of str
        Ids of many spots, for "strike" and "restore" instead of `spot`, and for "merge".
    parts : tuple of NewSpot
        What "split" makes of the spot.
    into : NewSpot or None
        What "merge" makes of the spots.
    area : dict or None
        The study area of "set_area", as GeoJSON in pixels.
    line : tuple of float
        Ends of the line of known length of "set_scale": x1, y1, x2, y2 in pixels.
    mm : float or None
        Its length in millimetres.
    text : str or None
        A remark.
    of : str or None
        Id of the amendment that is undone or done again; of the draw that a spot check's marks
        belong to.
    draw : Draw or None
        The quadrats of "spot_check_drawn".
    quadrat : int or None
        Number of the quadrat that "spot_check_marked" is about.
    count : int or None
        Objects that a person saw in it.
    marks : tuple of (float, float)
        Their places in pixels, where they were marked and not only counted.

    Raises
    ------
    ValueError
        If a value is missing, impossible, or does not belong to the kind of change.
    """

    id: str
    time: str
    who: str
    what: AmendmentKind
    spot: str | None = None
    x: float | None = None
    y: float | None = None
    radius: float | None = None
    spots: tuple[str, ...] = ()
    parts: tuple[NewSpot, ...] = ()
    into: NewSpot | None = None
    area: Mapping[str, Any] | None = None
    line: tuple[float, ...] = ()
    mm: float | None = None
    text: str | None = None
    of: str | None = None
    draw: Draw | None = None
    quadrat: int | None = None
    count: int | None = None
    marks: tuple[tuple[float, float], ...] = ()

    def __post_init__(self) -> None:
        for name in ("id", "time", "who"):
            _check_text(name, getattr(self, name))
        if self.what not in get_args(AmendmentKind):
            raise ValueError(f"the change {self.what!r} is not known")
        try:
            datetime.fromisoformat(self.time)
        except ValueError as trouble:
            raise ValueError(
                f"time must be a date and time such as 2026-05-04T10:00, not {self.time!r}"
            ) from trouble
        _check_fields(self)
        _check_lists(self)

    @property
    def is_edit(self) -> bool:
        """Whether it changes what is counted, by itself."""
        return self.what not in (*_REMARKS, "undo", "redo")

    @property
    def placed(self) -> tuple[NewSpot, ...]:
        """The spots it brings into being."""
        if self.what == "place":
            values: tuple[Any, ...] = (self.spot, self.x, self.y, self.radius)
            return (NewSpot(*values),)
        return self.parts if self.into is None else (self.into,)

    @property
    def changed(self) -> tuple[str, ...]:
        """Ids of the spots it needs, which were there before."""
        if self.what == "place" or (self.spot is None and not self.spots):
            return ()
        return self.spots or (str(self.spot),)

    @property
    def touched(self) -> tuple[str, ...]:
        """Ids of all spots it is about."""
        return (*self.changed, *(new.spot for new in self.placed))

    def is_same_as(self, other: Amendment) -> bool:
        """Whether another one is the same change, sent twice: all but the time is alike."""
        return replace(self, time=other.time) == other

    def as_dict(self) -> dict[str, Any]:
        """Return plain values for a file: what is given, and the schema's number."""
        known: dict[str, Any] = {"schema": _SINCE.get(self.what, 2)}
        for field in fields(self):
            value = getattr(self, field.name)
            if value is not None and value != ():
                known[field.name] = value
        for name in ("spots", "line"):
            if name in known:
                known[name] = list(known[name])
        if self.parts:
            known["parts"] = [part.as_dict() for part in self.parts]
        if self.into is not None:
            known["into"] = self.into.as_dict()
        if self.draw is not None:
            known["draw"] = self.draw.as_dict()
        if self.marks:
            known["marks"] = [list(mark) for mark in self.marks]
        return known

    def line_of_log(self) -> str:
        """Return the amendment as one line of the log."""
        return json.dumps(self.as_dict(), ensure_ascii=False, allow_nan=False) + "\n"

    @classmethod
    def from_dict(cls, values: Any) -> Amendment:
        """Return the amendment that a line of a log or a request holds.

        Raises
        ------
        SchemaNewer
            If a later version wrote it.
        ValueError
            If it is none, in one clause.
        """
        if not isinstance(values, dict):
            raise ValueError("not an amendment")
        values = dict(values)
        schema = values.pop("schema", 1)
        if isinstance(schema, bool) or not isinstance(schema, int) or schema < 1:
            raise ValueError(f"schema must be a whole number, not {schema!r}")
        if schema > SCHEMA:
            raise SchemaNewer(f"schema {schema}, and this version reads up to {SCHEMA}")
        names = {field.name for field in fields(cls)}
        for name in values:
            if name not in names:
                raise ValueError(f"{name!r} is not known")
        for name in ("id", "time", "who", "what"):
            if name not in values:
                raise ValueError(f"{name!r} is missing")
        for name in ("spots", "line"):
            if name in values:
                values[name] = tuple(_list(name, values[name]))
        if "parts" in values:
            values["parts"] = tuple(_new_spot(part) for part in _list("parts", values["parts"]))
        if values.get("into") is not None:
            values["into"] = _new_spot(values["into"])
        if values.get("draw") is not None:
            values["draw"] = Draw.from_dict(values["draw"])
        if "marks" in values:
            values["marks"] = tuple(_mark(mark) for mark in _list("marks", values["marks"]))
        return cls(**values)


def _check_fields(amendment: Amendment) -> None:
    """Refuse what is missing, impossible, or does not belong to the kind of change."""
    what = amendment.what
    needed = _NEEDED[what]
    for field in fields(amendment)[4:]:
        name, value = field.name, getattr(amendment, field.name)
        given = value is not None and value != ()
        if not given and name in needed:
            raise ValueError(f"{what!r} needs {name}")
        if given and name not in (*needed, *_ALLOWED.get(what, ())):
            raise ValueError(f"{what!r} takes no {name}")
        if given and name in ("spot", "text", "of"):
            _check_text(name, value)
        if given and name in ("x", "y", "radius", "mm"):
            _check_number(name, value)
        if given and name in ("quadrat", "count"):
            _check_whole(name, value)
    if what in ("strike", "restore") and (amendment.spot is None) == (amendment.spots == ()):
        raise ValueError(f"{what!r} needs either spot or spots")


def _check_lists(amendment: Amendment) -> None:
    """Refuse lists that are too short, hold other things, or name one thing twice."""
    for spot in amendment.spots:
        _check_text("spots", spot)
    for value in amendment.line:
        _check_number("line", value)
    if amendment.line and len(amendment.line) != 4:
        raise ValueError(f"line must be four numbers, not {len(amendment.line)}")
    if amendment.what == "split" and len(amendment.parts) < 2:
        raise ValueError("'split' needs two parts or more")
    if amendment.what == "merge" and len(amendment.spots) < 2:
        raise ValueError("'merge' needs two spots or more")
    if amendment.marks and len(amendment.marks) != amendment.count:
        raise ValueError(f"count is {amendment.count}, but there are {len(amendment.marks)} marks")
    if amendment.draw is not None and not isinstance(amendment.draw, Draw):
        raise ValueError("draw must be the draw of a spot check")
    names = amendment.touched
    if len(set(names)) != len(names):
        raise ValueError("one spot is named twice")
    if amendment.area is not None and not isinstance(amendment.area, Mapping):
        raise ValueError("area must be a GeoJSON outline")


def _list(name: str, value: Any) -> list[Any]:
    """Return a value that must be a list."""
    if not isinstance(value, list):
        raise ValueError(f"{name} must be a list, not {value!r:.40}")
    return value


def _new_spot(values: Any) -> NewSpot:
    """Read one spot that is to be."""
    names = ("spot", "x", "y", "radius")
    if not isinstance(values, dict) or set(values) != set(names):
        raise ValueError(f"a new spot must have {', '.join(names)}, no more and no less")
    return NewSpot(**values)


def _mark(values: Any) -> tuple[float, float]:
    """Read the place of one mark."""
    if not isinstance(values, list) or len(values) != 2:
        raise ValueError("a mark must be two numbers, x and y")
    for name, value in zip("xy", values, strict=True):
        _check_number(name, value)
    return (values[0], values[1])


def _check_whole(name: str, value: Any) -> None:
    """Refuse what is no whole number of things that a person could count."""
    sound = isinstance(value, int) and not isinstance(value, bool)
    if not sound or not 0 <= value <= (MOST_MARKS if name == "count" else 10**9):
        raise ValueError(f"{name} must be a whole number of 0 or more, not {value!r:.40}")


def _check_text(name: str, text: Any) -> None:
    """Refuse what is no text, is blank, or cannot be written down."""
    if not (isinstance(text, str) and text.strip()):
        raise ValueError(f"{name} must be a text in quotes, not {text!r:.60}")
    try:
        text.encode("utf-8")
    except UnicodeEncodeError as trouble:
        raise ValueError(f"{name} holds half a character, which no file can hold") from trouble


def _check_number(name: str, value: Any) -> None:
    """Refuse what is no finite number, and a length that is not positive."""
    sound = isinstance(value, int | float) and not isinstance(value, bool)
    # A whole number may be too large for what it is reckoned with.
    if not sound or not abs(value) <= 1e15 or not math.isfinite(value):
        raise ValueError(f"{name} must be a number, not {value!r:.40}")
    if name in ("radius", "mm") and not value > 0:
        raise ValueError(f"{name} must be positive, not {value!r:.40}")
