"""Points and their study area in millimetres, from a sheet, a table or a program."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal, get_args

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry.base import BaseGeometry

from analyse.count_table import CountTable as CountTable
from analyse.count_table import read_counts as read_counts
from analyse.region import area_from_option as area_from_option
from analyse.region import check_area, rectangle
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
    """The circle of a dish, in the unit of its pattern.

    Examples
    --------
    >>> Circle(43.0, 43.0, 42.0)
    Circle(x=43.0, y=43.0, radius=42.0)
    """

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
    radius : ndarray of shape (n,)
        Radius of each point in `unit`, NaN where not known; an empty one stands for none known.
    sought : str
        What a detector looked for: colonies, seedlings, lesions or spots; empty where none did.
    spots : tuple of str
        Ids of the points on their sheet; empty for what is no photograph.

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
    radius: NDArray[np.float64] = field(default_factory=lambda: np.empty(0))
    sought: str = ""
    spots: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        points: NDArray[np.float64] = np.array(self.points, dtype=np.float64).reshape(-1, 2)
        doubt: NDArray[np.float64] = np.array(self.doubt, dtype=np.float64).reshape(-1)
        radius: NDArray[np.float64] = np.array(self.radius, dtype=np.float64).reshape(-1)
        if not radius.size:
            radius = np.full(len(points), math.nan)
        for name, column in (("doubt", doubt), ("radius", radius)):
            if column.shape != (len(points),):
                raise ValueError(f"{name} has {column.size} values for {len(points)} points")
        if not ((radius > 0) | np.isnan(radius)).all():
            raise ValueError("a radius is not above 0")
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
        for name, column in (("points", points), ("doubt", doubt), ("radius", radius)):
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
        radius: ArrayLike | None = None,
        doubt: ArrayLike | None = None,
    ) -> Pattern:
        """Return the pattern of points in an area; points outside are left out and counted.

        Parameters
        ----------
        points : array_like of shape (n, 2)
            Points as x, y in `unit`.
        area : shapely geometry or four numbers
            Study area in `unit`; four numbers are x0, y0, x1, y1 of a rectangle. A polygon that is
            a disc (of more than 32 sides) counts as a dish.
        name : str
            What the pattern is called in tables and reports.
        unit : {"mm", "px"}
            Unit of points and area.
        radius : array_like of shape (n,), optional
            Radius of each point in `unit`, NaN where not known.
        doubt : array_like of shape (n,), optional
            Probability, 0..1, that a point is no real object; 0 where not said.

        Returns
        -------
        Pattern

        Raises
        ------
        AreaWrong
            If the area is unusable.
        ValueError
            If a point is not finite, or a column does not fit.

        Examples
        --------
        >>> pattern = Pattern.of([[1, 2], [5, 5], [12, 3]], (0, 0, 10, 10))
        >>> len(pattern), pattern.outside, pattern.flags
        (2, 1, ('outside',))
        >>> Pattern.of([[1, 2]], shapely.Point(0, 0).buffer(10)).dish is None
        False
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
        sizes, doubts = (
            np.full(len(xy), missing) if given is None else np.asarray(given, dtype=np.float64)
            for given, missing in ((radius, math.nan), (doubt, 0.0))
        )
        for column, values in (("radius", sizes), ("doubt", doubts)):
            if values.shape != (len(xy),):
                raise ValueError(f"{column} has {values.size} values for {len(xy)} points")
        sizes, doubts = sizes[inside], doubts[inside]
        known = sizes[np.isfinite(sizes)]
        return cls(
            name,
            kept,
            region,
            unit,
            kind,
            0.0,
            doubts,
            True,
            _point_flags(kept, outside, doubts),
            _disc(region),
            outside,
            width=2 * float(np.median(known)) if known.size else math.nan,
            radius=sizes,
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
    points, area, radii = spots.centres, sheet.area.polygon, spots.radius
    if sheet.scale is not None:
        if sheet.scale.lens is not None:
            area = shapely.segmentize(area, sheet.photograph.width / _PIECES)
        radii = radii * sheet.scale.mm_per_px(points)
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
        2 * float(np.median(radii)) if len(radii) else math.nan,
        radii,
        str(sheet.settings.get("detector", {}).get("kind", "spots")),
        spots.id,
    )


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


def _disc(area: BaseGeometry) -> Circle | None:
    """Return the circle of an area that is a disc, so that what holds for dishes holds for it."""
    from analyse.set_covariance import dish_circle  # loads scipy, which help has no use for

    found = dish_circle(area)
    return None if found is None else Circle(*found)


def _circle(area: BaseGeometry) -> Circle:
    """Return the circle of equal area about the centroid."""
    centre = area.centroid
    return Circle(centre.x, centre.y, math.sqrt(area.area / math.pi))
