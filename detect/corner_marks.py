"""Marks at the four corners of a plot, found by themselves: printed plates, or square fiducial marks."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.errors import ScaleNotFound
from detect.fiducials import read_fiducials
from detect.photograph import Photograph
from detect.readers import MarkKind
from detect.scale import Scale, scale_from_corners
from detect.squares import Square, find_squares

Points = NDArray[np.float64]

CORNER_NAMES = ("top left", "top right", "bottom right", "bottom left")
MOST_CANDIDATES = 12
LIKELY = 0.4  # of the clearest square's contrast: fainter ones are no plates when plates are told
MOST_UNLIKE = 0.12  # by which a side of a plate, made true, may differ from the mean of all
MOST_STRETCHED = 0.06  # by which all plates together may be wider than high, made true


@dataclass(frozen=True, slots=True, eq=False)
class CornerMarks:
    """The four marks of a plot.

    Parameters
    ----------
    kind : {"plates", "fiducials"}
    squares : tuple of Square
        In the order of the plot's corners: its top left, top right, bottom right, bottom left.
    ids : tuple of int
        Of fiducial marks, in the same order; empty for plates.
    """

    kind: MarkKind
    squares: tuple[Square, ...]
    ids: tuple[int, ...] = ()

    @property
    def centres(self) -> Points:
        """Their centres in pixels, (4, 2)."""
        return np.array([square.centre for square in self.squares])

    @property
    def uncertainty_px(self) -> Points:
        """Standard uncertainty of each centre in x and in y, (4,)."""
        return np.array([square.uncertainty_px for square in self.squares])


def find_corner_marks(
    photograph: Photograph, kind: MarkKind, width_mm: float, height_mm: float
) -> CornerMarks:
    """Find the marks at the corners of a plot.

    Parameters
    ----------
    photograph : Photograph
    kind : {"plates", "fiducials"}
        White plates with a black square, told by their place in the picture; or fiducial marks of
        the dictionary of 4 x 4 cells and 50 marks, told by their ids.
    width_mm, height_mm : float
        Sides of the plot between the marks' centres.

    Returns
    -------
    CornerMarks

    Raises
    ------
    ScaleNotFound
        If there are fewer than four marks, or no four, or several, that fit the plot.

    References
    ----------
    S. Garrido-Jurado et al., "Automatic generation and detection of highly reliable fiducial
    markers under occlusion", Pattern Recognition 47 (2014) 2280-2292.
    """
    if kind == "plates":
        return _four_plates(find_squares(photograph), width_mm, height_mm, photograph.name)
    return _four_fiducials(photograph, width_mm, height_mm)


def scale_from_marks(marks: CornerMarks, width_mm: float, height_mm: float) -> Scale:
    """Take the scale from four marks at the corners of a plot of known sides.

    Parameters
    ----------
    marks : CornerMarks
    width_mm, height_mm : float
        Sides of the plot between the marks' centres.

    Returns
    -------
    Scale
        Millimetres are counted from the first mark; the map is that of `scale_from_corners`. The
        relative uncertainty is the root mean square, over lengths all across the plot, of what the
        uncertainty of the four centres makes of them.

    Raises
    ------
    OptionWrong
        If a side is not positive.
    """
    return scale_from_centres(marks.centres, marks.uncertainty_px, marks.kind, width_mm, height_mm)


def scale_from_centres(
    centres: Points, uncertainty_px: Points, kind: MarkKind, width_mm: float, height_mm: float
) -> Scale:
    """Take the scale from the centres (4, 2) of marks and their uncertainty (4,), in pixels."""
    turned = 0
    if kind == "fiducials":  # their order may be turned in the picture
        turned = _turn(centres)
    sides = (width_mm, height_mm) if turned % 2 == 0 else (height_mm, width_mm)
    seen = scale_from_corners(np.roll(centres, -turned, axis=0), *sides)
    matrix = _back(turned, width_mm, height_mm) @ seen.matrix
    words = "corner plates" if kind == "plates" else "fiducial marks"
    scale = Scale(
        matrix, kind, 0.0, f"four {words} found, {width_mm:g} x {height_mm:g} mm between centres"
    )
    relative = _relative(centres, uncertainty_px, width_mm, height_mm)
    return replace(scale, relative_uncertainty=relative)


def _turn(centres: Points) -> int:
    """Return how many places the first as-seen (top left) corner stands behind the first mark."""
    for turned in range(4):
        rolled = np.roll(centres, -turned, axis=0)
        across = rolled[1] + rolled[2] - rolled[0] - rolled[3]
        if abs(math.atan2(across[1], across[0])) <= math.pi / 4:
            return turned
    return 0


def _back(turned: int, width_mm: float, height_mm: float) -> Points:
    """Turn millimetres counted from the corner seen at the top left to those of the first mark."""
    x, y = width_mm, height_mm
    return np.array(
        (
            ((1, 0, 0), (0, 1, 0), (0, 0, 1)),
            ((0, -1, x), (1, 0, 0), (0, 0, 1)),
            ((-1, 0, x), (0, -1, y), (0, 0, 1)),
            ((0, 1, 0), (-1, 0, y), (0, 0, 1)),
        )[turned],
        dtype=np.float64,
    )


def _relative(centres: Points, u_px: Points, width_mm: float, height_mm: float) -> float:
    """Carry the uncertainty of four corners to lengths all across the plot, root mean square."""
    true = np.array([[0, 0], [width_mm, 0], [width_mm, height_mm], [0, height_mm]])
    grid = np.array(list(itertools.product((0.1, 0.37, 0.63, 0.9), repeat=2)))
    places = _mapped(cv2.getPerspectiveTransform(_f32(true), _f32(centres)), grid * true[2])
    pairs = np.array(list(itertools.combinations(range(len(grid)), 2)))
    lengths = _lengths(places, centres, true, pairs)
    total = np.zeros(len(pairs))
    for corner, axis in itertools.product(range(4), range(2)):
        moved = centres.copy()
        moved[corner, axis] += 1.0
        total += (u_px[corner] * (_lengths(places, moved, true, pairs) / lengths - 1)) ** 2
    return float(np.sqrt(total.mean()))


def _lengths(places: Points, centres: Points, true: Points, pairs: Any) -> Points:
    seen = _mapped(cv2.getPerspectiveTransform(_f32(centres), _f32(true)), places)
    return np.asarray(np.hypot(*(seen[pairs[:, 0]] - seen[pairs[:, 1]]).T))


def _f32(points: Points) -> Any:
    return np.ascontiguousarray(points, dtype=np.float32)


def _mapped(matrix: Any, points: Points) -> Points:
    mapped = np.column_stack([points, np.ones(len(points))]) @ np.asarray(matrix).T
    return np.asarray(mapped[:, :2] / mapped[:, 2:])


def _four_plates(
    squares: Sequence[Square], width_mm: float, height_mm: float, name: str
) -> CornerMarks:
    """Choose the four plates that are equal squares when the plot is made true."""
    fits: list[tuple[float, tuple[Square, ...]]] = []
    turned_fits = False
    for four in itertools.combinations(squares[:MOST_CANDIDATES], 4):
        ordered = as_seen(four)
        if ordered is None:
            continue
        unlike = _unlike(ordered, width_mm, height_mm)
        if unlike is not None:
            fits.append((unlike, ordered))
        turned_fits |= _unlike(ordered, height_mm, width_mm) is not None
    if len(fits) > 1:
        fits = _clearest(fits)
    if len(fits) == 1:
        return CornerMarks("plates", fits[0][1])
    if fits:
        raise ScaleNotFound(
            f"{len(fits)} sets of four plates in {name} could be the corners of the plot; leave only"
            " the four plates of one plot in the picture, or give the corners' positions."
        )
    plot = f"{width_mm:g} x {height_mm:g} mm"
    if turned_fits:
        raise ScaleNotFound(
            f"The four plates in {name} do not fit a plot of {plot}, but one of {height_mm:g} x"
            f" {width_mm:g} mm: give its width first, as it lies in the picture."
        )
    raise ScaleNotFound(_why_no_four(squares, plot, name))


def _clearest(
    fits: list[tuple[float, tuple[Square, ...]]],
) -> list[tuple[float, tuple[Square, ...]]]:
    """Keep the sets of the highest contrast where the others are plainly fainter."""
    worst = [min(square.contrast for square in four) for _, four in fits]
    return [fit for fit, low in zip(fits, worst, strict=True) if low > LIKELY * max(worst)]


def as_seen(four: Sequence[Square]) -> tuple[Square, ...] | None:
    """Order four squares: top left, top right, bottom right, bottom left; None if dented."""
    centres = np.array([square.centre for square in four])
    away = centres - centres.mean(axis=0)
    order = np.argsort(np.arctan2(away[:, 1], away[:, 0]))
    sides = np.roll(centres[order], -1, axis=0) - centres[order]
    ahead = np.roll(sides, -1, axis=0)
    sine = (sides[:, 0] * ahead[:, 1] - sides[:, 1] * ahead[:, 0]) / np.maximum(
        np.hypot(*sides.T) * np.hypot(*ahead.T), 1e-9
    )
    if sine.min() < 0.5:
        return None
    order = np.roll(order, -_turn(centres[order]))
    return tuple(four[k] for k in order)


def _unlike(four: Sequence[Square], width_mm: float, height_mm: float) -> float | None:
    """Return how unlike each other four plates are once the plot is made true; None if too much."""
    centres = np.array([square.centre for square in four])
    true = np.array([[0, 0], [width_mm, 0], [width_mm, height_mm], [0, height_mm]])
    matrix = cv2.getPerspectiveTransform(_f32(centres), _f32(true))
    corners = np.array([_mapped(matrix, square.corners) for square in four])
    edges = np.roll(corners, -1, axis=1) - corners
    sides = np.hypot(edges[..., 0], edges[..., 1])
    unlike = float(np.abs(sides / sides.mean() - 1).max())
    # Second moments of the edges tell how much wider than high all plates are, at any turn.
    stretched = math.sqrt(float((edges[..., 0] ** 2).sum() / (edges[..., 1] ** 2).sum()))
    fits = unlike <= MOST_UNLIKE and abs(stretched - 1) <= MOST_STRETCHED
    return unlike if fits else None


def _why_no_four(squares: Sequence[Square], plot: str, name: str) -> str:
    """Say which corner's plate is missing, as far as the others tell."""
    likely = [s for s in squares if s.contrast >= LIKELY * squares[0].contrast]
    if len(likely) == 3:
        missing = _missing_corner(np.array([square.centre for square in likely]))
        return (
            f"Only three of the four corner plates are seen in {name}: the one at the {missing} is"
            " missing; uncover it and photograph it whole, or give the corners' positions."
        )
    places = ", ".join(f"{s.centre[0]:.0f},{s.centre[1]:.0f}" for s in likely)
    if len(likely) > 3:
        return (
            f"{len(likely)} black squares are seen in {name} (at {places}), but no four that lie"
            f" at the corners of a plot of {plot} and are alike; check the plot's size, clear what"
            " covers a plate, or give the corners' positions."
        )
    seen = f"{len(likely)} can be seen in {name} (only at {places})"
    return (
        f"Four corner plates are needed and {seen if likely else f'none can be seen in {name}'};"
        " photograph all four whole, or give the corners' positions."
    )


