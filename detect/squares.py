"""Dark squares on white: where they lie in a photograph, to a fraction of a pixel, and how surely."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.edges import edge_line, linear_patch, read_at
from detect.photograph import Photograph

Array = NDArray[Any]
Points = NDArray[np.float64]

LONGEST_SIDE = 1600  # the picture is reduced to this for finding; edges are settled in full
LEAST_SIDE = 9.0  # of a square in the reduced picture
MOST_SHARE = 0.06  # of the picture that one square may fill
LEAST_STEP = 0.12  # between black and white, of the whole range of brightness
_LEVELS = np.linspace(22, 206, 18)  # of 0..255 at which the picture is cut


@dataclass(frozen=True, slots=True, eq=False)
class Square:
    """A dark square seen in a photograph.

    Parameters
    ----------
    corners : ndarray of shape (4, 2)
        In pixels, clockwise as seen.
    centre : ndarray of shape (2,)
        Image of the square's centre: where the diagonals cross.
    uncertainty_px : float
        Standard uncertainty of the centre in x and in y, from the scatter of its edges.
    contrast : float
        Step from black to white, 0..1 of linear brightness.
    """

    corners: Points
    centre: Points
    uncertainty_px: float
    contrast: float

    @property
    def side_px(self) -> float:
        """Mean length of its sides."""
        return float(np.hypot(*(np.roll(self.corners, -1, axis=0) - self.corners).T).mean())


def find_squares(photograph: Photograph) -> list[Square]:
    """Find the plain dark squares that lie on something white, from the clearest to the faintest.

    Parameters
    ----------
    photograph : Photograph

    Returns
    -------
    list of Square

    Notes
    -----
    A plate in the sun and one in shade are black and white at different levels, so the picture is
    cut at many; dark pieces of four straight sides whose inside is plainly dark and whose
    surroundings are plainly brighter are kept, and their edges settled on the full picture.
    """
    grey, factor = reduced_grey(photograph)
    found: list[Square] = []
    linear = (grey.astype(np.float32) / 255) ** np.float32(2.2)
    quads = [q for q in dark_quads(grey) if is_square(q) and stands_on_white(linear, q)]
    for quad in sorted(quads, key=lambda quad: -_side(quad)):
        centre = (_crossing(quad) + 0.5) / factor - 0.5
        if any(np.hypot(*(centre - other.centre)) < 0.5 * other.side_px for other in found):
            continue
        square = settle_square(photograph, (quad + 0.5) / factor - 0.5)
        if square is not None and is_square(square.corners):
            found.append(square)
    return sorted(found, key=lambda square: -square.contrast)


def reduced_grey(photograph: Photograph) -> tuple[NDArray[np.uint8], float]:
    """Return the picture in grey, its longer side `LONGEST_SIDE` at most, and the factor to it."""
    factor = min(1.0, LONGEST_SIDE / max(photograph.width, photograph.height))
    grey = photograph.pixels(shrink=factor).mean(axis=2)
    soft = cv2.GaussianBlur(grey, (0, 0), 0.7)
    return np.round(255 * soft).astype(np.uint8), factor


def dark_quads(grey: NDArray[np.uint8]) -> Iterator[Points]:
    """Yield the dark pieces of four straight sides at each level; one piece may come several times.

    Parameters
    ----------
    grey : ndarray of shape (height, width), uint8

    Yields
    ------
    ndarray of shape (4, 2)
        Corners, clockwise as seen.
    """
    for level in _LEVELS:
        dark = (grey < level).astype(np.uint8)
        n, labels, stats, _ = cv2.connectedComponentsWithStats(dark, connectivity=4)
        area, wide, high = (
            stats[:, k] for k in (cv2.CC_STAT_AREA, cv2.CC_STAT_WIDTH, cv2.CC_STAT_HEIGHT)
        )
        fits = (area >= LEAST_SIDE**2) & (area <= MOST_SHARE * grey.size)
        fits &= area >= 0.35 * wide * high
        fits &= np.minimum(wide, high) >= LEAST_SIDE
        for piece in np.flatnonzero(fits[1:]) + 1 if n > 1 else ():
            x, y, w, h = (int(v) for v in stats[piece, :4])
            mask = (labels[y : y + h, x : x + w] == piece).astype(np.uint8)
            quad = _quad_of(mask)
            if quad is not None:
                yield quad + np.array([x, y])


def _quad_of(mask: Array) -> Points | None:
    """Return the four-sided figure that a piece fills, or None."""
    padded = np.pad(mask, 1)
    outlines, _ = cv2.findContours(padded, cv2.RETR_EXTERNAL, cv2.CHAIN_APPROX_NONE)
    hull = cv2.convexHull(max(outlines, key=cv2.contourArea))
    around = cv2.arcLength(hull, True)
    for share in (0.03, 0.05, 0.07, 0.1):
        corners = cv2.approxPolyDP(hull, share * around, True).reshape(-1, 2).astype(np.float64)
        if len(corners) <= 4:
            break
    if len(corners) != 4:
        return None
    own = max(map(cv2.contourArea, outlines)) + 0.5 * len(max(outlines, key=len))  # holes and all
    # The outline runs through pixel centres, half a pixel within the piece's edge.
    fills = own / (cv2.contourArea(corners.astype(np.float32)) + 0.5 * around + 1)
    return _clockwise(corners - 1) if 0.84 <= fills <= 1.16 else None


def _clockwise(corners: Points) -> Points:
    """Turn the order of corners clockwise as seen (y down)."""
    after = np.roll(corners, -1, axis=0)
    turning = float((corners[:, 0] * after[:, 1] - corners[:, 1] * after[:, 0]).sum())
    return corners if turning > 0 else corners[::-1]


def _side(quad: Points) -> float:
    return float(np.hypot(*(np.roll(quad, -1, axis=0) - quad).T).mean())


def is_square(quad: Points) -> bool:
    """Tell whether four corners could be a square under a tilt of some 25 degrees."""
    sides = np.roll(quad, -1, axis=0) - quad
    lengths = np.hypot(*sides.T)
    ahead = np.roll(sides, -1, axis=0)
    sine = (sides[:, 0] * ahead[:, 1] - sides[:, 1] * ahead[:, 0]) / (
        lengths * np.roll(lengths, -1) + 1e-9
    )
    return bool(lengths.min() > 0.68 * lengths.max() and sine.min() > 0.9)


def stands_on_white(linear: Array, quad: Points) -> bool:
    """Tell whether a square is plainly dark within and has plain white all round it, in linear light."""
    centre = quad.mean(axis=0)
    t = (np.arange(16) + 0.5)[:, None] / 16
    rim = np.concatenate(
        [(1 - t) * p + t * q for p, q in zip(quad, np.roll(quad, -1, axis=0), strict=True)]
    )
    inside = np.concatenate(
        [read_at(linear, centre + s * (rim - centre)) for s in (0.1, 0.3, 0.5, 0.7)]
    )
    beyond = 1 + 0.12 + 2.0 / _side(quad)
    ring = read_at(linear, centre + beyond * (rim - centre))
    black, white = float(np.median(inside)), float(np.median(ring))
    middle = 0.5 * (black + white)
    return bool(
        white - black > LEAST_STEP * 0.5
        and white > 3.0 * black
        and (inside < middle).mean() > 0.9
        and (ring > middle).mean() > 0.72
    )


def settle_square(photograph: Photograph, quad: Points) -> Square | None:
    """Lay straight lines along the four edges of a square, on the full picture.

    Parameters
    ----------
    photograph : Photograph
    quad : ndarray of shape (4, 2)
        Its corners to within two pixels or so, clockwise as seen.

    Returns
    -------
    Square or None
        None where an edge is not seen.

    Notes
    -----
    Along each edge the brightness across it is read every pixel, and the edge lies where it passes
    the middle between black and white, in linear light. Points that a crumb, a leaf or a shadow
    displaces are trimmed from the line through them. The scatter about the line, over the number
    of points that err on their own, is the uncertainty of the line; it is carried to the centre.
    """
    reach = float(np.clip(0.2 * _side(quad), 2.5, 9.0))
    patch, corner = linear_patch(photograph, quad, reach + 3)
    quad = quad - corner
    for _ in range(2):
        edges = [
            edge_line(patch, p, q, reach)
            for p, q in zip(quad, np.roll(quad, -1, axis=0), strict=True)
        ]
        if any(edge is None for edge in edges):
            return None
        ends = np.array([edge.ends for edge in edges if edge is not None])
        quad = _corners_of(ends)
        if not np.isfinite(quad).all():
            return None
    off = np.array([edge.uncertainty_px for edge in edges if edge is not None])
    contrast = float(np.median([edge.contrast for edge in edges if edge is not None]))
    centre = _crossing(quad)
    return Square(quad + corner, centre + corner, _centre_uncertainty(ends, off, centre), contrast)


def _corners_of(ends: Points) -> Points:
    """Cross neighbouring lines, each given by two points (4, 2, 2), into corners (4, 2)."""
    return np.array([_meeting(*ends[k - 1], *ends[k]) for k in range(4)])


def _crossing(quad: Points) -> Points:
    """Return where the diagonals of four corners cross."""
    return _meeting(quad[0], quad[2], quad[1], quad[3])


def _meeting(a: Points, b: Points, c: Points, d: Points) -> Points:
    """Return where the line through a and b meets that through c and d; not finite if nowhere."""
    u, v = b - a, d - c
    across = u[0] * v[1] - u[1] * v[0]
    if abs(across) < 1e-9:
        return np.array([np.nan, np.nan])
    w = c - a
    return np.asarray(a + u * (w[0] * v[1] - w[1] * v[0]) / across)


def _centre_uncertainty(ends: Points, off: Array, centre: Points) -> float:
    """Carry the uncertainty of four lines to the crossing of the diagonals, root mean square of x and y.

    The two points of a line lie where a straight line's errors are independent: an arm of
    length / sqrt(12) to either side of its middle, each with sqrt(2) of the line's own uncertainty.
    """
    total = 0.0
    for k in range(4):
        along = ends[k, 1] - ends[k, 0]
        outwards = np.array([along[1], -along[0]]) / np.hypot(*along)
        for end in range(2):
            moved = ends.copy()
            moved[k, end] += 0.01 * outwards
            shift = (_crossing(_corners_of(moved)) - centre) / 0.01
            total += float((shift**2).sum()) * 2 * off[k] ** 2
    return float(np.sqrt(0.5 * total))
