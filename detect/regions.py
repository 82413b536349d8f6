"""What a region of the contrast map looks like: place, size, shape, edge."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from detect.contrast import Map

Labels = NDArray[np.int32]
Column = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Candidates:
    """Regions that may be objects, as columns of one length, in pixels of the contrast map.

    Parameters
    ----------
    x, y : ndarray of shape (n,)
        Centroids.
    area : ndarray of shape (n,)
        Pixels, holes filled.
    sxx, syy, sxy : ndarray of shape (n,)
        Central second moments.
    contrast : ndarray of shape (n,)
        Mean contrast inside.
    step : ndarray of shape (n,)
        Mean contrast inside less that just outside the open part of the boundary.
    open : ndarray of shape (n,)
        Share of the boundary beyond which contrast falls below half of that inside.
    slope : ndarray of shape (n,)
        Fall of contrast across the boundary, as a share of the mean contrast.
    rough : ndarray of shape (n,)
        Spread of the boundary about the ellipse of equal second moments, as a share of its size.
    texture : ndarray of shape (n,)
        Standard deviation of contrast inside, as a share of its mean.
    neck : ndarray of shape (n,)
        Width of the neck to the nearest kin over the region's own width; 0 for whole regions.
    height : ndarray of shape (n,)
        Level at which the region was cut, as a share of the mean contrast inside; a half for
        regions cut out against their surroundings.
    frame : ndarray of shape (n,)
        Share of the boundary that lies on the edge of the map: the region goes on beyond.
    local : ndarray of shape (n,)
        1 where the region was cut out against its surroundings, 0 where at a level.
    """

    x: Column
    y: Column
    area: Column
    sxx: Column
    syy: Column
    sxy: Column
    contrast: Column
    step: Column
    open: Column
    slope: Column
    rough: Column
    texture: Column
    neck: Column
    height: Column
    frame: Column
    local: Column

    def __len__(self) -> int:
        return int(self.x.size)

    @property
    def diameter(self) -> Column:
        """Diameter of the circle of equal area."""
        return np.asarray(2.0 * np.sqrt(self.area / np.pi))

    @property
    def fill(self) -> Column:
        """Area over that of the ellipse of equal second moments (1 for any filled ellipse)."""
        determinant = np.maximum(self.sxx * self.syy - self.sxy**2, 1e-9)
        return np.asarray(self.area / (4.0 * np.pi * np.sqrt(determinant)))

    @property
    def elongation(self) -> Column:
        """Long axis over short axis of the ellipse of equal second moments."""
        half = 0.5 * (self.sxx + self.syy)
        root = np.sqrt(np.maximum((0.5 * (self.sxx - self.syy)) ** 2 + self.sxy**2, 0.0))
        return np.asarray(np.sqrt((half + root) / np.maximum(half - root, 1e-9)))

    def where(self, chosen: NDArray[np.bool_] | NDArray[np.intp]) -> Candidates:
        """Return the chosen rows."""
        return Candidates(*(getattr(self, field.name)[chosen] for field in fields(self)))


def join(parts: list[Candidates]) -> Candidates:
    """Put tables of candidates below one another."""
    if not parts:
        return Candidates(*([np.zeros(0)] * len(fields(Candidates))))
    return Candidates(
        *(
            np.concatenate([getattr(part, field.name) for part in parts])
            for field in fields(parts[0])
        )
    )


def measure_regions(
    labels: Labels,
    count: int,
    contrast: Map,
    *,
    neck: Column,
    level: float | None,
    smallest_px: float,
    largest_px: float,
) -> Candidates:
    """Measure every region of a label map, by sums over its pixels.

    Parameters
    ----------
    labels : ndarray of shape (height, width), int32
        0 for ground, 1..count - 1 for regions.
    count : int
        One more than the highest label.
    contrast : ndarray of shape (height, width), float32
        The signed contrast map.
    neck : ndarray of shape (count,)
        Width of each label's neck over its own width.
    level : float or None
        Level at which the regions were cut; None where they were cut out against their
        surroundings.
    smallest_px, largest_px : float
        Regions under half the smallest or over 1.7 times the largest diameter are left out.

    Returns
    -------
    Candidates
        What the edge of the map cuts off has no say in the measures of the boundary.
    """
    width = labels.shape[1]
    at = np.flatnonzero(labels)
    label = labels.ravel()[at]
    y, x = np.divmod(at, width)
    value = contrast.ravel()[at].astype(np.float64)
    area = np.bincount(label, minlength=count).astype(np.float64)
    n = np.maximum(area, 1.0)
    mx, my = (np.bincount(label, v, count) / n for v in (x, y))
    dx, dy = x - mx[label], y - my[label]
    sxx, syy, sxy = (np.bincount(label, v, count) / n for v in (dx * dx, dy * dy, dx * dy))
    mean = np.bincount(label, value, count) / n
    square = np.bincount(label, value * value, count) / n
    texture = np.sqrt(np.maximum(square - mean**2, 0.0)) / np.maximum(np.abs(mean), 1e-6)
    diameter = 2.0 * np.sqrt(area / np.pi)
    sxx, syy = sxx + 1 / 12, syy + 1 / 12
    edge = _boundary(labels, label, x, y)
    free, frame = _off_the_frame(edge, labels, count)
    outside = _outside(free, mx, my, diameter, mean, sxx, syy, sxy, contrast, count)
    height = np.full(count, 0.5) if level is None else level / np.maximum(mean, 1e-6)
    local = np.full(count, float(level is None))
    keep = (diameter >= 0.5 * smallest_px) & (diameter <= 1.7 * largest_px) & (area > 0)
    columns = (mx, my, area, sxx, syy, sxy, mean, *outside, texture, neck, height, frame, local)
    return Candidates(*(column[keep] for column in columns))


def _boundary(
    labels: Labels, label: Labels, x: NDArray[np.intp], y: NDArray[np.intp]
) -> tuple[Labels, Column, Column]:
    """Label, x and y of the pixels with a 4-neighbour of another label (or the picture's edge)."""
    padded = np.pad(labels, 1)
    flat = padded.ravel()
    w = padded.shape[1]
    here = (y + 1) * w + x + 1
    edge = np.zeros(label.size, dtype=bool)
    for shift in (1, -1, w, -w):
        edge |= flat[here + shift] != label
    return label[edge], x[edge].astype(np.float64), y[edge].astype(np.float64)


def _off_the_frame(
    edge: tuple[Labels, Column, Column], labels: Labels, count: int
) -> tuple[tuple[Labels, Column, Column], Column]:
    """Boundary off the edge of the map, and the share of each label's boundary that is on it."""
    label, x, y = edge
    rows, columns = labels.shape
    on = (x == 0) | (y == 0) | (x == columns - 1) | (y == rows - 1)
    share = np.bincount(label, on, count) / np.maximum(np.bincount(label, minlength=count), 1)
    return (label[~on], x[~on], y[~on]), share


def _outside(
    edge: tuple[Labels, Column, Column],
    mx: Column,
    my: Column,
    diameter: Column,
    mean: Column,
    sxx: Column,
    syy: Column,
    sxy: Column,
    contrast: Map,
    count: int,
) -> tuple[Column, Column, Column, Column]:
    """Contrast step, open share, slope and roughness, from samples along rays over the boundary."""
    label, x, y = edge
    dx, dy = x - mx[label], y - my[label]
    length = np.maximum(np.hypot(dx, dy), 1e-6)
    reach = 0.18 * diameter[label]
    beyond = _sample(contrast, x + dx / length * reach, y + dy / length * reach)
    within = _sample(contrast, x - dx / length * reach * 0.6, y - dy / length * reach * 0.6)
    n = np.maximum(np.bincount(label, minlength=count), 1)
    is_open = beyond < 0.5 * mean[label]
    n_open = np.bincount(label, is_open, count)
    out_open = np.bincount(label, beyond * is_open, count) / np.maximum(n_open, 1)
    step = mean - np.where(n_open > 0, out_open, mean)
    slope = np.bincount(label, within - beyond, count) / n / np.maximum(mean, 1e-6)
    determinant = np.maximum(sxx * syy - sxy**2, 1e-9)[label]
    radius2 = (syy[label] * dx**2 - 2 * sxy[label] * dx * dy + sxx[label] * dy**2) / determinant
    ratio = np.sqrt(np.maximum(radius2, 0.0)) / 2.0
    mean_ratio = np.bincount(label, ratio, count) / n
    square = np.bincount(label, ratio**2, count) / n
    rough = np.sqrt(np.maximum(square - mean_ratio**2, 0.0))
    return step, n_open / n, slope, rough


def _sample(contrast: Map, x: Column, y: Column) -> Column:
    """Nearest pixel's contrast, the picture's edge repeated."""
    column = np.clip(np.rint(x), 0, contrast.shape[1] - 1).astype(np.intp)
    row = np.clip(np.rint(y), 0, contrast.shape[0] - 1).astype(np.intp)
    return contrast[row, column].astype(np.float64)
