"""Fine classes of distance, and what is read from the pairs in them: K and the pair correlation."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

_PARTS = 2  # classes between two distances at which K is wanted


@dataclass(frozen=True, slots=True, eq=False)
class PairBins:
    """Classes of distance whose bounds lie evenly on the scale of the square root.

    Parameters
    ----------
    k_at : ndarray of shape (k,)
        Distances at which K is wanted; bounds of classes.
    g_at : ndarray of shape (m,)
        Distances at which the pair correlation is wanted.
    widths : ndarray of shape (m,)
        Half width of the kernel at each.
    edges : ndarray of shape (bins + 1,)
        Class q holds distances above ``edges[q]`` up to and with ``edges[q + 1]``; the first also
        holds distance 0.
    slope, offset : float
        The class of distance d is ceil(slope sqrt(d) + offset), at least 0.

    Examples
    --------
    >>> PairBins.of(0.1, 2.5, 0.3, count=50, g_count=20)
    PairBins(133 classes up to 2.881)
    """

    k_at: Floats
    g_at: Floats
    widths: Floats
    edges: Floats
    slope: float
    offset: float

    def __post_init__(self) -> None:
        for column in (self.k_at, self.g_at, self.widths, self.edges):
            column.setflags(write=False)

    def __repr__(self) -> str:
        return f"PairBins({len(self.edges) - 1} classes up to {self.reach:.4g})"

    @classmethod
    def of(
        cls, shortest: float, longest: float, bandwidth: float, *, count: int, g_count: int
    ) -> PairBins:
        """Return classes for `count` distances of K and `g_count` of the pair correlation.

        Notes
        -----
        The distances are squares of evenly spaced numbers, so they lie closer where they are
        short. The kernel of the pair correlation is as wide as `bandwidth`, and wider where the
        distances lie farther apart than that, so that every pair has its say.
        """
        root, end = math.sqrt(shortest), math.sqrt(longest)
        step = (end - root) / (count - 1)
        k_at = np.asarray((root + step * np.arange(count)) ** 2, dtype=np.float64)
        g_from = math.sqrt(max(bandwidth, shortest))
        g_at = np.linspace(g_from, end, g_count) ** 2
        widths = np.maximum(bandwidth, np.gradient(g_at) / 2)
        widths = np.asarray(np.minimum(widths, g_at), dtype=np.float64)
        slope = _PARTS / step
        below = math.ceil(root * slope)
        above = math.ceil((math.sqrt(longest + widths[-1]) - end) * slope) + 1
        number = np.arange(-below, (count - 1) * _PARTS + above + 1)
        edges = np.maximum(root + number / slope, 0.0) ** 2
        return cls(k_at, g_at, widths, np.concatenate([[0.0], edges]), slope, below - root * slope)

    @property
    def reach(self) -> float:
        """The longest distance that has a class."""
        return float(self.edges[-1])

    @property
    def middles(self) -> Floats:
        """The distance that halves the ring of each class."""
        return np.asarray(np.sqrt((self.edges[:-1] ** 2 + self.edges[1:] ** 2) / 2))

    def __len__(self) -> int:
        return len(self.edges) - 1

    def number(self, distance: Floats) -> NDArray[np.intp]:
        """Return the class of each distance up to `reach`; beyond it the numbers run on."""
        scaled = np.sqrt(distance)
        scaled *= self.slope
        scaled += self.offset
        return np.ceil(scaled, out=scaled).astype(np.intp)

    def up_to(self, sums: Floats) -> Floats:
        """Return the sum over all classes up to each distance of `k_at`, of sums by class."""
        last = np.rint(np.sqrt(self.k_at) * self.slope + self.offset).astype(np.intp)
        return np.asarray(np.cumsum(sums)[last])

    def smoothed(self) -> Floats:
        """Return the matrix (m, bins) of the mean of the Epanechnikov kernel over each class."""
        scaled = (self.edges - self.g_at[:, None]) / self.widths[:, None]
        inside = np.clip(scaled, -1.0, 1.0)
        below = 0.75 * (inside - inside**3 / 3)
        spans = np.diff(self.edges)
        return np.diff(below, axis=1) / np.where(spans > 0, spans, 1.0)
