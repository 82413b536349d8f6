"""How large the objects are, learned from the picture when nobody says."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.choice import choose
from detect.doubt import DoubtModel
from detect.judge import judged_together
from detect.photograph import Photograph
from detect.regions import Column
from detect.wanted import DetectOptions
from detect.windows import views_that_teach

# Octaves of diameter start here, in photograph pixels, or at this share of the area's short side.
_SMALLEST_PX, _SMALLEST_SHARE = 5.0, 1 / 400
_LARGEST_SHARE = 0.45
_WORKING_PX = 8.0
# Of a very large picture the octaves begin where they do in one of this short side, and from
# more working pixels than these windows spread over it teach in place of the whole.
_USUAL_SHORT_PX, _TAUGHT_BY = 6000.0, 20_000_000


def learn_diameters(
    photograph: Photograph,
    area: StudyArea,
    options: DetectOptions,
    model: DoubtModel,
    *,
    direction: Column | None = None,
) -> tuple[float, float]:
    """Learn the range of diameters in which the picture holds the most plausible objects.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    options : DetectOptions
        Its `diameter` is not looked at.
    model : DoubtModel
    direction : ndarray of shape (3,) or None
        Direction in L*, a*, b* from ground to object, where it is known.

    Returns
    -------
    tuple of float
        Smallest and largest diameter in photograph pixels.

    Notes
    -----
    Every octave of diameter is searched on its own; each is worth the sum over its objects of
    (0.6 - doubt) times diameter to the power 1.5, so neither many specks nor one giant wins. The
    range runs between weighted quantiles of the diameters found in the best octave and its
    neighbours. Where no octave holds anything, it is the last one, which is searched soonest.
    """
    x0, y0, x1, y1 = area.polygon.bounds
    short = min(x1 - x0, y1 - y0)
    lowest = max(_SMALLEST_PX, _SMALLEST_SHARE * min(short, _USUAL_SHORT_PX))
    count = max(1, int(np.floor(np.log2(_LARGEST_SHARE * short / lowest))))
    found = [
        _octave(photograph, area, options, model, direction, lowest * 2.0**k) for k in range(count)
    ]
    worth = np.array([weight.sum() for _, weight in found])
    best = int(np.argmax(worth))
    if not worth[best] > 0:
        return lowest * 2.0 ** (count - 1), lowest * 2.0**count
    near = found[max(0, best - 1) : best + 2]
    diameter = np.concatenate([d for d, _ in near])
    weight = np.concatenate([w for _, w in near])
    order = np.argsort(diameter)
    share = np.cumsum(weight[order]) / weight.sum()
    low, high = (diameter[order][np.searchsorted(share, q)] for q in (0.1, 0.9))
    return float(0.75 * low), max(float(1.3 * high), lowest)


def _octave(
    photograph: Photograph,
    area: StudyArea,
    options: DetectOptions,
    model: DoubtModel,
    direction: Column | None,
    smallest: float,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Diameters (photograph pixels) found in one octave, and what each is worth."""
    shrink = min(1.0, _WORKING_PX / smallest)
    low = smallest * shrink
    views = views_that_teach(photograph, area, shrink, 2.0 * low, _TAUGHT_BY)
    low = smallest * views[0].shrink
    judgements, _ = judged_together(views, low, 2.0 * low, options, model, direction=direction)
    diameters, weights = [], []
    for judgement in judgements:
        rows = choose(judgement.candidates, judgement.doubt, highest_doubt=0.6)
        diameters.append(judgement.candidates.diameter[rows] / views[0].shrink)
        weights.append((0.6 - judgement.doubt[rows]) * diameters[-1] ** 1.5)
    return np.concatenate(diameters), np.concatenate(weights)
