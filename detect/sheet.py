"""The record of one photograph on disk, what people changed on it, and the state that follows."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any

import numpy as np
import shapely

from detect.amendments import AMENDMENTS_SUFFIX as AMENDMENTS_SUFFIX
from detect.amendments import SHEET_SUFFIX as SHEET_SUFFIX
from detect.amendments import Amendment as Amendment
from detect.amendments import amendments_path as amendments_path
from detect.amendments import append_amendment as append_amendment
from detect.amendments import explain, load_json, read_record
from detect.amendments import read_amendments as read_amendments
from detect.area import StudyArea
from detect.errors import DetectError, SheetUnreadable
from detect.files import csv_text, write_text_atomically
from detect.photograph import Photograph
from detect.planted import Planted
from detect.scale import Scale
from detect.spots import Spots

SCHEMA = 1
_IMPOSSIBLE = (
    KeyError,
    TypeError,
    ValueError,
    IndexError,
    AttributeError,
    DetectError,
    shapely.errors.ShapelyError,
)
_DAMAGED = "{} is damaged ({}); restore a copy or detect again."
_SPOT_COLUMNS = tuple(field.name for field in fields(Spots))
_POINT_COLUMNS = [
    "id",
    "x_px",
    "y_px",
    "x_mm",
    "y_mm",
    "radius_px",
    "radius_mm",
    "area_mm2",
    "contrast",
    "doubt",
    "origin",
    "standing",
]


@dataclass(frozen=True, slots=True)
class PhotographIdentity:
    """Which file a sheet is about: name, sha256 of its bytes, size in pixels, when taken."""

    name: str
    sha256: str
    width: int
    height: int
    taken: str | None = None

    @classmethod
    def of(cls, photograph: Photograph) -> PhotographIdentity:
        """Return the identity of a photograph that has been read."""
        return cls(
            photograph.name,
            photograph.sha256,
            photograph.width,
            photograph.height,
            photograph.taken,
        )


@dataclass(frozen=True, slots=True, eq=False)
class Sheet:
    """The record of one photograph: identity, scale, area, settings, spots.

    Parameters
    ----------
    schema : int
        Number of the file format.
    tool_version : str
        Version of the program that wrote it.
    photograph : PhotographIdentity
        The file it is about.
    scale : Scale or None
        None where no scale is known.
    area : StudyArea
        In pixels.
    settings : dict
        What was asked for and what it was resolved to; plain values.
    spots : Spots
        In pixels.
    planted : Planted or None
        What planted objects showed, once measured.
    """

    schema: int
    tool_version: str
    photograph: PhotographIdentity
    scale: Scale | None
    area: StudyArea
    settings: dict[str, Any]
    spots: Spots
    planted: Planted | None = None

    def __post_init__(self) -> None:
        if self.schema != SCHEMA:
            raise ValueError(f"schema {self.schema} is not {SCHEMA}")

    @property
    def stem(self) -> str:
        """Name of the photograph without its last suffix, which the files beside it share."""
        return Path(self.photograph.name).stem


def sheet_path(folder: Path, stem: str) -> Path:
    """Return where the sheet of a photograph with this stem lies in a folder."""
    return folder / f"{stem}{SHEET_SUFFIX}"


def write_sheet(sheet: Sheet, folder: Path) -> Path:
    """Write a sheet, complete or not at all.

    Parameters
    ----------
    sheet : Sheet
        The record; numbers are written so that they read back the same.
    folder : Path
        Where to.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    FolderNotWritable
        If it cannot be written.
    """
    path = sheet_path(folder, sheet.stem)
    write_text_atomically(path, _sheet_text(sheet))
    return path


def read_sheet(path: Path) -> Sheet:
    """Read a sheet.

    Parameters
    ----------
    path : Path
        A file named `<stem>.sheet.json`.

    Returns
    -------
    Sheet

    Raises
    ------
    SheetUnreadable
        If the file is missing, damaged, or written by a later version.
    """
    try:
        values = load_json(read_record(path))
    except ValueError as trouble:
        raise SheetUnreadable(_DAMAGED.format(path.name, explain(trouble))) from trouble
    if not isinstance(values, dict) or "schema" not in values:
        raise SheetUnreadable(f"{path.name} is no sheet: it has no schema number.")
    if values["schema"] != SCHEMA:
        raise SheetUnreadable(
            f"{path.name} has schema {values['schema']!r}, but this version reads {SCHEMA};"
            " use the version that wrote it or detect again."
        )
    try:
        return _sheet_from(values)
    except _IMPOSSIBLE as trouble:
        raise SheetUnreadable(_DAMAGED.format(path.name, explain(trouble))) from trouble


def points_csv(sheet: Sheet) -> str:
    """Return the spots of a sheet as a table, struck ones included.

    Parameters
    ----------
    sheet : Sheet
        As found, or with amendments applied by `detect.amended.current_state`.

    Returns
    -------
    str
        CSV; the cells in millimetres are empty where no scale is known.
    """
    spots, scale = sheet.spots, sheet.scale
    unknown = np.full(len(spots), np.nan)
    mm = np.column_stack([unknown, unknown]) if scale is None else scale.to_mm(spots.centres)
    factor = unknown if scale is None else scale.mm_per_px(spots.centres)
    columns = (
        spots.id,
        spots.x.tolist(),
        spots.y.tolist(),
        mm[:, 0].tolist(),
        mm[:, 1].tolist(),
        spots.radius.tolist(),
        (spots.radius * factor).tolist(),
        (spots.area * factor**2).tolist(),
        spots.contrast.tolist(),
        spots.doubt.tolist(),
        np.where(spots.found, "found", "placed").tolist(),
        np.where(spots.counted, "counted", "struck").tolist(),
    )
    return csv_text(_POINT_COLUMNS, zip(*columns, strict=True), digits=7)


def _sheet_text(sheet: Sheet) -> str:
    """Write the sheet as JSON: a line per part, and a line per spot."""
    parts = {
        "schema": sheet.schema,
        "tool_version": sheet.tool_version,
        "photograph": {
            field.name: getattr(sheet.photograph, field.name) for field in fields(sheet.photograph)
        },
        "scale": None if sheet.scale is None else sheet.scale.as_dict(),
        "area": sheet.area.as_dict(),
        "settings": sheet.settings,
        "planted": None if sheet.planted is None else sheet.planted.as_dict(),
        "spot_columns": list(_SPOT_COLUMNS),
    }
    lines = [f"{json.dumps(name)}: {_json(value)}" for name, value in parts.items()]
    return "{\n" + ",\n".join(lines) + ',\n"spots": [\n' + _spots_text(sheet.spots) + "\n]\n}\n"


def _spots_text(spots: Spots) -> str:
    """Write a line per spot, with null for what was not measured."""
    plain: list[Sequence[Any]] = [spots.id]
    for name in _SPOT_COLUMNS[1:]:
        column = getattr(spots, name)
        values = column.tolist()
        if np.isnan(column).any():
            values = [None if value != value else value for value in values]
        plain.append(values)
    rows = list(zip(*plain, strict=True))
    text = _json(rows)[1:-1].replace("], [", "],\n[")
    # Only an id that holds such brackets makes this differ from a line for each.
    return text if text.count("\n") == max(0, len(rows) - 1) else ",\n".join(map(_json, rows))


def _sheet_from(values: dict[str, Any]) -> Sheet:
    """Build the sheet that a file's values describe."""
    if tuple(values["spot_columns"]) != _SPOT_COLUMNS:
        raise ValueError(f"spot columns {values['spot_columns']}")
    rows = values["spots"]
    if set(map(len, rows)) - {len(_SPOT_COLUMNS)}:
        raise ValueError("a spot has too few or too many values")
    names, *others = zip(*rows, strict=True) if rows else [()] * len(_SPOT_COLUMNS)
    columns: list[Any] = [tuple(map(str, names))]
    for known in others:
        if None in known:
            known = tuple(np.nan if value is None else value for value in known)
        columns.append(np.array(known))
    return Sheet(
        values["schema"],
        str(values["tool_version"]),
        PhotographIdentity(**values["photograph"]),
        None if values["scale"] is None else Scale.from_dict(values["scale"]),
        StudyArea.from_dict(values["area"]),
        dict(values["settings"]),
        Spots(*columns),
        None if values.get("planted") is None else Planted.from_dict(values["planted"]),
    )


def _json(value: Any) -> str:
    """Write a value as compact JSON in which NaN cannot hide."""
    return json.dumps(value, ensure_ascii=False, allow_nan=False)
