"""How many there really are where several lie so close that they are counted as one."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special
from scipy.spatial import cKDTree

from analyse.density import Limits
from analyse.flags import flag_sentences
from analyse.pattern import Pattern

CROWDED = 0.05  # share of the objects lost in others from which a count is called crowded
MOST_CROWDED = 0.5  # neighbours within reach beyond which the correction would be a guess
LEVEL = 0.95
# Three objects that all reach each other are one clump, not two merges of three: the integral over
# such triangles (Armitage 1949; the same as in the third virial coefficient of hard discs).
_TRIANGLES = (4 * math.pi - 3 * math.sqrt(3)) / (24 * math.pi)
_PRIOR = 4.0  # pairs as if at random that are added to those counted there, so that few say little
_BESIDE = (1.4, 2.1)  # times the blind distance: where pairs are counted beside those merged
_STEADIER = (
    0.6  # by which merges vary less than Poisson counts, per neighbour within reach: simulated
)


@dataclass(frozen=True, slots=True)
class Crowding:
    """A count corrected for those that lie in others' reach.

    Parameters
    ----------
    counted : int
        What was counted: spots, or filled holes.
    corrected : Limits or None
        How many there are, with 95 % limits; None where it is too crowded to tell.
    neighbours : float
        How many others lie within reach of an object on average; of holes, objects in each.
    by : {"patches", "holes"}
        Which law was used.
    holes : int
        Of the plate; 0 for patches.
    parts : tuple of (int, Limits or None)
        Each plate's filled holes and corrected count, where there is more than one.
    """

    counted: int
    corrected: Limits | None
    neighbours: float
    by: Literal["patches", "holes"]
    holes: int = 0
    parts: tuple[tuple[int, Limits | None], ...] = ()

    def __repr__(self) -> str:
        told = "too crowded" if self.corrected is None else f"{self.corrected.value:.4g}"
        return f"<Crowding by {self.by}: {self.counted} counted, {told} corrected>"

    @property
    def is_crowded(self) -> bool:
        """Whether so many lie in others' reach that the count is noticeably too low."""
        if self.corrected is None:
            return True
        return self.counted < (1 - CROWDED) * self.corrected.value

    @property
    def sentence(self) -> str:
        """The correction in plain words; empty where it hardly changes the count."""
        if self.by == "holes":
            return _said_of_holes(self)
        return "".join(flag_sentences(self.flags, self.values))

    @property
    def flags(self) -> tuple[str, ...]:
        """The flag that a count of spots carries for being crowded; none for holes."""
        if self.by == "holes" or not self.is_crowded:
            return ()
        return ("too_crowded",) if self.corrected is None else ("crowded",)

    @property
    def values(self) -> dict[str, str]:
        """The numbers that the flag quotes."""
        if self.corrected is None:
            return {}
        known = {"": self.corrected.value, "_low": self.corrected.low, "_high": self.corrected.high}
        told = {f"corrected{name}": f"{value:,.0f}" for name, value in known.items()}
        return {"counted": f"{self.counted:,}", **told}


def share_of_clumps(neighbours: ArrayLike) -> NDArray[np.float64]:
    """Return the expected number of clumps for each object placed at random.

    Parameters
    ----------
    neighbours : array_like
        Mean number of others within reach of an object, 0 to 0.5.

    Returns
    -------
    ndarray
        1 for objects far apart.

    Notes
    -----
    1 - m/2 + (4 pi - 3 sqrt(3)) / (24 pi) m^2: each pair within reach takes one away, and each
    triangle gives one back. Simulated patterns have 0.2 % fewer at m = 0.4 and 0.5 % fewer at
    0.6.

    References
    ----------
    Armitage, P. (1949). An overlap problem arising in particle counting. Biometrika 36, 257-266.
    Roach, S. A. (1968). The Theory of Random Clumping. Methuen.

    Examples
    --------
    >>> share_of_clumps([0.0, 0.2]).round(3).tolist()
    [1.0, 0.904]
    """
    m = np.asarray(neighbours, dtype=np.float64)
    return np.asarray(1 - m / 2 + _TRIANGLES * m**2)


def corrected_for_patches(
    patches: int, reached: float, *, reach_uncertainty: float = 0.0
) -> tuple[Limits | None, float]:
    """Return how many objects at random make so many patches, with 95 % limits.

    Parameters
    ----------
    patches : int
        Clumps counted, single objects among them.
    reached : float
        Chance that one of two objects placed at random lies within the other's reach.
    reach_uncertainty : float
        Relative standard uncertainty of the distance of reach.

    Returns
    -------
    corrected : Limits or None
        None where more than 0.5 others would lie within reach of each object: too crowded.
    neighbours : float
        Mean number of others within reach; NaN where too crowded.

    Notes
    -----
    Solved by bisection for n in n f((n - 1) reached) = patches (`share_of_clumps`). The limits take
    in that the number of merges varies about as a Poisson count, less so when crowded, and how well
    the reach is known, in quadrature; never fewer than were counted.

    References
    ----------
    Armitage, P. (1949). An overlap problem arising in particle counting. Biometrika 36, 257-266.

    Examples
    --------
    >>> limits, neighbours = corrected_for_patches(362, 0.2 / 400)
    >>> round(limits.value), round(neighbours, 2)
    (400, 0.2)
    """
    if patches < 2 or reached == 0:
        return Limits(float(patches), float(patches), float(patches), LEVEL), 0.0

    def seen(n: float) -> float:
        return n * float(share_of_clumps((n - 1) * reached))

    most = 1 + MOST_CROWDED / reached
    if seen(most) < patches or most < patches:
        return None, math.nan
    low, high = float(patches), most
    for _ in range(80):
        middle = (low + high) / 2
        low, high = (middle, high) if seen(middle) < patches else (low, middle)
    n = (low + high) / 2
    m = (n - 1) * reached
    slope = 1 - m + 3 * _TRIANGLES * m**2  # objects seen for each one more
    chance = math.sqrt(max(0.0, (n - patches) * (1 - _STEADIER * m))) / slope
    reach = n * (0.5 - 2 * _TRIANGLES * m) * 2 * m * reach_uncertainty / slope
    half = float(special.ndtri(0.5 + LEVEL / 2)) * math.hypot(chance, reach)
    return Limits(n, max(float(patches), n - half), n + half, LEVEL), m


