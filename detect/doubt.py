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
    "star",
    "around",
)


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
    star, around : float
        Weights of how leaves radiate from the centre and how far around it; plants only.

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
    star: float = 0.0
    around: float = 0.0

    @property
    def weights(self) -> NDArray[np.float64]:
        """The weights in the order of `FEATURES`."""
        return np.array([getattr(self, name) for name in FEATURES])


# Fitted by tests/benchmarks/fit_doubt.py: GENERAL on hand-marked photographs of five subjects, the
# kinds on drawn scenes of their own (seeds 1000-1099), held near GENERAL by a ridge.
GENERAL = DoubtModel(
    intercept=2.236,
    size=-1.201,
    open=0.000,
    faint=-0.183,
    slope=1.350,
    rough=-11.540,
    texture=-1.289,
    long=0.000,
    clear=0.000,
    neck=-0.546,
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
    star=0.000,
    around=0.000,
)
SEEDLINGS = DoubtModel(
    intercept=8.308,
    size=-1.183,
    open=0.357,
    faint=-0.034,
    slope=-0.078,
    rough=-13.807,
    texture=-0.944,
    long=-3.456,
    clear=-0.196,
    neck=-3.839,
    star=10.820,
    around=-3.289,
)
LESIONS = DoubtModel(
    intercept=0.758,
    size=-2.382,
    open=0.566,
    faint=-0.056,
    slope=0.892,
    rough=-19.119,
    texture=-6.273,
    long=-2.547,
    clear=1.830,
    neck=-0.776,
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
    ndarray of shape (n, 9)
        Columns in the order of `FEATURES`, without the last two.
    """
    middle = 0.5 * np.log(smallest_px * largest_px)
    half = 0.5 * np.log(largest_px / smallest_px) + 0.2
    size = np.minimum(np.abs(np.log(candidates.diameter) - middle) / half, 2.5)
    usual = usual_step(candidates) if step is None else step
    relative = np.log(np.maximum(candidates.step, 1e-6) / usual)
    return np.column_stack(
        [
            size,
            candidates.open,
            np.clip(relative, -3.0, 0.0) ** 2,
            np.clip(candidates.slope, -1.0, 3.0),
            np.minimum(candidates.rough, 0.5),
            np.minimum(candidates.texture, 1.5),
            np.minimum(np.log(candidates.elongation), 1.5),
            np.clip(np.log(np.maximum(candidates.step, 1e-3) / noise), -1.0, 5.0),
            np.minimum(candidates.neck, 1.0),
        ]
    )


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
