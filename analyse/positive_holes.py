"""How many particles filled the holes of an air sampler's plates, some of them more than once."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from analyse.crowding import LEVEL, Crowding
from analyse.density import Limits
from analyse.errors import TableWrong
from detect.errors import OptionWrong

MOST_HOLES = 100_000


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
    tail = (1 - LEVEL) / 2
    low = float(special.betaincinv(filled, holes - filled + 1, tail)) if filled else 0.0
    high = float(special.betaincinv(filled + 1, holes - filled, 1 - tail)) if filled < holes else 1
    upper = math.inf if high == 1 else -holes * math.log1p(-high)
    return Limits(positive_hole(filled, holes), -holes * math.log1p(-low), upper, LEVEL)


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
        Limits(value, value - below, value + above, LEVEL),
        value / (holes * max(1, len(plates))),
        "holes",
        holes,
        tuple(parts) if len(parts) > 1 else (),
    )
