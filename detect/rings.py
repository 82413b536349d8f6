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

from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

Array = NDArray[Any]

RAYS = 360
ANGLES = np.arange(RAYS) * 2 * np.pi / RAYS
RAY_DIRECTIONS = np.column_stack([np.cos(ANGLES), np.sin(ANGLES)])
SHAPES = np.column_stack([np.ones(RAYS), RAY_DIRECTIONS, np.cos(2 * ANGLES), np.sin(2 * ANGLES)])
_STRONG = 4.0  # an edge is fully strong at so many times the ordinary slope
_ON_RING = 0.003  # an edge so near a ring lies on it
_NEAR = (-0.006, -0.003, 0.0, 0.003, 0.006)
_EVERY = 4  # rays used while searching


@dataclass(frozen=True, slots=True, eq=False)
class Frame:
    """Where rays start and how far they reach: position = centre + distance * matrix @ direction."""

    centre: Array
    matrix: Array

    @property
    def pixel(self) -> float:
        """One pixel as a distance along a ray."""
        return float(1.0 / np.sqrt(np.linalg.det(self.matrix)))

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
    """

    shape: Array
    seen: float
    strength: float
    scatter: float

    @property
    def size(self) -> float:
        """Mean distance from the frame's centre."""
        return float(self.shape[0])

    def distances(self) -> Array:
        """Distance on every ray."""
        return np.asarray(SHAPES @ self.shape)


@dataclass(frozen=True, slots=True, eq=False)
class EdgeMap:
    """Edges along the rays: the slope's local maxima as strengths 0..1, (RAYS, n)."""

    distances: Array
    strengths: Array

    @property
    def step(self) -> float:
        """Spacing of the distances."""
        return float(self.distances[1] - self.distances[0])

    def without(self, ring: Ring, *, width: float) -> EdgeMap:
        """Return the map with the edges near a ring taken out."""
        near = np.abs(self.distances - ring.distances()[:, None]) < width
        return EdgeMap(self.distances, np.where(near, 0, self.strengths))


def smoothed_round(rays: Array, sigma_rays: float) -> Array:
    """Smooth across rays; the last neighbours the first."""
    pad = int(4 * sigma_rays) + 1
    padded = np.concatenate([rays[-pad:], rays, rays[:pad]])
    smooth: Array = cv2.GaussianBlur(padded, (1, 2 * pad + 1), sigmaX=0.1, sigmaY=sigma_rays)
    return np.asarray(smooth[pad:-pad].reshape(rays.shape))


def slopes_along(rays: Array, *, sigma_rays: float, sigma_steps: float) -> Array:
    """Smooth, then take the slope along each ray, per channel."""
    smooth = smoothed_round(rays, sigma_rays)
    smooth = cv2.GaussianBlur(smooth, (0, 0), sigmaX=sigma_steps, sigmaY=0.01)
    smooth = np.asarray(smooth.reshape(rays.shape))
    slopes = np.zeros_like(smooth)
    slopes[:, 1:-1] = (smooth[:, 2:] - smooth[:, :-2]) / 2
    return slopes


def map_edges(
    rays: Array, distances: Array, *, calm: float, least_strong: float, main: float = 0.0
) -> EdgeMap:
    """Find the edges along sampled rays.

    Parameters
    ----------
    rays : ndarray of shape (RAYS, n, channels)
        Sampled values.
    distances : ndarray of shape (n,)
        Where along the rays.
    calm : float
        The ordinary slope is the median at distances below this.
    least_strong : float
        Slope per step below which no edge counts as fully strong, however calm the picture.
    main : float
        Share of the rays' strongest slope (their median) below which no edge counts as fully
        strong; 0 lets weak rings count as much as the main one.
    """
    size = np.abs(slopes_along(rays, sigma_rays=1.5, sigma_steps=1.0)).max(2)
    ordinary = float(np.median(size[:, distances < calm]))
    strongest = float(np.median(size.max(1)))
    strong = max(_STRONG * ordinary, least_strong, main * strongest)
    peak = np.zeros_like(size)
    middle = size[:, 1:-1]
    top = (middle >= size[:, :-2]) & (middle > size[:, 2:])
    peak[:, 1:-1][top] = middle[top]
    return EdgeMap(distances, np.minimum(peak / strong, 1.0))