def _missing_corner(three: Points) -> str:
    """Name the corner that lies opposite the one at which the other two sides meet."""
    bends = []
    for k in range(3):
        u, v = three[k - 1] - three[k], three[k - 2] - three[k]
        bends.append(abs(float(u @ v)) / float(np.hypot(*u) * np.hypot(*v)))
    k = int(np.argmin(bends))
    fourth = three[k - 1] + three[k - 2] - three[k]
    centres = np.vstack([three, fourth])
    away = centres - centres.mean(axis=0)
    order = np.argsort(np.arctan2(away[:, 1], away[:, 0]))
    order = np.roll(order, -_turn(centres[order]))
    return CORNER_NAMES[int(np.flatnonzero(order == 3)[0])]


def _four_fiducials(photograph: Photograph, width_mm: float, height_mm: float) -> CornerMarks:
    """Read four fiducial marks; rising ids run clockwise from the plot's top left corner."""
    found = read_fiducials(photograph)
    ids = sorted(found)
    told = ", ".join(map(str, ids)) or "none"
    name = photograph.name
    if len(ids) < 4:
        raise ScaleNotFound(
            f"Four fiducial marks are needed and {len(ids)} can be read in {name} (ids: {told});"
            f"{_gap(found)} clear what covers the others and photograph all four whole, or give the"
            " corners' positions."
        )
    if len(ids) > 4:
        raise ScaleNotFound(
            f"{len(ids)} fiducial marks are read in {name} (ids: {told}); leave only the four of"
            " one plot in the picture, or give the corners' positions."
        )
    squares = tuple(found[k] for k in ids)
    ordered = as_seen(squares)
    turned = 0 if ordered is None else ordered.index(squares[0])
    if ordered is None or tuple(np.roll(np.arange(4), -turned)) != tuple(
        ordered.index(square) for square in squares
    ):
        raise ScaleNotFound(
            f"The fiducial marks in {name} (ids: {told}) do not run clockwise round the plot;"
            " peg them out with rising ids, clockwise from the plot's top left corner."
        )
    if _unlike(squares, width_mm, height_mm) is None:
        raise ScaleNotFound(
            f"The fiducial marks in {name} do not lie at the corners of a plot of {width_mm:g} x"
            f" {height_mm:g} mm; check its size (the width runs from the mark of the lowest id to"
            " the next)."
        )
    return CornerMarks("fiducials", squares, tuple(ids))


def _gap(found: dict[int, Square]) -> str:
    """Name the corner without a mark where three are seen."""
    if len(found) != 3:
        return ""
    missing = _missing_corner(np.array([square.centre for square in found.values()]))
    return f" the one seen at the {missing} of the picture is missing;"
