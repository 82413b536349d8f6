"""Find the leaf in a photograph of one leaf on a plain background."""

from __future__ import annotations

from typing import Any

import cv2
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import Polygon
from skimage import measure

from detect.circles import shrunk
from detect.errors import AreaNotFound
from detect.photograph import Photograph

Array = NDArray[Any]

LONGEST_SIDE = 1400
LEAST_SHARE, MOST_SHARE = 0.02, 0.9  # of the picture
MOST_AT_FRAME = 0.25  # of the leaf's outline
MOST_UNEVEN = 0.35  # of the picture's margin that may differ from the background
_LIGHT_WEIGHT = 0.25  # of lightness against colour: shadows are dark but not coloured
_LEAST_STEP = 6.0  # Lab units between background and leaf
LEAST_ALONE = 0.5  # of all that stands out
LEAST_HOLE = 7e-5  # of the picture: smaller holes are glints, dust and noise
_CUT = 0.35  # of the leaf's difference from the background


def find_leaf(photograph: Photograph) -> Polygon:
    """Find the outline of a leaf, with the holes that show the background.

    Parameters
    ----------
    photograph : Photograph
        One leaf on a plain background, lighter or darker, that shows on the picture's margin.

    Returns
    -------
    shapely Polygon
        In pixels. Lesions belong to the leaf; a ruler or a shadow does not.

    Raises
    ------
    AreaNotFound
        If the margin is not plain, or nothing of a leaf's size stands out from it.

    Notes
    -----
    The background is a smooth surface of Lab colour fitted to what looks like the margin. Each
    pixel's difference from it counts colour fully and lightness little, since a shadow or a ruler
    differs in lightness alone. The leaf's level is the median difference beyond Otsu's cut; the
    leaf is the largest piece beyond a third of that level, so that its lesions stay in it. Its
    stalk is left out. A hole counts as one if it shows the background's colour; a broad white glare
    on white paper would pass for one.

    References
    ----------
    N. Otsu, "A threshold selection method from gray-level histograms",
    IEEE Transactions on Systems, Man, and Cybernetics 9 (1979) 62-66.
    """
    small, factor = shrunk(photograph, LONGEST_SIDE)
    lab = cv2.cvtColor(small.astype(np.float32) / 255, cv2.COLOR_RGB2LAB)
    difference = _difference(cv2.GaussianBlur(lab, (0, 0), 1.0))
    level = _leaf_level(difference)
    if level < _LEAST_STEP:
        raise AreaNotFound(
            f"No leaf is seen in {photograph.name}: nothing stands out from its background;"
            " photograph the leaf on a plain background of another colour, or choose another area."
        )
    mask = difference > _CUT * level
    uneven = float(_margin(mask).mean())
    if uneven > MOST_UNEVEN:
        raise AreaNotFound(
            f"No leaf is seen in {photograph.name}: {100 * uneven:.0f} % of the picture's margin"
            " differ from the background; photograph the leaf whole on a plain background,"
            " or choose another area."
        )
    blade = _blade(mask)
    _check_blade(blade, mask, photograph.name)
    return _outline(_without_false_holes(blade, difference, level), factor)


def _margin(values: Array) -> Array:
    """Values along the picture's margin, a fiftieth of its shorter side wide."""
    width = max(2, min(values.shape[:2]) // 50)
    rows = np.concatenate([values[:width], values[-width:]])
    columns = np.concatenate([values[width:-width, :width], values[width:-width, -width:]], axis=1)
    flat = rows.shape[2:] or (1,)
    return np.concatenate([rows.reshape(-1, *flat), columns.reshape(-1, *flat)])


def _difference(lab: Array) -> Array:
    """Difference from the background, a smooth surface through what looks like the margin."""
    weights = np.array([_LIGHT_WEIGHT, 1.0, 1.0], np.float32)
    y, x = np.mgrid[-1 : 1 : lab.shape[0] * 1j, -1 : 1 : lab.shape[1] * 1j].astype(np.float32)
    terms = np.stack([np.ones_like(x), x, y, x * x, x * y, y * y], axis=-1)
    few = (slice(None, None, 8), slice(None, None, 8))
    seen, at = lab[few].reshape(-1, 3), terms[few].reshape(-1, 6)
    expected = np.broadcast_to(np.median(_margin(lab), axis=0), seen.shape)
    for reach in (16.0, 10.0, 7.0):
        near = np.linalg.norm((seen - expected) * np.array([0.5, 1, 1]), axis=1) < reach
        if near.sum() < 50:
            break
        surface = np.linalg.lstsq(at[near], seen[near], rcond=None)[0]
        expected = at @ surface
    else:
        return np.asarray(np.linalg.norm((lab - terms @ surface) * weights, axis=-1), np.float32)
    middle = np.median(_margin(lab), axis=0)
    return np.asarray(np.linalg.norm((lab - middle) * weights, axis=-1), np.float32)


def _leaf_level(difference: Array) -> float:
    """Typical difference of what stands out from the background."""
    scaled = np.clip(difference * 4, 0, 255).astype(np.uint8)
    cut, _ = cv2.threshold(scaled, 0, 255, cv2.THRESH_BINARY | cv2.THRESH_OTSU)
    out = difference[difference > cut / 4]
    return float(np.median(out)) if out.size else 0.0


def _blade(mask: Array) -> Array:
    """Largest piece without its stalk: what survives an opening, and its teeth and tip."""
    pieces, labels, sizes, _ = cv2.connectedComponentsWithStats(mask.astype(np.uint8))
    if pieces < 2:
        return np.zeros(mask.shape, np.uint8)
    piece = (labels == 1 + int(sizes[1:, cv2.CC_STAT_AREA].argmax())).astype(np.uint8)
    closed = cv2.morphologyEx(piece, cv2.MORPH_CLOSE, _disc(1))
    radius = max(1, round(0.03 * float(np.sqrt(closed.sum()))))
    core = cv2.morphologyEx(_filled(closed), cv2.MORPH_OPEN, _disc(radius))
    near = cv2.dilate(core, _disc(round(1.3 * radius)))
    return np.asarray(closed & near)


def _disc(radius: int) -> Array:
    size = 2 * radius + 1
    return np.asarray(cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (size, size)))


