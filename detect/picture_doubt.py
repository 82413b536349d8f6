"""How far the doubt model is to be trusted in this picture, told by the picture itself."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from detect.calibration import Calibration
from detect.wanted import Kind

# Objects chosen up to this doubt of the model are the evidence.
LOOKED_AT = 0.3
# Mean absolute deviations of a normal law in its standard deviation.
_PER_DEVIATION = math.sqrt(math.pi / 2)
# Before a picture is seen its sizes are expected to spread by this much, as if five objects said so.
_USUAL_SPREAD, _SAID_BY = 0.25, 5


@dataclass(frozen=True, slots=True)
class Evidence:
    """What a picture as a whole says about its spots.

    Parameters
    ----------
    spread : float
        How much more the sizes of the likely objects differ than usual: log of the spread of their
        ln(diameter), over 0.25.
    """

    spread: float = 0.0

    def __post_init__(self) -> None:
        if not math.isfinite(self.spread):
            raise ValueError(f"evidence is not finite: {self.spread}")


def evidence_of(diameter: ArrayLike, doubt: ArrayLike) -> Evidence:
    """Gather what the objects chosen in one picture say together.

    Parameters
    ----------
    diameter : array_like of shape (n,)
        Diameters in any unit, positive.
    doubt : array_like of shape (n,)
        Doubts of the model, before any calibration; those above 0.3 have no say.

    Returns
    -------
    Evidence

    Notes
    -----
    The spread is the mean absolute deviation of ln(diameter) from its median, times sqrt(pi / 2):
    for sizes of log-normal law their standard deviation, but less swayed by a few false spots of
    another size. It is drawn to 0.25 as if five further objects had it.
    """
    size = np.log(np.asarray(diameter, dtype=np.float64))
    p = np.asarray(doubt, dtype=np.float64)
    own = size[p <= LOOKED_AT]
    off = float(np.abs(own - np.median(own)).sum()) if own.size else 0.0
    spread = (_PER_DEVIATION * off + _SAID_BY * _USUAL_SPREAD) / (own.size + _SAID_BY)
    return Evidence(math.log(spread / _USUAL_SPREAD))


@dataclass(frozen=True, slots=True)
class PictureCalibration:
    """A calibration that goes by the picture: more doubt where sizes spread.

    logit(new) = intercept + slope x logit(old) + spread x Evidence.spread

    Parameters
    ----------
    intercept, slope : float
        As of `Calibration`.
    spread : float
        Weight of the evidence.

    Notes
    -----
    How often a spot of a given doubt is false differs from subject to subject, for the model
    learned from pictures with other shares of false candidates; one map for all subjects moves
    the error from one to the next. What a picture shows of its own spots says which way to move, as
    in the correction of a classifier for new shares [1]_, but by a weight that is fitted instead of
    derived: objects of one sort are of like size, what is taken for them by mistake is of any.

    References
    ----------
    .. [1] Saerens M, Latinne P, Decaestecker C (2002). Adjusting the outputs of a classifier to
       new a priori probabilities: a simple procedure. Neural Computation 14, 21-41.
    """

    intercept: float = 0.0
    slope: float = 1.0
    spread: float = 0.0

    def of(self, evidence: Evidence) -> Calibration:
        """Return the calibration of the picture that gave this evidence."""
        return Calibration(self.intercept + self.spread * evidence.spread, self.slope)


# Fitted by tests/benchmarks/calibrate_doubt.py: "spots" on hand-marked photographs of five subjects,
# the kinds on drawn scenes of their own (seeds 1000-1099), held near it.
CALIBRATIONS: dict[Kind, PictureCalibration] = {
    "spots": PictureCalibration(intercept=0.589, slope=1.423, spread=1.842),
    "colonies": PictureCalibration(intercept=0.529, slope=1.783, spread=1.799),
    "seedlings": PictureCalibration(intercept=0.321, slope=1.568, spread=1.908),
    "lesions": PictureCalibration(intercept=1.053, slope=2.119, spread=1.933),
}
