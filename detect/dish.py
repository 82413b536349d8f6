"""Find the round dish in a photograph, and the edge where its agar meets the wall."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import product
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.circles import RoughCircle, find_circle, shrunk
from detect.errors import AreaNotFound
from detect.photograph import Photograph
from detect.rings import (
    RAYS,
    Frame,
    Ring,
    best_ring,
    fit_ring,
    map_edges,
    robust_shape,
    slopes_along,
    smoothed_round,
)

LEAST_SEEN = 0.45  # of a rough circle's line; text, soil and tissue stay below 0.35
LEAST_RING_SEEN = 0.6
LEAST_PLACED = 0.6  # of the inner edge at last; chance alone gives half
MOST_OUTSIDE = 0.02  # of the inner edge beyond the frame
_MIDDLE_SIDE, _FINE_SIDE = 1100, 3000
_MOST_RINGS = 7
_DARK = 16.0  # added to 0..255 before logarithms, so that noise in the dark counts little
_GROUP = 0.018  # rings within this share of the radius are one edge and its shading
_CLEAR_TINT = 0.06  # change of log colour that marks the agar's edge
_CLEAR_LIGHT = 0.05  # the same for log brightness


@dataclass(frozen=True, slots=True)
class Ellipse:
    """An ellipse in pixels.

    Parameters
    ----------
    cx, cy : float
        Centre.
    semi_a, semi_b : float
        Half the long and half the short axis.
    angle_deg : float
        From the x axis (right) to the long axis, towards y (down).

    Raises
    ------
    ValueError
        If the axes are not positive and finite, or the first is the shorter.
    """

    cx: float
    cy: float
    semi_a: float
    semi_b: float
    angle_deg: float

    def __post_init__(self) -> None:
        finite = all(map(math.isfinite, (self.cx, self.cy, self.semi_a, self.angle_deg)))
        if not (finite and 0 < self.semi_b <= self.semi_a):
            raise ValueError(
                f"an ellipse needs 0 < semi_b <= semi_a, not {self.semi_b} and {self.semi_a}"
            )

    def outline(self, n: int = 360) -> NDArray[np.float64]:
        """Return `n` points of the ellipse, (n, 2)."""
        t = np.arange(n) * 2 * np.pi / n
        return np.asarray(
            np.array([self.cx, self.cy])
            + np.column_stack([self.semi_a * np.cos(t), self.semi_b * np.sin(t)]) @ self.axes.T
        )

    @property
    def axes(self) -> NDArray[np.float64]:
        """Unit vectors of the long and the short axis as columns, (2, 2)."""
        turn = math.radians(self.angle_deg)
        return np.array([[math.cos(turn), -math.sin(turn)], [math.sin(turn), math.cos(turn)]])

    @property
    def mean_radius(self) -> float:
        """Radius of the circle of equal area."""
        return math.sqrt(self.semi_a * self.semi_b)


@dataclass(frozen=True, slots=True)
class Dish:
    """A dish as found.

    Parameters
    ----------
    inner : Ellipse
        Where the agar meets the wall: the edge whose diameter is the known one.
    outer : Ellipse or None
        The outermost edge seen, if another than the inner one was.
    quality : float
        Share of the inner edge, 0..1, on which it was seen.
    scatter_px : float
        Robust standard deviation of the edge points about the inner ellipse, in pixels.
    """

    inner: Ellipse
    outer: Ellipse | None
    quality: float
    scatter_px: float = 0.0


def find_dish(photograph: Photograph) -> Dish:
    """Find the round dish of a photograph.

    Parameters
    ----------
    photograph : Photograph
        One dish, seen from above or nearly so, wholly in the frame; on any bench.

    Returns
    -------
    Dish

    Raises
    ------
    AreaNotFound
        If nothing round and large enough is seen, or the frame cuts it.

    Notes
    -----
    Edges vote for a rough circle; around it, all nested rings are found along rays; the agar's edge
    is the innermost at which the colour (not only the brightness) changes, or the innermost where no
    ring shows such a change; it is then placed to parts of a pixel on a larger copy.
    """
    rough = find_circle(photograph)
    if rough.seen < LEAST_SEEN:
        raise AreaNotFound(
            f"No dish is seen in {photograph.name}: the best circle shows"
            f" {100 * rough.seen:.0f} % of its edge, {100 * LEAST_SEEN:.0f} % are needed;"
            " photograph one dish wholly in the frame, or choose another area."
        )
    middle, factor = shrunk(photograph, _MIDDLE_SIDE)
    frame = _main_frame(middle, rough, factor)
    rings, rays, distances = _all_rings(middle, frame)
    if not rings:
        raise _no_edge(photograph)
    inner = _inner_of(rings, rays, distances)
    fine, fine_factor = shrunk(photograph, _FINE_SIDE)
    placed, seen, scatter = _placed(fine, frame, inner, fine_factor / factor)
    if seen < LEAST_PLACED:
        raise _no_edge(photograph)
    inner_ellipse = _ellipse(placed, 1 / fine_factor)
    _check_in_frame(inner_ellipse, photograph)
    outer = rings[-1]
    outer_ellipse = None
    if outer is not inner:
        outer_ellipse = _ellipse(_reframed(frame, outer), 1 / factor)
    return Dish(inner_ellipse, outer_ellipse, seen, scatter / fine_factor)


def _no_edge(photograph: Photograph) -> AreaNotFound:
    return AreaNotFound(
        f"No dish is seen in {photograph.name}: the circle found there has no clear closed edge;"
        " photograph one dish wholly in the frame, or choose another area."
    )


def _main_frame(middle: NDArray[Any], rough: RoughCircle, factor: float) -> Frame:
    """Fit the most conspicuous ring near the rough circle; its ellipse is the frame for the rest."""
    centre = (np.array([rough.cx, rough.cy]) + 0.5) * factor - 0.5
    frame = Frame(centre, np.eye(2) * rough.radius * factor)
    distances = np.arange(0.80, 1.16, frame.pixel)
    rays = frame.sample(middle, distances)
    by_tint = map_edges(tints_of(rays), distances, calm=0.86, least_strong=0.012, main=0.7)
    by_light = map_edges(rays, distances, calm=0.86, least_strong=0.3)
    best, best_score = None, -math.inf
    for edges, stretch in product((by_tint, by_light), (0.0, 0.01, 0.02, 0.035)):
        shapes = _shapes(reach=0.06, step=0.01, stretch=stretch)
        _, start = best_ring(edges, shapes=shapes, between=(0.86, 1.10))
        ring = fit_ring(edges, start, tolerances=(0.015, 0.008, 0.005, 0.004))
        # Pieces of several rings can make up one that is stretched or ragged: those count less.
        score = ring.strength - 8 * stretch - 100 * ring.scatter
        if score > best_score:
            best, best_score = ring, score
        if best_score > 0.7:
            break
    assert best is not None
    return _reframed(frame, best)


def _shapes(*, reach: float, step: float, stretch: float = 0.0) -> NDArray[np.float64]:
    """Shifts on a grid within `reach`, each with every turn of one stretch."""
    grid = np.arange(-reach, reach + step / 2, step)
    shifts = [(p, q) for p, q in product(grid, grid) if math.hypot(p, q) <= reach + 1e-9]
    turns = np.arange(8) * np.pi / 4 if stretch else np.zeros(1)
    stretches = [(stretch * math.cos(t), stretch * math.sin(t)) for t in turns]
    return np.array([(*shift, *bend) for shift, bend in product(shifts, stretches)])


def _all_rings(middle: NDArray[Any], frame: Frame) -> tuple[list[Ring], NDArray[Any], NDArray[Any]]:
    """Find the nested rings, from the inside out, with the rays they were found on."""
    distances = np.arange(0.84, 1.13, frame.pixel)
    rays = frame.sample(middle, distances)
    edges = map_edges(rays, distances, calm=0.9, least_strong=0.3)
    shapes = _shapes(reach=0.045, step=0.0075)
    rings: list[Ring] = []
    for _ in range(_MOST_RINGS):
        strength, start = best_ring(edges, shapes=shapes, between=(0.88, 1.10))
        if strength < 0.35:
            break
        ring = fit_ring(edges, start, tolerances=(0.006, 0.004, 0.003))
        if ring.seen >= LEAST_RING_SEEN:
            rings.append(ring)
        edges = edges.without(ring, width=0.005)
    return sorted(rings, key=lambda r: r.size), rays, distances


def _inner_of(rings: list[Ring], rays: NDArray[Any], distances: NDArray[Any]) -> Ring:
    """Choose the ring at which the agar ends.

    It is the innermost at which colour or brightness differ between its two sides, as they do not
    at a highlight. Of it and its close neighbours (the meniscus is shaded), the one with the
    clearest change of colour is meant; without colour, the sharpest.
    """
    logs = np.log(smoothed_round(rays, 2.0) + _DARK)
    light = [_light_change(logs.mean(2), distances, r) for r in rings]
    tint = [_change(tints_of(rays), distances, r) for r in rings]
    ends = [
        r.seen >= 0.75 and (t >= _CLEAR_TINT or brightness >= _CLEAR_LIGHT)
        for r, t, brightness in zip(rings, tint, light, strict=True)
    ]
    first = rings[ends.index(True)] if any(ends) else max(rings, key=lambda r: r.strength)
    near = [i for i, r in enumerate(rings) if 0 <= r.size - first.size < _GROUP]
    clear = max(tint[i] for i in near) >= _CLEAR_TINT
    return rings[max(near, key=lambda i: tint[i] if clear else rings[i].strength)]


def tints_of(rays: NDArray[Any]) -> NDArray[Any]:
    """Colour free of brightness: log red over green and log blue over green."""
    logs = np.log(smoothed_round(rays, 2.0) + _DARK)
    return np.asarray(logs[..., [0, 2]] - logs[..., [1]])


def _light_change(logs: NDArray[Any], distances: NDArray[Any], ring: Ring) -> float:
    """Change of log brightness across a ring, of either sign, median over all rays."""
    off = distances - ring.distances()[:, None]
    sides = []
    for side in (-1, 1):
        band = (off * side > 0.004) & (off * side < 0.010)
        sides.append((logs * band).sum(1) / np.maximum(band.sum(1), 1))
    return float(np.median(np.abs(sides[1] - sides[0])))


def _change(values: NDArray[Any], distances: NDArray[Any], ring: Ring) -> float:
    """Length of the change across a ring, from just inside to just outside, median over all rays."""
    step = distances[1] - distances[0]
    at = (ring.distances() - distances[0]) / step
    columns = (
        np.round(at + side * 0.006 / step).astype(int).clip(0, distances.size - 1)
        for side in (-1, 1)
    )
    inside, outside = (values[np.arange(RAYS), column] for column in columns)
    return float(np.linalg.norm(np.median(outside - inside, axis=0)))


def _placed(
    fine: NDArray[Any], frame: Frame, ring: Ring, factor: float
) -> tuple[Frame, float, float]:
    """Place a ring on a larger copy: its ellipse as a frame, the share seen, the scatter in pixels.

    The profile on each ray is weighed by how the median colour changes across the ring, so that a
    step of colour counts where there is one and the brightness elsewhere.
    """
    around = _reframed(frame, ring).moved(factor)
    step = max(around.pixel, 0.0012)
    distances = np.arange(0.970, 1.0301, step)
    rays = around.sample(fine, distances)
    signal = _edge_signal(rays, distances)
    slopes = np.abs(slopes_along(signal[..., None], sigma_rays=1.0, sigma_steps=1.2)[..., 0])
    far = np.abs(distances - 1) > 0.013
    column = np.where(far, 0, slopes).argmax(1).clip(1, distances.size - 2)
    every_ray = np.arange(RAYS)
    before, here, after = (slopes[every_ray, column + k] for k in (-1, 0, 1))
    bend = before - 2 * here + after
    shift = np.where(bend < 0, 0.5 * (before - after) / np.where(bend < 0, bend, 1), 0).clip(-1, 1)
    at = distances[column] + shift * step
    strength = np.minimum(here / (np.median(here) + 1e-9), 1.0)
    shape, scatter = robust_shape(at, strength, np.array([1.0, 0, 0, 0, 0]), step)
    placed = Ring(shape, 0.0, 0.0, scatter)
    seen = float((np.abs(at - placed.distances()) < 0.006).mean())
    return _reframed(around, placed), seen, scatter / around.pixel


def _edge_signal(rays: NDArray[Any], distances: NDArray[Any]) -> NDArray[Any]:
    """One value per sample: tint if it clearly changes across the ring, else log brightness."""
    logs = np.log(rays + _DARK)
    tints = logs[..., [0, 2]] - logs[..., [1]]
    inside = (distances > 0.982) & (distances < 0.994)
    outside = (distances > 1.006) & (distances < 1.018)
    change = np.median(tints[:, outside].mean(1) - tints[:, inside].mean(1), axis=0)
    if np.linalg.norm(change) >= _CLEAR_TINT:
        return np.asarray(tints @ (change / np.linalg.norm(change)))
    return np.asarray(logs.mean(2))


def _reframed(frame: Frame, ring: Ring) -> Frame:
    """Return the frame whose unit circle is the ellipse through a ring."""
    x, y = frame.positions(ring.distances()).T
    scale = math.sqrt(float(np.linalg.det(frame.matrix))) * ring.size
    u, v = (x - frame.centre[0]) / scale, (y - frame.centre[1]) / scale
    conic = np.column_stack([u * u, u * v, v * v, u, v])
    a, b, c, d, e = np.linalg.lstsq(conic, np.ones(RAYS), rcond=None)[0]
    form = np.array([[a, b / 2], [b / 2, c]])
    middle = -0.5 * np.linalg.solve(form, np.array([d, e]))
    form = form / (1.0 + middle @ form @ middle)
    values, vectors = np.linalg.eigh(form)
    matrix = vectors @ np.diag(scale / np.sqrt(np.maximum(values, 1e-12))) @ vectors.T
    return Frame(frame.centre + scale * middle, matrix)


def _ellipse(frame: Frame, factor: float) -> Ellipse:
    """Return a frame's ellipse in a picture `factor` times as large."""
    moved = frame.moved(factor)
    (short, long), vectors = np.linalg.eigh(moved.matrix)
    angle = math.degrees(math.atan2(vectors[1, 1], vectors[0, 1])) % 180.0
    cx, cy = moved.centre
    return Ellipse(float(cx), float(cy), float(long), float(min(short, long)), angle)


def _check_in_frame(inner: Ellipse, photograph: Photograph) -> None:
    """Refuse a dish that the frame cuts."""
    x, y = inner.outline().T
    inside = (x >= -0.5) & (y >= -0.5)
    inside &= (x <= photograph.width - 0.5) & (y <= photograph.height - 0.5)
    if (outside := float(1 - inside.mean())) > MOST_OUTSIDE:
        raise AreaNotFound(
            f"The dish in {photograph.name} is cut by the frame ({100 * outside:.0f} % of its inner"
            " edge lie outside); photograph it whole, or choose another area."
        )
