"""The nested edges of a dish: meniscus, agar's edge, wall, rim and lid, each as a closed ring.

A picture is sampled along rays of a frame (a centre and a symmetric map of the unit circle), so that
a ring is a nearly straight line: its distance along the ray at angle t is
s + p cos t + q sin t + e cos 2t + f sin 2t, a slightly shifted, slightly stretched circle.

References
----------
P. W. Holland and R. E. Welsch, "Robust regression using iteratively reweighted least-squares",
Communications in Statistics A 6 (1977) 813-827: the fit that ignores stray edges.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray

Array = NDArray[Any]

RAYS = 360
ANGLES = np.arange(RAYS) * 2 * np.pi / RAYS
RAY_DIRECTIONS = np.column_stack([np.cos(ANGLES), np.sin(ANGLES)])
SHAPES = np.column_stack([np.ones(RAYS), RAY_DIRECTIONS, np.cos(2 * ANGLES), np.sin(2 * ANGLES)])
_AROUND = 0.05  # within this share of the radius the ordinary slope is taken
_BROAD = 0.012  # what changes more slowly is shading, no edge
_STRONG = 3.0  # an edge is fully strong at so many times the ordinary slope
_ON_RING = 0.003  # an edge so near a ring lies on it
_DARK = 16.0
_EVERY = 6  # rays used while searching


@dataclass(frozen=True, slots=True, eq=False)
class Frame:
    """Where rays start and how far they reach: position = centre + distance * matrix @ direction."""

    centre: Array
    matrix: Array

    @property
    def pixel(self) -> float:
        """One pixel as a distance along a ray."""
        return float(1.0 / np.sqrt(np.linalg.det(self.matrix)))

    def within(self, shape: tuple[int, ...], distances: Array) -> Array:
        """Tell which rays, at one distance each (RAYS,), are still in a picture of a shape."""
        x, y = self.positions(distances).T
        return np.asarray((x > -0.5) & (y > -0.5) & (x < shape[1] - 0.5) & (y < shape[0] - 0.5))

    def positions(self, distances: Array) -> Array:
        """Map a distance per ray (RAYS,) to pixel positions (RAYS, 2)."""
        return np.asarray(self.centre + (distances[:, None] * RAY_DIRECTIONS) @ self.matrix.T)

    def sample(self, picture: Array, distances: Array) -> Array:
        """Sample the picture at common distances on every ray: (RAYS, n, channels), float32."""
        ahead = RAY_DIRECTIONS @ self.matrix.T
        x = (self.centre[0] + ahead[:, :1] * distances).astype(np.float32)
        y = (self.centre[1] + ahead[:, 1:] * distances).astype(np.float32)
        sampled: Array = cv2.remap(
            picture, x, y, cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE
        ).astype(np.float32)
        return sampled

    def around(self, shape: Array) -> Frame:
        """Return the frame whose unit circle is the ellipse through a ring of a shape (5,)."""
        x, y = self.positions(SHAPES @ shape).T
        scale = math.sqrt(float(np.linalg.det(self.matrix))) * float(shape[0])
        u, v = (x - self.centre[0]) / scale, (y - self.centre[1]) / scale
        conic = np.column_stack([u * u, u * v, v * v, u, v])
        a, b, c, d, e = np.linalg.lstsq(conic, np.ones(RAYS), rcond=None)[0]
        form = np.array([[a, b / 2], [b / 2, c]])
        middle = -0.5 * np.linalg.solve(form, np.array([d, e]))
        form = form / (1.0 + middle @ form @ middle)
        values, vectors = np.linalg.eigh(form)
        matrix = vectors @ np.diag(scale / np.sqrt(np.maximum(values, 1e-12))) @ vectors.T
        return Frame(self.centre + scale * middle, matrix)

    def is_like(self, other: Frame) -> bool:
        """Tell whether both are the same to within a thousandth of the radius."""
        apart = max(
            np.abs(self.matrix - other.matrix).max(), np.abs(self.centre - other.centre).max()
        )
        return bool(apart * self.pixel < 0.001)

    def moved(self, factor: float) -> Frame:
        """Return the frame in the same picture at `factor` times the size."""
        return Frame((self.centre + 0.5) * factor - 0.5, self.matrix * factor)


@dataclass(frozen=True, slots=True, eq=False)
class Ring:
    """One closed edge in a frame.

    Parameters
    ----------
    shape : ndarray of shape (5,)
        s, p, q, e, f of the module's formula.
    seen : float
        Share of the rays on which an edge lies on the ring, 0..1.
    strength : float
        Mean strength of that edge, 0..1.
    scatter : float
        Robust standard deviation of the edge about the ring, as a distance along a ray.
    sign : float
        1 where the picture brightens outwards at the ring, -1 where it darkens.
    on : ndarray of shape (RAYS,), bool
        The rays on which an edge of this sign lies on the ring.
    of_tint : bool
        Whether it was found by colour instead of brightness.
    """

    shape: Array
    seen: float
    strength: float
    scatter: float
    sign: float
    on: Array
    of_tint: bool = False

    @property
    def size(self) -> float:
        """Mean distance from the frame's centre."""
        return float(self.shape[0])

    def distances(self) -> Array:
        """Distance on every ray."""
        return np.asarray(SHAPES @ self.shape)


