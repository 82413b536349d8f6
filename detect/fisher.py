"""The colour along which reviewed objects stand out most from ground and from what was struck."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.constants import Settling
from detect.contrast import Mask
from detect.ground import followed_ground
from detect.reviewed import Reviewed
from detect.view import View

# Pixels of an object lie within this share of its radius, pixels of the ground beyond that one.
_INNER, _OUTER = 0.75, 1.35
_MOST = 4_000  # pixels of each sort and photograph that have a say
# The pooled covariance is drawn this far towards a round one, and no axis is narrower than this.
_ROUNDED, _LEAST_SPREAD = 0.1, 0.5
# A direction is worth nothing unless objects stand this many spreads of the ground above it.
_LEAST_APART = 1.0

Colours = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class ReviewedPixels:
    """Departures (n, 3) from the ground's colour, in L*, a*, b*: of objects, ground, struck spots.

    `real_spots` and `struck_spots` are the numbers of spots they come from.
    """

    objects: Colours
    ground: Colours
    struck: Colours
    real_spots: int
    struck_spots: int


def reviewed_pixels(
    view: View, reviewed: Reviewed, diameters_px: tuple[float, float]
) -> ReviewedPixels:
    """Sort a reviewed photograph's pixels into objects, ground and what was struck.

    Parameters
    ----------
    view : View
    reviewed : Reviewed
    diameters_px : pair of float
        Smallest and largest diameter, in photograph pixels.

    Returns
    -------
    ReviewedPixels
        At most 4,000 of each sort, evenly spread.
    """
    smallest, largest = (d * view.shrink for d in diameters_px)
    ground = followed_ground(
        [view.lab], [view.inside], Settling(), smallest_px=smallest, largest_px=largest
    )[0]
    departure = view.lab - ground
    real, struck = reviewed.real, reviewed.struck
    near_real = _covered(view, real, _OUTER)
    near = near_real | _covered(view, struck, _OUTER)
    masks = (
        _covered(view, real, _INNER),
        ~near,
        _covered(view, struck, _INNER) & ~near_real,
    )
    objects, around, false = (_sample(departure[mask & view.inside]) for mask in masks)
    return ReviewedPixels(objects, around, false, len(real), len(struck))


def fisher_direction(pixels: list[ReviewedPixels]) -> tuple[float, float, float] | None:
    """Find the direction that best parts objects from all else.

    Parameters
    ----------
    pixels : list of ReviewedPixels
        Of one or more photographs, each with the same say.

    Returns
    -------
    tuple of three floats or None
        Unit direction in L*, a*, b* from ground to object; None where objects do not stand clear
        of the ground along it, or pixels of either are missing.

    Notes
    -----
    Fisher's linear discriminant [1]_, S^-1 (m1 - m0). The class that is not object holds the
    ground, and struck spots by their number beside the real ones (at most as much as the ground);
    its spread is taken about the ground, so that along what tells struck spots from ground nothing
    is gained. The covariance S is drawn a tenth of the way towards a round one [2]_.

    References
    ----------
    .. [1] Fisher RA (1936). The use of multiple measurements in taxonomic problems. Annals of
       Eugenics 7, 179-188.
    .. [2] Friedman JH (1989). Regularized discriminant analysis. Journal of the American
       Statistical Association 84, 165-175.
    """
    objects, ground, struck = (
        np.vstack([getattr(each, name) for each in pixels])
        for name in ("objects", "ground", "struck")
    )
    if min(len(objects), len(ground)) < 20:
        return None
    middle = ground.mean(axis=0)
    share = 0.0
    if len(struck):
        real = sum(each.real_spots for each in pixels)
        share = min(1.0, sum(each.struck_spots for each in pixels) / max(1, real))
    else:
        struck = ground[:1]
    other = (middle + share * struck.mean(axis=0)) / (1 + share)
    about = struck - middle
    spread = np.cov(ground.T) + share * (about.T @ about) / len(about)
    pooled = 0.5 * (np.cov(objects.T) + spread / (1 + share))
    round_part = (_ROUNDED * np.trace(pooled) / 3 + _LEAST_SPREAD**2) * np.eye(3)
    direction = np.linalg.solve((1 - _ROUNDED) * pooled + round_part, objects.mean(axis=0) - other)
    direction /= max(float(np.linalg.norm(direction)), 1e-12)
    apart = float((objects.mean(axis=0) - middle) @ direction)
    if apart < _LEAST_APART * max(float((ground @ direction).std()), _LEAST_SPREAD):
        return None
    lightness, red, yellow = (float(value) for value in direction)
    return lightness, red, yellow


def _covered(view: View, discs: Colours, share: float) -> Mask:
    """Which working pixels lie within a share of the radius of any disc (x, y, radius)."""
    mask = np.zeros(view.inside.shape, dtype=np.uint8)
    for x, y, radius in discs:
        at = (
            round(((x - view.left + 0.5) * view.shrink_x - 0.5) * 16),
            round(((y - view.top + 0.5) * view.shrink_y - 0.5) * 16),
        )
        reach = max(8, round(share * radius * view.shrink * 16))
        cv2.circle(mask, at, reach, 1, -1, lineType=cv2.LINE_8, shift=4)
    return mask > 0


def _sample(colours: NDArray[np.float32]) -> Colours:
    """Every so many rows, so that at most `_MOST` stay."""
    step = max(1, -(-len(colours) // _MOST))
    return colours[::step].astype(np.float64)
