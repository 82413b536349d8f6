"""A bar of known length, banded in black and white, found anywhere in a photograph."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.edges import edge_line, linear_patch
from detect.errors import ScaleNotFound
from detect.photograph import Photograph
from detect.scale import Scale, scale_from_line
from detect.squares import dark_quads, reduced_grey

Points = NDArray[np.float64]
Array = NDArray[Any]

FEWEST_BLACK = 3  # bands: two black squares at two sides' distance may lie anywhere by chance
_ALIKE = 1.4  # in area, of two black bands of one bar
_ASTRAY = 0.22  # of a band's length, by which a band may lie off its place in the row
_FLOOR_PX = 0.05  # our own calibration, as for squares


@dataclass(frozen=True, slots=True, eq=False)
class Bar:
    """A banded bar seen in a photograph.

    Parameters
    ----------
    ends : ndarray of shape (2, 2)
        Middle of its first and of its last edge, in pixels.
    bands : int
        Number of bands, black and white.
    uncertainty_px : float
        Standard uncertainty of each end along the bar.
    """

    ends: Points
    bands: int
    uncertainty_px: float

    @property
    def length_px(self) -> float:
        """From end to end."""
        return float(np.hypot(*(self.ends[1] - self.ends[0])))


def find_bar(photograph: Photograph) -> Bar:
    """Find the one bar of equal bands, black and white in turn, that begins and ends with black.

    Parameters
    ----------
    photograph : Photograph
        With a bar of five bands or more, on white, at any turn.

    Returns
    -------
    Bar

    Raises
    ------
    ScaleNotFound
        If there is no such bar, or several.

    Notes
    -----
    A thick print or a bright picture moves the edges from black to white and those from white to
    black in opposite directions. The places s of all edges k = 0..n are therefore fitted as
    s = (a + b k) / (1 + c k) + d (-1)^k: equal bands in perspective, and the spread d of the ink.
    The ends are those of the equal bands.
    """
    grey, factor = reduced_grey(photograph)
    bands = [quad for quad in dark_quads(grey) if _is_band(quad)]
    rows = _rows_of(_once_each(bands), grey)
    bars = [bar for row in rows if (bar := _settled(photograph, row, factor)) is not None]
    if len(bars) == 1:
        return bars[0]
    if not bars:
        raise ScaleNotFound(
            f"No banded bar is seen in {photograph.name}: one of five bands or more of equal length,"
            " black and white in turn, black at both ends, on white; photograph it whole and"
            " uncovered, or give the ends of a known length."
        )
    places = ", ".join(f"{x:.0f},{y:.0f}" for x, y in (bar.ends.mean(axis=0) for bar in bars))
    raise ScaleNotFound(
        f"{len(bars)} banded bars are seen in {photograph.name} (about {places}); leave only one in"
        " the picture, or give the ends of a known length."
    )


def scale_from_bar(bar: Bar, length_mm: float) -> Scale:
    """Take the scale from a banded bar of known length.

    Parameters
    ----------
    bar : Bar
    length_mm : float
        From the outer edge of its first black band to that of its last.

    Returns
    -------
    Scale
        The same number of millimetres per pixel everywhere.

    Raises
    ------
    OptionWrong
        If the length is not positive.
    """
    line = scale_from_line(
        bar.ends[0], bar.ends[1], length_mm, end_uncertainty_px=bar.uncertainty_px
    )
    note = f"a bar of {length_mm:g} mm found, {bar.bands} bands, {bar.length_px:.1f} pixels long"
    return Scale(line.matrix, "ruler", line.relative_uncertainty, note)


def _once_each(quads: Sequence[Points]) -> list[Points]:
    """Keep one of the figures that cover each other: the largest, unless it is more than its like."""
    areas = np.array([_area(quad) for quad in quads])
    centres = np.array([quad.mean(axis=0) for quad in quads]).reshape(-1, 2)
    kept: list[int] = []
    for k in np.argsort(-areas, kind="stable"):
        before = np.array(kept, dtype=np.intp)
        same = np.hypot(*(centres[before] - centres[k]).T) < 0.3 * np.sqrt(areas[k])
        if not (same & (areas[before] < 2.0 * areas[k])).any():
            kept.append(int(k))
    return [quads[k] for k in kept]


def _area(quad: Points) -> float:
    after = np.roll(quad, -1, axis=0)
    return 0.5 * float((quad[:, 0] * after[:, 1] - quad[:, 1] * after[:, 0]).sum())


def _rows_of(quads: list[Points], grey: Array) -> list[list[Points]]:
    """Find rows of black bands, each as far from the next as it is long twice."""
    centres = np.array([quad.mean(axis=0) for quad in quads]).reshape(-1, 2)
    areas = np.array([_area(quad) for quad in quads])
    rows: list[list[int]] = []
    for i in range(len(quads)):
        alike = (areas < _ALIKE * areas[i]) & (areas * _ALIKE > areas[i])
        alike[i] = False
        near = np.hypot(*(centres - centres[i]).T) < 2.6 * _longest(quads[i])
        for j in np.flatnonzero(alike & near):
            step = centres[j] - centres[i]
            if abs(_extent(quads[i], step) * 2 / np.hypot(*step) - 1) > 0.25:
                continue
            row = _followed(i, int(j), centres, alike)
            if len(row) >= FEWEST_BLACK and _white_between(grey, centres[row]):
                rows.append(row)
    longest: list[list[int]] = []
    for row in sorted(rows, key=len, reverse=True):
        if not any(set(row) & set(other) for other in longest):
            longest.append(row)
    return [[quads[k] for k in row] for row in longest]


def _is_band(quad: Points) -> bool:
    """Tell whether opposite sides are equal and parallel, as in a band under some tilt."""
    sides = np.roll(quad, -1, axis=0) - quad
    return bool((np.hypot(*(sides[:2] + sides[2:]).T) < 0.3 * np.hypot(*sides[:2].T)).all())


def _longest(quad: Points) -> float:
    return float(np.hypot(*(np.roll(quad, -1, axis=0) - quad).T).max())


def _extent(quad: Points, direction: Points) -> float:
    """Return the length of a figure along a direction, as its area over its breadth across."""
    unit = direction / np.hypot(*direction)
    across = quad @ np.array([-unit[1], unit[0]])
    return _area(quad) / max(float(np.ptp(across)), 1e-9)


def _followed(i: int, j: int, centres: Points, alike: Array) -> list[int]:
    """Follow a row from i through j as far as bands lie where the next is expected."""
    row = [i, j]
    while True:
        step = centres[row[-1]] - centres[row[-2]]
        away = np.hypot(*(centres - centres[row[-1]] - step).T)
        away[~alike] = np.inf
        k = int(away.argmin())
        if not away[k] < _ASTRAY * 0.5 * np.hypot(*step) or k in row:
            return row
        row.append(k)


def _white_between(grey: Array, centres: Points) -> bool:
    """Tell whether white lies between all bands of a row, and beyond either end."""
    steps = np.diff(centres, axis=0)
    gaps = np.vstack([centres[:-1] + 0.5 * steps, centres[0] - 0.5 * steps[0]])
    gaps = np.vstack([gaps, centres[-1] + 0.5 * steps[-1]])
    height, width = grey.shape
    if (gaps < 0).any() or (gaps > (width - 1, height - 1)).any():
        return False
    black = np.array([grey[round(y), round(x)] for x, y in centres], dtype=float)
    white = np.array([grey[round(y), round(x)] for x, y in gaps], dtype=float)
    return bool(white.min() > black.max() + 30 and white.min() > 0.6 * white.max())


def _settled(photograph: Photograph, row: list[Points], factor: float) -> Bar | None:
    """Settle the edges of a row of bands on the full picture; None where they are not seen."""
    quads = [(quad + 0.5) / factor - 0.5 for quad in row]
    centres = np.array([quad.mean(axis=0) for quad in quads])
    step = (centres[-1] - centres[0]) / (len(row) - 1)
    unit = step / np.hypot(*step)
    across = np.array([-unit[1], unit[0]])
    tall = float(np.median([np.ptp(quad @ across) for quad in quads]))
    lean = float(np.median([_lean(quad, unit) for quad in quads]))
    band = 0.5 * float(np.hypot(*step))
    tall -= abs(lean) * band  # what a bar's own turn against the row of its centres adds
    bands = 2 * len(row) - 1
    reach = float(np.clip(0.2 * band, 2.0, 9.0))
    around = np.vstack(quads)
    patch, corner = linear_patch(photograph, around, reach + 3)
    start = centres[0] - 0.5 * band * unit - corner
    places, unsure = [], []
    for k in range(bands + 1):
        middle = start + k * band * unit
        top, bottom = middle - 0.5 * tall * across, middle + 0.5 * tall * across
        # Dark on the right as seen: going up, that is the side towards the bar's end.
        edge = edge_line(patch, *((bottom, top) if k % 2 == 0 else (top, bottom)), reach)
        if edge is None:
            return None
        places.append(_cut(edge.ends, start, unit))
        unsure.append(edge.uncertainty_px)
    return _bar_of(np.array(places), np.array(unsure), start + corner, unit, bands)


def _lean(quad: Points, unit: Points) -> float:
    """Return the slope of a band's long sides against the row."""
    sides = np.roll(quad, -1, axis=0) - quad
    along, across = sides @ unit, sides @ np.array([-unit[1], unit[0]])
    flat = np.abs(along) > np.abs(across)
    return float(np.median(across[flat] / along[flat])) if flat.any() else 0.0