def _filled(mask: Array) -> Array:
    """Return a mask without its holes."""
    filled = np.zeros(mask.shape, np.uint8)
    outlines, _ = cv2.findContours(mask, cv2.RETR_EXTERNAL, cv2.CHAIN_APPROX_SIMPLE)
    return np.asarray(cv2.drawContours(filled, outlines, -1, 1, cv2.FILLED))


def _check_blade(blade: Array, mask: Array, name: str) -> None:
    """Refuse what has not a leaf's size, lies cut off at the frame, or is but one piece of many."""
    whole = _filled(blade)
    share = float(whole.mean())
    if not LEAST_SHARE <= share <= MOST_SHARE:
        raise AreaNotFound(
            f"No leaf is seen in {name}: the largest piece fills {100 * share:.1f} % of the picture,"
            f" not {100 * LEAST_SHARE:.0f} to {100 * MOST_SHARE:.0f} %; photograph one leaf whole on"
            " a plain background, or choose another area."
        )
    edge = whole - cv2.erode(whole, _disc(1), borderType=cv2.BORDER_CONSTANT, borderValue=0)
    at_frame = edge[0].sum() + edge[-1].sum() + edge[:, 0].sum() + edge[:, -1].sum()
    cut = float(at_frame / edge.sum())
    if cut > MOST_AT_FRAME:
        raise AreaNotFound(
            f"The leaf in {name} is cut by the frame along {100 * cut:.0f} % of its outline;"
            " photograph it whole, or choose another area."
        )
    alone = float(blade.sum() / max(mask.sum(), 1))
    if alone < LEAST_ALONE:
        raise AreaNotFound(
            f"No leaf is seen in {name}: its largest piece is only {100 * alone:.0f} % of what"
            " stands out; photograph one leaf on a plain background, or choose another area."
        )


def _without_false_holes(blade: Array, difference: Array, level: float) -> Array:
    """Fill the holes that do not show the background (lesions, glare) or are tiny."""
    solid = _filled(blade)
    pieces, labels, sizes, _ = cv2.connectedComponentsWithStats((solid - blade).astype(np.uint8))
    for piece in range(1, pieces):
        inside = labels == piece
        enough = sizes[piece, cv2.CC_STAT_AREA] >= LEAST_HOLE * blade.size
        if enough and float(np.percentile(difference[inside], 25)) < 0.6 * _CUT * level:
            solid[inside] = 0
    return solid


def _outline(mask: Array, factor: float) -> Polygon:
    """Smooth outline through the mask's edge, in pixels of the photograph."""
    padded = np.pad(mask, 1).astype(np.float32)
    soft = cv2.GaussianBlur(padded, (0, 0), 1.0)
    soft[[0, -1]], soft[:, [0, -1]] = 0, 0
    contours: list[Array] = measure.find_contours(soft, 0.5)  # type: ignore[no-untyped-call]
    rings = [(line[:, ::-1] - 1 + 0.5) / factor - 0.5 for line in contours if len(line) > 3]
    polygons = [Polygon(ring) for ring in rings]
    whole = max(polygons, key=lambda ring: ring.area)
    holes = [
        ring
        for ring, polygon in zip(rings, polygons, strict=True)
        if polygon is not whole and whole.contains(polygon)
    ]
    outline = Polygon(whole.exterior, holes).simplify(0.25 / factor)
    parts = shapely.get_parts(shapely.make_valid(outline))
    pieces = [part for part in parts if isinstance(part, Polygon)]
    return max(pieces, key=lambda part: part.area)
