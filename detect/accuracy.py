"""Spots against hand-marked truth: what was found, what was missed, what was invented."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from detect.files import csv_text
from detect.sheet import Sheet
from detect.truth import Truth as Truth
from detect.truth import read_truth as read_truth

SCORE_COLUMNS = (
    "photograph",
    "truth",
    "found",
    "matched",
    "precision",
    "recall",
    "f1",
    "count_error",
    "rmse_px",
    "rmse_mm",
)


@dataclass(frozen=True, slots=True)
class MatchOptions:
    """How near a spot must lie to a true object to be taken for it.

    Parameters
    ----------
    radii : float
        Reach in radii of the true object.
    least_px : float
        Reach in pixels at least, for small objects.
    """

    radii: float = 0.5
    least_px: float = 3.0


@dataclass(frozen=True, slots=True, eq=False)
class Match:
    """Pairs of spots and true objects, each used once at most.

    Parameters
    ----------
    found, truth : ndarray of int, shape (k,)
        Positions of the members of each pair in the two tables.
    distance : ndarray of shape (k,)
        Distance of each pair, in pixels.
    """

    found: NDArray[np.intp]
    truth: NDArray[np.intp]
    distance: NDArray[np.float64]

    def __len__(self) -> int:
        return self.found.size


@dataclass(frozen=True, slots=True)
class Accuracy:
    """How the spots of one photograph, or of many together, compare with the truth.

    Parameters
    ----------
    name : str
        Photograph, or what the row sums up.
    truth, found, matched : int
        Numbers of true objects, of counted spots, and of pairs.
    squares_px, squares_mm : float
        Sums of squared distances of the pairs; NaN in millimetres where no scale is known.
    """

    name: str
    truth: int
    found: int
    matched: int
    squares_px: float = 0.0
    squares_mm: float = math.nan

    def __post_init__(self) -> None:
        if not 0 <= self.matched <= min(self.truth, self.found):
            raise ValueError(
                f"{self.matched} pairs of {self.found} spots and {self.truth} true objects"
            )

    @property
    def precision(self) -> float:
        """Share of the spots that are real objects; NaN without spots."""
        return self.matched / self.found if self.found else math.nan

    @property
    def recall(self) -> float:
        """Share of the real objects that were found; NaN without objects."""
        return self.matched / self.truth if self.truth else math.nan

    @property
    def f1(self) -> float:
        """Harmonic mean of precision and recall; NaN with neither spots nor objects."""
        total = self.found + self.truth
        return 2 * self.matched / total if total else math.nan

    @property
    def count_error(self) -> int:
        """Spots found beyond the true number; negative where too few."""
        return self.found - self.truth

    @property
    def rmse_px(self) -> float:
        """Root mean squared distance of the pairs in pixels; NaN without pairs."""
        return math.sqrt(self.squares_px / self.matched) if self.matched else math.nan

    @property
    def rmse_mm(self) -> float:
        """Root mean squared distance of the pairs in millimetres; NaN where not known."""
        return math.sqrt(self.squares_mm / self.matched) if self.matched else math.nan

    def row(self) -> tuple[str | int | float, ...]:
        """Return the cells of its row, in the order of `SCORE_COLUMNS`."""
        return (
            self.name,
            self.truth,
            self.found,
            self.matched,
            self.precision,
            self.recall,
            self.f1,
            self.count_error,
            self.rmse_px,
            self.rmse_mm,
        )


def match_spots(
    found_xy: ArrayLike,
    truth_xy: ArrayLike,
    truth_r: ArrayLike,
    *,
    options: MatchOptions | None = None,
) -> Match:
    """Pair spots with true objects one to one: as many pairs as possible, then the nearest.

    Parameters
    ----------
    found_xy : array_like of shape (n, 2)
        Centres of the spots, in pixels.
    truth_xy : array_like of shape (m, 2)
        Centres of the true objects, in pixels.
    truth_r : array_like of shape (m,)
        Their radii, in pixels.
    options : MatchOptions, optional
        How near the members of a pair must lie.

    Returns
    -------
    Match
        Pairs in the order of the true objects.

    Notes
    -----
    A pair is allowed where the distance is at most max(radii * r, least_px). Among all sets of
    allowed pairs that use no spot and no object twice, one with the most pairs is taken, and
    among those one with the least total distance. Groups that share no allowed pair are solved
    one by one as assignment problems [1]_.

    References
    ----------
    .. [1] Kuhn HW (1955). The Hungarian method for the assignment problem. Naval Research
       Logistics Quarterly 2, 83-97.

    Examples
    --------
    >>> match = match_spots([[10, 10], [14, 10]], [[12, 10], [16, 10]], [5, 5])
    >>> match.found.tolist(), match.distance.tolist()
    ([0, 1], [2.0, 2.0])
    """
    options = options or MatchOptions()
    found = np.asarray(found_xy, dtype=np.float64).reshape(-1, 2)
    truth = np.asarray(truth_xy, dtype=np.float64).reshape(-1, 2)
    reach = np.maximum(options.radii * np.asarray(truth_r, dtype=np.float64), options.least_px)
    near, far, distance = _allowed(found, truth, reach)
    pairs: list[tuple[int, int]] = []
    for group in _groups(near, far, len(found), len(truth)):
        pairs += _assign(near[group], far[group], distance[group])
    pairs.sort(key=lambda pair: pair[1])
    rows = np.array([i for i, _ in pairs], dtype=np.intp)
    columns = np.array([j for _, j in pairs], dtype=np.intp)
    return Match(rows, columns, np.hypot(*(found[rows] - truth[columns]).T))


def score_sheet(sheet: Sheet, truth: Truth, *, options: MatchOptions | None = None) -> Accuracy:
    """Compare the counted spots of a sheet with the hand-marked objects of its study area.

    Parameters
    ----------
    sheet : Sheet
        Its struck spots have no say.
    truth : Truth
        Objects outside the study area neither count as missed nor make a spot false.
    options : MatchOptions, optional
        How near the members of a pair must lie.

    Returns
    -------
    Accuracy
    """
    centres = sheet.spots.centres[sheet.spots.counted]
    match = match_spots(centres, truth.xy, truth.radius, options=options)
    inside = sheet.area.contains(truth.xy)
    kept = inside[match.truth]
    astray = int((~kept).sum())
    squares_mm = math.nan
    if sheet.scale is not None:
        apart = sheet.scale.to_mm(centres[match.found]) - sheet.scale.to_mm(truth.xy[match.truth])
        squares_mm = float((apart[kept] ** 2).sum())
    return Accuracy(
        sheet.photograph.name,
        int(inside.sum()),
        len(centres) - astray,
        int(kept.sum()),
        float((match.distance[kept] ** 2).sum()),
        squares_mm,
    )


def pooled(scores: Sequence[Accuracy]) -> Accuracy:
    """Sum up the scores of several photographs, every object weighing the same."""
    return Accuracy(
        "all",
        sum(score.truth for score in scores),
        sum(score.found for score in scores),
        sum(score.matched for score in scores),
        math.fsum(score.squares_px for score in scores),
        math.fsum(score.squares_mm for score in scores),
    )


def score_csv(scores: Sequence[Accuracy]) -> str:
    """Return scores as a table, a row per photograph and one for all together."""
    return csv_text(SCORE_COLUMNS, [score.row() for score in [*scores, pooled(scores)]], digits=6)


_Indices = NDArray[np.intp]


def _allowed(
    found: NDArray[np.float64], truth: NDArray[np.float64], reach: NDArray[np.float64]
) -> tuple[_Indices, _Indices, NDArray[np.float64]]:
    """List all allowed pairs: positions in both tables, and distances."""
    from scipy.spatial import cKDTree

    if not (len(found) and len(truth)):
        return np.empty(0, np.intp), np.empty(0, np.intp), np.empty(0)
    lists = cKDTree(found).query_ball_point(truth, reach)
    near = np.array([i for found_here in lists for i in sorted(found_here)], dtype=np.intp)
    far = np.repeat(np.arange(len(truth)), [len(found_here) for found_here in lists])
    return near, far, np.hypot(*(found[near] - truth[far]).T)


def _groups(near: _Indices, far: _Indices, n: int, m: int) -> list[_Indices]:
    """Split the allowed pairs into groups that share no spot and no object."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    if not near.size:
        return []
    graph = coo_array((np.ones(near.size), (near, n + far)), shape=(n + m, n + m))
    labels = connected_components(graph, directed=False)[1][near]
    order = np.argsort(labels, kind="stable")
    edges = np.flatnonzero(np.diff(labels[order])) + 1
    return np.split(order, edges)


def _assign(near: _Indices, far: _Indices, distance: NDArray[np.float64]) -> list[tuple[int, int]]:
    """Choose the most pairs of one group, then the least total distance."""
    from scipy.optimize import linear_sum_assignment

    rows, row = np.unique(near, return_inverse=True)
    columns, column = np.unique(far, return_inverse=True)
    cost = np.zeros((rows.size, columns.size))
    cost[row, column] = distance - (distance.sum() + 1.0)
    chosen = zip(*linear_sum_assignment(cost), strict=True)
    return [(int(rows[i]), int(columns[j])) for i, j in chosen if cost[i, j] < 0]
