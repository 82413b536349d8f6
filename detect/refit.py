"""How the weights of the doubt, and its cut-off, are fitted to what a person has reviewed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detect.calibration import Calibration, fit_calibration
from detect.doubt import FEATURES, DoubtModel, doubt_of
from detect.lesson import Decided, Lesson, decided
from detect.own_colour import OwnColour

# Cut-offs that are tried, as logits of the doubt.
_LOGITS = np.linspace(-3.2, 3.2, 65)
_CUTS = 1.0 / (1.0 + np.exp(-_LOGITS))
# F1 is averaged over neighbouring cut-offs with these weights before the best is taken.
_SMOOTHING = np.array([1, 2, 3, 4, 3, 2, 1]) / 16.0
# Own colours are counted in tens of L*, a*, b*; features in their usual spread among candidates of
# hand-marked photographs, so that a pull means the same whatever the photograph.
_COLOUR_UNIT = 10.0
_USUAL_SPREAD = {
    "size": 0.48,
    "open": 0.28,
    "faint": 2.2,
    "slope": 0.29,
    "rough": 0.058,
    "texture": 0.15,
    "long": 0.30,
    "clear": 1.04,
    "neck": 0.40,
}
_OTHER_SPREAD = 0.25
_MOST_STEPS = 40


@dataclass(frozen=True, slots=True)
class RefitOptions:
    """How strongly the weights and the cut-off are held where they were.

    Parameters
    ----------
    say : float
        Weight of each spot's likelihood.
    ridge : float
        Pull of each standardised weight towards the kind's.
    colour_ridge : float
        Pull of each weight of the own colour, per ten units, towards zero.
    cut_pull : float
        F1 that a shift of the cut-off by one logit must gain, from very many objects.
    cut_objects : float
        Number of real objects from which it must gain twice as much.
    rounds : int
        How often spots are chosen and the weights fitted to them.
    """

    say: float = 0.3
    ridge: float = 30.0
    colour_ridge: float = 3.0
    cut_pull: float = 0.03
    cut_objects: float = 100.0
    rounds: int = 3


@dataclass(frozen=True, slots=True)
class Refitted:
    """Weights of the doubt, with those of the own colour where it has a say."""

    model: DoubtModel
    own_colour: OwnColour | None = None

    def doubt(self, lesson: Lesson) -> NDArray[np.float64]:
        """Doubt of a lesson's candidates."""
        doubt = doubt_of(lesson.measured, self.model)
        return doubt if self.own_colour is None else self.own_colour.eased(doubt, lesson.colours)


def refit(
    lessons: Sequence[Lesson], prior: DoubtModel, *, options: RefitOptions | None = None
) -> Refitted:
    """Fit the weights of the doubt to reviewed photographs, near those they had.

    Parameters
    ----------
    lessons : sequence of Lesson
        Reviewed photographs.
    prior : DoubtModel
        Weights they are held near.
    options : RefitOptions, optional

    Returns
    -------
    Refitted

    Notes
    -----
    Logistic regression of real against false spots [1]_, penalised by the squared distance of the
    standardised weights from `prior` [2]_: the mode of the posterior under a normal prior about
    the kind's weights, which rules while few spots were reviewed. Three more weights, held near
    zero, are for the spot's own colour. The spots are those that would be found up to a doubt of
    0.97; with the weights they change, so they are chosen and fitted to in turn.

    References
    ----------
    .. [1] Cox DR (1958). The regression analysis of binary sequences. Journal of the Royal
       Statistical Society B 20, 215-242.
    .. [2] le Cessie S, van Houwelingen JC (1992). Ridge estimators in logistic regression.
       Applied Statistics 41, 191-201.
    """
    options = options or RefitOptions()
    refitted = Refitted(prior)
    for _ in range(options.rounds):
        chosen = [decided(lesson, refitted.doubt(lesson)) for lesson in lessons]
        hit = np.concatenate([each.hit for each in chosen])
        if not hit.any():
            return refitted
        pairs = list(zip(lessons, chosen, strict=True))
        measured = np.vstack([lesson.measured[each.rows] for lesson, each in pairs])
        colours = np.vstack([lesson.colours[each.rows] for lesson, each in pairs])
        refitted = _fitted(measured, colours, hit, prior, options)
    return refitted


