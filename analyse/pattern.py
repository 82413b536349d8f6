"""Points and their study area in millimetres, from a sheet, a table or a program."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal, get_args

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry.base import BaseGeometry

from analyse.count_table import CountTable as CountTable
from analyse.count_table import read_counts as read_counts
from analyse.errors import TableWrong
from analyse.region import MM_PER_UNIT, TableUnit, check_area, rectangle
from analyse.region import area_from_option as area_from_option
from analyse.rows import read_rows, real_in
from detect.amended import current_state
from detect.changes import Changes, changes_of
from detect.planted import Planted
from detect.scale import Scale
from detect.sheet import Amendment, Sheet

Unit = Literal["mm", "px"]
DOUBTFUL = 0.5  # a doubt above this is more likely false than real

_PIECES = 64  # of the picture's width: how finely outlines are cut where a lens bends them


@dataclass(frozen=True, slots=True)
class Circle:
    """The circle of a dish, in the unit of its pattern."""

    x: float
    y: float
    radius: float


@dataclass(frozen=True, slots=True, eq=False)
class Pattern:
    """Points in a study area, ready to be counted in quadrats.

    Parameters
    ----------
    name : str
        File name of the photograph or table.
    points : ndarray of shape (n, 2)
        Counted points as x, y in `unit`; all lie in the area.
    area : shapely Polygon or MultiPolygon
        Study area in `unit`, with holes.
    unit : {"mm", "px"}
        Pixels only where no scale is known.
    area_kind : str
        What the area is: dish, plot, leaf, frame, polygon or rectangle.
    relative_uncertainty : float
        Standard uncertainty of a length, as a fraction of it.
    doubt : ndarray of shape (n,)
        Estimated probability, 0..1, that a point is no real object.
    reviewed : bool
        Whether a person has marked the points as checked (always so for a table).
    flags : tuple of str
        Reasons for care known already (see `analyse.flags.FLAGS`).
    dish : Circle or None
        The circle that rings and sectors are laid in.
    outside : int
        Points left out because they lie outside the area.
    planted : Planted or None
        What planted objects showed of the detector, where they were set.
    blind : float
        How near two usual spots may lie to be seen as one, in `unit`; NaN where not measured.
    dish_notes : tuple of str
        What makes the dish unsure.
    changes : Changes or None
        What people did to the spots of a photograph, and whether it is marked as checked; None for
        what is no photograph.
    width : float
        Usual width of a spot, the median of their diameters, in `unit`; NaN where not known.

    Raises
    ------
    ValueError
        If the columns differ in length or hold impossible values.
    AreaWrong
        If the area is no polygon, crosses itself or encloses nothing.
    """

    name: str
    points: NDArray[np.float64]
    area: BaseGeometry
    unit: Unit
    area_kind: str
    relative_uncertainty: float
    doubt: NDArray[np.float64]
    reviewed: bool
    flags: tuple[str, ...]
    dish: Circle | None
    outside: int
    planted: Planted | None = None
    blind: float = math.nan
    dish_notes: tuple[str, ...] = ()
    changes: Changes | None = None
    width: float = math.nan

    def __post_init__(self) -> None:
        points = np.array(self.points, dtype=np.float64).reshape(-1, 2)
        doubt = np.array(self.doubt, dtype=np.float64).reshape(-1)
        if doubt.size != len(points):
            raise ValueError(f"doubt has {doubt.size} values for {len(points)} points")
        if not np.isfinite(points).all():
            raise ValueError("a point is not finite")
        if not ((doubt >= 0) & (doubt <= 1)).all():
            raise ValueError("a doubt is not within 0..1")
        if self.unit not in get_args(Unit):
            raise ValueError(f"unit must be mm or px, not {self.unit!r}")
        if not (math.isfinite(self.relative_uncertainty) and self.relative_uncertainty >= 0):
            raise ValueError(
                f"relative_uncertainty must be 0 or more, not {self.relative_uncertainty}"
            )
        check_area(self.area)
        for name, column in (("points", points), ("doubt", doubt)):
            column.setflags(write=False)
            object.__setattr__(self, name, column)

    def __len__(self) -> int:
        return len(self.points)

    def __repr__(self) -> str:
        return (
            f"<Pattern {self.name}: {len(self)} points in a {self.area_kind} of"
            f" {self.area.area:.4g} {self.unit}2>"
        )

    @classmethod
    def of(
        cls,
        points: ArrayLike,
        area: BaseGeometry | Sequence[float],
        *,
        name: str = "points",
        unit: Unit = "mm",
    ) -> Pattern:
        """Return the pattern of points in an area; points outside are left out and counted.

        Parameters
        ----------
        points : array_like of shape (n, 2)
            Points as x, y in `unit`.
        area : shapely geometry or four numbers
            Study area in `unit`; four numbers are x0, y0, x1, y1 of a rectangle.
        name : str
            What the pattern is called in tables and reports.
        unit : {"mm", "px"}
            Unit of points and area.

        Returns
        -------
        Pattern

        Raises
        ------
        AreaWrong
            If the area is unusable.
        ValueError
            If a point is not finite.

        Examples
        --------
        >>> pattern = Pattern.of([[1, 2], [5, 5], [12, 3]], (0, 0, 10, 10))
        >>> len(pattern), pattern.outside, pattern.flags
        (2, 1, ('outside',))
        """
        kind = "polygon" if isinstance(area, BaseGeometry) else "rectangle"
        region = area if isinstance(area, BaseGeometry) else rectangle([float(v) for v in area])
        xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
        check_area(region)
        if not np.isfinite(xy).all():
            raise ValueError("a point is not finite")
        shapely.prepare(region)
        inside = np.asarray(shapely.intersects_xy(region, xy[:, 0], xy[:, 1]))
        outside = int((~inside).sum())
        kept = xy[inside]
        flags = _point_flags(kept, outside, np.zeros(len(kept)))
        return cls(
            name, kept, region, unit, kind, 0.0, np.zeros(len(kept)), True, flags, None, outside
        )

    @property
    def duplicates(self) -> int:
        """Number of points that repeat the place of an earlier one."""
        return len(self.points) - len(np.unique(self.points, axis=0))

    @property
    def doubtful(self) -> int:
        """Number of points more likely false than real by their doubt."""
        return int((self.doubt > DOUBTFUL).sum())


def pattern_from_sheet(sheet: Sheet, amendments: Sequence[Amendment] = ()) -> Pattern:
    """Return the counted spots of a sheet, as people have amended it, in millimetres.

    Parameters
    ----------
    sheet : Sheet
        The record of one photograph.
    amendments : sequence of Amendment
        What people changed, in order.

    Returns
    -------
    Pattern
        In pixels, with the flag ``uncalibrated``, where the sheet knows no scale.

    Notes
    -----
    Struck spots are left out. Spots a person moved or placed outside the study area are left out
    and counted. Straight edges stay straight under the map of a tilted plane, so only the corners
    of the outline are mapped; where a lens bends them, they are mapped in short pieces.
    """
    if not amendments:
        return pattern_of_state(sheet, Changes())
    return pattern_of_state(current_state(sheet, amendments), changes_of(sheet, amendments))


def pattern_of_state(sheet: Sheet, changes: Changes) -> Pattern:
    """Return the counted spots of a sheet as it stands.

    Parameters
    ----------
    sheet : Sheet
        With what people changed applied.
    changes : Changes
        What that was.

    Returns
    -------
    Pattern
        As `pattern_from_sheet` does.
    """
    spots = sheet.spots.where(sheet.spots.counted)
    inside = sheet.area.contains(spots.centres)
    outside, spots = int((~inside).sum()), spots.where(inside)
    points, area, diameters = spots.centres, sheet.area.polygon, 2 * spots.radius
    if sheet.scale is not None:
        if sheet.scale.lens is not None:
            area = shapely.segmentize(area, sheet.photograph.width / _PIECES)
        diameters = diameters * sheet.scale.mm_per_px(points)
        points, area = sheet.scale.to_mm(points), shapely.transform(area, sheet.scale.to_mm)
    flags = _point_flags(points, outside, spots.doubt)
    flags += _scale_flags(sheet.scale)
    dish_notes = tuple(sheet.settings.get("dish", ()))
    flags += ("dish_unsure",) if dish_notes else ()
    flags += changes.flags
    return Pattern(
        sheet.photograph.name,
        points,
        area,
        "mm" if sheet.scale else "px",
        sheet.area.kind,
        sheet.scale.relative_uncertainty if sheet.scale else 0.0,
        spots.doubt,
        changes.is_checked,
        flags,
        _circle(area) if sheet.area.kind == "dish" else None,
        outside,
        sheet.planted,
        _blind(sheet),
        dish_notes,
        changes,
        float(np.median(diameters)) if len(diameters) else math.nan,
    )


def read_points(path: Path, *, area: BaseGeometry, unit: TableUnit = "mm") -> Pattern:
    """Read a table of points with the columns x and y.

    Parameters
    ----------
    path : Path
        A CSV file with a header; other columns and lines that start with # are passed over.
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
        If a column is missing or a cell holds no finite number.
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
    return Pattern.of(xy, area, name=path.name)