@dataclass(frozen=True, slots=True, eq=False)
class EdgeMap:
    """Edges along the rays: slopes -1..1, brightening outwards positive, and their peaks, (RAYS, n).

    A ring's edges have one sign over long arcs, so that pieces of several rings, or a ring and the
    texture beside it, cancel where magnitudes would add up to a ring that is none.
    """

    distances: Array
    slopes: Array
    peaks: Array

    @property
    def step(self) -> float:
        """Spacing of the distances."""
        return float(self.distances[1] - self.distances[0])

    def coarser(self, step: float) -> EdgeMap:
        """Return the map at a wider step: the mean within each."""
        every = max(1, round(step / self.step))
        n = self.distances.size // every * every
        shape = (len(self.slopes), n // every, every)
        return EdgeMap(
            self.distances[:n].reshape(-1, every).mean(1),
            self.slopes[:, :n].reshape(shape).mean(2),
            self.peaks[:, :n].reshape(shape).mean(2),
        )

    def mean_sign(self, shape: Array) -> float:
        """Return 1 where a ring brightens outwards on the whole, -1 where it darkens."""
        column = np.round((SHAPES @ shape - self.distances[0]) / self.step).astype(int)
        inside = (column >= 0) & (column < self.distances.size)
        at = self.slopes[np.arange(RAYS)[inside], column[inside]]
        return 1.0 if at.sum() >= 0 else -1.0

    def without(self, ring: Ring, *, width: float) -> EdgeMap:
        """Return the map with the edges near a ring taken out."""
        near = np.abs(self.distances - ring.distances()[:, None]) < width
        return EdgeMap(
            self.distances,
            np.where(near, np.float32(0), self.slopes),
            np.where(near, np.float32(0), self.peaks),
        )


def smoothed_round(rays: Array, sigma_rays: float) -> Array:
    """Smooth across rays; the last neighbours the first."""
    pad = int(4 * sigma_rays) + 1
    padded = np.concatenate([rays[-pad:], rays, rays[:pad]])
    smooth: Array = cv2.GaussianBlur(padded, (1, 2 * pad + 1), sigmaX=0.1, sigmaY=sigma_rays)
    return np.asarray(smooth[pad:-pad].reshape(rays.shape))


def logs_of(values: Array) -> Array:
    """Logarithms of values 0..255, a little lifted so that noise in the dark counts little."""
    return np.log(values + _DARK)


def tints_in(logs: Array) -> Array:
    """Colour free of brightness: log red over green and log blue over green."""
    return np.asarray(logs[..., [0, 2]] - logs[..., [1]])


def tints_of(rays: Array) -> Array:
    """Tints of sampled rays, smoothed a little across them."""
    return tints_in(logs_of(smoothed_round(rays, 2.0)))


def slopes_along(rays: Array, *, sigma_rays: float, sigma_steps: float) -> Array:
    """Smooth, then take the slope along each ray, per channel."""
    smooth = smoothed_round(rays, sigma_rays)
    smooth = cv2.GaussianBlur(smooth, (0, 0), sigmaX=sigma_steps, sigmaY=0.01)
    smooth = np.asarray(smooth.reshape(rays.shape))
    slopes = np.zeros_like(smooth)
    slopes[:, 1:-1] = (smooth[:, 2:] - smooth[:, :-2]) / 2
    return slopes


def map_edges(rays: Array, distances: Array, *, least_strong: float) -> EdgeMap:
    """Find the edges along sampled rays.

    Parameters
    ----------
    rays : ndarray of shape (RAYS, n)
        Sampled values of one kind: brightness or a tint.
    distances : ndarray of shape (n,)
        Where along the rays.
    least_strong : float
        Slope per step below which no edge counts as fully strong, however calm the picture.
    """
    slopes = slopes_along(rays[..., None], sigma_rays=1.5, sigma_steps=1.0)[..., 0]
    step = float(distances[1] - distances[0])
    broad = (2 * round(_BROAD / step) + 1, 1)
    shading = np.abs(cv2.blur(slopes, broad, borderType=cv2.BORDER_REPLICATE))
    slopes = np.sign(slopes) * np.maximum(np.abs(slopes) - shading, 0)
    ordinary = np.median(np.abs(slopes), axis=0)
    window = 2 * round(_AROUND / step) + 1
    ordinary = cv2.blur(ordinary[None], (window, 1), borderType=cv2.BORDER_REPLICATE)[0]
    strong = np.maximum(_STRONG * ordinary, least_strong)
    slopes = slopes / strong
    size = np.pad(np.abs(slopes), ((0, 0), (1, 1)))
    peak = (size[:, 1:-1] >= size[:, :-2]) & (size[:, 1:-1] > size[:, 2:])
    slopes = np.clip(slopes, -1, 1).astype(np.float32)
    return EdgeMap(distances, slopes, np.where(peak, slopes, 0))


def best_ring(
    edges: EdgeMap, *, shapes: Array, between: tuple[float, float]
) -> tuple[float, Array]:
    """Return the strongest of all rings of some shapes: its mean strength and its shape (5,)."""
    strengths, found = best_rings(edges, shapes=shapes, between=between)
    best = int(strengths.argmax())
    return float(strengths[best]), found[best]


def best_rings(
    edges: EdgeMap, *, shapes: Array, between: tuple[float, float]
) -> tuple[Array, Array]:
    """Search the mean distance at which a ring of each shape has the strongest edges.

    Parameters
    ----------
    edges : EdgeMap
        Where to look.
    shapes : ndarray of shape (k, 4)
        Shifts and stretches (p, q, e, f) to try.
    between : tuple of float
        Least and greatest mean distance s.

    Returns
    -------
    strengths : ndarray of shape (k,)
        Mean slope over the rays, of either sign.
    found : ndarray of shape (k, 5)
        The shapes with their mean distance first.
    """
    rows = np.arange(0, RAYS, _EVERY)
    bends = np.round(SHAPES[rows, 1:] @ shapes.T / edges.step).astype(np.int64)
    room = int(np.abs(bends).max()) + 1
    first, last = np.searchsorted(edges.distances, between)
    columns = np.arange(first, max(last, first + 1))
    padded = np.pad(edges.slopes[rows], ((0, 0), (room, room)))
    total = np.zeros((len(shapes), columns.size), padded.dtype)
    # Row by row, what each shape sees of a ray is one stretch of it.
    stretches = sliding_window_view(padded, columns.size, axis=1)
    for ray, start in zip(stretches, bends + (first + room), strict=True):
        total += ray[start]
    mean = np.abs(total) / len(rows)
    at = mean.argmax(1)
    strengths = mean[np.arange(len(shapes)), at]
    return strengths, np.column_stack([edges.distances[columns[at]], shapes])


def fit_ring(
    edges: EdgeMap, start: Array, *, tolerances: tuple[float, ...], proportion: float = math.inf
) -> Ring:
    """Fit a ring to the edges near a start, ever nearer; stray edges lose their weight."""
    shape = np.asarray(start, dtype=np.float64)
    scatter, every_ray = 1.0, np.arange(RAYS)
    sign = edges.mean_sign(shape)
    signed = np.maximum(sign * edges.peaks, 0)
    for tolerance in tolerances:
        ring = SHAPES @ shape
        reach = np.arange(-math.ceil(tolerance / edges.step), math.ceil(tolerance / edges.step) + 1)
        columns = np.round((ring - edges.distances[0]) / edges.step).astype(int)[:, None] + reach
        columns = columns.clip(0, edges.distances.size - 1)
        off = np.abs(edges.distances[columns] - ring[:, None]) / tolerance
        weight = np.where(off < 1, signed[every_ray[:, None], columns] * (1 - 0.5 * off), 0)
        best = weight.argmax(1)
        column, weights = columns[every_ray, best], weight[every_ray, best]
        weights[weights < 0.15] = 0
        if (weights > 0).mean() < 0.3:
            break
        shape, scatter = robust_shape(
            edges.distances[column], weights, shape, edges.step, proportion=proportion
        )
    off = np.abs(edges.distances - (SHAPES @ shape)[:, None])
    near = off < max(_ON_RING, 1.3 * edges.step)
    strongest = np.where(near, np.maximum(sign * edges.slopes, 0), 0).max(1)
    on = strongest > 0.3
    return Ring(shape, float(on.mean()), float(strongest.mean()), scatter, sign, on)


def robust_shape(
    distances: Array,
    weights: Array,
    start: Array,
    least_scatter: float,
    *,
    proportion: float = math.inf,
) -> tuple[Array, float]:
    """Fit a shape to one distance per ray by reweighted least squares; return it with the scatter.

    `proportion` is the standard deviation of the stretches e and f about 0 where the frame's own
    proportion is trusted: what is seen of half a ring alone would not tell them.
    """
    shape, scatter = start, 0.0
    used = weights > 0
    for _ in range(5):
        off = distances - SHAPES @ shape
        scatter = 1.4826 * float(np.sort(np.abs(off[used]))[used.sum() // 2])
        width = max(scatter, 0.3 * least_scatter)
        weight = weights / (1 + (off / (2 * width)) ** 2) ** 2
        normal = SHAPES.T @ (SHAPES * weight[:, None])
        normal[[3, 4], [3, 4]] += (3 * width / proportion) ** 2  # neighbouring rays err together
        normal += 1e-9 * np.eye(5)
        shape = np.linalg.solve(normal, SHAPES.T @ (weight * distances))
    return shape, scatter
