"""Which colour a candidate has itself, and how much of its doubt that takes away."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detect.contrast import Map
from detect.regions import Candidates

# Points of a sunflower within this share of a candidate's ellipse.
_POINTS, _REACH = 21, 0.7
_GOLDEN_ANGLE = np.pi * (3 - np.sqrt(5))


@dataclass(frozen=True, slots=True)
class OwnColour:
    """Weights of a candidate's own colour: logit(1 - doubt) += sum of weight x (colour - usual).

    Parameters
    ----------
    usual : tuple of three floats
        L*, a*, b* at which nothing changes.
    weights : tuple of three floats
        Per unit of L*, a* and b*.

    Raises
    ------
    ValueError
        If there are not three of either, or one is not finite.
    """

    usual: tuple[float, float, float]
    weights: tuple[float, float, float]

    def __post_init__(self) -> None:
        if not (
            len(self.usual) == len(self.weights) == 3
            and np.isfinite([*self.usual, *self.weights]).all()
        ):
            raise ValueError(f"the own colour {self.usual}, {self.weights} is not three and three")

    def eased(
        self, doubt: NDArray[np.float64], colours: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Return doubts of candidates with these (n, 3) colours, their colour taken into account."""
        gain = (colours - self.usual) @ np.array(self.weights)
        with np.errstate(divide="ignore"):
            logit = np.log1p(-doubt) - np.log(doubt) + gain
        return np.asarray(1.0 / (1.0 + np.exp(np.clip(logit, -50.0, 50.0))))


def own_colours(lab: Map, candidates: Candidates) -> NDArray[np.float64]:
    """Average the colour of each candidate over the inner part of its ellipse.

    Parameters
    ----------
    lab : ndarray of shape (height, width, 3), float32
        The picture that the candidates lie in, L*, a*, b*.
    candidates : Candidates

    Returns
    -------
    ndarray of shape (n, 3)

    Notes
    -----
    The mean of 21 pixels spread evenly, as the seeds of a sunflower are [1]_.

    References
    ----------
    .. [1] Vogel H (1979). A better way to construct the sunflower head. Mathematical Biosciences
       44, 179-189.
    """
    c = candidates
    half = 0.5 * (c.sxx + c.syy)
    root = np.sqrt(np.maximum((0.5 * (c.sxx - c.syy)) ** 2 + c.sxy**2, 0.0))
    turn = 0.5 * np.arctan2(2 * c.sxy, c.sxx - c.syy)[:, None]
    seed = np.arange(_POINTS) + 0.5
    away = 2.0 * _REACH * np.sqrt(seed / _POINTS)
    u = np.sqrt(half + root)[:, None] * away * np.cos(seed * _GOLDEN_ANGLE)
    v = np.sqrt(np.maximum(half - root, 0.0))[:, None] * away * np.sin(seed * _GOLDEN_ANGLE)
    x = c.x[:, None] + u * np.cos(turn) - v * np.sin(turn)
    y = c.y[:, None] + u * np.sin(turn) + v * np.cos(turn)
    column = np.clip(np.rint(x), 0, lab.shape[1] - 1).astype(np.intp)
    row = np.clip(np.rint(y), 0, lab.shape[0] - 1).astype(np.intp)
    return np.asarray(lab[row, column].mean(axis=1, dtype=np.float64))
