"""Spots against hand-marked truth: what was found, what was missed, what was invented."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

from detect.accuracy import SCORE_COLUMNS, Accuracy
from detect.crowding import distances_apart
from detect.errors import RequestWrong
from detect.files import Cell, csv_text
from detect.matching import MatchOptions, match_spots
from detect.reliability import area_under_curve, reliability
from detect.sheet import Sheet
from detect.truth import Truth

DOUBT_COLUMNS = ("with_doubt", "mean_doubt", "share_false", "auc", "ece", "ece_equal_width")


@dataclass(frozen=True, slots=True, eq=False)
class Objects:
    """True objects of a study area, and what became of them.

    Parameters
    ----------
    xy : ndarray of shape (m, 2)
        Centres, in pixels.
    radius, radius_mm : ndarray of shape (m,)
        Radii; in millimetres NaN where no scale is known.
    known : ndarray of bool, shape (m,)
        Whether the radius was marked; where not, it is the usual one.
    apart : ndarray of shape (m,)
        Distance to the true neighbour that is nearest in sums of both radii, in that unit: 1 where
        two discs touch. Infinite without a neighbour.
    hit : ndarray of bool, shape (m,)
        Whether a spot was paired with it.
    off_px, off_mm : ndarray of shape (m,)
        Distance to that spot; NaN where there is none, or no scale.
    """

    xy: NDArray[np.float64]
    radius: NDArray[np.float64]
    radius_mm: NDArray[np.float64]
    known: NDArray[np.bool_]
    apart: NDArray[np.float64]
    hit: NDArray[np.bool_]
    off_px: NDArray[np.float64]
    off_mm: NDArray[np.float64]

    def __post_init__(self) -> None:
        _check_columns(self, self.hit.size)

    def __len__(self) -> int:
        return self.hit.size


@dataclass(frozen=True, slots=True, eq=False)
class Claims:
    """Counted spots, each of which claims to be an object, and whether it is one.

    Parameters
    ----------
    xy : ndarray of shape (k, 2)
        Centres, in pixels.
    radius : ndarray of shape (k,)
        Radii, in pixels.
    doubt : ndarray of shape (k,)
        Doubt of the spots that were found; NaN for those that a person placed.
    real : ndarray of bool, shape (k,)
        Whether a true object was paired with it.
    """

    xy: NDArray[np.float64]
    radius: NDArray[np.float64]
    doubt: NDArray[np.float64]
    real: NDArray[np.bool_]

    def __post_init__(self) -> None:
        _check_columns(self, self.real.size)

    def __len__(self) -> int:
        return self.real.size


@dataclass(frozen=True, slots=True, eq=False)
class Compared:
    """The counted spots of one photograph, or of many together, beside the truth.

    Parameters
    ----------
    name : str
        Photograph, or what is summed up.
    objects : Objects
        The true objects in the study area.
    claims : Claims
        The counted spots, without those at true objects beyond the area.
    """

    name: str
    objects: Objects
    claims: Claims

    @property
    def accuracy(self) -> Accuracy:
        """How many were found, missed and invented, and how far centres lie off."""
        hit = self.objects.hit
        return Accuracy(
            self.name,
            hit.size,
            len(self.claims),
            int(hit.sum()),
            float((self.objects.off_px[hit] ** 2).sum()),
            float((self.objects.off_mm[hit] ** 2).sum()),
        )

    @property
    def doubts(self) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
        """Doubts of the spots that have one, and which of those spots are false."""
        found = ~np.isnan(self.claims.doubt)
        return self.claims.doubt[found], ~self.claims.real[found]

    def row(self) -> tuple[Cell, ...]:
        """Return the cells of its row, in the order of `SCORE_COLUMNS` and `DOUBT_COLUMNS`."""
        doubt, false = self.doubts
        means = (float(doubt.mean()), float(false.mean())) if doubt.size else (None, None)
        return (
            *self.accuracy.row(),
            doubt.size,
            *means,
            area_under_curve(doubt, false),
            reliability(doubt, false).error,
            reliability(doubt, false, binning="width").error,
        )


def compare_sheet(
    sheet: Sheet,
    truth: Truth,
    *,
    usual_radius_px: float | None = None,
    options: MatchOptions | None = None,
) -> Compared:
    """Compare the counted spots of a sheet with the hand-marked objects of its study area.

    Parameters
    ----------
    sheet : Sheet
        As it stands, with its amendments applied; struck spots have no say.
    truth : Truth
        Objects outside the study area neither count as missed nor make a spot false.
    usual_radius_px : float, optional
        Radius of the objects whose radius was not marked; as `usual_radius_of` says unless given.
    options : MatchOptions, optional
        How near the members of a pair must lie.

    Returns
    -------
    Compared

    Raises
    ------
    RequestWrong
        If most objects lie outside the photograph, or a radius is needed and cannot be told.
    """
    _check_within(sheet, truth)
    radius = truth.radius
    if not truth.known.all():
        radius = np.where(truth.known, radius, usual_radius_px or usual_radius_of(sheet, truth))
    spots = sheet.spots.where(sheet.spots.counted)
    match = match_spots(spots.centres, truth.xy, radius, options=options)
    inside = sheet.area.contains(truth.xy)
    off_px, off_mm = (np.full(len(truth.xy), np.nan) for _ in range(2))
    off_px[match.truth] = match.distance
    radius_mm = np.full(len(truth.xy), np.nan)
    if sheet.scale is not None:
        to_mm = sheet.scale.to_mm
        apart = to_mm(spots.centres[match.found]) - to_mm(truth.xy[match.truth])
        off_mm[match.truth] = np.hypot(*apart.T)
        radius_mm = radius * sheet.scale.mm_per_px(truth.xy)
    objects = Objects(
        truth.xy[inside],
        radius[inside],
        radius_mm[inside],
        truth.known[inside],
        distances_apart(truth.xy, radius)[inside],
        np.isfinite(off_px)[inside],
        off_px[inside],
        off_mm[inside],
    )
    real = np.zeros(len(spots), dtype=np.bool_)
    real[match.found] = True
    at_one_beyond = np.zeros(len(spots), dtype=np.bool_)
    at_one_beyond[match.found[~inside[match.truth]]] = True
    doubt = np.where(spots.found, spots.doubt, np.nan)
    say = ~at_one_beyond
    claims = Claims(spots.centres[say], spots.radius[say], doubt[say], real[say])
    return Compared(sheet.photograph.name, objects, claims)


def usual_radius_of(sheet: Sheet, truth: Truth) -> float:
    """Tell the radius of objects for which none was marked.

    Parameters
    ----------
    sheet : Sheet
        Its settings say which diameters were looked for.
    truth : Truth
        Its other radii.

    Returns
    -------
    float
        In pixels: the median of the radii that were marked, or else half the middle (geometric
        mean) of the diameters looked for.

    Raises
    ------
    RequestWrong
        If neither is known.
    """
    if truth.known.any():
        return truth.usual_radius
    try:
        low, high = (float(value) for value in sheet.settings["detector"]["diameter_px"])
        radius = 0.5 * math.sqrt(low * high)
    except (KeyError, TypeError, ValueError):
        radius = math.nan
    if not (math.isfinite(radius) and radius > 0):
        raise RequestWrong(
            f"The truth of {sheet.photograph.name} marks no radii, and its sheet does not say which"
            " diameters were looked for; give --radius, such as 6px."
        )
    return radius


def joined(compared: Sequence[Compared], *, name: str = "all") -> Compared:
    """Put several photographs together, every object weighing the same."""
    return Compared(
        name,
        _stacked([each.objects for each in compared]),
        _stacked([each.claims for each in compared]),
    )


def score_csv(compared: Sequence[Compared]) -> str:
    """Return scores as a table, a row per photograph and one for all together."""
    rows = [each.row() for each in (*compared, joined(compared))]
    return csv_text([*SCORE_COLUMNS, *DOUBT_COLUMNS], rows, digits=6)


def _check_within(sheet: Sheet, truth: Truth) -> None:
    """Refuse a truth that can hardly be about this photograph."""
    width, height = sheet.photograph.width, sheet.photograph.height
    x, y = truth.xy.T
    outside = (x < -0.5) | (y < -0.5) | (x > width - 0.5) | (y > height - 0.5)
    if 2 * outside.sum() > outside.size:
        raise RequestWrong(
            f"{outside.sum()} of the {outside.size} objects of the truth lie outside the photograph"
            f" ({width} x {height} px); write x and y in pixels from its top left corner, and make"
            " sure that the table belongs to it."
        )


def _check_columns(table: Objects | Claims, n: int) -> None:
    """Refuse columns of different lengths, and make them read-only."""
    for field in fields(table):
        column = getattr(table, field.name)
        if len(column) != n:
            raise ValueError(f"{field.name} has {len(column)} values for {n} rows")
        column.setflags(write=False)


Table = TypeVar("Table", Objects, Claims)


def _stacked(tables: Sequence[Table]) -> Table:
    """Put several tables one under the other."""
    columns: list[Any] = [
        np.concatenate([getattr(table, field.name) for table in tables])
        for field in fields(tables[0])
    ]
    return type(tables[0])(*columns)
