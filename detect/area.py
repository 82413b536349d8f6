"""Study areas: the region of a photograph in which spots count."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry import Polygon, box, mapping, shape
from shapely.geometry.base import BaseGeometry

from detect.errors import AreaWrong
from detect.leaf import find_leaf
from detect.on_map import named_map

if TYPE_CHECKING:
    from detect.dish import Dish
    from detect.georeference import Georeference
    from detect.photograph import Photograph

AreaKind = Literal["dish", "plot", "leaf", "frame", "polygon"]


@dataclass(frozen=True, slots=True, eq=False)
class StudyArea:
    """The region in which spots count, in pixels.

    Parameters
    ----------
    polygon : shapely Polygon or MultiPolygon
        Outline with holes, in pixels (x right, y down, pixel centres at whole numbers).
    kind : {"dish", "plot", "leaf", "frame", "polygon"}
        What the outline is.
    note : str
        How it was found, as reports quote it.

    Raises
    ------
    AreaWrong
        If the outline crosses itself or encloses nothing.
    """

    polygon: BaseGeometry
    kind: AreaKind
    note: str

    def __post_init__(self) -> None:
        if self.polygon.geom_type not in ("Polygon", "MultiPolygon"):
            raise AreaWrong(
                f"A study area must be a polygon, not a {self.polygon.geom_type}; draw a closed outline."
            )
        if not self.polygon.is_valid:
            reason = shapely.is_valid_reason(self.polygon)
            raise AreaWrong(
                f"The study area's outline is not usable ({reason}); draw it without crossings."
            )
        if not self.polygon.area > 0:
            raise AreaWrong(
                "The study area encloses nothing (0 square pixels); draw a larger outline."
            )

    def contains(self, points_px: ArrayLike) -> NDArray[np.bool_]:
        """Tell which of (n, 2) pixel positions lie in the area, its edge included."""
        points = np.asarray(points_px, dtype=np.float64).reshape(-1, 2)
        shapely.prepare(self.polygon)
        return np.asarray(shapely.intersects_xy(self.polygon, points[:, 0], points[:, 1]))

    def as_dict(self) -> dict[str, Any]:
        """Return the area as plain values for a file (geometry as in GeoJSON)."""
        return {"kind": self.kind, "note": self.note, "geometry": mapping(self.polygon)}

    @classmethod
    def from_dict(cls, values: dict[str, Any]) -> StudyArea:
        """Return the area a file holds."""
        return cls(shape(values["geometry"]), values["kind"], str(values["note"]))


def dish_area(dish: Dish, *, width: int, height: int, inset_px: float = 0.0) -> StudyArea:
    """Return the inside of a dish, its edge stepped inwards by `inset_px` pixels.

    Of a dish cut by the picture of `width` x `height` pixels it is the part within: a polygon.

    Raises
    ------
    AreaWrong
        If the inset is negative or swallows the dish.
    """
    seen = f"dish found ({100 * dish.quality:.0f} % of its edge seen)"
    seen = "; ".join((seen, *dish.notes))
    area = _stepped_in(Polygon(dish.inner.outline(720)), "dish", seen, inset_px)
    if not dish.outside:
        return area
    frame = box(-0.5, -0.5, width - 0.5, height - 0.5)
    return StudyArea(area.polygon.intersection(frame), "polygon", area.note)


def plot_area(corners_px: ArrayLike, *, inset_px: float = 0.0) -> StudyArea:
    """Return the plot between four corners (4, 2), its edge stepped inwards by `inset_px` pixels.

    Raises
    ------
    AreaWrong
        If the corners cross, or the inset is negative or swallows the plot.
    """
    outline = Polygon(np.asarray(corners_px, dtype=np.float64).reshape(-1, 2))
    return _stepped_in(outline, "plot", "plot between its corners", inset_px)


def leaf_area(photograph: Photograph, *, inset_px: float = 0.0) -> StudyArea:
    """Find the leaf of a photograph and return it, its edge stepped inwards by `inset_px` pixels.

    Raises
    ------
    AreaNotFound
        If no leaf is seen.
    AreaWrong
        If the inset is negative or swallows the leaf.
    """
    outline = find_leaf(photograph)
    holes = len(outline.interiors)
    note = "leaf found" if not holes else f"leaf found, without its {holes} hole{'s'[: holes - 1]}"
    return _stepped_in(outline, "leaf", note, inset_px)


def frame_area(width: int, height: int, *, inset_px: float = 0.0) -> StudyArea:
    """Return the whole picture, pixel edge to pixel edge, stepped inwards by `inset_px` pixels.

    Raises
    ------
    AreaWrong
        If the inset is negative or swallows the picture.
    """
    return _stepped_in(box(-0.5, -0.5, width - 0.5, height - 0.5), "frame", "whole frame", inset_px)


def polygon_area(
    path: Path,
    width: int,
    height: int,
    *,
    inset_px: float = 0.0,
    georeference: Georeference | None = None,
) -> StudyArea:
    """Read a study area drawn by hand.

    Parameters
    ----------
    path : Path
        A GeoJSON file with one Polygon or MultiPolygon (alone, as a Feature, or as the only one of
        a FeatureCollection) in pixel coordinates, x right and y down; or in the coordinates of a
        georeferenced raster's map, if the file names that map in a member "crs".
    width, height : int
        Size of the picture, in which the outline must lie.
    inset_px : float
        How far the edge steps inwards.
    georeference : Georeference or None
        Of the picture.

    Returns
    -------
    StudyArea

    Raises
    ------
    AreaWrong
        If the file cannot be read, is on another map than the picture, holds no such outline, the outline crosses itself or leaves
        the picture, or the inset is negative or swallows it.

    References
    ----------
    RFC 7946, "The GeoJSON format" (2016), section 3.
    """
    values = _json_of(path)
    outline = _one_polygon(values, path.name)
    told = named_map(values)
    if told is not None and georeference is not None:
        if told != georeference.name:
            raise AreaWrong(
                f"The polygon in {path.name} is on the map {told}, but the raster on"
                f" {georeference.name}; export it on the raster's map."
            )
        outline = shapely.transform(outline, georeference.to_px)
    area = StudyArea(outline, "polygon", f"polygon from {path.name}")
    frame = box(-0.5, -0.5, width - 0.5, height - 0.5)
    if not frame.buffer(1e-6).covers(outline):
        left, top, right, bottom = (f"{bound:.10g}" for bound in outline.bounds)
        what = "draw it in pixels of this picture"
        if georeference is not None and told is None:
            what += f", or name its map in the file as a GeoJSON's crs ({georeference.name})"
        raise AreaWrong(
            f"The polygon in {path.name} reaches from {left} to {right} in x and from {top} to"
            f" {bottom} in y, out of the picture of {width} x {height} pixels; {what}."
        )
    return _stepped_in(area.polygon, "polygon", area.note, inset_px)


def area_with_data(area: StudyArea, seen: BaseGeometry | None) -> StudyArea:
    """Return a study area without what of its picture holds no data.

    Parameters
    ----------
    area : StudyArea
    seen : shapely geometry or None
        The part of the picture that holds data, in pixels; None where all of it does.

    Returns
    -------
    StudyArea

    Raises
    ------
    AreaWrong
        If nothing of the area holds data.
    """
    if seen is None or seen.covers(area.polygon):
        return area
    parts = [
        part
        for part in shapely.get_parts(area.polygon.intersection(seen))
        if part.geom_type in ("Polygon", "MultiPolygon") and part.area > 0
    ]
    if not parts:
        raise AreaWrong(
            "The study area lies where the raster holds no data; check its coordinates."
        )
    note = f"{area.note}, without what holds no data"
    return StudyArea(shapely.union_all(parts), area.kind, note)


def _stepped_in(outline: BaseGeometry, kind: AreaKind, note: str, inset_px: float) -> StudyArea:
    """Step an outline inwards and say so in the note."""
    if not (np.isfinite(inset_px) and inset_px >= 0):
        raise AreaWrong(f"The inset must be 0 or a positive length, not {inset_px:g} pixels.")
    whole = StudyArea(outline, kind, note)
    if inset_px == 0:
        return whole
    inner = outline.buffer(-inset_px)
    if inner.is_empty:
        raise AreaWrong(
            f"The inset of {inset_px:.4g} pixels leaves nothing of the {kind}; give a smaller one."
        )
    return StudyArea(inner, kind, f"{note}, inset by {inset_px:.1f} pixels")


def _json_of(path: Path) -> Any:
    """Read a JSON file; every way this can fail becomes one sentence."""
    try:
        return json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError as error:
        raise AreaWrong(f"There is no polygon file {path}; check the path.") from error
    except OSError as error:
        reason = (error.strerror or "unknown reason").lower()
        raise AreaWrong(f"The polygon file {path} cannot be opened ({reason}).") from error
    except ValueError as error:
        raise AreaWrong(
            f"The polygon file {path.name} is no JSON text; save the outline as GeoJSON."
        ) from error


def _one_polygon(values: Any, name: str) -> BaseGeometry:
    """Return the one polygon of a GeoJSON value."""
    kind = values.get("type") if isinstance(values, dict) else type(values).__name__
    if kind == "FeatureCollection":
        features = values.get("features")
        if not isinstance(features, list) or len(features) != 1:
            n = len(features) if isinstance(features, list) else 0
            raise AreaWrong(
                f"The polygon file {name} holds {n} features; keep the one that is the study area."
            )
        return _one_polygon(features[0], name)
    if kind == "Feature":
        return _one_polygon(values.get("geometry"), name)
    if kind not in ("Polygon", "MultiPolygon"):
        raise AreaWrong(
            f"The polygon file {name} holds a {kind}, not a Polygon or MultiPolygon;"
            " save a closed outline as GeoJSON."
        )
    try:
        with np.errstate(invalid="ignore"):  # positions that are not finite are told below
            outline = shape(values)
        finite = bool(np.isfinite(shapely.get_coordinates(outline)).all())
    except (KeyError, TypeError, ValueError, IndexError, shapely.errors.ShapelyError) as error:
        raise _bad_positions(name) from error
    if not finite or outline.is_empty:
        raise _bad_positions(name)
    return shapely.force_2d(outline)


def _bad_positions(name: str) -> AreaWrong:
    return AreaWrong(
        f"The polygon file {name} has positions that are no pairs of numbers;"
        " give rings of at least four x, y positions, the last equal to the first."
    )
