"""How far the doubt model is to be trusted in this picture, told by the picture itself."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from detect.calibration import Calibration
from detect.wanted import Kind

# Objects chosen up to this doubt of the model are the evidence.
LOOKED_AT = 0.6
_LIKELY, _UNLIKELY = 0.3, 0.45
# Before a picture is seen its sizes are expected to spread by this much, as if five objects said so.
_USUAL_SPREAD, _SAID_BY = 0.25, 5


@dataclass(frozen=True, slots=True)
class Evidence:
    """What a picture as a whole says about its spots.

    Parameters
    ----------
    spread : float
        How much more the sizes of the likely objects differ than usual: log of the standard
        deviation of their ln(diameter), over 0.25.
    wavering : float
        Log of how many objects are in between for each that is likely: low where the model tells
        two sorts apart clearly.
    """

    spread: float = 0.0
    wavering: float = 0.0

    def __post_init__(self) -> None:
        if not (math.isfinite(self.spread) and math.isfinite(self.wavering)):
            raise ValueError(f"evidence is not finite: {self.spread}, {self.wavering}")


def evidence_of(diameter: ArrayLike, doubt: ArrayLike) -> Evidence:
    """Gather what the objects chosen in one picture say together.

    Parameters
    ----------
    diameter : array_like of shape (n,)
        Diameters in any unit, positive.
    doubt : array_like of shape (n,)
        Doubts of the model, before any calibration; those above 0.6 have no say.

    Returns
    -------
    Evidence

    Notes
    -----
    The standard deviation is taken over doubts up to 0.45 and drawn to 0.25 as if five further
    objects had it; objects up to 0.3 count as likely, those above as in between, one more of each.
    """
    size = np.log(np.asarray(diameter, dtype=np.float64))
    p = np.asarray(doubt, dtype=np.float64)
    own = size[p <= _UNLIKELY]
    squares = float(((own - own.mean()) ** 2).sum()) if own.size else 0.0
    variance = (squares + _SAID_BY * _USUAL_SPREAD**2) / (own.size + _SAID_BY)
    likely = int((p <= _LIKELY).sum())
    between = int(((p > _LIKELY) & (p <= LOOKED_AT)).sum())
    return Evidence(
        0.5 * math.log(variance / _USUAL_SPREAD**2), math.log((between + 1) / (likely + 1))
    )


@dataclass(frozen=True, slots=True)
class PictureCalibration:
    """A calibration that goes by the picture: more doubt where sizes spread and the model wavers.

    logit(new) = intercept + slope x logit(old) + spread x Evidence.spread
    + wavering x Evidence.wavering

    Parameters
    ----------
    intercept, slope : float
        As of `Calibration`.
    spread, wavering : float
        Weights of the evidence.

    Notes
    -----
    How often a spot of a given doubt is false differs from subject to subject, for the model
    learned from pictures with other shares of false candidates; one map for all subjects moves
    the error from one to the next. What a picture shows of its own two sorts of candidate says
    which way to move, as in the correction of a classifier for new shares [1]_, but with weights
    that are fitted instead of derived, for the model's doubts are not exact to begin with.

    References
    ----------
    .. [1] Saerens M, Latinne P, Decaestecker C (2002). Adjusting the outputs of a classifier to
       new a priori probabilities: a simple procedure. Neural Computation 14, 21-41.
    """

    intercept: float = 0.0
    slope: float = 1.0
    spread: float = 0.0
    wavering: float = 0.0

    def of(self, evidence: Evidence) -> Calibration:
        """Return the calibration of the picture that gave this evidence."""
        moved = self.spread * evidence.spread + self.wavering * evidence.wavering
        return Calibration(self.intercept + moved, self.slope)


# Fitted by tests/benchmarks/calibrate_doubt.py: "spots" on hand-marked photographs of five subjects,
# the kinds on drawn scenes of their own (seeds 1000-1099), held near it.
CALIBRATIONS: dict[Kind, PictureCalibration] = {
    "spots": PictureCalibration(intercept=0.268, slope=1.349, spread=2.008, wavering=0.219),
    "colonies": PictureCalibration(intercept=2.117, slope=1.667, spread=1.99, wavering=0.478),
    "seedlings": PictureCalibration(intercept=1.276, slope=1.043, spread=2.164, wavering=0.149),
    "lesions": PictureCalibration(intercept=1.161, slope=1.975, spread=2.122, wavering=0.227),
}
