"""Which quadrats were drawn for a spot check, and what a person saw in them without the detections."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import shapely
from shapely.geometry import shape
from shapely.geometry.base import BaseGeometry

from detect.errors import AmendmentRefused

if TYPE_CHECKING:
    from detect.amendment import Amendment

SPOT_CHECK_KINDS = ("spot_check_drawn", "spot_check_marked")
MOST_DRAWN = 1000  # quadrats in one spot check
MOST_MARKS = 10_000  # in one quadrat
_EDGE_PX = 0.5  # how far beyond its quadrat a mark may lie: outlines are kept to a tenth of a pixel


@dataclass(frozen=True, slots=True)
class DrawnQuadrat:
    """One quadrat of a spot check.

    Parameters
    ----------
    quadrat : int
        Its number in quadrats.csv, from 1.
    stratum : int
        From 0.
    counted : int
        Spots that counted in it when it was drawn; a person who counts must not see this.
    outline : mapping
        GeoJSON in pixels of what it holds of the study area.

    Raises
    ------
    ValueError
        If a value is impossible.
    """

    quadrat: int
    stratum: int
    counted: int
    outline: Mapping[str, Any]

    def __post_init__(self) -> None:
        for name, least in (("quadrat", 1), ("stratum", 0), ("counted", 0)):
            _check_whole(name, getattr(self, name), least)
        outline_of(self.outline)

    def as_dict(self) -> dict[str, Any]:
        """Return plain values for a file."""
        return {
            "quadrat": self.quadrat,
            "stratum": self.stratum,
            "counted": self.counted,
            "outline": dict(self.outline),
        }


@dataclass(frozen=True, slots=True)
class Draw:
    """The quadrats drawn for a spot check, in the order in which they are to be looked at.

    Parameters
    ----------
    seed : int
        Of the draw.
    sizes : tuple of int
        Quadrats in each stratum.
    total : int
        Spots that counted in all quadrats.
    quadrats : tuple of DrawnQuadrat
        Those drawn.

    Raises
    ------
    ValueError
        If nothing or too much is drawn, a quadrat twice, or more of a stratum than it holds.
    """

    seed: int
    sizes: tuple[int, ...]
    total: int
    quadrats: tuple[DrawnQuadrat, ...]

    def __post_init__(self) -> None:
        _check_whole("seed", self.seed, 0)
        _check_whole("total", self.total, 0)
        for size in self.sizes:
            _check_whole("sizes", size, 1)
        if not 1 <= len(self.quadrats) <= MOST_DRAWN:
            raise ValueError(
                f"a spot check has 1 to {MOST_DRAWN} quadrats, not {len(self.quadrats)}"
            )
        if len({each.quadrat for each in self.quadrats}) < len(self.quadrats):
            raise ValueError("a quadrat is drawn twice")
        for stratum, size in enumerate(self.sizes):
            if not 1 <= sum(each.stratum == stratum for each in self.quadrats) <= size:
                raise ValueError(f"of stratum {stratum} none is drawn, or more than its {size}")
        if any(each.stratum >= len(self.sizes) for each in self.quadrats):
            raise ValueError("a quadrat is of a stratum that is not told")

    def __repr__(self) -> str:
        return f"<Draw of {len(self.quadrats)} of {sum(self.sizes)} quadrats, seed {self.seed}>"

    def as_dict(self) -> dict[str, Any]:
        """Return plain values for a file."""
        return {
            "seed": self.seed,
            "sizes": list(self.sizes),
            "total": self.total,
            "quadrats": [each.as_dict() for each in self.quadrats],
        }

    @classmethod
    def from_dict(cls, values: Any) -> Draw:
        """Return the draw that a line of a log holds (ValueError if it is none)."""
        if not isinstance(values, dict) or set(values) != {"seed", "sizes", "total", "quadrats"}:
            raise ValueError("a draw must have seed, sizes, total, quadrats, no more and no less")
        names = {"quadrat", "stratum", "counted", "outline"}
        rows = values["quadrats"]
        if not isinstance(rows, list) or not isinstance(values["sizes"], list):
            raise ValueError("sizes and quadrats of a draw must be lists")
        if not all(isinstance(row, dict) and set(row) == names for row in rows):
            raise ValueError(
                "a drawn quadrat must have quadrat, stratum, counted, outline, no more and no less"
            )
        quadrats = tuple(DrawnQuadrat(**row) for row in rows)
        return cls(values["seed"], tuple(values["sizes"]), values["total"], quadrats)


@dataclass(frozen=True, slots=True)
class Marked:
    """What a person saw in one quadrat of a spot check.

    Parameters
    ----------
    count : int
        Objects.
    marks : ndarray of shape (count, 2), or None
        Where, in pixels; None where they were only counted.
    who : str
        The person.
    """

    count: int
    marks: Any
    who: str


@dataclass(frozen=True, slots=True, eq=False)
class Checked:
    """A spot check as far as it has come.

    Parameters
    ----------
    id : str
        Of the amendment that drew it.
    before : int
        Changes in the log before the draw: the spots as they stood then are what is checked.
    draw : Draw
    marked : mapping from a quadrat's number to Marked
        The newest of each that stands.
    """

    id: str
    before: int
    draw: Draw
    marked: Mapping[int, Marked]

    def __repr__(self) -> str:
        return f"<Checked: {len(self.marked)} of {len(self.draw.quadrats)} quadrats>"

    @property
    def is_done(self) -> bool:
        """Whether every quadrat has been looked at."""
        return len(self.marked) == len(self.draw.quadrats)


def latest_spot_check(
    amendments: Sequence[Amendment], active: Mapping[str, bool] | None = None
) -> Checked | None:
    """Return the newest spot check of a log that stands.

    Parameters
    ----------
    amendments : sequence of Amendment
        In order.
    active : mapping or None
        Which of them stand, by id; None to follow from the log itself.

    Returns
    -------
    Checked or None
        None where none was drawn.
    """
    stands = dict(active) if active is not None else _standing(amendments)
    known: Checked | None = None
    marked: dict[int, Marked] = {}
    for number, each in enumerate(amendments):
        if not stands[each.id]:
            continue
        if each.what == "spot_check_drawn" and each.draw is not None:
            marked = {}
            known = Checked(each.id, number, each.draw, marked)
        elif each.what == "spot_check_marked" and known is not None and each.of == known.id:
            marks = np.array(each.marks, dtype=np.float64).reshape(-1, 2)
            counted = int(each.count or 0)
            told = None if counted and not len(marks) else marks
            marked[int(each.quadrat or 0)] = Marked(counted, told, each.who)
    return known


def check_marked(drawn: Amendment | None, stands: bool, marked: Amendment) -> None:
    """Refuse marks of no standing draw, of a quadrat not drawn, or outside their quadrat.

    Raises
    ------
    AmendmentRefused
    """
    if drawn is None or drawn.draw is None or not stands:
        raise AmendmentRefused(
            f"marks a quadrat of the spot check {marked.of!r}, but no such spot check was drawn"
        )
    at = {each.quadrat: each for each in drawn.draw.quadrats}
    if marked.quadrat not in at:
        raise AmendmentRefused(
            f"marks quadrat {marked.quadrat}, which was not drawn for this spot check"
        )
    outline = outline_of(at[marked.quadrat].outline).buffer(_EDGE_PX)
    for x, y in marked.marks:
        if not outline.intersects(shapely.Point(x, y)):
            raise AmendmentRefused(
                f"marks {x:g}, {y:g}, which lies outside quadrat {marked.quadrat}; mark what has"
                " its middle inside"
            )


def outline_of(values: Mapping[str, Any]) -> BaseGeometry:
    """Return the outline of a quadrat (ValueError if it is none)."""
    try:
        outline = shape(dict(values))
        sound = outline.geom_type in ("Polygon", "MultiPolygon") and outline.area > 0
        sound = sound and bool(np.isfinite(shapely.get_coordinates(outline)).all())
    except (KeyError, TypeError, ValueError, IndexError, AttributeError, RecursionError) as trouble:
        raise ValueError("outline must be a GeoJSON Polygon or MultiPolygon") from trouble
    except shapely.errors.ShapelyError as trouble:
        raise ValueError("outline must be a GeoJSON Polygon or MultiPolygon") from trouble
    if not sound:
        raise ValueError(
            "outline must be a GeoJSON Polygon or MultiPolygon that encloses something"
        )
    return outline


def _standing(amendments: Sequence[Amendment]) -> dict[str, bool]:
    """Return which amendments stand, as undo and redo left them."""
    stands: dict[str, bool] = {}
    for each in amendments:
        stands[each.id] = True
        if each.what in ("undo", "redo"):
            stands[str(each.of)] = each.what == "redo"
    return stands


def _check_whole(name: str, value: Any, least: int) -> None:
    """Refuse what is no whole number, or too small or too large a one."""
    if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= 10**12:
        raise ValueError(f"{name} must be a whole number of {least} or more, not {value!r:.40}")
