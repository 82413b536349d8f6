"""Pictures of the quadrats of a spot check without what was detected, to be counted on paper."""

from __future__ import annotations

import math

import cv2
import numpy as np
import shapely
from jinja2 import Environment, PackageLoader, StrictUndefined
from shapely.geometry.base import BaseGeometry

from analyse.embedding import data_uri
from detect.photograph import Photograph
from detect.sheet import Sheet
from detect.spot_check import Draw, outline_of
from detect.strokes import Picture, draw_lines, in_8_bits, jpeg_bytes

_MARGIN = 0.15  # of a quadrat's longer side, so that what is cut by a line can be judged
_SIDE = 900  # pixels of a picture's longer side
_INK = (255, 214, 64)
_SHADE = 0.55  # brightness of what lies outside the quadrat


def quadrat_picture(photograph: Photograph, outline: BaseGeometry) -> Picture:
    """Return one quadrat enlarged, its outline drawn, what lies beyond it darkened.

    Parameters
    ----------
    photograph : Photograph
        Any size and depth.
    outline : shapely Polygon or MultiPolygon
        The quadrat in pixels.

    Returns
    -------
    ndarray of uint8, shape (height, width, 3)
        The longer side about 900 pixels.
    """
    x0, y0, x1, y1 = outline.bounds
    margin = _MARGIN * max(x1 - x0, y1 - y0)
    left, top = max(0, math.floor(x0 - margin)), max(0, math.floor(y0 - margin))
    right = min(photograph.width, math.ceil(x1 + margin) + 1)
    bottom = min(photograph.height, math.ceil(y1 + margin) + 1)
    scale = _SIDE / max(right - left, bottom - top)
    part = photograph.reduced(shrink=min(1.0, scale), box=(left, top, right, bottom))
    size = (max(1, round((right - left) * scale)), max(1, round((bottom - top) * scale)))
    way = cv2.INTER_CUBIC if scale > 1 else cv2.INTER_AREA
    picture: Picture = np.ascontiguousarray(cv2.resize(in_8_bits(part), size, interpolation=way))
    steps = np.array([size[0] / (right - left), size[1] / (bottom - top)])
    rings = [
        (shapely.get_coordinates(ring) - (left, top) + 0.5) * steps - 0.5
        for each in shapely.get_parts(outline)
        for ring in (each.exterior, *each.interiors)
    ]
    inside = np.zeros(picture.shape[:2], dtype=np.uint8)
    cv2.fillPoly(inside, [np.round(ring).astype(np.int32) for ring in rings], 1)
    shaded = np.round(picture * _SHADE).astype(np.uint8)
    picture = np.where(inside[..., None] == 1, picture, shaded)
    draw_lines(picture, rings, _INK, 3)
    return picture


def form_html(state: Sheet, draw: Draw, photograph: Photograph) -> str:
    """Return one file with a picture of each quadrat and a box for its count.

    Parameters
    ----------
    state : Sheet
        Of the photograph; its spots are not shown.
    draw : Draw
        What was drawn.
    photograph : Photograph
        The picture.

    Returns
    -------
    str
        HTML without outside requests, which prints two quadrats to a page.
    """
    environment = Environment(
        loader=PackageLoader("analyse"), autoescape=True, undefined=StrictUndefined
    )
    pictures = [
        {
            "quadrat": each.quadrat,
            "uri": data_uri(jpeg_bytes(quadrat_picture(photograph, outline_of(each.outline)))),
        }
        for each in draw.quadrats
    ]
    return environment.get_template("spot_check.html").render(
        photograph=state.photograph.name,
        pictures=pictures,
        all_quadrats=sum(draw.sizes),
        seed=draw.seed,
        table=f"{state.stem}.spot_check.csv",
    )
