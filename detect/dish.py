"""Find the round dish in a photograph, and the edge where its agar meets the wall."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.circles import RoughCircle, find_circle, shrunk
from detect.errors import AreaNotFound
from detect.inner import InnerEdge, choose_inner, place_inner
from detect.nested import Nest, find_nest
from detect.photograph import Photograph
from detect.readers import CutDish
from detect.rings import Frame, Ring
from detect.tilt import far_centre, sine_of_tilt

LEAST_SEEN = 0.45  # of a rough circle's line; text, soil and tissue stay below 0.35
LEAST_PLACED = 0.6  # of the inner edge's visible part at last; chance alone gives half
MOST_OUTSIDE = 0.02  # of the inner edge beyond the frame, without a word
MOST_CUT = 0.40  # of it beyond the frame where cut dishes are used
_PER_OUTSIDE = 0.02  # uncertainty of the diameter for each share of the edge beyond the frame
_OTHER_SEEN = 0.6  # of another circle's line, from which on it may be a dish
_ADVICE = (
    "photograph one round dish wholly in the frame, or choose another area"
    " (of a square dish: plot, with its corners)"
)
_MIDDLE_SIDE, _FINE_SIDE = 1100, 4200


@dataclass(frozen=True, slots=True)
class Ellipse:
    """An ellipse in pixels.

    Parameters
    ----------
    cx, cy : float
        Centre.
    semi_a, semi_b : float
        Half the long and half the short axis.
    angle_deg : float
        From the x axis (right) to the long axis, towards y (down).

    Raises
    ------
    ValueError
        If the axes are not positive and finite, or the first is the shorter.
    """

    cx: float
    cy: float
    semi_a: float
    semi_b: float
    angle_deg: float

    def __post_init__(self) -> None:
        finite = all(map(math.isfinite, (self.cx, self.cy, self.semi_a, self.angle_deg)))
        if not (finite and 0 < self.semi_b <= self.semi_a):
            raise ValueError(
                f"an ellipse needs 0 < semi_b <= semi_a, not {self.semi_b} and {self.semi_a}"
            )

    def outline(self, n: int = 360) -> NDArray[np.float64]:
        """Return `n` points of the ellipse, (n, 2)."""
        t = np.arange(n) * 2 * np.pi / n
        return np.asarray(
            np.array([self.cx, self.cy])
            + np.column_stack([self.semi_a * np.cos(t), self.semi_b * np.sin(t)]) @ self.axes.T
        )

    @property
    def axes(self) -> NDArray[np.float64]:
        """Unit vectors of the long and the short axis as columns, (2, 2)."""
        turn = math.radians(self.angle_deg)
        return np.array([[math.cos(turn), -math.sin(turn)], [math.sin(turn), math.cos(turn)]])

    @property
    def mean_radius(self) -> float:
        """Radius of the circle of equal area."""
        return math.sqrt(self.semi_a * self.semi_b)


@dataclass(frozen=True, slots=True)
class Dish:
    """A dish as found.

    Parameters
    ----------
    inner : Ellipse
        Where the agar meets the wall: the edge whose diameter is the known one.
    outer : Ellipse or None
        The outermost edge seen, if another than the inner one was.
    quality : float
        Share of the inner edge, 0..1, on which it was seen.
    scatter_px : float
        Robust standard deviation of the edge points about the inner ellipse, in pixels.
    spread : float
        How far apart the readings of where the edge lies in its profile are, as a fraction of the
        radius.
    far : tuple of float
        Where the true centre lies in the inner ellipse seen as the unit circle (see `tilt`).
    tilt_deg : float
        How far the camera stood off the dish's axis, about.
    outside : float
        Share of the inner edge beyond the frame, where the ellipse is only continued.
    notes : tuple of str
        What the reader should know, such as that part of the dish lies beyond the frame.
    """

    inner: Ellipse
    outer: Ellipse | None
    quality: float
    scatter_px: float = 0.0
    spread: float = 0.0
    far: tuple[float, float] = (0.0, 0.0)
    tilt_deg: float = 0.0
    outside: float = 0.0
    notes: tuple[str, ...] = ()


def find_dish(photograph: Photograph, *, cut: CutDish = "refuse") -> Dish:
    """Find the round dish of a photograph.

    Parameters
    ----------
    photograph : Photograph
        One dish, seen from above or up to 20 degrees aslant, on any bench. Of several, the one
        nearest to the middle of the frame is taken, with a note.
    cut : {"refuse", "use"}
        What to do with a dish that the frame cuts: refuse it, or fit its edge to the arc that is
        seen, at least 60 % of it, with a note and a larger uncertainty.

    Returns
    -------
    Dish

    Raises
    ------
    AreaNotFound
        If nothing round and large enough is seen, or the frame cuts it more than is allowed.

    Notes
    -----
    Edges vote for a rough circle; around it, the nested rings of one proportion are found along rays;
    the agar's edge is the innermost at which the picture changes; it is then placed to parts of a
    pixel on the photograph itself, along the part that nothing higher hides.
    """
    middle, factor = shrunk(photograph, _MIDDLE_SIDE)
    rough, notes = _central_circle(middle, factor, photograph)
    centre = (np.array([rough.cx, rough.cy]) + 0.5) * factor - 0.5
    nest = find_nest(middle, centre, rough.radius * factor)
    choice = choose_inner(nest, middle.shape)
    if choice is None:
        raise _no_edge(photograph)
    fine, fine_factor = shrunk(photograph, _FINE_SIDE)
    frame = nest.frame.around(choice.ring.shape).moved(fine_factor / factor)
    edge = place_inner(fine, frame, choice.visible)
    if edge.seen < LEAST_PLACED * edge.visible:
        raise _no_edge(photograph)
    dish = _dish(edge, fine_factor, _highest(nest, choice.ring), factor, photograph)
    outside = _outside_frame(dish.inner, photograph, cut)
    if choice.rival != 1.0:
        notes.append(
            f"another ring, {abs(100 * (choice.rival - 1)):.0f} %"
            f" {'larger' if choice.rival > 1 else 'smaller'}, might be the agar's edge instead;"
            " check the dashed line in the overlay"
        )
    if outside:
        notes.append(
            f"{100 * outside:.0f} % of the dish's edge lie beyond the frame; the edge was fitted to"
            " the rest, and only what lies in the frame counts"
        )
    spread = math.hypot(dish.spread, (choice.rival - 1) / math.sqrt(12), _PER_OUTSIDE * outside)
    return replace(dish, spread=spread, outside=outside, notes=tuple(notes))


def _central_circle(
    middle: NDArray[Any], factor: float, photograph: Photograph
) -> tuple[RoughCircle, list[str]]:
    """Find the rough circle of the dish nearest to the middle of the frame; note if there are more."""
    first = find_circle(middle, factor)
    if first.seen < LEAST_SEEN:
        raise AreaNotFound(
            f"No dish is seen in {photograph.name}: the best circle shows"
            f" {100 * first.seen:.0f} % of its edge, {100 * LEAST_SEEN:.0f} % are needed;"
            f" {_ADVICE}."
        )
    x, y = (photograph.width - 1) / 2, (photograph.height - 1) / 2
    room = max(abs(first.cx - x) + x, abs(first.cy - y) + y) - first.radius
    if room < first.radius:
        return first, []
    other = find_circle(middle, factor, beside=first)
    apart = math.hypot(other.cx - first.cx, other.cy - first.cy)
    whole = min(other.cx, other.cy, 2 * x - other.cx, 2 * y - other.cy) > 0.95 * other.radius
    alike = 0.7 < other.radius / first.radius < 1.4
    if not (whole and alike and other.seen > _OTHER_SEEN and apart > 0.9 * first.radius):
        return first, []
    nearest = min(first, other, key=lambda c: math.hypot(c.cx - x, c.cy - y))
    return nearest, ["several round things are seen; the one nearest to the middle was taken"]


def _no_edge(photograph: Photograph) -> AreaNotFound:
    return AreaNotFound(
        f"No dish is seen in {photograph.name}: the circle found there has no clear closed edge;"
        f" {_ADVICE}."
    )


def _highest(nest: Nest, inner: Ring) -> Frame | None:
    """Return the outermost clear ring, the lid's or the rim's, if there is one beside the inner."""
    outer = nest.rings[-1]
    for ring in nest.rings:
        if ring.size > inner.size + 0.012 and min(ring.strength, ring.seen - 0.2) > 0.5:
            outer = ring
    return None if outer is inner else nest.frame.around(outer.shape)


def _dish(
    edge: InnerEdge, fine_factor: float, rim: Frame | None, factor: float, photograph: Photograph
) -> Dish:
    """Put together what was found, in pixels of the photograph."""
    inner = edge.frame.moved(1 / fine_factor)
    far, outer = (0.0, 0.0), None
    if rim is not None:
        rim = rim.moved(1 / factor)
        outer = _ellipse(rim)
        middle = np.array([photograph.width - 1, photograph.height - 1]) / 2
        far = far_centre(inner, rim, middle)
    return Dish(
        _ellipse(inner),
        outer,
        edge.seen,
        edge.scatter / inner.pixel,
        edge.spread,
        far,
        math.degrees(math.asin(sine_of_tilt(inner))),
    )


def _ellipse(frame: Frame) -> Ellipse:
    """Return a frame's ellipse."""
    (short, long), vectors = np.linalg.eigh(frame.matrix)
    angle = math.degrees(math.atan2(vectors[1, 1], vectors[0, 1])) % 180.0
    cx, cy = frame.centre
    return Ellipse(float(cx), float(cy), float(long), float(min(short, long)), angle)


def _outside_frame(inner: Ellipse, photograph: Photograph, cut: CutDish) -> float:
    """Share of the edge beyond the frame, 0 if hardly any; refuse what must not be cut."""
    x, y = inner.outline().T
    inside = (x >= -0.5) & (y >= -0.5)
    inside &= (x <= photograph.width - 0.5) & (y <= photograph.height - 0.5)
    if (outside := float(1 - inside.mean())) <= MOST_OUTSIDE:
        return 0.0
    if cut == "refuse":
        raise AreaNotFound(
            f"The dish in {photograph.name} is cut by the frame ({100 * outside:.0f} % of its inner"
            " edge lie outside); photograph it whole, choose another area, or ask for cut dishes"
            " to be used (--cut-dish use)."
        )
    if outside > MOST_CUT:
        raise AreaNotFound(
            f"The dish in {photograph.name} is cut too far by the frame ({100 * outside:.0f} % of its"
            f" inner edge lie outside, at most {100 * MOST_CUT:.0f} % may); photograph it whole."
        )
    return outside