def chance_within_reach(pattern: Pattern, blind: float) -> float:
    """Return the chance that two objects at random in an area lie within each other's reach.

    Parameters
    ----------
    pattern : Pattern
        With radii; those that are not known take no part.
    blind : float
        Reach in sums of both radii.

    Returns
    -------
    float
        pi b^2 / A, less what the edge cuts off, averaged over all pairs of radii.

    Notes
    -----
    For reaches that are short beside the area, a share 2 P b / (3 pi A) is cut off by the edge of
    perimeter P (the set covariance falls by P b / pi at first).

    References
    ----------
    Matheron, G. (1975). Random Sets and Integral Geometry. Wiley (the set covariance at 0).

    Examples
    --------
    >>> import shapely
    >>> points = np.random.default_rng(1).uniform(0, 100, (80, 2))
    >>> dish = Pattern.of(points, shapely.box(0, 0, 100, 100), radius=np.full(80, 1.0))
    >>> round(chance_within_reach(dish, 0.5), 6)
    0.000311
    """
    radii = pattern.radius[np.isfinite(pattern.radius)]
    first, second = float(radii.mean()), float((radii**2).mean())
    squared = blind**2 * 2 * (second + first**2)
    cut = 2 * pattern.area.length * math.sqrt(squared) / (3 * math.pi * pattern.area.area)
    return math.pi * squared / pattern.area.area * max(0.0, 1 - cut)


def crowding_of_patches(pattern: Pattern, blind: float, blind_se: float) -> Crowding | None:
    """Correct a count of spots for those too near to others to be seen.

    Parameters
    ----------
    pattern : Pattern
        As counted.
    blind : float
        How near two may lie to be seen as one, in sums of both radii.
    blind_se : float
        Its standard error.

    Returns
    -------
    Crowding or None
        None without radii.

    Notes
    -----
    Objects at random have a known number of neighbours within reach. Clumped ones have more, and
    those that keep apart fewer: as many times as pairs lie from 1.4 to 2.1 times the blind distance
    apart, just beyond what is merged, for each one expected there at random. By that ratio the
    neighbours within reach are multiplied; how unsure it is, as a Poisson count, goes into the
    limits. Four pairs as if at random are added to both, so that few pairs say little.

    Examples
    --------
    >>> import shapely
    >>> points = np.random.default_rng(1).uniform(0, 100, (400, 2))
    >>> dish = Pattern.of(points, shapely.box(0, 0, 100, 100), radius=np.full(400, 1.0))
    >>> crowding_of_patches(dish, 0.8, 0.05)
    <Crowding by patches: 400 counted, 489.4 corrected>
    """
    if not np.isfinite(pattern.radius).any() or blind <= 0:
        return None
    reached = chance_within_reach(pattern, blind)
    ratio, ratio_se = _pairs_beside(pattern, blind)
    # Neighbours go by the square of the reach, so the reach errs by half of what the ratio does.
    unsure = math.hypot(blind_se / blind, ratio_se / ratio / 2)
    limits, neighbours = corrected_for_patches(
        len(pattern), reached * ratio, reach_uncertainty=unsure
    )
    return Crowding(len(pattern), limits, neighbours, "patches")


def _pairs_beside(pattern: Pattern, blind: float) -> tuple[float, float]:
    """Return pairs just beyond the blind distance for each one expected at random, and its s.e."""
    known = np.isfinite(pattern.radius)
    points, radii = pattern.points[known], pattern.radius[known]
    least, most = (factor * blind for factor in _BESIDE)
    n = len(points)
    expected = n * (n - 1) / 2
    expected *= chance_within_reach(pattern, most) - chance_within_reach(pattern, least)
    pairs = cKDTree(points).query_pairs(2 * most * float(radii.max()), output_type="ndarray")
    apart = np.hypot(*(points[pairs[:, 0]] - points[pairs[:, 1]]).T)
    sums = radii[pairs[:, 0]] + radii[pairs[:, 1]]
    seen = int(((apart >= least * sums) & (apart < most * sums)).sum())
    return (seen + _PRIOR) / (expected + _PRIOR), math.sqrt(seen + _PRIOR) / (expected + _PRIOR)


def _said_of_holes(crowding: Crowding) -> str:
    """Say what filled holes come to."""
    seen = crowding.corrected
    assert seen is not None
    plates = f" each on {len(crowding.parts)} plates" if crowding.parts else ""
    upper = f"to {seen.high:,.0f}" if math.isfinite(seen.high) else "upwards: every hole is filled"
    return (
        f"Positive holes: {crowding.counted:,} filled of {crowding.holes}{plates} stand for"
        f" {seen.value:,.0f} particles (95 % limits {seen.low:,.0f} {upper}), since some holes were"
        " hit more than once."
    )
