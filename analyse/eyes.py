"""What whoever counted could not see: how near two may lie to be counted as one."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import cKDTree

from analyse.pattern import Pattern

Source = Literal["planted", "default", "person", "contact"]
Floats = NDArray[np.float64]

# Sums of both radii and their spread, by what was looked for: pairs drawn at known separations into
# dishes, plots and leaves (see DEVELOPERS.md, "What the detector makes of overlaps").
DEFAULTS: dict[str, tuple[float, float]] = {
    "colonies": (0.60, 0.08),
    "seedlings": (1.04, 0.11),
    "lesions": (0.82, 0.11),
    "spots": (0.80, 0.15),
}
PERSON = (0.30, 0.10)  # our own assumption of what a person with the page tells apart
CONTACT = 0.90  # of the radii's sum: nearer than this two spots do overlap, sizes being measured
_SPLIT = 0.5  # of the close pairs expected: with fewer, the person has not told them apart


@dataclass(frozen=True, slots=True)
class Eyes:
    """How near two objects may lie to be counted as one, and how many of all are seen.

    Parameters
    ----------
    blind : float
        Sums of both radii within which two of usual sizes are seen as one, 0 or more; of source
        "contact" those within which two cannot lie.
    blind_se : float
        Its standard error, 0 or more.
    recall : float
        Share of the objects that is found, 0..1; NaN where not measured.
    source : {"planted", "default", "person", "contact"}
        Measured with planted objects; the usual one of what was looked for; assumed of a person who
        has checked the photograph; objects that cannot overlap.

    Raises
    ------
    ValueError
        If a number is impossible.
    """

    blind: float
    blind_se: float
    recall: float
    source: Source

    def __post_init__(self) -> None:
        for name in ("blind", "blind_se"):
            value = getattr(self, name)
            if not (math.isfinite(value) and value >= 0):
                raise ValueError(f"{name} must be 0 or more, not {value}")
        if not (math.isnan(self.recall) or 0 <= self.recall <= 1):
            raise ValueError(f"a recall of {self.recall}")
        if self.source not in get_args(Source):
            raise ValueError(f"source must be one of {get_args(Source)}, not {self.source!r}")

    @classmethod
    def of(cls, pattern: Pattern) -> Eyes | None:
        """Return the eyes that saw a pattern.

        Parameters
        ----------
        pattern : Pattern
            Of a photograph or a table.

        Returns
        -------
        Eyes or None
            None for tables, which no detector has seen, and where no radius is known.

        Notes
        -----
        The blind distance is that of planted objects, where they were set, or else the usual one of
        what was looked for. Where a person has marked the photograph as checked, an assumed, shorter
        one applies, but only if the person has told near ones apart: at least half as many pairs
        nearer than the detector's blind distance stand as chance alone would give. Otherwise
        nobody has split what the detector saw as one, and its blind distance stands.

        Examples
        --------
        >>> Eyes.of(Pattern.of([[1, 2], [5, 5]], (0, 0, 10, 10))) is None
        True
        """
        if not pattern.sought or not np.isfinite(pattern.radius).any():
            return None
        planted = pattern.planted
        recall = math.nan if planted is None or planted.recall is None else planted.recall.value
        if planted is not None and planted.blind is not None:
            seen = planted.blind
            eyes = cls(seen.value, seen.standard_error, recall, "planted")
        else:
            eyes = cls(*DEFAULTS.get(pattern.sought, DEFAULTS["spots"]), recall, "default")
        if pattern.reviewed and eyes.blind > PERSON[0] and _split(pattern, eyes.blind):
            return replace(eyes, blind=PERSON[0], blind_se=PERSON[1], source="person")
        return eyes


def usual_sums(radii: ArrayLike) -> tuple[float, float]:
    """Return the mean sum, and the mean of the smaller, of the radii of two objects.

    Parameters
    ----------
    radii : array_like of shape (n,)
        At least one.

    Returns
    -------
    tuple of float
        Over all pairs of two radii drawn at random from these.

    Examples
    --------
    >>> usual_sums([1.0, 1.0])
    (2.0, 1.0)
    """
    sizes = np.sort(np.asarray(radii, dtype=np.float64))
    n = sizes.size
    smaller = float((sizes * (2 * (n - np.arange(n)) - 1)).sum() / n**2)
    return 2 * float(sizes.mean()), smaller


def known_radii(pattern: Pattern) -> Floats:
    """Return the radii of a pattern that are known.

    Examples
    --------
    >>> known_radii(Pattern.of([[1, 2], [5, 5]], (0, 0, 10, 10), radius=[1.5, math.nan])).tolist()
    [1.5]
    """
    return np.asarray(pattern.radius[np.isfinite(pattern.radius)])


def near_pairs(points: Floats, radii: Floats, within: float) -> int:
    """Count the pairs of points that lie nearer than some sums of their radii.

    Parameters
    ----------
    points : ndarray of shape (n, 2)
        x, y.
    radii : ndarray of shape (n,)
        In the same unit; NaN takes part in no pair.
    within : float
        Sums of both radii.

    Returns
    -------
    int

    Examples
    --------
    >>> near_pairs(np.array([[0.0, 0.0], [1.5, 0.0], [9.0, 0.0]]), np.ones(3), 0.8)
    1
    """
    known = np.isfinite(radii)
    xy, r = points[known], radii[known]
    if len(xy) < 2:
        return 0
    pairs = cKDTree(xy).query_pairs(2 * within * float(r.max()), output_type="ndarray")
    apart = np.hypot(*(xy[pairs[:, 0]] - xy[pairs[:, 1]]).T)
    return int((apart < within * (r[pairs[:, 0]] + r[pairs[:, 1]])).sum())


def expected_pairs(pattern: Pattern, within: float) -> float:
    """Return how many pairs of a pattern would lie nearer than some sums of radii at random.

    Parameters
    ----------
    pattern : Pattern
        With a radius that is known.
    within : float
        Sums of both radii.

    Returns
    -------
    float
        n (n - 1) / 2 times the mean of pi (within (r + s))^2 over the area; edges are left out of
        account, so it is a little too large.

    Examples
    --------
    >>> pair = Pattern.of([[1, 2], [5, 5]], (0, 0, 10, 10), radius=[1.0, 1.0])
    >>> round(expected_pairs(pair, 0.5), 3)
    0.031
    """
    radii = known_radii(pattern)
    squared = 2 * float(np.mean(radii**2)) + 2 * float(np.mean(radii)) ** 2  # of the sum of two
    reached = math.pi * squared * within**2 / pattern.area.area
    return len(pattern) * (len(pattern) - 1) / 2 * reached


def _split(pattern: Pattern, blind: float) -> bool:
    """Tell whether pairs nearer than the detector's blind distance stand, as only a person parts them."""
    expected = expected_pairs(pattern, blind) - expected_pairs(pattern, PERSON[0])
    return near_pairs(pattern.points, pattern.radius, blind) >= _SPLIT * expected
