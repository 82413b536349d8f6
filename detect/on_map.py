"""The spots of a georeferenced raster as points on its map."""

from __future__ import annotations

import json
import re
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from detect.georeference import Georeference
    from detect.sheet import Sheet


def points_geojson(sheet: Sheet, georeference: Georeference) -> str:
    """Return the spots as a layer of points in the raster's own coordinate reference system.

    Parameters
    ----------
    sheet : Sheet
        As found, or with amendments applied.
    georeference : Georeference
        Of its photograph.

    Returns
    -------
    str
        GeoJSON, a line per spot, with id, radius in millimetres where a scale is known, doubt,
        origin and standing of each; struck spots are included.

    Notes
    -----
    The member "crs" names the reference system, as GeoJSON had it before RFC 7946 (2016) left only
    degrees; geographic information systems go on reading it.

    References
    ----------
    The GeoJSON Format Specification (2008), section 3.
    """
    spots, scale = sheet.spots, sheet.scale
    places = georeference.to_map(spots.centres).tolist()
    radii: list[float | None] = [None] * len(spots)
    if scale is not None:
        lengths = spots.radius * scale.mm_per_px(spots.centres)
        radii = [round(value, 4) for value in lengths.tolist()]
    lines = [
        json.dumps(
            {
                "type": "Feature",
                "geometry": {"type": "Point", "coordinates": [round(x, 9), round(y, 9)]},
                "properties": {
                    "id": spots.id[i],
                    "radius_mm": radii[i],
                    "doubt": round(float(spots.doubt[i]), 7),
                    "origin": "found" if spots.found[i] else "placed",
                    "standing": "counted" if spots.counted[i] else "struck",
                },
            },
            ensure_ascii=False,
        )
        for i, (x, y) in enumerate(places)
    ]
    head = ['"type": "FeatureCollection"']
    if georeference.is_named:
        head.append(f'"crs": {json.dumps(_crs_member(georeference.name))}')
    features = ",\n".join(lines)
    return "{\n" + ",\n".join(head) + ',\n"features": [\n' + features + "\n]\n}\n"


def named_map(values: Any) -> str | None:
    """Return the name of the map that a GeoJSON value says its positions are on, if it says one.

    Examples
    --------
    >>> member = {"type": "name", "properties": {"name": "urn:ogc:def:crs:EPSG::32632"}}
    >>> named_map({"type": "Feature", "crs": member})
    'EPSG:32632'
    """
    member = values.get("crs") if isinstance(values, dict) else None
    if not isinstance(member, dict) or not isinstance(member.get("properties"), dict):
        return None
    name = str(member["properties"].get("name"))
    code = re.search(r"EPSG:(?:[\d.]*:)?(\d+)$", name)
    return f"EPSG:{code[1]}" if code else name


def _crs_member(name: str) -> dict[str, Any]:
    """Name a map as GeoJSON of 2008 did."""
    code = name.removeprefix("EPSG:")
    return {"type": "name", "properties": {"name": f"urn:ogc:def:crs:EPSG::{code}"}}
