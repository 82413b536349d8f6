"""Study areas given by hand for a table: a rectangle of four numbers or a polygon in a file."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import Literal

import shapely
from shapely.geometry.base import BaseGeometry

from detect.errors import AreaWrong, OptionWrong
from detect.lengths import LONGEST

TableUnit = Literal["mm", "cm", "m"]
MM_PER_UNIT: dict[TableUnit, float] = {"mm": 1.0, "cm": 10.0, "m": 1000.0}


def check_area(area: BaseGeometry) -> None:
    """Refuse a study area that is no polygon, crosses itself or encloses nothing.

    Examples
    --------
    >>> check_area(shapely.box(0, 0, 2, 1))
    >>> check_area(shapely.Point(0, 0))
    Traceback (most recent call last):
        ...
    detect.errors.AreaWrong: A study area must be a polygon, not a Point; give a closed outline.
    """
    if area.geom_type not in ("Polygon", "MultiPolygon"):
        raise AreaWrong(
            f"A study area must be a polygon, not a {area.geom_type}; give a closed outline."
        )
    if not area.is_valid:
        reason = shapely.is_valid_reason(area)
        raise AreaWrong(f"The study area is not usable ({reason}); draw it without crossings.")
    if not (math.isfinite(area.area) and area.area > 0):
        raise AreaWrong("The study area encloses nothing; give one with an area above 0.")


def area_from_option(text: str, unit: TableUnit = "mm") -> BaseGeometry:
    """Return the study area a person typed for a table, in millimetres.

    Parameters
    ----------
    text : str
        ``X0,Y0,X1,Y1`` of a rectangle, or the path of a GeoJSON file with one polygon.
    unit : {"mm", "cm", "m"}
        Unit of the numbers.

    Returns
    -------
    shapely geometry

    Raises
    ------
    AreaWrong
        If the text is neither, or the area is unusable.
    OptionWrong
        If the unit is unknown.

    Examples
    --------
    >>> area_from_option("0,0,2,1", "cm").area
    200.0
    """
    if unit not in MM_PER_UNIT:
        raise OptionWrong(f"--unit must be mm, cm or m, not {unit!r}.")
    factor = MM_PER_UNIT[unit]
    numbers = _four_numbers(text)
    if numbers is not None:
        return rectangle([value * factor for value in numbers])
    area = _polygon_in(Path(text))
    return shapely.transform(area, lambda xy: xy * factor)


def rectangle(numbers: Sequence[float]) -> BaseGeometry:
    """Return the rectangle with the corners x0, y0 and x1, y1.

    Examples
    --------
    >>> rectangle([0, 0, 4, 3]).area
    12.0
    """
    if len(numbers) != 4 or not all(math.isfinite(value) for value in numbers):
        raise AreaWrong(
            f"A rectangle needs four finite numbers X0,Y0,X1,Y1, not {list(numbers)}; give all four."
        )
    if max(map(abs, numbers)) > LONGEST:
        raise AreaWrong(
            f"A rectangle may reach to {LONGEST:g} at most, not {list(numbers)}; check the numbers."
        )
    x0, y0, x1, y1 = numbers
    if not (x1 > x0 and y1 > y0):
        raise AreaWrong(
            f"The rectangle {x0:g},{y0:g},{x1:g},{y1:g} encloses nothing;"
            " give the smaller corner first, then the larger one."
        )
    return shapely.box(x0, y0, x1, y1)


def _four_numbers(text: str) -> list[float] | None:
    """Return the numbers of a rectangle, or None where the text is meant as a path."""
    parts = text.split(",")
    try:
        return [float(part) for part in parts]
    except ValueError:
        return None


def _polygon_in(path: Path) -> BaseGeometry:
    """Return the one polygon of a GeoJSON file."""
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, ValueError) as error:
        raise AreaWrong(
            f"The study area {str(path)!r} is neither X0,Y0,X1,Y1 nor a file that can be read;"
            " check the path."
        ) from error
    try:
        shapes = shapely.get_parts(shapely.from_geojson(text))
    except shapely.GEOSException as error:
        raise AreaWrong(
            f"{path.name} is not GeoJSON; save one polygon as GeoJSON and name that file."
        ) from error
    if len(shapes) != 1 and {shape.geom_type for shape in shapes} != {"Polygon"}:
        raise AreaWrong(
            f"{path.name} holds {len(shapes)} shapes; a study area is one polygon, with holes if need be."
        )
    area: BaseGeometry = shapes[0] if len(shapes) == 1 else shapely.MultiPolygon(list(shapes))
    check_area(area)
    return area