def _cut(ends: Points, start: Points, unit: Points) -> float:
    """Return how far along the bar's middle line an edge crosses it."""
    across = np.array([-unit[1], unit[0]])
    (s0, t0), (s1, t1) = ((end - start) @ np.column_stack([unit, across]) for end in ends)
    return float(s0 - t0 * (s1 - s0) / (t1 - t0))


def _bar_of(s: Array, unsure: Array, start: Points, unit: Points, bands: int) -> Bar | None:
    """Fit equal bands in perspective, and the spread of the ink, to the places of all edges."""
    k = np.arange(bands + 1, dtype=np.float64)
    design = np.column_stack([np.ones_like(k), k, -k * s, (-1.0) ** k])
    solved, *_ = np.linalg.lstsq(design, s, rcond=None)
    away = s - design @ solved
    free = max(len(k) - 4, 1)
    scatter = np.hypot(np.sqrt((away**2).sum() / free), np.sqrt((unsure**2).mean()))
    scatter = float(np.hypot(scatter, _FLOOR_PX))
    a, b, c, spread = solved
    if abs(spread) > 0.15 * abs(b) or scatter > 0.1 * abs(b):
        return None
    ends = np.array([a, (a + b * bands) / (1 + c * bands)])
    # Of the two ends' difference, in the same fit.
    covariance = np.linalg.inv(design.T @ design)
    slope = 1 + c * bands
    moves = np.array([1 / slope - 1, bands / slope, -bands * (a + b * bands) / slope**2, 0.0])
    length = scatter * float(np.sqrt(moves @ covariance @ moves))
    return Bar(start + ends[:, None] * unit, bands, length / np.sqrt(2))
