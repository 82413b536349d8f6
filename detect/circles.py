"""Where a large circle lies in a photograph, roughly: the first step towards a dish.

Every edge point votes for the centres that lie on its normal, on both sides of the edge, so dark,
light and alternating rims count alike.

References
----------
D. H. Ballard, "Generalizing the Hough transform to detect arbitrary shapes",
Pattern Recognition 13 (1981) 111-122: votes directed by the gradient.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.photograph import Photograph

Array = NDArray[Any]

LONGEST_SIDE = 560
SMALLEST_RADIUS, LARGEST_RADIUS = 0.15, 0.54  # of the shorter side
_CELL = 4  # pixels of the shrunk picture per cell of the votes
_VOTERS, _FEW = 5000, 7000  # edges used for votes, and for a closer look
_CLEAR_OF = 1.25  # radii from a circle, beyond which edges belong to something else
_CANDIDATES = 4
_SECTORS = 36
_FULL_WEIGHT = 70  # percentile of the edges' strengths
_DIM = 16_384  # of 65,535
_BIN = 3.0  # pixels of radius


@dataclass(frozen=True, slots=True)
class RoughCircle:
    """A circle in pixels of the photograph, and how much of its line was seen as an edge."""

    cx: float
    cy: float
    radius: float
    seen: float


@dataclass(frozen=True, slots=True, eq=False)
class _Edges:
    """Thin edges: positions, unit normals, and weights 0..1 by strength."""

    x: Array
    y: Array
    nx: Array
    ny: Array
    weight: Array

    def where(self, chosen: Array | slice) -> _Edges:
        """Return some of the edges."""
        return _Edges(*(getattr(self, entry.name)[chosen] for entry in fields(self)))

    def thinned(self, most: int) -> _Edges:
        """Return about so many of the edges at most, each counting for those left out."""
        every = max(1, -(-self.x.size // most))
        few = self.where(slice(None, None, every))
        return replace(few, weight=few.weight * every)

    def plain(self) -> _Edges:
        """Return the edges with equal weights of 1."""
        return replace(self, weight=np.ones(self.x.size))


def shrunk(photograph: Photograph, longest_side: int) -> tuple[Array, float]:
    """Return the picture as uint8 with its longest side at most so long, and the factor.

    Of 16 bits that are hardly used (a 12-bit camera's), the used part is stretched.
    """
    factor = min(1.0, longest_side / max(photograph.width, photograph.height))
    array: Array = photograph.reduced(shrink=factor, quick=True)
    if array.dtype == np.uint16:
        top = float(np.percentile(array[::7, ::7], 99.9))
        gain = 1.0 if top > _DIM else 60_000 / max(top, 1.0)
        array = np.clip(array * (gain / 257) + 0.5, 0, 255).astype(np.uint8)
    return array, array.shape[1] / photograph.width


def find_circle(picture: Array, factor: float, *, beside: RoughCircle | None = None) -> RoughCircle:
    """Return the circle whose line is best seen; of several about as well seen, the largest.

    Parameters
    ----------
    picture : ndarray of shape (rows, columns, 3), uint8
        The photograph made `factor` times as large.
    factor : float
    beside : RoughCircle or None
        A circle whose own edges, and those within it, are left out.

    Returns
    -------
    RoughCircle
        In pixels of the photograph.
    """
    shrink = min(1.0, LONGEST_SIDE / max(picture.shape[:2]))
    small, factor = picture, factor * shrink
    if shrink < 1.0:
        size = (round(picture.shape[1] * shrink), round(picture.shape[0] * shrink))
        small = cv2.resize(picture, size, interpolation=cv2.INTER_AREA)
    edges = _thin_edges(small)
    if beside is not None:
        x, y = (edges.x + 0.5) / factor - 0.5, (edges.y + 0.5) / factor - 0.5
        edges = edges.where(np.hypot(x - beside.cx, y - beside.cy) > _CLEAR_OF * beside.radius)
    shorter = min(small.shape[:2])
    centres = _likely_centres(edges, small.shape[:2])
    few = edges.thinned(_FEW)
    found = [_best_around(few, centre, shorter) for centre in centres]
    enough = 0.85 * max(f[0] for f in found)
    _, cx, cy, radius = max((f for f in found if f[0] >= enough), key=lambda f: f[3])
    shares, radii = _seen_shares(edges.plain(), cx, cy, shorter)
    seen = float(shares[np.abs(radii - radius) < 1.5 * _BIN].max())
    return RoughCircle((cx + 0.5) / factor - 0.5, (cy + 0.5) / factor - 0.5, radius / factor, seen)


def _thin_edges(small: Array) -> _Edges:
    """Edges one pixel wide, in whichever channel they are strongest."""
    smooth = cv2.GaussianBlur(small.astype(np.float32), (0, 0), 1.3)
    gx3 = cv2.Sobel(smooth, cv2.CV_32F, 1, 0, ksize=3) / 8
    gy3 = cv2.Sobel(smooth, cv2.CV_32F, 0, 1, ksize=3) / 8
    strongest = (gx3 * gx3 + gy3 * gy3).argmax(2)[..., None]
    gx = np.take_along_axis(gx3, strongest, 2)[..., 0]
    gy = np.take_along_axis(gy3, strongest, 2)[..., 0]
    size = np.hypot(gx, gy)
    keep = size[1:-1, 1:-1] > max(2.0 * float(np.median(size)), 0.6)
    rows, columns = np.nonzero(keep)
    rows, columns = rows + 1, columns + 1
    here = size[rows, columns]
    # The neighbour nearest to the normal's direction on either side must not be stronger.
    step_x = np.round(gx[rows, columns] / (here * 0.9239)).astype(int).clip(-1, 1)
    step_y = np.round(gy[rows, columns] / (here * 0.9239)).astype(int).clip(-1, 1)
    thin = here >= size[rows + step_y, columns + step_x]
    thin &= here > size[rows - step_y, columns - step_x]
    rows, columns, here = rows[thin], columns[thin], here[thin]
    weight = np.minimum(here / (np.percentile(here, _FULL_WEIGHT) if here.size else 1.0), 1.0)
    return _Edges(columns, rows, gx[rows, columns] / here, gy[rows, columns] / here, weight)


def _likely_centres(edges: _Edges, shape: tuple[int, ...]) -> list[tuple[float, float]]:
    """Places with the most votes above those around them, best first."""
    shorter = min(shape)
    radii = np.arange(SMALLEST_RADIUS * shorter, LARGEST_RADIUS * shorter, _CELL)
    rows, columns = shape[0] // _CELL + 1, shape[1] // _CELL + 1
    votes = np.zeros(rows * columns)
    every = max(1, edges.x.size // _VOTERS)
    x, y, nx, ny = (a[::every, None] for a in (edges.x, edges.y, edges.nx, edges.ny))
    for side in (-radii, radii):
        column = ((x + nx * side) / _CELL).astype(np.int32)
        row = ((y + ny * side) / _CELL).astype(np.int32)
        inside = (column >= 0) & (row >= 0) & (column < columns) & (row < rows)
        votes += np.bincount((row * columns + column)[inside], minlength=votes.size)
    grid = votes.reshape(rows, columns).astype(np.float32)
    around = cv2.GaussianBlur(grid, (0, 0), 8)
    score = (cv2.GaussianBlur(grid, (0, 0), 1.5) - around) / np.sqrt(around + 1)
    centres = []
    for _ in range(_CANDIDATES):
        row, column = divmod(int(score.argmax()), columns)
        centres.append(((column + 0.5) * _CELL, (row + 0.5) * _CELL))
        cv2.circle(score, (column, row), 5, -1e9, -1)
    return centres


def _best_around(
    edges: _Edges, centre: tuple[float, float], shorter: int
) -> tuple[float, float, float, float]:
    """Weighted share of the line seen, centre and radius of the best circle near a likely centre."""
    best = (-1.0, *centre, 0.0)
    for step in (8, 4, 2):
        _, cx, cy, _ = best
        for dx in (-step, 0, step):
            for dy in (-step, 0, step):
                shares, radii = _seen_shares(edges, cx + dx, cy + dy, shorter)
                i = int(shares.argmax())
                best = max(best, (float(shares[i]), cx + dx, cy + dy, float(radii[i])))
    return best


def _seen_shares(edges: _Edges, cx: float, cy: float, shorter: int) -> tuple[Array, Array]:
    """Share of the line that is an edge, for circles of many radii about one centre.

    Only edges that face the centre count, and in each sector at most as many as fill it.
    """
    dx, dy = edges.x - cx, edges.y - cy
    distance = np.hypot(dx, dy) + 1e-6
    facing = np.abs(dx * edges.nx + dy * edges.ny) > 0.97 * distance
    facing &= (distance > SMALLEST_RADIUS * shorter) & (distance < LARGEST_RADIUS * shorter)
    dx, dy, distance = dx[facing], dy[facing], distance[facing]
    n_bins = int(LARGEST_RADIUS * shorter / _BIN) + 2
    sector = ((np.arctan2(dy, dx) / (2 * np.pi) + 0.5) * _SECTORS).astype(int) % _SECTORS
    cell = sector * n_bins + (distance / _BIN).astype(int)
    seen = np.bincount(cell, edges.weight[facing], minlength=_SECTORS * n_bins)
    seen = seen.reshape(_SECTORS, n_bins)
    seen[:, 1:] += seen[:, :-1].copy()
    radii = np.arange(n_bins) * _BIN
    full = np.maximum(2 * np.pi * radii / _SECTORS, 1.0)
    return np.minimum(seen / full, 1.0).mean(0), radii
