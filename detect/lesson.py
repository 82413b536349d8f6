"""What a reviewed photograph teaches: which of the spots that might be found are real."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from detect.accuracy import MatchOptions
from detect.choice import choose
from detect.doubt import DoubtModel
from detect.find import look_at
from detect.own_colour import own_colours
from detect.photograph import read_photograph
from detect.regions import Candidates
from detect.reviewed import Reviewed
from detect.view import View

# Spots of more doubt than this teach nothing.
_TOP = 0.97


@dataclass(frozen=True, slots=True, eq=False)
class Lesson:
    """Candidates of a reviewed photograph, what was measured, and the real objects.

    Parameters
    ----------
    candidates : Candidates
        In working pixels.
    xy : ndarray of shape (n, 2)
        Their centres in photograph pixels.
    measured : ndarray of shape (n, k)
        Features of the doubt model.
    colours : ndarray of shape (n, 3)
        Their own colour, L*, a*, b*.
    within : ndarray of bool, shape (n,)
        Whether each is centred in the study area.
    real : ndarray of shape (m, 3)
        Real objects as rows x, y, radius in photograph pixels.
    """

    candidates: Candidates
    xy: NDArray[np.float64]
    measured: NDArray[np.float64]
    colours: NDArray[np.float64]
    within: NDArray[np.bool_]
    real: NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Decided:
    """Spots that would be found, the least doubtful first, and whether each is real.

    Parameters
    ----------
    rows : ndarray of int, shape (n,)
        Their rows among the candidates.
    doubt : ndarray of shape (n,)
    hit : ndarray of bool, shape (n,)
    real : int
        Number of real objects.
    """

    rows: NDArray[np.intp]
    doubt: NDArray[np.float64]
    hit: NDArray[np.bool_]
    real: int


def take_lesson(
    reviewed: Reviewed,
    diameters_px: tuple[float, float],
    *,
    model: DoubtModel,
    direction: tuple[float, float, float] | None = None,
) -> tuple[View, Lesson]:
    """Look at a reviewed photograph again.

    Parameters
    ----------
    reviewed : Reviewed
    diameters_px : pair of float
        Smallest and largest diameter in photograph pixels.
    model : DoubtModel
        Chooses the side of the ground where the picture is unclear.
    direction : tuple of three floats or None
        From ground to object in L*, a*, b*, where it is known.

    Returns
    -------
    tuple of View and Lesson
    """
    view, judgement = look_at(
        read_photograph(reviewed.photograph),
        reviewed.sheet.area,
        reviewed.options,
        diameters_px,
        model=model,
        direction=None if direction is None else np.array(direction),
    )
    candidates = judgement.candidates
    xy = np.column_stack(view.to_photograph(candidates.x, candidates.y))
    return view, Lesson(
        candidates,
        xy,
        judgement.measured,
        own_colours(view.lab, candidates),
        reviewed.sheet.area.contains(xy),
        reviewed.real,
    )


def decided(lesson: Lesson, doubt: NDArray[np.float64]) -> Decided:
    """Choose spots by their doubt, and pair them with the real objects.

    Parameters
    ----------
    lesson : Lesson
    doubt : ndarray of shape (n,)
        Of its candidates.

    Returns
    -------
    Decided
        Spots centred in the study area, up to a doubt of 0.97. Pairs are taken nearest first, so
        a lower cut-off leaves the pairs of what is left as they are.
    """
    rows = choose(lesson.candidates, doubt, highest_doubt=_TOP)
    rows = rows[lesson.within[rows]]
    hit = np.zeros(rows.size, dtype=np.bool_)
    if rows.size and len(lesson.real):
        tree = cKDTree(lesson.xy[rows])
        near = tree.query_ball_point(lesson.real[:, :2], _reach(lesson.real[:, 2]))
        pairs = [
            (float(np.hypot(*(lesson.xy[rows[i]] - lesson.real[j, :2]))), i, j)
            for j, found in enumerate(near)
            for i in found
        ]
        taken: set[int] = set()
        for _, i, j in sorted(pairs):
            if not hit[i] and j not in taken:
                hit[i] = True
                taken.add(j)
    return Decided(rows, doubt[rows], hit, len(lesson.real))


def together(parts: Sequence[Decided]) -> Decided:
    """Pool the spots of several photographs, the least doubtful first.

    The rows are those of each one's own photograph.
    """
    rows = np.concatenate([part.rows for part in parts])
    doubt = np.concatenate([part.doubt for part in parts])
    hit = np.concatenate([part.hit for part in parts])
    order = np.argsort(doubt, kind="stable")
    return Decided(rows[order], doubt[order], hit[order], sum(part.real for part in parts))


def _reach(radius: NDArray[np.float64]) -> NDArray[np.float64]:
    """How near a spot must lie to an object to be it, as when spots are scored."""
    options = MatchOptions()
    return np.maximum(options.radii * radius, options.least_px)