def _fitted(
    measured: NDArray[np.float64],
    colours: NDArray[np.float64],
    hit: NDArray[np.bool_],
    prior: DoubtModel,
    options: RefitOptions,
) -> Refitted:
    """Fit the weights to spots that are known to be real or false."""
    usual = colours[hit].mean(axis=0)
    k = measured.shape[1]
    spread = np.array([_USUAL_SPREAD.get(name, _OTHER_SPREAD) for name in FEATURES[:k]])
    design = np.column_stack(
        [np.ones(len(hit)), measured / spread, (colours - usual) / _COLOUR_UNIT]
    )
    centre = np.r_[prior.intercept, prior.weights[:k] * spread, np.zeros(3)]
    pull = np.r_[1.0, np.full(k, options.ridge), np.full(3, options.colour_ridge)]
    best = _mode(design, hit.astype(np.float64), options.say, centre, pull)
    weights = dict(zip(FEATURES, best[1 : k + 1] / spread, strict=False))
    model = replace(
        prior, intercept=_plain(best[0]), **{name: _plain(v) for name, v in weights.items()}
    )
    lightness, red, yellow = (_plain(v / _COLOUR_UNIT) for v in best[k + 1 :])
    at = (_plain(usual[0]), _plain(usual[1]), _plain(usual[2]))
    return Refitted(model, OwnColour(at, (lightness, red, yellow)))


def best_cut(spots: Decided, usual: Decided, usual_cut: float, *, options: RefitOptions) -> float:
    """Choose the highest doubt to keep.

    Parameters
    ----------
    spots : Decided
        Spots judged by new weights, best by weights that had not seen their photograph.
    usual : Decided
        The same photographs judged by the weights as they were.
    usual_cut : float
        The highest doubt that was kept of those.
    options : RefitOptions

    Returns
    -------
    float
        The cut-off of the highest F1, less a pull times the squared distance in logits from the
        cut-off that keeps about as many spots as before; the pull weakens with their number.
    """
    before = int((usual.doubt <= usual_cut).sum())
    kept = np.searchsorted(spots.doubt, _CUTS, side="right")
    start = float(np.log(usual_cut) - np.log1p(-usual_cut)) if usual_cut < 1 else _LOGITS[-1]
    alike = np.flatnonzero(np.abs(kept - before) <= max(2, 0.05 * before))
    if not alike.size:
        alike = np.array([int(np.argmin(np.abs(kept - before)))])
    anchor = _LOGITS[alike[np.argmin(np.abs(_LOGITS[alike] - start))]]
    pull = options.cut_pull * (1.0 + options.cut_objects / max(1, spots.real))
    worth = smooth_f1(spots) - pull * (_LOGITS - anchor) ** 2
    return _plain(float(_CUTS[int(np.argmax(worth))]))


def smooth_f1(spots: Decided) -> NDArray[np.float64]:
    """F1 at each cut-off that is tried, averaged over its neighbours."""
    f1 = np.array([f1_at(spots, cut) for cut in _CUTS])
    return np.convolve(np.pad(f1, 3, mode="edge"), _SMOOTHING, mode="valid")


def f1_at(spots: Decided, cut: float) -> float:
    """F1 of the spots of no more doubt than `cut`; 1 where there is nothing and nothing found."""
    kept = int(np.searchsorted(spots.doubt, cut, side="right"))
    total = kept + spots.real
    return 2.0 * float(spots.hit[:kept].sum()) / total if total else 1.0


def recalibrated(spots: Decided, cut: float) -> Calibration:
    """Fit the calibration of the doubts of spots that are kept."""
    kept = spots.doubt <= cut
    fitted = fit_calibration(spots.doubt[kept], ~spots.hit[kept])
    return Calibration(_plain(fitted.intercept), _plain(fitted.slope))


def _mode(
    design: NDArray[np.float64],
    real: NDArray[np.float64],
    say: float,
    centre: NDArray[np.float64],
    pull: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Minimise minus the log likelihood times `say` plus half the pulled squared distance.

    By Newton's steps, halved until they lead downhill; the sum is strictly convex.
    """

    def loss(at: NDArray[np.float64]) -> float:
        eta, away = design @ at, at - centre
        fit = (np.logaddexp(0.0, eta) - real * eta).sum()
        return float(say * fit + 0.5 * (pull * away**2).sum())

    at, here = centre, loss(centre)
    for _ in range(_MOST_STEPS):
        p = 1.0 / (1.0 + np.exp(-np.clip(design @ at, -50.0, 50.0)))
        slope = say * (design.T @ (p - real)) + pull * (at - centre)
        curvature = say * (design.T * (p * (1 - p))) @ design + np.diag(pull)
        step = np.linalg.solve(curvature, slope)
        for _ in range(_MOST_STEPS):
            there = loss(at - step)
            if there <= here:
                break
            step = 0.5 * step
        at = at - step
        if here - there < 1e-10 * max(1.0, abs(here)):
            break
        here = there
    return at


def _plain(value: float) -> float:
    """Round to what the file of what was learned holds: five digits."""
    return float(f"{value:.5g}")
