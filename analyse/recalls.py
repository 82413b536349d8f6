"""Which share of the objects a detector may have found, as far as it was measured."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy import special

from analyse.pattern import Pattern
from detect.planted import Recall

RecallSource = Literal["planted", "assumed", "checked", "table"]
NEAREST = 1e-6  # a chance nearer to 0 or 1 than this counts as that far away
_TRIED = 10  # recalls tried for each that is drawn
_ANY_LOGIT = (-2.0, 6.0)  # recalls from 0.12 to 0.998


@dataclass(frozen=True, slots=True)
class DrawOptions:
    """How detection error is drawn.

    Parameters
    ----------
    draws : int
        How many pictures of what may really be there; fewer, but at least 99, where spots and
        quadrats together are more than 10,000.
    shared_doubt : float
        Standard deviation of the error, on the logit scale, that the doubts of one photograph have
        in common.
    shared_recall : float
        The same of the recall that planted objects give.
    assumed_recall, assumed_spread : float
        Recall where none was measured, and its standard deviation on the logit scale.
    unlike : float
        Chance that a photograph is unlike those, so that any recall is as likely as another before
        planted objects are set.
    level : float
        Of the intervals.

    Raises
    ------
    ValueError
        If a value is impossible.

    Notes
    -----
    The three spreads and the assumed recall have the greatest likelihood on small scenes drawn with
    the fitting seeds (tests/benchmarks/under_doubt.py). That one photograph in five is unlike them
    is a caution of our own; those scenes would have none.

    Examples
    --------
    >>> DrawOptions().draws, DrawOptions(unlike=0.5).unlike
    (999, 0.5)
    """

    draws: int = 999
    shared_doubt: float = 1.5
    shared_recall: float = 0.75
    assumed_recall: float = 0.96
    assumed_spread: float = 1.0
    unlike: float = 0.2
    level: float = 0.95

    def __post_init__(self) -> None:
        if self.draws < 99:
            raise ValueError(f"{self.draws} draws are too few; 999 are usual")
        if min(self.shared_doubt, self.shared_recall, self.assumed_spread, self.unlike) < 0:
            raise ValueError("a spread is negative")
        if not (0 < self.assumed_recall < 1 and 0 < self.level < 1):
            raise ValueError("a recall or a level does not lie between 0 and 1")


def recalls(
    pattern: Pattern, options: DrawOptions, rng: np.random.Generator
) -> tuple[RecallSource, NDArray[np.float64] | None]:
    """Return where the recall comes from, and one for each draw; None where nothing is missed.

    Parameters
    ----------
    pattern : Pattern
        With what planted objects showed, and whether a person has checked it.
    options : DrawOptions
        What drawn scenes showed, and how many to draw.
    rng : numpy.random.Generator
        Source of randomness.

    Returns
    -------
    (source, ndarray of shape (draws,) or None)

    Notes
    -----
    See `analyse.draws.under_doubt`.

    Examples
    --------
    >>> points = Pattern.of([[1, 2], [3, 4]], (0, 0, 5, 5))
    >>> recalls(points, DrawOptions(), np.random.default_rng(1))
    ('table', None)
    """
    if pattern.changes is None:
        return "table", None
    if pattern.changes.is_checked:
        return "checked", None
    seen = None if pattern.planted is None else pattern.planted.recall
    steps = rng.standard_normal(options.draws)
    if pattern.planted is None or seen is None:
        logit = special.logit(options.assumed_recall) + options.assumed_spread * steps
        return "assumed", np.asarray(special.expit(logit))
    return "planted", _measured(seen, pattern.planted.copies, options, rng)


def _measured(
    seen: Recall, copies: int, options: DrawOptions, rng: np.random.Generator
) -> NDArray[np.float64]:
    """Return recalls from the law that trials leave of what was known before."""
    many = _TRIED * options.draws
    logit = special.logit(options.assumed_recall) + options.assumed_spread * rng.standard_normal(
        many
    )
    unlike = rng.random(many) < options.unlike
    logit[unlike] = rng.uniform(*_ANY_LOGIT, size=int(unlike.sum()))
    of_copies = special.expit(logit + options.shared_recall * rng.standard_normal(many))
    trials = float(copies)
    if seen.standard_error > 0:
        trials = min(trials, seen.value * (1 - seen.value) / seen.standard_error**2)
    found = max(trials, 1.0) * np.array([seen.value, 1 - seen.value])
    fits = special.xlogy(found[0], of_copies) + special.xlog1py(found[1], -of_copies)
    weights = np.exp(fits - fits.max())
    drawn = rng.choice(many, size=options.draws, p=weights / weights.sum())
    return np.asarray(special.expit(logit[drawn]))
