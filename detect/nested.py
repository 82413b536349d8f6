"""Which nested edges a dish shows: agar's edge, wall, rim and lid, however the dish leans.

Every edge of a dish is a circle about one axis, in planes one above the other. Seen aslant, all of
them become ellipses of one and the same proportion, and the higher ones are shifted along the short
axis. So the proportion is looked for first, as the one at which the best ring and those nested
with it are sharpest; then the rings, with shifts along that axis only.

References
----------
D. A. Forsyth and J. Ponce, "Computer vision: a modern approach" (2003), section 2.3: far from the
camera a scene is seen by an affine map, which does to all parallel planes the same.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from itertools import product
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.rings import (
    EdgeMap,
    Frame,
    Ring,
    best_ring,
    best_rings,
    fit_ring,
    map_edges,
    tints_of,
)

Array = NDArray[Any]

LEAST_RING_SEEN = 0.42  # of the rays: half of a tilted dish's agar can hide behind its rim
CLEAR_TINT = 0.06  # change of log colour that tells two materials
_MOST_RINGS = 9
_MOST_TINT_RINGS = 2
_COARSE = 0.004
_MOST_STRETCH = 0.036  # of a circle tilted by 21.5 degrees
_FRAMES = 3
_NEARLY_ROUND = 0.0005
_HIGHER = 0.40  # the lid's height over the agar, in radii, at most


@dataclass(frozen=True, slots=True, eq=False)
class Nest:
    """The nested rings of a dish in one frame, from the inside out, and the rays they were found on."""

    frame: Frame
    rings: tuple[Ring, ...]
    rays: Array
    distances: Array
    edges: EdgeMap
    tint_edges: EdgeMap | None

    @property
    def clearness(self) -> float:
        """How clearly rings are seen, all together."""
        return float(sum(ring.strength**3 for ring in self.rings))

    def sharpest(self) -> Frame:
        """Return the frame of the clearest ring, fitted once more in whatever proportion it has."""
        ring = max(self.rings, key=lambda ring: ring.strength + ring.seen)
        edges = self.tint_edges if ring.of_tint and self.tint_edges is not None else self.edges
        again = fit_ring(edges, ring.shape, tolerances=(0.006, 0.005, 0.004, 0.004, 0.004))
        return self.frame.around(again.shape)


def find_nest(picture: Array, centre: Array, radius: float) -> Nest:
    """Find the nested rings near a rough circle.

    Parameters
    ----------
    picture : ndarray of shape (rows, columns, 3)
    centre : ndarray of shape (2,)
    radius : float
        Rough circle in pixels of the picture.

    Returns
    -------
    Nest
        With no rings where none are seen.
    """
    rough = Frame(centre, np.eye(2) * radius)
    nests = [_nest_in(picture, frame) for frame in _frames(picture, rough)]
    best = max(nests, key=lambda nest: nest.clearness)
    return _nest_in(picture, best.sharpest()) if best.rings else best


def _frames(picture: Array, rough: Frame) -> list[Frame]:
    """Ellipses of the best rings near a rough circle, of several proportions."""
    distances = np.arange(0.78, 1.2, rough.pixel)
    rays = rough.sample(picture, distances)
    edges = map_edges(rays.mean(2), distances, least_strong=0.3)
    coarse = edges.coarser(_COARSE)
    shifts = _disc(0.06, 0.012)
    stretches = _disc(_MOST_STRETCH, 0.009)
    shapes = np.array([(*a, *b) for b, a in product(stretches, shifts)])
    strengths, found = best_rings(coarse, shapes=shapes, between=(0.84, 1.14))
    strengths = strengths.reshape(len(stretches), len(shifts))
    found = found.reshape(len(stretches), len(shifts), 5)
    best = strengths.argmax(1)
    order = np.argsort(-strengths.max(1))[:_FRAMES]
    round_one = int(np.abs(stretches).sum(1).argmin())
    frames: list[Frame] = []
    for k in (*order, round_one):
        start = _sharper(edges, found[k, best[k]])
        tie = _NEARLY_ROUND if k == round_one else math.inf
        ring = fit_ring(edges, start, tolerances=(0.010, 0.006, 0.004), proportion=tie)
        frame = rough.around(ring.shape)
        if not any(frame.is_like(other) for other in frames):
            frames.append(frame)
    return frames


def _sharper(edges: EdgeMap, shape: Array) -> Array:
    """Improve a coarse shape at the map's own fineness."""
    near = np.array([(*a, *b) for a, b in product(_disc(0.006, 0.006), _disc(0.0045, 0.0045))])
    s = float(shape[0])
    _, better = best_ring(edges, shapes=shape[1:] + near, between=(s - 0.01, s + 0.01))
    return better