def best_ring(
    edges: EdgeMap, *, shapes: Array, between: tuple[float, float]
) -> tuple[float, Array]:
    """Search for the ring with the strongest edges, first coarsely, then near the best.

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
    strength : float
        Mean strength over the rays.
    shape : ndarray of shape (5,)
    """
    _, coarse = _search(edges, shapes, between, reach=2)
    finer = coarse[1:] + np.array([(p, q, 0, 0) for p in _NEAR for q in _NEAR])
    s = float(coarse[0])
    return _search(edges, finer, (s - 0.012, s + 0.012), reach=1)


def _search(
    edges: EdgeMap, shapes: Array, between: tuple[float, float], *, reach: int
) -> tuple[float, Array]:
    """Best of some shapes; an edge may lie `reach` steps off the ring and still count."""
    rows = np.arange(0, RAYS, _EVERY)
    wide = cv2.dilate(edges.strengths[rows], np.ones((1, 2 * reach + 1), np.uint8))
    first, last = np.searchsorted(edges.distances, between)
    columns = np.arange(first, max(last, first + 1))
    bends = np.round(SHAPES[rows, 1:] @ shapes.T / edges.step).astype(int)
    best_strength, best_shape = -1.0, np.zeros(5)
    flat = wide.ravel()
    starts = rows[:, None] // _EVERY * wide.shape[1]
    for k in range(len(shapes)):
        at = (columns + bends[:, k : k + 1]).clip(0, wide.shape[1] - 1)
        strength = flat[starts + at].mean(0)
        i = int(strength.argmax())
        if strength[i] > best_strength:
            best_strength = float(strength[i])
            best_shape = np.array([edges.distances[columns[i]], *shapes[k]])
    return best_strength, best_shape


def fit_ring(edges: EdgeMap, start: Array, *, tolerances: tuple[float, ...]) -> Ring:
    """Fit a ring to the strongest edges near a start, ever nearer; stray edges lose their weight."""
    shape = np.asarray(start, dtype=np.float64)
    scatter, every_ray = 1.0, np.arange(RAYS)
    for tolerance in tolerances:
        off = np.abs(edges.distances - (SHAPES @ shape)[:, None]) / tolerance
        weight = np.where(off < 1, edges.strengths * (1 - 0.5 * off), 0)
        column = weight.argmax(1)
        weights = weight[every_ray, column]
        weights[weights < 0.15] = 0
        if (weights > 0).mean() < 0.3:
            break
        shape, scatter = robust_shape(edges.distances[column], weights, shape, edges.step)
    off = np.abs(edges.distances - (SHAPES @ shape)[:, None])
    strongest = np.where(off < max(_ON_RING, 1.3 * edges.step), edges.strengths, 0).max(1)
    return Ring(shape, float((strongest > 0.3).mean()), float(strongest.mean()), scatter)


def robust_shape(
    distances: Array, weights: Array, start: Array, least_scatter: float
) -> tuple[Array, float]:
    """Fit a shape to one distance per ray by reweighted least squares; return it with the scatter."""
    shape, scatter = start, 0.0
    used = weights > 0
    for _ in range(6):
        off = distances - SHAPES @ shape
        scatter = 1.4826 * float(np.median(np.abs(off[used])))
        width = max(scatter, 0.3 * least_scatter)
        root = np.sqrt(weights) / (1 + (off / (2 * width)) ** 2)
        shape = np.linalg.lstsq(SHAPES * root[:, None], distances * root, rcond=None)[0]
    return shape, scatter
