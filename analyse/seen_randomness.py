"""What chance would give if it were counted with the eyes that counted the pattern."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components, minimum_spanning_tree
from scipy.spatial import cKDTree
from shapely.geometry.base import BaseGeometry

from analyse.columns import hold_columns
from analyse.errors import TooCrowded
from analyse.eyes import Eyes, usual_sums
from analyse.nulls import CompleteRandomness, Null

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
_LARGE = 2.0  # median radii above which an object looks for its neighbours by itself
_MOST_OBJECTS = 5.0  # objects for each one seen, above which no more are tried
_PAST = 0.8  # of the most that were seen, below which more objects only hide each other
_TRIES = 8  # of another blind distance, where one lets too few be seen


@dataclass(frozen=True, slots=True, eq=False)
class SeenRandomness:
    """Random objects as they would be counted by eyes that see near ones as one.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        Study area.
    radii : array_like of shape (m,)
        Radii to draw from, above 0, in the unit of the area.
    eyes : Eyes
        How near two may lie to be seen as one; of source "contact", to lie at all.
    base : Null or None
        The law of the objects' places; None for complete spatial randomness.

    Raises
    ------
    ValueError
        If there is no radius, or one is not above 0.

    Notes
    -----
    Objects are placed one by one by the base law, with radii drawn from those observed,
    independently of the place, until as many are seen as were counted. Two of radii R >= r are seen
    as one where the smaller does not stand out enough: where d < R + r - k r. The k follows from
    the blind distance b, so that over pairs of the radii given R + r - k r is b (R + r) on
    average; with pairs of one size it is the same rule as d < b (R + r). Drawn scenes show that
    the detector does so: k is the same from equal pairs to those of one to two, where b is not
    (see DEVELOPERS.md). Below the b that makes k = 1 (the smaller's centre on the larger's rim)
    all distances shrink in proportion. What is linked by such pairs is seen as one, at the
    middle of its largest member's area and what the others add to it.

    The blind distance of each simulation is drawn from the normal law of its standard error, so
    that an unsure one makes an unsure null. Objects missed independently of their place, as by
    recall, leave points placed independently at random as they are (thinning of a Poisson process
    is one), and so need not be drawn.

    Radii are those of seen spots, among them merged ones, which are larger; the sizes drawn are
    too large by that much.

    Objects that cannot overlap are set one after the other where there is room, radii drawn anew
    with each try.

    References
    ----------
    Diggle, P. J. (1983). Statistical Analysis of Spatial Point Patterns. Academic Press, London,
    sections 2.1 (randomness given the number), 4.3 (thinning) and 4.8 (simple sequential
    inhibition).
    Besag, J. and Diggle, P. J. (1977). Simple Monte Carlo tests for spatial pattern. Journal of
    the Royal Statistical Society C 26, 327-333 (any law that can be simulated may be the null).

    Examples
    --------
    >>> import shapely
    >>> eyes = Eyes(0.6, 0.0, 1.0, "planted")
    >>> null = SeenRandomness(shapely.box(0, 0, 40, 40), [1.0], eyes)
    >>> points = null.draw(60, np.random.default_rng(1))
    >>> points.shape, bool(cKDTree(points).query(points, k=2)[0][:, 1].min() > 0.6)
    ((60, 2), True)
    """

    area: BaseGeometry
    radii: Floats
    eyes: Eyes
    base: Null | None = None
    _law: Null = field(init=False)
    _sums: tuple[float, float] = field(init=False)

    def __post_init__(self) -> None:
        radii = np.asarray(self.radii, dtype=np.float64).reshape(-1)
        if not radii.size or not (np.isfinite(radii) & (radii > 0)).all():
            raise ValueError("the radii must be one or more numbers above 0")
        law = CompleteRandomness(self.area) if self.base is None else self.base
        for name, value in (("radii", radii), ("_law", law), ("_sums", usual_sums(radii))):
            object.__setattr__(self, name, value)
        hold_columns(self, ["radii"])

    def __repr__(self) -> str:
        return f"<SeenRandomness: {self.name}, {self.eyes.blind:.3g} of the radii's sum>"

    @property
    def name(self) -> str:
        """What the law is called in outputs."""
        if self.eyes.source == "contact":
            return f"{self._law.name}, without overlap"
        who = "person" if self.eyes.source == "person" else "detector"
        return f"{self._law.name}, as the {who} sees it"

    def draw(self, n: int, rng: np.random.Generator) -> Floats:
        """Return n points that are seen, (n, 2), in the unit of the area.

        Raises
        ------
        TooCrowded
            If so many can hardly be seen, or find no room, at random.
        ValueError
            If `n` is negative.
        """
        if n < 0:
            raise ValueError(f"the number of points must be 0 or more, not {n}")
        contact = self.eyes.source == "contact"
        for _ in range(1 if contact else _TRIES):
            blind = max(0.0, self.eyes.blind + self.eyes.blind_se * rng.standard_normal())
            found = self._apart(n, rng) if contact else self._merged(n, blind, rng)
            if found is not None:
                return found
        raise TooCrowded(
            f"{n:,} spots of these sizes can hardly be told apart at random in this area"
            f" (blind distance {self.eyes.blind:.2f} of their radii's sum)."
        )

    def _merged(self, n: int, blind: float, rng: np.random.Generator) -> Floats | None:
        """Return n points as seen with a blind distance; None where they cannot be told apart."""
        xy, radii = np.empty((0, 2)), np.empty(0)
        hides = math.pi * (blind * self._sums[0]) ** 2 / self.area.area  # share of the area, by one
        more = 8 + math.ceil(n * min(1 + 0.6 * n * hides, _MOST_OBJECTS))
        while True:
            xy = np.concatenate([xy, self._law.draw(more, rng)])
            radii = np.concatenate([radii, self._drawn_radii(more, rng)])
            pairs = linked(xy, radii, blind, self._sums)
            seen = np.arange(1, len(xy) + 1) - np.cumsum(_unions(pairs, len(xy)))
            enough = np.flatnonzero(seen == n)
            if n == 0 or enough.size:
                break
            if len(xy) > _MOST_OBJECTS * n + 20 or seen[-1] < _PAST * seen.max():
                return None
            half = len(xy) // 2
            gain = max(0.1, (seen[-1] - seen[half]) / (len(xy) - half))  # seen for each one more
            more = 8 + math.ceil(1.3 * (n - int(seen[-1])) / gain)
        used = 0 if n == 0 else int(enough[0]) + 1
        inner = pairs[(pairs < used).all(axis=1)]
        return self._within(merged_middles(xy[:used], radii[:used], inner), xy)

    def _drawn_radii(self, n: int, rng: np.random.Generator) -> Floats:
        """Return n of the radii, drawn with replacement."""
        return np.asarray(self.radii[rng.integers(len(self.radii), size=n)])

    def _within(self, middles: tuple[Floats, Ints], xy: Floats) -> Floats:
        """Return merged middles, that of the largest member alone where one fell out of the area."""
        points, largest = middles
        moved = np.flatnonzero((points != xy[largest]).any(axis=1))
        shapely.prepare(self.area)
        out = moved[~shapely.intersects_xy(self.area, points[moved, 0], points[moved, 1])]
        points[out] = xy[largest[out]]
        return points

    def _apart(self, n: int, rng: np.random.Generator) -> Floats | None:
        """Return n points set one after the other, each clear of all before; None without room."""
        xy, radii = np.empty((0, 2)), np.empty(0)
        more = n + 8
        while True:
            xy = np.concatenate([xy, self._law.draw(more, rng)])
            radii = np.concatenate([radii, self._drawn_radii(more, rng)])
            stands = _stands(_nearer(xy, radii, self.eyes.blind), len(xy))
            placed = np.flatnonzero(stands)[:n]
            if len(placed) == n:
                return xy[placed]
            if len(xy) > _MOST_OBJECTS * n + 20:
                return None
            more = 8 + math.ceil(1.5 * (n - len(placed)))


def linked(xy: Floats, radii: Floats, blind: float, sums: tuple[float, float]) -> Ints:
    """Return the pairs of objects that are seen as one.

    Parameters
    ----------
    xy : ndarray of shape (m, 2)
        Centres.
    radii : ndarray of shape (m,)
        Radii.
    blind : float
        Sums of both radii, on average over pairs, within which two are seen as one.
    sums : tuple of float
        What `usual_sums` gives for the radii at large.

    Returns
    -------
    ndarray of int, shape (k, 2)
        Rows of `xy`.

    Examples
    --------
    >>> linked(np.array([[0.0, 0.0], [1.0, 0.0], [5.0, 0.0]]), np.ones(3), 0.6, (2.0, 1.0)).tolist()
    [[0, 1]]
    """
    both, smaller = sums
    hidden = (1 - blind) * both / smaller  # of the smaller's radius that may lie within the larger
    shrink = 1.0
    if hidden > 1:
        hidden, shrink = 1.0, blind / (1 - smaller / both)
    if not blind > 0:
        return np.empty((0, 2), dtype=np.int64)
    pairs = _candidates(xy, shrink * (2 - hidden) * radii)
    i, j = pairs.T
    apart = np.hypot(*(xy[i] - xy[j]).T)
    reach = radii[i] + radii[j] - hidden * np.minimum(radii[i], radii[j])
    return np.asarray(pairs[apart < shrink * reach])


def merged_middles(xy: Floats, radii: Floats, pairs: Ints) -> tuple[Floats, Ints]:
    """Return where objects linked by pairs are seen as one, and the largest of each.

    Parameters
    ----------
    xy : ndarray of shape (m, 2)
        Centres.
    radii : ndarray of shape (m,)
        Radii.
    pairs : ndarray of int, shape (k, 2)
        Rows that are seen as one.

    Returns
    -------
    points : ndarray of shape (seen, 2)
    largest : ndarray of int, shape (seen,)
        Row of the largest member of each.

    Notes
    -----
    Every other member adds the part of it that stands out of the largest: the share e of its diameter,
    about the middle of that part, weighted by e times its area. Two of one size so have their
    middle halfway, and one hidden within a larger does not shift it.

    Examples
    --------
    >>> xy = np.array([[0.0, 0.0], [1.0, 0.0], [5.0, 0.0]])
    >>> merged_middles(xy, np.ones(3), np.array([[0, 1]]))[0].tolist()
    [[0.5, 0.0], [5.0, 0.0]]
    """
    m = len(xy)
    links = coo_matrix((np.ones(len(pairs), dtype=bool), pairs.T), shape=(m, m))
    seen, one = connected_components(links, directed=False)
    order = np.argsort(-radii, kind="stable")
    largest = np.empty(seen, dtype=np.int64)
    largest[one[order[::-1]]] = order[::-1]
    others = np.flatnonzero(largest[one] != np.arange(m))
    points = xy[largest]
    if not others.size:
        return points, largest
    big, r = largest[one[others]], radii[others]
    step = xy[others] - xy[big]
    apart = np.hypot(*step.T)
    out = np.clip((apart - (radii[big] - r)) / (2 * r), 0.0, 1.0)
    weight = out * r**2
    shift = weight[:, None] * step * ((apart + r * (1 - out)) / np.maximum(apart, 1e-12))[:, None]
    total = radii[largest] ** 2 + np.bincount(one[others], weight, seen)
    moved = [np.bincount(one[others], shift[:, k], seen) / total for k in (0, 1)]
    return points + np.column_stack(moved), largest


def _candidates(xy: Floats, reach: Floats) -> Ints:
    """Return the pairs nearer than the reach of one of both, where that is its own for few large ones."""
    large = reach > _LARGE * np.median(reach)
    usual = np.flatnonzero(~large)
    tree = cKDTree(xy[usual], balanced_tree=False, compact_nodes=False)
    pairs = [usual[tree.query_pairs(float(reach[usual].max()), output_type="ndarray")]]
    if large.any():
        rows = np.flatnonzero(large)
        near = cKDTree(xy).query_ball_point(xy[rows], reach[rows])
        own = np.repeat(rows, [len(found) for found in near])
        other = np.concatenate([np.asarray(found, dtype=np.int64) for found in near])
        once = ~large[other] | (other > own) | (reach[other] < reach[own])
        both = np.column_stack([own, other])[once & (other != own)]
        pairs.append(np.unique(np.sort(both, axis=1), axis=0))
    return np.concatenate(pairs)


def _unions(pairs: Ints, m: int) -> NDArray[np.int64]:
    """Return how many groups each object joins into one, beyond its own, when it comes after those before."""
    if not len(pairs):
        return np.zeros(m, dtype=np.int64)
    later = pairs.max(axis=1)
    # Of a spanning forest that takes early pairs first, each edge is one such join.
    links = coo_matrix((later + 1.0, pairs.T), shape=(m, m))
    joins = minimum_spanning_tree(links).data.astype(np.int64) - 1
    return np.asarray(np.bincount(joins, minlength=m), dtype=np.int64)


def _nearer(xy: Floats, radii: Floats, within: float) -> Ints:
    """Return the pairs nearer than some sums of their radii."""
    pairs = _candidates(xy, 2 * within * radii)
    i, j = pairs.T
    apart = np.hypot(*(xy[i] - xy[j]).T)
    return np.asarray(pairs[apart < within * (radii[i] + radii[j])])


def _stands(pairs: Ints, m: int) -> NDArray[np.bool_]:
    """Return which objects find room, if each goes away that is too near to one that stands."""
    stands = [True] * m
    rows = np.sort(pairs, axis=1)
    for early, late in rows[np.lexsort(rows.T)].tolist():
        if stands[early]:
            stands[late] = False
    return np.asarray(stands, dtype=bool)
