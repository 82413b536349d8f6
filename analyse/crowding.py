"""How many there really are where several lie so close that they are counted as one."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from analyse.density import Limits
from analyse.errors import TableWrong
from analyse.flags import flag_sentences
from analyse.pattern import Pattern
from detect.errors import OptionWrong

CROWDED = 0.05  # share of the objects lost in others from which a count is called crowded
MOST_CROWDED = 0.5  # neighbours within reach beyond which the correction would be a guess
MOST_HOLES = 100_000
_LEVEL = 0.95
# Three objects that all reach each other are one clump, not two merges of three: the integral over
# such triangles (Armitage 1949; the same as in the third virial coefficient of hard discs).
_TRIANGLES = (4 * math.pi - 3 * math.sqrt(3)) / (24 * math.pi)
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
        return Limits(float(patches), float(patches), float(patches), _LEVEL), 0.0

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
    half = float(special.ndtri(0.5 + _LEVEL / 2)) * math.hypot(chance, reach)
    return Limits(n, max(float(patches), n - half), n + half, _LEVEL), m


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

    Examples
    --------
    >>> import shapely
    >>> points = np.random.default_rng(1).uniform(0, 100, (400, 2))
    >>> dish = Pattern.of(points, shapely.box(0, 0, 100, 100), radius=np.full(400, 1.0))
    >>> crowding_of_patches(dish, 0.8, 0.05)
    <Crowding by patches: 400 counted, 486.7 corrected>
    """
    if not np.isfinite(pattern.radius).any() or blind <= 0:
        return None
    limits, neighbours = corrected_for_patches(
        len(pattern), chance_within_reach(pattern, blind), reach_uncertainty=blind_se / blind
    )
    return Crowding(len(pattern), limits, neighbours, "patches")


def positive_hole(filled: int, holes: int) -> float:
    """Return how many particles fill so many of the holes of a plate.

    Parameters
    ----------
    filled : int
        Holes that hold something, 0 to `holes`.
    holes : int
        Of the plate.

    Returns
    -------
    float

    Notes
    -----
    N (1/N + 1/(N - 1) + ... + 1/(N - r + 1)): the expected number of particles that it takes to
    fill r of N holes at random.

    References
    ----------
    Feller, W. (1950). An Introduction to Probability Theory and its Applications, vol. 1. Wiley
    (waiting times in coupon collecting).
    Andersen, A. A. (1958). New sampler for the collection, sizing, and enumeration of viable
    airborne particles. Journal of Bacteriology 76, 471-484.
    Macher, J. M. (1989). Positive-hole correction of multiple-jet impactors for collecting viable
    microorganisms. American Industrial Hygiene Association Journal 50, 561-568.

    Examples
    --------
    >>> round(positive_hole(100, 400), 2), round(positive_hole(400, 400), 2)
    (114.91, 2627.97)
    """
    return float(holes * (1 / np.arange(holes, holes - filled, -1, dtype=np.float64)).sum())


def positive_hole_limits(filled: int, holes: int) -> Limits:
    """Return the positive-hole count with 95 % limits of what such a sample has on average.

    Parameters
    ----------
    filled : int
        Holes that hold something.
    holes : int
        Of the plate.

    Returns
    -------
    Limits
        The upper one is infinite where every hole is filled.

    Notes
    -----
    Where particles come as a Poisson count of mean m, each hole stays empty with chance
    exp(-m / N), independently: exact binomial limits p of the share filled give m = -N ln(1 - p).

    References
    ----------
    Clopper, C. J. and Pearson, E. S. (1934). The use of confidence or fiducial limits illustrated in
    the case of the binomial. Biometrika 26, 404-413.

    Examples
    --------
    >>> limits = positive_hole_limits(100, 400)
    >>> round(limits.low, 1), round(limits.high, 1)
    (93.4, 140.1)
    """
    tail = (1 - _LEVEL) / 2
    low = float(special.betaincinv(filled, holes - filled + 1, tail)) if filled else 0.0
    high = float(special.betaincinv(filled + 1, holes - filled, 1 - tail)) if filled < holes else 1
    upper = math.inf if high == 1 else -holes * math.log1p(-high)
    return Limits(positive_hole(filled, holes), -holes * math.log1p(-low), upper, _LEVEL)


def crowding_of_holes(counts: ArrayLike, holes: int) -> Crowding:
    """Correct counts of filled holes for holes that were hit more than once.

    Parameters
    ----------
    counts : array_like of int
        Filled holes, one number for each plate.
    holes : int
        Of a plate.

    Returns
    -------
    Crowding
        The sum over plates; its limits by adding half widths in quadrature.

    Raises
    ------
    OptionWrong
        If a plate can have no such number of holes.
    TableWrong
        If more holes are filled than a plate has.

    Examples
    --------
    >>> crowding_of_holes([100], 400)
    <Crowding by holes: 100 counted, 114.9 corrected>
    """
    if not 1 <= holes <= MOST_HOLES:
        raise OptionWrong(f"--holes must be from 1 to {MOST_HOLES}, not {holes}.")
    plates = [int(count) for count in np.asarray(counts).reshape(-1)]
    if plates and max(plates) > holes:
        raise TableWrong(
            f"{max(plates)} are counted on a plate of {holes} holes, and no more than {holes} can be"
            " filled; check --holes and the counts."
        )
    parts = [(count, positive_hole_limits(count, holes)) for count in plates]
    value = sum(each.value for _, each in parts)
    below = math.hypot(*(each.value - each.low for _, each in parts))
    above = math.hypot(*(each.high - each.value for _, each in parts))
    return Crowding(
        sum(plates),
        Limits(value, value - below, value + above, _LEVEL),
        value / (holes * max(1, len(plates))),
        "holes",
        holes,
        tuple(parts) if len(parts) > 1 else (),
    )


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
