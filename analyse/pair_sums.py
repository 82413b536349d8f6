"""The sum of 1 / set covariance over the pairs in each class of distance, as fast as can be.

Two ways to the same sums. `DirectPairs` measures every pair; `BinnedPairs` measures near pairs one
by one, and all others from the counts in a fine grid by Fourier transform.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import fft, sparse
from scipy.spatial import cKDTree
from shapely.geometry.base import BaseGeometry

from analyse.pair_bins import PairBins
from analyse.pair_distances import near_pairs
from analyse.set_covariance import (
    DiscCovariance,
    MaskCovariance,
    SetCovariance,
)

Floats = NDArray[np.float64]
Floats32 = NDArray[np.float32]

_ROWS = 64  # points compared at once with those to their right
_BELOW = np.tri(_ROWS, dtype=bool)
_NEAR = 1.4  # mean spacings 1 / sqrt(density) up to which pairs are measured one by one
_FINE = 12  # cells of the grid in that distance
_COARSE = 4  # cells in that distance at least, where the grid may be no finer
_CROWDED = 40_000_000  # pairs, roughly, from which near ones are counted rather than listed
_DIRECTIONS = 32
_MOST_CELLS = 2048**2
# The difference of two uniform places in their cells has variance 1/6 along any direction; so has
# the biweight kernel of this half width.
_SPREAD = math.sqrt(7 / 6)


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Weights:
    """1 / set covariance of single steps, in single precision where that is faster.

    Examples
    --------
    >>> from analyse.set_covariance import RectangleCovariance
    >>> weights = Weights.of(RectangleCovariance(10.0, 10.0), 2.5)
    >>> step = np.array([2.0], np.float32), np.array([0.0], np.float32)
    >>> weights.weigh(*weights.kept(*step)).round(4).item()
    0.012500000186264515
    """

    covariance: SetCovariance
    table: Floats32
    table_cell: float
    half: int

    @classmethod
    def of(cls, covariance: SetCovariance, reach: float) -> Weights:
        """Prepare the weights of steps up to a distance."""
        if not isinstance(covariance, MaskCovariance):
            return cls(covariance, np.zeros((0, 0), np.float32), 1.0, 0)
        half = math.ceil(reach / covariance.cell) + 1
        steps = covariance.cell * np.arange(-half, half + 1, dtype=np.float64)
        shared = covariance.at(*np.meshgrid(steps, steps))
        table = (1 / np.maximum(shared, shared.max() * 1e-6)).astype(np.float32)
        table.setflags(write=False)
        return cls(covariance, table, covariance.cell, half)

    def kept(self, dx: Floats32, dy: Floats32) -> tuple[Floats32, ...]:
        """Return what must be kept of steps so that they can be weighed; may write over them."""
        if isinstance(self.covariance, DiscCovariance):
            return ()  # weighed by the class of their length
        if isinstance(self.covariance, MaskCovariance):
            return dx, dy
        np.abs(dx, out=dx)
        np.abs(dy, out=dy)
        np.subtract(np.float32(self.covariance.width), dx, out=dx)
        np.subtract(np.float32(self.covariance.height), dy, out=dy)
        dx *= dy
        return (dx,)

    def weigh(self, *kept: Floats32) -> Floats32:
        """Return the weight of steps from what was kept of them."""
        if len(kept) == 1:
            return np.asarray(1 / kept[0])
        scale = np.float32(1 / self.table_cell)
        middle = np.float32(self.half + 0.5)
        column, row = ((step * scale + middle).astype(np.int32) for step in kept)
        return np.asarray(self.table.ravel().take(row * self.table.shape[1] + column))


@dataclass(frozen=True, slots=True, eq=False)
class DirectPairs:
    """Every pair measured.

    Examples
    --------
    >>> import shapely
    >>> from analyse.set_covariance import RectangleCovariance
    >>> area = shapely.box(0, 0, 10, 10)
    >>> bins = PairBins.of(0.1, 2.5, 0.3, count=50, g_count=20)
    >>> DirectPairs.of(area, RectangleCovariance(10.0, 10.0), bins)
    DirectPairs(PairBins(133 classes up to 2.881))
    """

    bins: PairBins
    weights: Weights
    by_class: Floats | None  # weight of a class where it depends on the distance alone
    middle: Floats

    @classmethod
    def of(cls, area: BaseGeometry, covariance: SetCovariance, bins: PairBins) -> DirectPairs:
        """Prepare the pairs of one area."""
        x0, y0, x1, y1 = area.bounds
        by_class = None
        if isinstance(covariance, DiscCovariance):
            by_class = 1 / covariance.along(bins.middles)
        middle = np.array([(x0 + x1) / 2, (y0 + y1) / 2])
        return cls(bins, Weights.of(covariance, bins.reach), by_class, middle)

    def __repr__(self) -> str:
        return f"DirectPairs({self.bins!r})"

    def sums(self, points: Floats) -> Floats:
        """Return the sum over the unordered pairs in each class."""
        xy = (points - self.middle).astype(np.float32)
        xy = xy[np.argsort(xy[:, 0])]
        x, y = np.ascontiguousarray(xy[:, 0]), np.ascontiguousarray(xy[:, 1])
        until = np.searchsorted(x, x + np.float32(self.bins.reach), "right")
        starts = np.arange(0, len(x), _ROWS)
        ends = np.minimum(starts + _ROWS, len(x))
        widest = int((until[ends - 1] - starts).max())
        room = np.empty((3, _ROWS * widest), np.float32)  # stays in the processor's own memory
        sums = np.zeros(len(self.bins))
        for start, end in zip(starts.tolist(), ends.tolist(), strict=True):
            squared, *kept = self._strip(
                x, y, slice(start, end), slice(start, until[end - 1]), room
            )
            number = self.bins.number(np.sqrt(squared, out=squared))
            weight = self.weights.weigh(*kept) if kept else None
            sums += np.bincount(number, weight, len(sums))[: len(sums)]
        return sums if self.by_class is None else sums * self.by_class

    def _strip(
        self, x: Floats32, y: Floats32, rows: slice, right: slice, room: Floats32
    ) -> list[Floats32]:
        """Return the squared length of steps from some points to those at their right, and more.

        Whole blocks are worked on in place, as picking pairs out costs more than arithmetic.
        """
        shape = (rows.stop - rows.start, right.stop - right.start)
        across, along, squared = (part[: shape[0] * shape[1]].reshape(shape) for part in room)
        np.subtract(y[right], y[rows, None], out=along)
        np.multiply(along, along, out=across)
        np.subtract(x[right], x[rows, None], out=squared)
        squared *= squared
        squared += across
        np.subtract(x[right], x[rows, None], out=across)
        own = shape[0]
        squared[:, :own][_BELOW[:own, :own]] = np.inf  # each pair once, none with itself
        near = np.flatnonzero(squared < np.float32(self.bins.reach) ** 2)
        return [part.ravel().take(near) for part in (squared, *self.weights.kept(across, along))]


@dataclass(frozen=True, slots=True, eq=False)
class BinnedPairs:
    """Near pairs measured, far ones from counts in a grid of fine cells.

    Notes
    -----
    The number of pairs at every step between cells is the autocorrelation of the counts, which a
    Fourier transform gives for all steps at once. Two points in cells apart by a step are apart
    by that step give or take the places within their cells; each step's pairs are spread over the
    classes as such pairs would be at random, so no distance is favoured.

    Examples
    --------
    >>> import shapely
    >>> from analyse.set_covariance import RectangleCovariance
    >>> area = shapely.box(0, 0, 10, 10)
    >>> bins = PairBins.of(0.1, 2.5, 0.3, count=50, g_count=20)
    >>> BinnedPairs.of(area, RectangleCovariance(10.0, 10.0), bins, 3000)
    BinnedPairs(PairBins(133 classes up to 2.881), 463 x 463 cells)
    """

    bins: PairBins
    covariance: SetCovariance
    corner: tuple[float, float]
    cell: float
    shape: tuple[int, int]
    padded: tuple[int, int]
    near: int  # classes below this are measured
    steps: NDArray[np.intp]  # places of the steps wanted in the autocorrelation
    spread: sparse.csr_array

    @classmethod
    def of(
        cls, area: BaseGeometry, covariance: SetCovariance, bins: PairBins, n: int
    ) -> BinnedPairs:
        """Prepare the pairs of n points in one area."""
        x0, y0, x1, y1 = area.bounds
        spacing = math.sqrt(area.area / n)
        finest = math.sqrt((x1 - x0) * (y1 - y0) / _MOST_CELLS)
        near = int(np.searchsorted(bins.edges, max(_NEAR * spacing, _COARSE * finest)))
        near = min(near, len(bins))
        cell = max(bins.edges[near] / _FINE, finest)
        shape = (math.ceil((y1 - y0) / cell) + 1, math.ceil((x1 - x0) / cell) + 1)
        most = math.ceil(bins.reach / cell) + 1
        padded = tuple(fft.next_fast_len(size + most, real=True) for size in shape)
        steps, spread = _spread(covariance, bins, cell, most, (padded[0], padded[1]), near)
        return cls(
            bins, covariance, (x0, y0), cell, shape, (padded[0], padded[1]), near, steps, spread
        )

    def __repr__(self) -> str:
        return f"BinnedPairs({self.bins!r}, {self.shape[0]} x {self.shape[1]} cells)"

    def sums(self, points: Floats) -> Floats:
        """Return the sum over the unordered pairs in each class."""
        cells = ((points - self.corner) / self.cell).astype(np.intp)
        place = cells[:, 1] * self.shape[1] + cells[:, 0]
        counts = np.bincount(place, minlength=self.shape[0] * self.shape[1])
        spectrum = fft.rfft2(counts.reshape(self.shape).astype(np.float32), s=self.padded)
        spectrum.real = spectrum.real**2 + spectrum.imag**2
        spectrum.imag = 0.0
        pairs = fft.irfft2(spectrum, s=self.padded).ravel().take(self.steps)
        sums = np.asarray(self.spread @ pairs.astype(np.float64))
        crowd = np.bincount((cells[:, 1] // _FINE) * self.shape[1] + cells[:, 0] // _FINE)
        crowded = float(crowd @ crowd) > _CROWDED
        sums[: self.near] = self.counted(points) if crowded else self.measured(points)
        return sums

    def measured(self, points: Floats) -> Floats:
        """Return the sums of the classes of near pairs, each weighed by itself."""
        reach = float(self.bins.edges[self.near])
        sums = np.zeros(self.near)
        for i, j in near_pairs(points, reach):
            dx, dy = (points[j] - points[i]).T
            number = np.minimum(self.bins.number(np.hypot(dx, dy)), self.near - 1)
            sums += np.bincount(number, 1 / self.covariance.at(dx, dy), self.near)
        return sums

    def counted(self, points: Floats) -> Floats:
        """Return the same where very many points crowd, weighed by the mean over directions.

        Pairs are counted by whole branches of a tree, in a time that their number hardly sets.
        """
        tree = cKDTree(points)
        up_to = tree.count_neighbors(tree, self.bins.edges[1 : self.near + 1])
        pairs = np.diff(np.concatenate([[len(points)], np.asarray(up_to)])) / 2
        angle = np.pi * (np.arange(_DIRECTIONS) + 0.5) / _DIRECTIONS
        apart = self.bins.middles[: self.near]
        shared = self.covariance.at(np.outer(np.cos(angle), apart), np.outer(np.sin(angle), apart))
        return np.asarray(pairs * (1 / shared).mean(axis=0))


def _spread(
    covariance: SetCovariance,
    bins: PairBins,
    cell: float,
    most: int,
    padded: tuple[int, int],
    near: int,
) -> tuple[NDArray[np.intp], sparse.csr_array]:
    """Return where the wanted steps lie, and the matrix (bins, steps) of their weight in each class.

    The share of each step in the classes is scaled so that together they fill every ring exactly.
    """
    across, down = np.meshgrid(np.arange(-most, most + 1), np.arange(most + 1))
    apart = np.hypot(across, down) * cell
    half = (down > 0) | (across > 0)
    wanted = half & (apart < bins.reach + 2 * cell) & (apart > bins.edges[near] - 2 * cell)
    ix, iy, apart = across[wanted], down[wanted], apart[wanted]
    mean = apart + cell**2 / (12 * apart)  # of the distance, as places within cells vary
    reach = _SPREAD * cell
    first = np.maximum(bins.number(np.maximum(mean - reach, 0.0)), near)
    last = np.minimum(bins.number(mean + reach), len(bins) - 1)
    many = np.maximum(last - first + 1, 0)
    step = np.repeat(np.arange(ix.size), many)
    number = np.arange(step.size) - np.repeat(np.cumsum(many) - many - first, many)
    below, above = ((bins.edges[number + k] - mean[step]) / reach for k in (0, 1))
    share = _biweight(above) - _biweight(below)
    filled = np.bincount(number, share, len(bins))
    ring = math.pi * np.diff(bins.edges**2) / (2 * cell**2)
    scale = np.divide(ring, filled, out=np.zeros(len(bins)), where=filled > 0)
    weight = share * scale[number] / covariance.at(ix * cell, iy * cell)[step]
    spread = sparse.csr_array((weight, (number, step)), shape=(len(bins), ix.size))
    return np.asarray((iy % padded[0]) * padded[1] + ix % padded[1], dtype=np.intp), spread


def _biweight(t: Floats) -> Floats:
    """Return the distribution function of the biweight kernel on -1..1."""
    u = np.clip(t, -1.0, 1.0)
    return np.asarray(0.5 + 15 / 16 * (u - 2 * u**3 / 3 + u**5 / 5))


PairSums = DirectPairs | BinnedPairs
