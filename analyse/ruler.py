"""All curves over distance of one pattern after another in the same area, as fast as can be."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import cKDTree
from shapely.geometry.base import BaseGeometry

from analyse.boundary import Boundary
from analyse.hopkins_skellam import against_neighbours
from analyse.nulls import random_points
from analyse.pair_bins import PairBins
from analyse.pair_sums import BinnedPairs, DirectPairs, PairSums
from analyse.second_order import BANDWIDTH
from analyse.set_covariance import longest_useful, set_covariance

Floats = NDArray[np.float64]
PairWay = Literal["direct", "binned"]

CURVES = ("l_function", "pair_correlation", "nearest_neighbour", "empty_space")
SCALARS = ("mean_nearest", "hopkins_skellam")

_MOST_DIRECT = 1_500  # points up to which all pairs are measured; see DEVELOPERS.md
_DISTANCES = 300  # of K: many cost nothing, and tell more closely where a pattern departs
_SMOOTHED = 50  # of the pair correlation, whose kernel is wider than their steps
_NEAREST = 40  # of the nearest-neighbour and empty-space functions
_QUARTER = 0.25  # of sqrt(A): the longest distance
_LEFT = 0.25  # of the area that a step, or a strip along the edge, must leave
_TAIL = 0.005  # of the nearest distances at random that lie beyond the longest looked at
_TEST_POINTS = (1_000, 10_000)  # fewest, most
_TEST_SEED = 20_000  # of the test points, so that they are the same every time


@dataclass(frozen=True, slots=True, eq=False)
class Ruler:
    """Distances, tables and test points for patterns of n points in one area.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        Study area.
    n : int
        Points for which the distances were chosen.
    x : mapping of str to ndarray
        The distances of each curve of `CURVES`, in the unit of the area, increasing.
    pairs : DirectPairs or BinnedPairs
        How pairs are measured.
    boundary : Boundary
        Edge of the area.
    test_points : ndarray of shape (m, 2)
        Places from which empty space is measured.
    test_depth : ndarray of shape (m,)
        Their distances to the edge.

    Notes
    -----
    Use `Ruler.of`. Everything is a rule of the area and n alone, so a test that compares a
    pattern with simulated ones of as many points stays valid; and all go through the same code.

    Examples
    --------
    >>> import numpy as np, shapely
    >>> ruler = Ruler.of(shapely.box(0, 0, 10, 10), 100)
    >>> ruler
    Ruler(100 points, distances up to 2.5, direct)
    >>> curves = ruler.curves(np.random.default_rng(1).uniform(0, 10, (100, 2)))
    >>> {name: part.shape for name, part in ruler.split(curves).items()}["l_function"]
    (300,)
    """

    area: BaseGeometry
    n: int
    x: Mapping[str, Floats]
    pairs: PairSums
    boundary: Boundary
    test_points: Floats
    test_depth: Floats
    _to_g: Floats
    _sorted_depth: Floats

    def __post_init__(self) -> None:
        for column in (*self.x.values(), self.test_points, self.test_depth):
            column.setflags(write=False)

    def __repr__(self) -> str:
        way = "direct" if isinstance(self.pairs, DirectPairs) else "binned"
        longest = self.x["l_function"][-1]
        return f"Ruler({self.n} points, distances up to {longest:.4g}, {way})"

    @classmethod
    def of(cls, area: BaseGeometry, n: int, *, pairs: PairWay | None = None) -> Ruler:
        """Prepare for patterns of n points in an area.

        Parameters
        ----------
        area : shapely Polygon or MultiPolygon
            Study area, in any unit.
        n : int
            How many points the patterns have, at least 2.
        pairs : {"direct", "binned"}, optional
            How pairs are measured; by a rule of n where it is not said.

        Returns
        -------
        Ruler

        Raises
        ------
        ValueError
            If `n` is below 2.

        Notes
        -----
        K and the pair correlation go from the distance within which one pair is expected at
        random to a quarter of sqrt(A), or to where a step in some direction leaves less than a
        quarter of the area; the distances are evenly spaced squares of roots, closer where short.
        Nearest-neighbour and empty-space functions go to where all but 0.5 % of random points
        have their neighbour, or to where the edge leaves a quarter of the area.
        """
        if n < 2:
            raise ValueError(f"distances need at least 2 points, not {n}")
        covariance, boundary = set_covariance(area), Boundary.of(area)
        spacing = math.sqrt(area.area / n)
        longest = min(_QUARTER * math.sqrt(area.area), longest_useful(area, covariance, left=_LEFT))
        one_pair = math.sqrt(2 * area.area / (math.pi * n * (n - 1)))
        bins = PairBins.of(
            min(one_pair, longest / 4),
            longest,
            min(BANDWIDTH * spacing, longest / 4),
            count=_DISTANCES,
            g_count=_SMOOTHED,
        )
        direct = n <= _MOST_DIRECT if pairs is None else pairs == "direct"
        way: PairSums = (
            DirectPairs.of(area, covariance, bins)
            if direct
            else BinnedPairs.of(area, covariance, bins, n)
        )
        deep = float(np.interp(-_LEFT * area.area, -boundary.left, boundary.depths))
        far = min(spacing * math.sqrt(-math.log(_TAIL) / math.pi), deep)
        near = far * np.arange(1, _NEAREST + 1) / _NEAREST
        tests = random_points(area, min(max(n, _TEST_POINTS[0]), _TEST_POINTS[1]), _rng())
        depth = boundary.distance(tests)
        x = {
            "l_function": bins.k_at,
            "pair_correlation": bins.g_at,
            "nearest_neighbour": near,
            "empty_space": near,
        }
        rings = 2 * math.pi * bins.g_at[:, None]
        return cls(
            area,
            n,
            x,
            way,
            boundary,
            tests,
            depth,
            bins.smoothed() / rings,
            np.sort(depth),
        )

    def curves(self, points: ArrayLike) -> Floats:
        """Return all curves and scalars of one pattern, end to end.

        Parameters
        ----------
        points : array_like of shape (m, 2)
            x, y inside the area; at least 2, usually `n` of them.

        Returns
        -------
        ndarray of shape (k,)
            L(r) - r, pair correlation, nearest-neighbour function, empty-space function, mean
            nearest-neighbour distance, Hopkins and Skellam's index (see `split`).

        Raises
        ------
        ValueError
            If there are fewer than 2 points.

        Notes
        -----
        K and the pair correlation have the translation correction, over the n (n - 1) ordered
        pairs; L = sqrt(K / pi). The nearest-neighbour function has Hanisch's correction, the
        empty-space function that of Chiu and Stoyan. Where no point lies nearer to a neighbour
        than to the edge, the nearest-neighbour function is 0. Hopkins and Skellam's index
        compares means, over the fixed test points and over the points; it is infinite where every
        point coincides with another.

        References
        ----------
        Ripley, B. D. (1977). Modelling spatial patterns. Journal of the Royal Statistical Society
        B 39, 172-212.
        Ohser, J. and Stoyan, D. (1981). On the second-order and orientation analysis of planar
        stationary point processes. Biometrical Journal 23, 523-533 (translation correction).
        Hanisch, K.-H. (1984). Some remarks on estimators of the distribution function of nearest
        neighbour distance in stationary spatial point processes. Mathematische
        Operationsforschung und Statistik, Series Statistics 15, 409-412.
        Chiu, S. N. and Stoyan, D. (1998). Estimators of distance distributions for spatial
        patterns. Statistica Neerlandica 52, 239-246.
        Stoyan, D. and Stoyan, H. (1994). Fractals, Random Shapes and Point Fields. Wiley,
        Chichester (pair correlation).
        """
        xy = np.ascontiguousarray(points, dtype=np.float64).reshape(-1, 2)
        if len(xy) < 2:
            raise ValueError(f"distances need at least 2 points, not {len(xy)}")
        tree = cKDTree(xy, balanced_tree=False, compact_nodes=False)
        nearest = np.asarray(tree.query(xy, k=[2])[0])[:, 0]
        empty = np.asarray(tree.query(self.test_points)[0])
        scale = 2 * self.area.area**2 / (len(xy) * (len(xy) - 1))
        sums = self.pairs.sums(xy) * scale
        r = self.x["l_function"]
        return np.concatenate(
            [
                np.sqrt(self.pairs.bins.up_to(sums) / math.pi) - r,
                self._to_g @ sums,
                self._nearest_neighbour(xy, nearest),
                self._empty_space(empty),
                [nearest.mean(), against_neighbours(empty, nearest)],
            ]
        )

    def split(self, curves: Floats) -> dict[str, Floats]:
        """Return the parts of what `curves` gives, by name.

        Parameters
        ----------
        curves : ndarray of shape (..., k)
            One pattern, or many in rows.

        Returns
        -------
        dict of str to ndarray
            Each curve of shape (..., distances), and the scalars of `SCALARS` of shape (...).
        """
        ends = np.cumsum([0, *(len(self.x[name]) for name in CURVES)])
        parts = {
            name: curves[..., start:end]
            for name, start, end in zip(CURVES, ends[:-1], ends[1:], strict=True)
        }
        scalars = {name: curves[..., ends[-1] + k] for k, name in enumerate(SCALARS)}
        return parts | scalars

    def _nearest_neighbour(self, xy: Floats, nearest: Floats) -> Floats:
        """Return Hanisch's estimate of the nearest-neighbour function."""
        r = self.x["nearest_neighbour"]
        known = nearest <= self.boundary.distance(xy)
        if not known.any():
            return np.zeros(len(r))
        inner = nearest[known]
        left = np.maximum(self.boundary.area_beyond(inner), 1e-9 * self.area.area)
        found = _summed(r, inner, 1 / left)
        return np.asarray(
            found[:-1] / found[-1]
        )  # exactly 1 where all lie below, so that ties stay ties

    def _empty_space(self, empty: Floats) -> Floats:
        """Return Chiu and Stoyan's estimate of the empty-space function."""
        known = empty <= self.test_depth
        inner = empty[known]
        deeper = len(self._sorted_depth) - np.searchsorted(self._sorted_depth, inner, "left")
        return _summed(self.x["empty_space"], inner, 1 / deeper)[:-1]


def _summed(r: Floats, distance: Floats, weight: Floats) -> Floats:
    """Return the sum of the weights of distances up to each r, and of all."""
    at = np.searchsorted(r, distance, "left")
    return np.cumsum(np.bincount(at, weight, len(r) + 1))


def _rng() -> np.random.Generator:
    """Return the source of the test points."""
    return np.random.default_rng(_TEST_SEED)
