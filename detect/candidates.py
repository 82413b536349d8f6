"""Contrast map -> candidate regions: cut at many levels, with holes filled and touching ones split.

No single cut is right for every object, so each level's regions, whole and split, all go into one
pool; what they look like is measured in `regions` and judged in `doubt`. A dim object beside a
bright one stands out at no level, but against its surroundings.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.constants import pooled
from detect.contrast import Contrast, Map, Mask
from detect.ground import blur
from detect.regions import Candidates, Column, Labels, join, measure_regions
from detect.splitting import split_regions

# Reach of the surroundings against which objects are cut out, as shares of a middling diameter.
SURROUNDINGS = (0.5, 1.0)


def find_candidates(
    contrast: Contrast,
    inside: Mask,
    *,
    smallest_px: float,
    largest_px: float,
    cuts: Column | None = None,
    surroundings: Sequence[float] = (),
    together: float = 0.95,
) -> Candidates:
    """Cut the map at several levels and collect every region that could be an object.

    Parameters
    ----------
    contrast : Contrast
        The signed contrast map.
    inside : ndarray of bool
        The study area on the same map.
    smallest_px, largest_px : float
        Range of diameters in pixels of the map.
    cuts : ndarray or None
        Levels at which the map is cut; None takes those of `cut_levels`.
    surroundings : sequence of float
        Standard deviations of Gaussian means, as shares of the middle of the range, above which
        the map is cut as well.
    together : float
        Peaks of one region stay one while the relief between them keeps this share of the lower.

    Returns
    -------
    Candidates
        Ten to twenty overlapping regions for each object.

    References
    ----------
    Borgefors G (1986). Distance transformations in digital images. Computer Vision, Graphics, and
    Image Processing 34, 344-371: the distance whose peaks tell touching objects apart.
    """
    smooth = cv2.GaussianBlur(contrast.map, (0, 0), max(0.06 * smallest_px, 0.3))
    crest = cv2.GaussianBlur(contrast.map, (0, 0), max(0.15 * smallest_px, 0.5))
    crest = np.sqrt(np.maximum(crest, 0.0))
    parts: list[Candidates] = []
    levels = cut_levels([contrast], [inside]) if cuts is None else cuts
    around = _surroundings(contrast.map, surroundings, np.sqrt(smallest_px * largest_px))
    for level, floor in _floors(levels, around):
        mask = _clean((smooth > floor) & inside, largest_px)
        for labels, count, neck in _whole_and_split(mask, crest, smallest_px, largest_px, together):
            parts.append(
                measure_regions(
                    labels,
                    count,
                    contrast.map,
                    neck=neck,
                    level=level,
                    smallest_px=smallest_px,
                    largest_px=largest_px,
                )
            )
    return join(parts)


def _surroundings(map_: Map, shares: Sequence[float], middle_px: float) -> list[Map]:
    """Return means of the map, without what lies below the ground, over the surroundings."""
    above = np.maximum(map_, 0.0) if shares else map_
    return [blur(above, share * middle_px) for share in shares]


def _floors(levels: Column, around: Sequence[Map]) -> Iterator[tuple[float | None, float | Map]]:
    """Each level as it is, and each mean no lower than the lowest level."""
    yield from ((float(level), float(level)) for level in levels)
    yield from ((None, np.maximum(mean, np.float32(levels[0]))) for mean in around)


def cut_levels(
    contrasts: Sequence[Contrast], insides: Sequence[Mask], *, levels: int = 8
) -> Column:
    """Return the levels to cut at, from under the base threshold to near the strongest contrast.

    Parameters
    ----------
    contrasts : sequence of Contrast
        Maps of pieces of one picture, with one threshold.
    insides : sequence of ndarray of bool
        The study area on each.
    levels : int
        Number of cuts, in geometric steps.

    Returns
    -------
    ndarray of shape (levels,)
    """
    values = pooled([contrast.map for contrast in contrasts], insides)
    threshold = contrasts[0].threshold
    above = values[values > threshold]
    lowest = 0.45 * threshold
    highest = float(np.percentile(above, 97)) if above.size else 2.0 * lowest
    return np.geomspace(lowest, max(highest, 1.05 * lowest), levels)


def _disc(diameter: float) -> NDArray[np.uint8]:
    size = max(3, round(diameter) | 1)
    return np.asarray(cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (size, size)), dtype=np.uint8)


def _clean(mask: Mask, largest_px: float) -> NDArray[np.uint8]:
    """Fill round holes, drop specks and threads, and drop what is far too large."""
    filled = _fill_holes(mask.astype(np.uint8), largest_px)
    opened = cv2.morphologyEx(filled, cv2.MORPH_OPEN, np.ones((3, 3), np.uint8))
    return _without_giants(opened, largest_px)


def _fill_holes(mask: NDArray[np.uint8], largest_px: float) -> NDArray[np.uint8]:
    """Fill holes up to half the largest disc when round, or when tiny."""
    limit = 0.5 * np.pi / 4 * largest_px**2
    count, labels, stats, _ = cv2.connectedComponentsWithStats(1 - mask, connectivity=4)
    area = stats[:, cv2.CC_STAT_AREA].astype(np.float64)
    left, top = stats[:, cv2.CC_STAT_LEFT], stats[:, cv2.CC_STAT_TOP]
    right = left + stats[:, cv2.CC_STAT_WIDTH]
    bottom = top + stats[:, cv2.CC_STAT_HEIGHT]
    enclosed = (left > 0) & (top > 0) & (right < mask.shape[1]) & (bottom < mask.shape[0])
    enclosed[0] = False
    small = enclosed & (area <= limit)
    fill = small & (area <= 0.15 * limit)
    larger = np.flatnonzero(small & ~fill)
    if larger.size:
        chosen = np.zeros(count, dtype=bool)
        chosen[larger] = True
        at = np.flatnonzero(chosen[labels])
        fill[larger] = _ellipse_fill(labels.ravel()[at], at, mask.shape[1], count)[larger] > 0.9
    return np.asarray(mask | fill[labels].astype(np.uint8), dtype=np.uint8)


def _ellipse_fill(label: Labels, at: NDArray[np.intp], width: int, count: int) -> Column:
    """Area over that of the moment ellipse, per label."""
    y, x = np.divmod(at, width)
    n = np.maximum(np.bincount(label, minlength=count), 1)
    mx, my = (np.bincount(label, v, count) / n for v in (x, y))
    dx, dy = x - mx[label], y - my[label]
    sxx, syy, sxy = (np.bincount(label, v, count) / n for v in (dx * dx, dy * dy, dx * dy))
    determinant = (sxx + 1 / 12) * (syy + 1 / 12) - sxy**2
    return np.asarray(n / (4 * np.pi * np.sqrt(np.maximum(determinant, 1e-9))))


def _without_giants(mask: NDArray[np.uint8], largest_px: float) -> NDArray[np.uint8]:
    """Drop what survives an opening by a disc well over the largest size (rims, benches)."""
    reduce = max(1, int(largest_px // 12))
    size = (max(1, mask.shape[1] // reduce), max(1, mask.shape[0] // reduce))
    small = cv2.resize(mask, size, interpolation=cv2.INTER_AREA) if reduce > 1 else mask
    giants = cv2.morphologyEx(small, cv2.MORPH_OPEN, _disc(1.6 * largest_px / reduce))
    if not giants.any():
        return mask
    giants = cv2.resize(giants, mask.shape[1::-1], interpolation=cv2.INTER_NEAREST)
    return np.asarray(mask & (1 - giants), dtype=np.uint8)


def _whole_and_split(
    mask: NDArray[np.uint8], crest: Map, smallest_px: float, largest_px: float, together: float
) -> Iterator[tuple[Labels, int, Column]]:
    """Labels of the connected regions, then of their pieces by shape, then by shape and contrast."""
    count, labels, stats, _ = cv2.connectedComponentsWithStats(mask, connectivity=4)
    area = stats[:, cv2.CC_STAT_AREA]
    usable = (area >= 0.2 * smallest_px**2) & (area <= 100 * largest_px**2)
    usable[0] = False
    if not usable.any():
        return
    new = np.where(usable, np.cumsum(usable), 0).astype(np.int32)
    labels = new[labels]
    count = int(new.max()) + 1
    yield labels, count, np.zeros(count)
    distance = cv2.distanceTransform((labels > 0).astype(np.uint8), cv2.DIST_L2, 5)
    distance = cv2.GaussianBlur(distance, (0, 0), max(0.12 * smallest_px, 0.3))
    for relief in (distance, distance * crest):
        pieces = split_regions(
            labels,
            count,
            distance=distance,
            relief=relief,
            smallest_px=smallest_px,
            largest_px=largest_px,
            together=together,
        )
        if pieces is not None:
            yield pieces
