"""Which spots are clear enough to be copied, and what of each is lifted from its ground."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import cv2
import numpy as np
import shapely
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.photograph import Photograph
from detect.spots import Spots

FEWEST_CLEAR = 5
# A spot more doubtful than half of the others is not copied, unless none is really doubtful; one
# of more doubt than the second limit never is.
_HARDLY_DOUBTFUL, _MOST_DOUBT = 0.02, 0.2
# A stamp holds its spot whole up to the first of these radii and none of it beyond the second;
# beyond that only the halo, which is gone at the third.
_WHOLE, _REACH, _HALO = 1.4, 1.9, 2.5
# The ground is what is seen from here to the end of the halo, and no nearer to another spot than
# this many of its radii.
_GROUND_FROM, _OFF_OTHERS = 2.0, 1.4
# The halo is a median around the spot, in rings of this breadth in radii, of some pixels at least.
_RING, _FEWEST_PIXELS = 0.15, 12
# Below the first share of the core's own departure a pixel is ground, above the second all object.
_GROUND, _OBJECT = 0.2, 0.8
# The smooth ground is kept on a map on which the median spot has this radius, in pixels.
_SMALL_RADIUS = 4.0

Layer = NDArray[np.float32]


@dataclass(frozen=True, slots=True, eq=False)
class SmoothGround:
    """The colour of the ground without its spots, everywhere in a photograph.

    Parameters
    ----------
    values : ndarray of shape (h, w, 3), float32
        Red, green and blue, 0..1, on a small map of the whole photograph.
    shrink_x, shrink_y : float
        Pixels of the map per pixel of the photograph.
    """

    values: Layer
    shrink_x: float
    shrink_y: float

    def at(self, left: int, top: int, width: int, height: int) -> Layer:
        """Return the ground in a box of the photograph, as (height, width, 3)."""
        x = (np.arange(left, left + width, dtype=np.float32) + 0.5) * self.shrink_x - 0.5
        y = (np.arange(top, top + height, dtype=np.float32) + 0.5) * self.shrink_y - 0.5
        across = np.broadcast_to(x.astype(np.float32), (height, width))
        down = np.broadcast_to(y.astype(np.float32)[:, None], (height, width))
        seen: Any = cv2.remap(
            self.values,
            np.ascontiguousarray(across),
            np.ascontiguousarray(down),
            cv2.INTER_LINEAR,
            borderMode=cv2.BORDER_REPLICATE,
        )
        return np.asarray(seen, dtype=np.float32)


@dataclass(frozen=True, slots=True, eq=False)
class Stamp:
    """One clear spot, lifted from its ground.

    Parameters
    ----------
    lifted : ndarray of shape (h, w, 3), float32
        How far each pixel departs from the ground, in red, green and blue of 0..1; fades to 0.
    cover : ndarray of shape (h, w), float32
        How much of each pixel is object, 0..1.
    x, y : float
        Centre of the spot in the stamp, pixel centres at whole numbers.
    radius : float
        Radius of the spot, in pixels.
    contrast : float
        Its contrast in units of noise.
    light : float
        Mean brightness of the ground it stood on, 0..1.
    """

    lifted: Layer
    cover: Layer
    x: float
    y: float
    radius: float
    contrast: float
    light: float


def separations(spots: Spots) -> NDArray[np.float64]:
    """Distance of each spot to its nearest neighbour in sums of both radii; infinite if alone."""
    if len(spots) < 2:
        return np.full(len(spots), np.inf)
    apart = np.hypot(np.subtract.outer(spots.x, spots.x), np.subtract.outer(spots.y, spots.y))
    np.fill_diagonal(apart, np.inf)
    return np.asarray((apart / np.add.outer(spots.radius, spots.radius)).min(axis=1))


def clear_spots(spots: Spots, area: StudyArea) -> NDArray[np.intp]:
    """Choose the spots that can be copied: hardly doubtful, apart from others, wholly in the area.

    Parameters
    ----------
    spots : Spots
        As found.
    area : StudyArea

    Returns
    -------
    ndarray of int
        Their positions in the table.

    Notes
    -----
    Clear is a counted spot with no other spot and no edge of the area within 1.9 of its radii
    from its centre, and no more doubtful than half of the spots are, or than 0.02 if that is
    more; 0.2 at most: our own limits. What is copied should be real, for of a false spot the
    copy is rightly missed.
    """
    n = len(spots)
    if n == 0:
        return np.empty(0, dtype=np.intp)
    apart = np.hypot(np.subtract.outer(spots.x, spots.x), np.subtract.outer(spots.y, spots.y))
    np.fill_diagonal(apart, np.inf)
    free = (apart - spots.radius[None, :]).min(axis=1) > _REACH * spots.radius
    edge = shapely.distance(shapely.points(spots.centres), area.polygon.boundary)
    whole = np.asarray(edge) > _REACH * spots.radius
    most = min(_MOST_DOUBT, max(_HARDLY_DOUBTFUL, float(np.median(spots.doubt))))
    return np.flatnonzero(spots.counted & (spots.doubt <= most) & free & whole)


def smooth_ground(photograph: Photograph, area: StudyArea, spots: Spots) -> SmoothGround:
    """Return the ground's colour without the spots on it, smoothed over some spots' breadth.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
        What lies outside it has no say where there is ground inside.
    spots : Spots
        Masked out to one and a half radii.

    Returns
    -------
    SmoothGround

    Notes
    -----
    A Gaussian mean over the unmasked pixels alone (normalised convolution, Knutsson and Westin
    1993).

    References
    ----------
    Knutsson H, Westin CF (1993). Normalized and differential convolution. Proceedings of the IEEE
    Conference on Computer Vision and Pattern Recognition, 515-523.
    """
    radius = float(np.median(spots.radius))
    small = photograph.pixels(shrink=min(1.0, _SMALL_RADIUS / radius))
    height, width = small.shape[:2]
    sx, sy = width / photograph.width, height / photograph.height
    weight = np.zeros((height, width), dtype=np.float32)
    for polygon in getattr(area.polygon, "geoms", [area.polygon]):
        for value, rings in ((1.0, [polygon.exterior]), (0.0, polygon.interiors)):
            for ring in rings:
                points = (shapely.get_coordinates(ring) + 0.5) * (sx, sy) - 0.5
                cv2.fillPoly(weight, [np.rint(points).astype(np.int32)], value)
    for x, y, r in zip(spots.x, spots.y, spots.radius, strict=True):
        centre = (round((x + 0.5) * sx - 0.5), round((y + 0.5) * sy - 0.5))
        cv2.circle(weight, centre, int(np.ceil(1.5 * r * sx)), 0.0, cv2.FILLED)
    sigma = 2.0 * radius * sx
    # Where spots leave no ground nearby, a wider mean steps in, and at last the mean of all.
    ground = np.broadcast_to(small.reshape(-1, 3).mean(axis=0), small.shape)
    for breadth in (6.0 * sigma, sigma):
        top = cv2.GaussianBlur(small * weight[..., None], (0, 0), breadth)
        below = cv2.GaussianBlur(weight, (0, 0), breadth)[..., None]
        ground = (top + 1e-2 * ground) / (below + 1e-2)
    return SmoothGround(np.asarray(ground, dtype=np.float32), sx, sy)


def lift(photograph: Photograph, ground: SmoothGround, spots: Spots, row: int) -> Stamp | None:
    """Lift one spot from its ground, with the halo it has.

    Parameters
    ----------
    photograph : Photograph
    ground : SmoothGround
        Of this photograph.
    spots : Spots
    row : int
        Which one.

    Returns
    -------
    Stamp or None
        None where it reaches out of the picture or hardly departs from its ground.

    Notes
    -----
    A halo (yellow tissue around a lesion, haze around a colony) lets neighbours run into one
    another, so a copy must have it. It is told from the grain of the ground by its being round:
    what is lifted beside the object is the median of each ring about the spot.
    """
    x, y, radius = float(spots.x[row]), float(spots.y[row]), float(spots.radius[row])
    half = int(np.ceil(_HALO * radius)) + 1
    left, top = round(x) - half, round(y) - half
    right, bottom = left + 2 * half + 1, top + 2 * half + 1
    if left < 0 or top < 0 or right > photograph.width or bottom > photograph.height:
        return None
    seen = photograph.pixels(box=(left, top, right, bottom))
    below = ground.at(left, top, right - left, bottom - top)
    lifted = seen - below
    down, across = np.mgrid[top:bottom, left:right]
    reach = np.hypot(across - x, down - y) / radius
    free = _off_others(spots, row, across, down)
    # The smooth ground may lie a little beside the true one: the ring about the spot says how far.
    ring = (reach > _GROUND_FROM) & (reach < _HALO) & free
    if ring.sum() < _FEWEST_PIXELS:
        ring = (reach > _WHOLE) & (reach < _REACH)
    lifted -= np.median(lifted[ring], axis=0)
    core = lifted[reach < 0.6].mean(axis=0)
    strength = float((core**2).sum())
    if strength < 1e-5:
        return None
    share = cv2.GaussianBlur((lifted @ core) / np.float32(strength), (0, 0), 0.6)
    fading = np.clip((_REACH - reach) / (_REACH - _WHOLE), 0.0, 1.0).astype(np.float32)
    cover = np.clip((share - _GROUND) / (_OBJECT - _GROUND), 0.0, 1.0) * fading
    # The lifted light goes with what is covered and its near surroundings: gloss and shadow.
    near = cv2.GaussianBlur(cover, (0, 0), max(0.7, 0.08 * radius))
    near = (np.clip(2.0 * near, 0.0, 1.0) * fading)[..., None]
    lifted = near * lifted + (1.0 - near) * _halo(lifted, reach, free & (cover < _GROUND))
    return Stamp(
        np.asarray(lifted, dtype=np.float32),
        np.asarray(cover, dtype=np.float32),
        x - left,
        y - top,
        radius,
        float(spots.contrast[row]),
        float(below.mean()),
    )


def _off_others(
    spots: Spots, row: int, across: NDArray[np.int_], down: NDArray[np.int_]
) -> NDArray[np.bool_]:
    """Tell which pixels lie off all other spots."""
    free = np.ones(across.shape, dtype=np.bool_)
    reach = _OFF_OTHERS * spots.radius
    corner = float(np.hypot(*across.shape)) / 2
    apart = np.hypot(spots.x - spots.x[row], spots.y - spots.y[row])
    for j in np.flatnonzero(apart < corner + reach):
        if j != row:
            free &= np.hypot(across - spots.x[j], down - spots.y[j]) > reach[j]
    return free


def _halo(lifted: Layer, reach: NDArray[np.float64], beside: NDArray[np.bool_]) -> Layer:
    """Return the median of what is lifted beside the object, ring by ring, fading outwards."""
    bounds = np.arange(0.8, _HALO + _RING / 2, _RING)
    middles, medians = [], []
    for low, high in pairwise(bounds):
        ring = (reach >= low) & (reach < high) & beside
        if ring.sum() >= _FEWEST_PIXELS:
            middles.append((low + high) / 2)
            medians.append(np.median(lifted[ring], axis=0))
    if not middles:
        return np.zeros_like(lifted)
    columns = np.array(medians).T
    halo = np.stack([np.interp(reach, middles, column) for column in columns], axis=-1)
    fading = np.clip((_HALO - reach) / (_HALO - _REACH), 0.0, 1.0)
    return np.asarray(halo * fading[..., None], dtype=np.float32)


def altered(stamp: Stamp, *, size: float, strength: float, turns: int, mirrored: bool) -> Stamp:
    """Return a stamp made larger or smaller, fainter or stronger, and turned.

    Parameters
    ----------
    stamp : Stamp
    size, strength : float
        Factors on the radius and on the contrast.
    turns : int
        Quarter turns.
    mirrored : bool
        Whether left and right change places, after the turns.

    Returns
    -------
    Stamp
    """
    lifted, cover = stamp.lifted * np.float32(strength), stamp.cover
    height, width = cover.shape
    new = (max(3, round(width * size)), max(3, round(height * size)))
    how = cv2.INTER_AREA if size < 1 else cv2.INTER_CUBIC
    lifted, cover = (
        np.asarray(cv2.resize(layer, new, interpolation=how)) for layer in (lifted, cover)
    )
    x = (stamp.x + 0.5) * new[0] / width - 0.5
    y = (stamp.y + 0.5) * new[1] / height - 0.5
    for _ in range(turns % 4):
        # A quarter turn takes the right edge to the top.
        lifted, cover, x, y = np.rot90(lifted), np.rot90(cover), y, lifted.shape[1] - 1 - x
    if mirrored:
        lifted, cover, x = lifted[:, ::-1], cover[:, ::-1], lifted.shape[1] - 1 - x
    return Stamp(
        np.ascontiguousarray(lifted),
        np.clip(np.ascontiguousarray(cover), 0.0, 1.0),
        x,
        y,
        stamp.radius * new[0] / width,
        stamp.contrast * strength,
        stamp.light,
    )
