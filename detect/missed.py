"""What share of the objects of a photograph is found, judged by the copies set into it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, fields
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

from detect.logistic import LogisticCurve, fit_logistic
from detect.planted import Recall, Share
from detect.spots import Spots
from detect.stamps import separations

# A found spot stands for no more than this many objects, however unlikely it was to be found.
_MOST_STOOD_FOR = 4.0
# Nothing is said of sizes and contrasts beyond these quantiles of the copies'.
_MEASURED = (0.05, 0.95)
# A neighbour has a say below this separation, in sums of both radii.
_NEIGHBOUR = 1.5
# Bounds of the classes in which shares are shown: thirds of size and contrast, and neighbours.
_CLASSES = 3
_BY_SEPARATION = (0.0, 0.8, 1.1, _NEIGHBOUR, math.inf)
Z = 1.959963984540054  # upper 2.5 % point of the normal law


@dataclass(frozen=True, slots=True, eq=False)
class Trials:
    """Single copies and what became of them, as columns of one length.

    Parameters
    ----------
    round : ndarray of int, shape (m,)
        In which round each was set.
    radius : ndarray of shape (m,)
        In pixels.
    contrast : ndarray of shape (m,)
        In units of noise.
    separation : ndarray of shape (m,)
        From the nearest spot, in sums of both radii.
    found : ndarray of bool, shape (m,)
        Whether it was found again.

    Raises
    ------
    ValueError
        If the columns differ in length.
    """

    round: NDArray[np.intp]
    radius: NDArray[np.float64]
    contrast: NDArray[np.float64]
    separation: NDArray[np.float64]
    found: NDArray[np.bool_]

    def __post_init__(self) -> None:
        for field in fields(self):
            column = getattr(self, field.name)
            if column.shape != (self.round.size,):
                raise ValueError(f"{field.name} has shape {column.shape}, not ({self.round.size},)")
            column.setflags(write=False)

    def __len__(self) -> int:
        return self.round.size

    def where(self, chosen: NDArray[np.bool_]) -> Trials:
        """Return the chosen rows."""
        return Trials(*(getattr(self, field.name)[chosen] for field in fields(self)))


def recall_of(trials: Trials, spots: Spots) -> Recall:
    """Estimate what share of the objects of a photograph is found.

    Parameters
    ----------
    trials : Trials
        Single copies of at least two rounds.
    spots : Spots
        What was found in the photograph itself.

    Returns
    -------
    Recall

    Raises
    ------
    ValueError
        If there are no spots or fewer than two rounds.

    Notes
    -----
    The chance p of being found is a logistic function of log radius, log contrast and how near
    the nearest neighbour is, fitted to the copies. The spots found lack the missed ones, so each
    found spot stands for 1/p objects [1]_ with p from its own size, contrast and neighbour
    [2]_, [3]_, 4 objects at most; each weighs by 1 less its doubt, and the recall is the sum of
    weights over that of weights by 1/p. Where a spot is smaller, larger, fainter or stronger than
    nineteen in twenty copies, the nearest size and contrast that was measured stands in.
    The standard error is the jackknife's over rounds [4]_. The interval is for the share found of
    the objects in this very photograph, which itself varies by chance: of N objects (n over the
    recall R) a beta-binomial number [5]_ is found, its chance drawn from what m trials leave
    open, Beta(m R + 1/2, m (1 - R) + 1/2), where m is R (1 - R) over the squared standard error,
    but no more than the number of copies.
    Objects that look unlike every spot found have no copy and no say.

    References
    ----------
    .. [1] Horvitz DG, Thompson DJ (1952). A generalization of sampling without replacement from a
       finite universe. Journal of the American Statistical Association 47, 663-685.
    .. [2] Huggins RM (1989). On the statistical analysis of capture experiments. Biometrika 76,
       133-140.
    .. [3] Alho JM (1990). Logistic regression in capture-recapture models. Biometrics 46, 623-635.
    .. [4] Tukey JW (1958). Bias and confidence in not quite large samples. Annals of Mathematical
       Statistics 29, 614.
    .. [5] Skellam JG (1948). A probability distribution derived from the binomial distribution by
       regarding the probability of success as variable between the sets of trials. Journal of the
       Royal Statistical Society B 10, 257-261.
    """
    rounds = np.unique(trials.round)
    if len(spots) == 0 or rounds.size < 2:
        raise ValueError(f"{len(spots)} spots and {rounds.size} rounds tell no recall")
    value = _share_found(trials, spots)
    left_out = [_share_found(trials.where(trials.round != k), spots) for k in rounds]
    k = rounds.size
    error = math.sqrt((k - 1) / k * float(((np.array(left_out) - np.mean(left_out)) ** 2).sum()))
    spread = value * (1.0 - value)
    trusted = float(len(trials)) if error == 0 else min(float(len(trials)), spread / error**2)
    low, high = _foreseen(value, max(trusted, 1.0), round(len(spots) / value))
    return Recall(value, min(low, value), max(high, value), error)


def _foreseen(share: float, trials: float, objects: int) -> tuple[float, float]:
    """Return limits that hold the share found of so many objects with 95 % probability."""
    from scipy.stats import betabinom

    law = betabinom(objects, trials * share + 0.5, trials * (1.0 - share) + 0.5)
    return float(law.ppf(0.025) / objects), float(law.ppf(0.975) / objects)


def wilson(share: float, trials: float) -> tuple[float, float]:
    """Return the 95 % interval of a share seen in a number of trials.

    References
    ----------
    Wilson EB (1927). Probable inference, the law of succession, and statistical inference. Journal
    of the American Statistical Association 22, 209-212.

    Examples
    --------
    >>> low, high = wilson(0.9, 50)
    >>> round(low, 3), round(high, 3)
    (0.786, 0.957)
    """
    centre = (share + Z**2 / (2 * trials)) / (1 + Z**2 / trials)
    half = math.sqrt(share * (1 - share) / trials + Z**2 / (4 * trials**2))
    half *= Z / (1 + Z**2 / trials)
    return max(0.0, min(centre - half, share)), min(1.0, max(centre + half, share))


def shares(measure: ArrayLike, found: ArrayLike, bounds: Sequence[float]) -> tuple[Share, ...]:
    """Count copies, and those found, in classes of a measure; the last bound is included."""
    values, seen = np.asarray(measure, dtype=np.float64), np.asarray(found, dtype=np.bool_)
    rows = []
    for low, high in pairwise(bounds):
        within = (values >= low) & ((values < high) | (values == bounds[-1]) & (high == bounds[-1]))
        rows.append(Share(float(low), float(high), int(within.sum()), int(seen[within].sum())))
    return tuple(rows)


def thirds(measure: NDArray[np.float64], found: NDArray[np.bool_]) -> tuple[Share, ...]:
    """Count copies, and those found, in thirds of a measure."""
    bounds = np.quantile(measure, np.linspace(0.0, 1.0, _CLASSES + 1))
    return shares(measure, found, np.unique(bounds).tolist()) if measure.size > 1 else ()


def by_separation(trials: Trials) -> tuple[Share, ...]:
    """Count copies, and those found, by how near the nearest spot lies."""
    return shares(trials.separation, trials.found, _BY_SEPARATION)


def _share_found(trials: Trials, spots: Spots) -> float:
    """Return the weighted number of spots over that of the objects they stand for."""
    usual = float(np.median(spots.radius)), float(np.median(spots.contrast))
    terms = _terms(trials.radius, trials.contrast, trials.separation, usual)
    curve: LogisticCurve = fit_logistic(terms, trials.found)
    own = _terms(spots.radius, spots.contrast, separations(spots), usual)
    for k in (0, 1):
        own[:, k] = np.clip(own[:, k], *np.quantile(terms[:, k], _MEASURED))
    stands_for = np.minimum(1.0 / curve.at(own), _MOST_STOOD_FOR)
    return float(1.0 / np.average(stands_for, weights=1.0 - spots.doubt + 1e-9))


def _terms(
    radius: NDArray[np.float64],
    contrast: NDArray[np.float64],
    separation: NDArray[np.float64],
    usual: tuple[float, float],
) -> NDArray[np.float64]:
    """Return the terms of the logistic curve: size, contrast, nearness of a neighbour."""
    near = np.clip(_NEIGHBOUR - separation, 0.0, _NEIGHBOUR)
    return np.column_stack([np.log(radius / usual[0]), np.log(contrast / usual[1]), near])
