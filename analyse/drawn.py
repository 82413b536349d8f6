"""What a figure shows, in the coordinates of its axes: the answer of every drawing."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analyse.marks import Points


@dataclass(frozen=True, slots=True, eq=False)
class DrawnPicture:
    """What a picture of spots and quadrats shows, in the coordinates of its axes.

    Parameters
    ----------
    spots : dict of str to ndarray of shape (n, 2)
        Centres drawn as "counted", "doubtful", "placed" and "struck".
    quadrats : tuple of ndarray of shape (m, 2)
        Outlines of the quadrats, in the order of the grid.
    labels : tuple of (float, float, str)
        Where each quadrat's count stands, and the count.
    """

    spots: dict[str, Points]
    quadrats: tuple[Points, ...]
    labels: tuple[tuple[float, float, str], ...]


@dataclass(frozen=True, slots=True, eq=False)
class DrawnResiduals:
    """What a map of residuals shows: the value behind each colour, and the texts or signs."""

    values: NDArray[np.float64]
    outlined: NDArray[np.bool_]
    labels: tuple[tuple[float, float, str], ...]


@dataclass(frozen=True, slots=True, eq=False)
class DrawnFrequencies:
    """What a picture of frequencies shows: heights of bars and of both laws' marks.

    `clumped` is the negative binomial law's; None where it is the Poisson law, or not known.
    """

    classes: tuple[str, ...]
    observed: NDArray[np.float64]
    expected: NDArray[np.float64]
    clumped: NDArray[np.float64] | None = None


@dataclass(frozen=True, slots=True, eq=False)
class DrawnCurve:
    """What a curve with its global band shows, in the coordinates of its axes.

    Parameters
    ----------
    x, observed, central, low, high : ndarray of shape (k,)
        The curve of the photograph, the mean of the simulations, and the band.
    outside : ndarray of shape (m,)
        Those x at which the curve is drawn strong, because it leaves the band.
    mark : (float, float)
        The greatest departure.
    label : str
        Where that is; empty if it lies within the band.
    """

    x: NDArray[np.float64]
    observed: NDArray[np.float64]
    central: NDArray[np.float64]
    low: NDArray[np.float64]
    high: NDArray[np.float64]
    outside: NDArray[np.float64]
    mark: tuple[float, float]
    label: str
