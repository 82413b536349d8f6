"""Points from a plain table, with what it tells of their sizes and doubts."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from analyse.errors import TableWrong
from analyse.pattern import Pattern
from analyse.region import MM_PER_UNIT, TableUnit
from analyse.rows import Row, read_rows, real_in


def read_points(path: Path, *, area: BaseGeometry, unit: TableUnit = "mm") -> Pattern:
    r"""Read a table of points with the columns x and y, and radius and doubt where it has them.

    Parameters
    ----------
    path : Path
        A CSV file with a header; lines that start with # and columns other than ``x``, ``y``,
        ``radius`` (or ``radius_mm``, always in millimetres) and ``doubt`` are passed over. Empty
        cells of a radius mean not known, of a doubt 0.
    area : shapely geometry
        Study area in millimetres (see `area_from_option`).
    unit : {"mm", "cm", "m"}
        Unit of the columns.

    Returns
    -------
    Pattern
        In millimetres; points outside the area are left out and counted.

    Raises
    ------
    TableWrong
        If a column is missing, a cell holds no finite number, a radius is not above 0, or a doubt
        is not within 0..1.

    Examples
    --------
    >>> import shapely
    >>> from tempfile import TemporaryDirectory
    >>> with TemporaryDirectory() as folder:
    ...     table = Path(folder) / "points.csv"
    ...     _ = table.write_text("x,y\n1,2\n3.5,4\n")
    ...     pattern = read_points(table, area=shapely.box(0, 0, 100, 100), unit="cm")
    >>> pattern.points.tolist()
    [[10.0, 20.0], [35.0, 40.0]]
    """
    header, *body = read_rows(path)
    names = [cell.lower() for cell in header.cells]
    missing = [name for name in ("x", "y") if name not in names]
    if missing:
        raise TableWrong(
            f"{path.name} has no column {missing[0]!r} (its columns: {', '.join(header.cells)});"
            " name the columns x and y in the first line."
        )
    at = {name: names.index(name) for name in ("x", "y")}
    points = [[real_in(row, at[name], name) for name in ("x", "y")] for row in body]
    xy = np.array(points, dtype=np.float64).reshape(-1, 2) * MM_PER_UNIT[unit]
    radius = None
    for name, factor in (("radius_mm", 1.0), ("radius", MM_PER_UNIT[unit])):
        if radius is None and name in names:
            radius = _optional(body, names.index(name), name, math.nan, (0.0, math.inf)) * factor
    doubt = None
    if "doubt" in names:
        doubt = _optional(body, names.index("doubt"), "doubt", 0.0, (0.0, 1.0))
    return Pattern.of(xy, area, name=path.name, radius=radius, doubt=doubt)


def _optional(
    body: list[Row], column: int, name: str, empty: float, limits: tuple[float, float]
) -> NDArray[np.float64]:
    """Return a column that may have empty cells; complain of a value beyond its limits."""
    low, high = limits
    values = np.full(len(body), empty)
    for k, row in enumerate(body):
        if column >= len(row.cells) or not row.cells[column]:
            continue
        values[k] = value = real_in(row, column, name)
        above = value > low if math.isinf(high) else value >= low
        if not (above and value <= high):
            asked = "above 0" if math.isinf(high) else f"within {low:g} to {high:g}"
            raise TableWrong(f"{row.where}: the {name} {value:g} must be {asked}.")
    return values
