"""Which of the copies set into a photograph are found again."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detect.accuracy import match_spots
from detect.planting import Copies
from detect.spots import Spots


@dataclass(frozen=True, slots=True, eq=False)
class Refound:
    """What became of the copies of one round.

    Parameters
    ----------
    found : ndarray of bool, shape (k,)
        Whether a spot lies where the copy was set that is none of the spots seen before.
    lost : ndarray of bool, shape (n,)
        Which of the spots seen before are no longer seen.
    """

    found: NDArray[np.bool_]
    lost: NDArray[np.bool_]


def refound(before: Spots, after: Spots, copies: Copies) -> Refound:
    """Compare the spots of a photograph with those seen once copies are set into it.

    Parameters
    ----------
    before, after : Spots
        Spots without and with the copies.
    copies : Copies
        Where they were set.

    Returns
    -------
    Refound

    Notes
    -----
    Spots seen before are matched first, by the rule that spots are matched to hand-marked truth
    (`detect.accuracy.match_spots`), and each takes its spot with it: a copy that falls on an
    object and only finds that one again is not found.
    """
    old = match_spots(after.centres, before.centres, before.radius)
    lost = np.ones(len(before), dtype=np.bool_)
    lost[old.truth] = False
    rest = np.setdiff1d(np.arange(len(after)), old.found)
    new = match_spots(after.centres[rest], copies.centres, copies.radius)
    found = np.zeros(len(copies), dtype=np.bool_)
    found[new.truth] = True
    return Refound(found, lost)