def _disc(reach: float, step: float) -> Array:
    """Points of a grid within a distance of 0."""
    grid = np.arange(-math.floor(reach / step + 1e-9), math.floor(reach / step + 1e-9) + 1) * step
    return np.array([(p, q) for p, q in product(grid, grid) if math.hypot(p, q) <= reach + 1e-9])


def _nest_in(picture: Array, frame: Frame) -> Nest:
    """Find the nested rings in a frame."""
    distances = np.arange(0.80, 1.16, frame.pixel)
    rays = frame.sample(picture, distances)
    edges = map_edges(rays.mean(2), distances, least_strong=0.3)
    shapes = _along_axis(frame)
    rings = _rings_of(edges, shapes, _MOST_RINGS)
    tint = _tint_edges(rays, distances)
    if tint is not None:
        rings += [replace(r, of_tint=True) for r in _rings_of(tint, shapes, _MOST_TINT_RINGS)]
    rings.sort(key=lambda r: r.size)
    return Nest(frame, tuple(rings), rays, distances, edges, tint)


def _rings_of(edges: EdgeMap, shapes: Array, most: int) -> list[Ring]:
    """Find rings, the strongest first, each on what the others left."""
    rings = []
    for _ in range(most):
        strength, start = best_ring(edges, shapes=shapes, between=(0.84, 1.12))
        if strength < 0.3:
            break
        ring = fit_ring(edges, start, tolerances=(0.006, 0.004, 0.003), proportion=0.002)
        if ring.seen >= LEAST_RING_SEEN and ring.scatter < 0.01:
            rings.append(ring)
        edges = edges.without(ring, width=0.005)
    return rings


def _tint_edges(rays: Array, distances: Array) -> EdgeMap | None:
    """Edges of colour, along the direction in which the dish's inside differs from its outside."""
    tints = tints_of(rays)
    inside = np.median(tints[:, distances < 0.88], axis=(0, 1))
    outside = np.median(tints[:, distances > 1.1], axis=(0, 1))
    change = outside - inside
    if (size := float(np.linalg.norm(change))) < CLEAR_TINT:
        return None
    return map_edges(tints @ (change / size), distances, least_strong=0.01)


def _along_axis(frame: Frame) -> Array:
    """Shifts to try: along the short axis, as far as the tilt can make them, and a little across."""
    (short, long), vectors = np.linalg.eigh(frame.matrix)
    sine = math.sqrt(max(0.0, 1 - (short / long) ** 2))
    if sine < 0.1:
        return np.array([(*shift, 0.0, 0.0) for shift in _disc(0.045, 0.0075)])
    reach = 0.02 + _HIGHER * sine
    along = np.arange(-math.ceil(reach / 0.006), math.ceil(reach / 0.006) + 1) * 0.006
    shifts = (
        along[:, None, None] * vectors[:, 0] + np.array([-0.01, 0, 0.01])[:, None] * vectors[:, 1]
    )
    return np.array([(*shift, 0.0, 0.0) for shift in shifts.reshape(-1, 2)])
