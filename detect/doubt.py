"""How likely each candidate is to be false: a small logistic model anyone can check by hand."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detect.regions import Candidates
from detect.wanted import Kind

FEATURES = (
    "size",
    "open",
    "faint",
    "slope",
    "rough",
    "texture",
    "long",
    "clear",
    "neck",
    "cut",
    "frame",
    "local",
    "misfit",
    "freed",
    "star",
    "around",
    "gathered",
    "several",
    "apart",
)
# A region with more of its boundary than this on the picture's edge is cut off by it; that it is
# small then counts by half.
_CUT_OFF, _EXCUSE = 0.05, 0.5
# What the picture's edge cuts off counts only where so much of the rest of its boundary is open.
_LEAST_OPEN = 0.4


@dataclass(frozen=True, slots=True)
class DoubtModel:
    """Weights of a logistic regression: logit(1 - doubt) = intercept + sum of weight x feature.

    Parameters
    ----------
    intercept : float
    size : float
        Weight of the distance of ln(diameter) from the middle of the range, in half ranges.
    open : float
        Weight of the share of the boundary beyond which contrast falls away.
    faint : float
        Weight of the squared log of how much weaker the edge step is than the picture's usual one.
    slope : float
        Weight of the fall of contrast across the boundary over the mean contrast.
    rough : float
        Weight of the boundary's spread about the ellipse of equal moments.
    texture : float
        Weight of the relative standard deviation of contrast inside.
    long : float
        Weight of the log of long over short axis.
    clear : float
        Weight of the log of the edge step in units of the ground's noise.
    neck : float
        Weight of the width of the neck to the nearest kin over the own width.
    cut : float
        Weight of how far from half its mean contrast the region was cut.
    frame : float
        Weight of the share of the boundary on the edge of the picture.
    local : float
        Weight of having been cut out against its surroundings.
    misfit : float
        Weight of the size's distance times roughness: together they say less than each alone.
    freed : float
        Weight of the open share of what was cut out against its surroundings.
    star, around : float
        Weights of how leaves radiate from the centre and how far around it; plants only.
    gathered, several : float
        Weights of how many leaves were given to a plant of that centre, and of how many further
        plants' centres lie inside; plants only.
    apart : float
        Weight of being a plant put together from single leaves; plants only. Of such a plant
        `rough`, `texture`, `long` and `cut` say nothing and are 0.

    References
    ----------
    Cox, D. R. (1958), The regression analysis of binary sequences, J. R. Stat. Soc. B 20, 215-242.
    """

    intercept: float
    size: float
    open: float
    faint: float
    slope: float
    rough: float
    texture: float
    long: float = 0.0
    clear: float = 0.0
    neck: float = 0.0
    cut: float = 0.0
    frame: float = 0.0
    local: float = 0.0
    misfit: float = 0.0
    freed: float = 0.0
    star: float = 0.0
    around: float = 0.0
    gathered: float = 0.0
    several: float = 0.0
    apart: float = 0.0

    @property
    def weights(self) -> NDArray[np.float64]:
        """The weights in the order of `FEATURES`."""
        return np.array([getattr(self, name) for name in FEATURES])


# Fitted by tests/benchmarks/fit_doubt.py: GENERAL on hand-marked photographs of five subjects, the
# kinds on drawn scenes of their own (seeds 1000-1099), held near GENERAL by a ridge: LESIONS near what
# it was with `cut`, `frame` and `local`, COLONIES and SEEDLINGS near what it was before, all three
# before `misfit` and `freed` were measured.
GENERAL = DoubtModel(
    intercept=1.908,
    size=-1.624,
    open=1.175,
    faint=-0.194,
    slope=0.831,
    rough=-13.653,
    texture=-2.058,
    long=0.000,
    clear=0.000,
    neck=-0.405,
    cut=0.967,
    frame=0.000,
    local=-0.560,
    misfit=3.772,
    freed=0.692,
    star=0.000,
    around=0.000,
)
COLONIES = DoubtModel(
    intercept=0.364,
    size=-1.162,
    open=2.083,
    faint=-0.053,
    slope=1.488,
    rough=-22.000,
    texture=-3.546,
    long=-5.530,
    clear=1.037,
    neck=-0.048,
    cut=0.000,
    frame=0.000,
    local=0.000,
    misfit=0.000,
    freed=0.000,
    star=0.000,
    around=0.000,
)
SEEDLINGS = DoubtModel(
    intercept=2.292,
    size=-1.219,
    open=1.752,
    faint=0.058,
    slope=-0.217,
    rough=-9.115,
    texture=-6.177,
    long=-5.574,
    clear=0.834,
    neck=-1.748,
    cut=0.000,
    frame=0.000,
    local=0.000,
    misfit=0.000,
    freed=0.000,
    star=5.478,
    around=0.322,
    gathered=2.917,
    several=-0.442,
    apart=-6.117,
)
LESIONS = DoubtModel(
    intercept=0.506,
    size=-2.460,
    open=0.910,
    faint=0.294,
    slope=0.428,
    rough=-18.036,
    texture=-7.447,
    long=-2.520,
    clear=2.173,
    neck=-0.496,
    cut=-0.039,
    frame=-3.687,
    local=-0.104,
    misfit=0.000,
    freed=0.000,
    star=0.000,
    around=0.000,
)
MODELS: dict[Kind, DoubtModel] = {
    "spots": GENERAL,
    "colonies": COLONIES,
    "seedlings": SEEDLINGS,
    "lesions": LESIONS,
}


def features(
    candidates: Candidates,
    *,
    noise: float,
    smallest_px: float,
    largest_px: float,
    step: float | None = None,
) -> NDArray[np.float64]:
    """Measure what the model weighs.

    Parameters
    ----------
    candidates : Candidates
        Regions of one photograph.
    noise : float
        The ground's noise, in the units of the candidates' contrast.
    smallest_px, largest_px : float
        Expected range of diameters, in the candidates' pixels.
    step : float or None
        The picture's usual edge step; None takes that of these candidates.

    Returns
    -------
    ndarray of shape (n, 14)
        Columns in the order of `FEATURES`, without those of plants only.
    """
    middle = 0.5 * np.log(smallest_px * largest_px)
    half = 0.5 * np.log(largest_px / smallest_px) + 0.2
    size = (np.log(candidates.diameter) - middle) / half
    # What the picture's edge cuts off is larger than it looks.
    size = np.where((size < 0) & (candidates.frame > _CUT_OFF), _EXCUSE * size, size)
    usual = usual_step(candidates) if step is None else step
    relative = np.log(np.maximum(candidates.step, 1e-6) / usual)
    distance = np.minimum(np.abs(size), 2.5)
    rough = np.minimum(candidates.rough, 0.5)
    return np.column_stack(
        [
            distance,
            candidates.open,
            np.clip(relative, -3.0, 0.0) ** 2,
            np.clip(candidates.slope, -1.0, 3.0),
            rough,
            np.minimum(candidates.texture, 1.5),
            np.minimum(np.log(candidates.elongation), 1.5),
            np.clip(np.log(np.maximum(candidates.step, 1e-3) / noise), -1.0, 5.0),
            np.minimum(candidates.neck, 1.0),
            np.minimum(np.abs(candidates.height - 0.5), 1.0),
            candidates.frame,
            candidates.local,
            distance * rough,
            candidates.local * candidates.open,
        ]
    )


def shows_itself(candidates: Candidates) -> NDArray[np.bool_]:
    """Tell which candidates show enough of an outline to be judged by it.

    Parameters
    ----------
    candidates : Candidates

    Returns
    -------
    ndarray of bool, shape (n,)
        False where the picture's edge cuts a region off and most of its other boundary borders on
        more of the same: a strip of ground in a corner looks so.
    """
    return np.asarray((candidates.frame <= _CUT_OFF) | (candidates.open >= _LEAST_OPEN))


def usual_step(candidates: Candidates) -> float:
    """Median edge step of the picture's well-shaped, free-standing candidates."""
    positive = candidates.step > 0
    good = positive & (candidates.fill > 0.93) & (candidates.open > 0.7)
    if good.sum() < 5:
        good = positive
    return float(np.median(candidates.step[good])) if good.any() else 1.0


def doubt_of(measured: NDArray[np.float64], model: DoubtModel) -> NDArray[np.float64]:
    """Estimate the probability that each candidate is false.

    Parameters
    ----------
    measured : ndarray of shape (n, k)
        The first k of `FEATURES`; those left out count as 0.
    model : DoubtModel
        Weights.

    Returns
    -------
    ndarray of shape (n,)
        Doubt, 0..1.
    """
    logit = model.intercept + measured @ model.weights[: measured.shape[1]]
    return np.asarray(1.0 / (1.0 + np.exp(np.clip(logit, -50.0, 50.0))))
