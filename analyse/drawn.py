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
    """What a picture of frequencies shows: heights of bars and of the expected marks."""

    classes: tuple[str, ...]
    observed: NDArray[np.float64]
    expected: NDArray[np.float64]