def _scale_flags(scale: Scale | None) -> tuple[str, ...]:
    """Return the flag of a scale that is missing, or does not say how sure it is."""
    if scale is None:
        return ("uncalibrated",)
    return () if scale.relative_uncertainty > 0 else ("exact_scale",)


def _point_flags(
    points: NDArray[np.float64], outside: int, doubt: NDArray[np.float64]
) -> tuple[str, ...]:
    """Return the flags that points give rise to by themselves."""
    known = {
        "outside": outside > 0,
        "duplicates": len(np.unique(points, axis=0)) < len(points),
        "doubtful": bool((doubt > DOUBTFUL).any()),
    }
    return tuple(name for name, raised in known.items() if raised)


def _blind(sheet: Sheet) -> float:
    """Return the blind distance of a sheet as a length, at the scale of its area's middle."""
    if sheet.planted is None or sheet.scale is None:
        return math.nan if sheet.planted is None else sheet.planted.blind_px
    middle = sheet.area.polygon.centroid
    return sheet.planted.blind_px * float(sheet.scale.mm_per_px([[middle.x, middle.y]])[0])


def _circle(area: BaseGeometry) -> Circle:
    """Return the circle of equal area about the centroid."""
    centre = area.centroid
    return Circle(centre.x, centre.y, math.sqrt(area.area / math.pi))
