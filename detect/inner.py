"""Which of a dish's nested edges is where the agar ends, and exactly where that edge runs.

The agar's edge lies lowest, so it is the innermost ring at which the picture changes. It shows as a
step (agar beside wall), as a line (the meniscus), or as both at once: the median profile across the
edge, taken along all rays on which nothing higher hides it, tells how much of either there is.

References
----------
B. D. Lucas and T. Kanade, "An iterative image registration technique with an application to stereo
vision", Proc. 7th Int. Joint Conf. on Artificial Intelligence (1981) 674-679: places found by
matching a profile instead of by its single steepest point.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.nested import CLEAR_TINT, Nest
from detect.rings import (
    RAYS,
    SHAPES,
    Frame,
    Ring,
    logs_of,
    robust_shape,
    slopes_along,
    smoothed_round,
    tints_in,
)

Array = NDArray[Any]

LEAST_VISIBLE = 0.42  # of the rays
_LEAST_RING_SEEN = 0.7  # of the visible rays
_OTHER_PLANE = 0.012  # rings shifted by more against each other lie at different heights
_CLEAR_OF = 0.012  # an edge so near to a higher one is hidden by it
_CLEAR_LIGHT = 0.05  # the same for log brightness, of a step or a line
_GROUP = 0.018  # rings within this share of the radius are one edge and its shading
# How far a ray's profile may lie off the median one, and how much of it on either side is matched.
_PASSES = ((0.014, 0.030), (0.008, 0.018), (0.006, 0.012), (0.005, 0.010))
_NEAR = 0.012  # how far off the edge may lie where it is read from the profile
_BESIDE = 0.02  # so far beside a line its sides are looked at
_AGREE = 0.004  # readings by brightness and by colour that lie closer agree
_STEP = 0.0012


_NEARLY = 0.8  # so much of a change is nearly enough
_LITTLE = 1.5  # and so much hardly more
_FARTHEST = 1.08  # times the chosen size, another ring may still be meant
_Candidate = tuple[Ring, Array, float, float]  # with its visible rays, share seen, and change


@dataclass(frozen=True, slots=True, eq=False)
class InnerEdge:
    """The agar's edge as placed.

    Parameters
    ----------
    frame : Frame
        Its ellipse, in pixels of the picture it was placed on.
    seen, visible : float
        Share of all rays on which it was seen, and on which nothing higher hides it.
    scatter : float
        Robust standard deviation about the ellipse, as a fraction of the radius.
    spread : float
        How far apart the readings of the profile lie, as a fraction of the radius.
    """

    frame: Frame
    seen: float
    visible: float
    scatter: float
    spread: float


def visible_rays(ring: Ring, rings: tuple[Ring, ...]) -> Array:
    """Tell on which rays no higher ring hides one: a larger one, shifted, that passes inside."""
    visible = np.ones(RAYS, bool)
    own = ring.distances()
    for other in rings:
        shifted = math.hypot(*(other.shape[1:3] - ring.shape[1:3])) > _OTHER_PLANE
        if shifted and other.size > ring.size and min(other.strength, other.seen - 0.2) > 0.5:
            visible &= other.distances() - own > _CLEAR_OF
    return visible


@dataclass(frozen=True, slots=True, eq=False)
class Choice:
    """The ring taken for the agar's edge, and the rays on which it is visible.

    `rival` is another ring's size over its own, where that might as well be the agar's edge; else 1.
    """

    ring: Ring
    visible: Array
    rival: float = 1.0


def choose_inner(nest: Nest, shape: tuple[int, ...]) -> Choice | None:
    """Choose the ring at which the agar ends, in a picture of a shape (rows, columns).

    It is the innermost that is seen on most of its visible rays and at which colour or brightness
    change, be it for good (a step) or for a while (a line); of it and its close neighbours in the
    same plane, the one that is seen best. None if there is no such ring.
    """
    logs = logs_of(smoothed_round(nest.rays, 2.0))
    candidates = []
    for ring in nest.rings:
        visible = visible_rays(ring, nest.rings)
        visible &= nest.frame.within(shape, ring.distances())
        if visible.mean() < LEAST_VISIBLE:
            continue
        seen = float(ring.on[visible].mean())
        if seen >= _LEAST_RING_SEEN:
            candidates.append((ring, visible, seen, _change(logs, nest.distances, ring, visible)))
    first = next((c for c in candidates if c[3] >= 1), None)
    if first is None:
        return None
    near = [
        c
        for c in candidates
        if 0 <= c[0].size - first[0].size < _GROUP
        and math.hypot(*(c[0].shape[1:3] - first[0].shape[1:3])) <= _OTHER_PLANE
    ]
    best = max(near, key=lambda c: c[2] + c[0].strength + c[0].of_tint)
    return Choice(best[0], best[1], _rival(best, max(c[3] for c in near), candidates))


def _rival(best: _Candidate, change: float, candidates: list[_Candidate]) -> float:
    """Size of the ring that might as well be the agar's edge, over the chosen one's; 1 if none might.

    One farther in, at which nothing much changes, or one farther out, at which far more does than the
    little that changes here.
    """
    for ring, _, _, other in candidates:
        ratio = ring.size / best[0].size
        inside = ratio < 1 - 1.5 * _GROUP and other > _NEARLY
        outside = 1 + 1.5 * _GROUP < ratio < _FARTHEST and change < _LITTLE and other > 3 * change
        if inside or outside:
            return ratio
    return 1.0


def _change(logs: Array, distances: Array, ring: Ring, visible: Array) -> float:
    """How much colour or brightness change across a ring: from 1 on it counts."""
    step = distances[1] - distances[0]
    at = (ring.distances() - distances[0]) / step

    def beside(offset: float) -> Array:
        column = np.round(at + offset / step).astype(int).clip(0, distances.size - 1)
        return np.asarray(logs[np.arange(RAYS), column][visible])

    inside, outside = beside(-0.007), beside(0.007)
    light = float(np.median(np.abs((outside - inside).mean(1))))
    change = np.median(tints_in(outside - inside), axis=0)
    return max(light / _CLEAR_LIGHT, float(np.linalg.norm(change)) / CLEAR_TINT)


def place_inner(picture: Array, frame: Frame, visible: Array) -> InnerEdge:
    """Place the agar's edge to parts of a pixel.

    Parameters
    ----------
    picture : ndarray of shape (rows, columns, 3)
        The finest copy there is.
    frame : Frame
        The edge's ellipse in this picture, as found on a coarser one.
    visible : ndarray of shape (RAYS,), bool
        Where nothing higher hides the edge.

    Returns
    -------
    InnerEdge

    Notes
    -----
    The rays' profiles are matched with their median, so that the ellipse follows all of the edge's
    shading alike; where within the profile the edge lies is then read from the sharper median.
    """
    step = max(frame.pixel, _STEP)
    distances = 1.0 + np.arange(-math.ceil(0.045 / step), math.ceil(0.045 / step) + 1) * step
    proportion = 0.002 if visible.mean() < 0.8 else math.inf
    scatter, spread, seen = 0.0, 0.0, np.zeros(RAYS, bool)
    for reach, width in _PASSES:
        rays = frame.sample(picture, distances)
        at, alike = _matched(_signals(rays, visible), visible, distances, reach, width)
        weights = np.where(visible, np.clip(alike, 0, 1) ** 2, 0)
        if (weights > 0.1).mean() < 0.25:
            seen = np.zeros(RAYS, bool)
            break
        shape, scatter = robust_shape(
            1.0 + at, weights, np.array([1.0, 0, 0, 0, 0]), step, proportion=proportion
        )
        seen = visible & (alike > 0.5) & (np.abs(1.0 + at - SHAPES @ shape) < 0.005)
        frame = frame.around(shape)
        place, spread = _edge_in_profile(frame.sample(picture, distances), distances, visible)
        frame = Frame(frame.centre, frame.matrix * place)
    return InnerEdge(frame, float(seen.mean()), float(visible.mean()), scatter, spread)


def _signals(rays: Array, visible: Array) -> Array:
    """Log brightness, and tint along its change across the edge where it clearly changes."""
    logs = logs_of(rays)
    light = logs.mean(2)
    tints = tints_in(logs)
    change = _tint_change(np.median(tints[visible], axis=0))
    if (size := float(np.linalg.norm(change))) < CLEAR_TINT:
        return np.asarray(light[None])
    return np.stack([light, tints @ (change / size)])


def _tint_change(profile: Array) -> Array:
    """Change of a tint's profile (n, 2) from its inner to its outer quarter."""
    n = len(profile) // 4
    return np.asarray(profile[-n:].mean(0) - profile[:n].mean(0))


def _matched(
    signals: Array, visible: Array, distances: Array, reach: float, width: float
) -> tuple[Array, Array]:
    """Shift of each ray's profile against the median, and how alike both are (-1..1).

    Compared are the slopes within `width` of the edge, at shifts up to `reach`.
    """
    step = float(distances[1] - distances[0])
    lags, middle = max(2, round(reach / step)), (distances.size - 1) // 2
    half = min(round(width / step), middle - lags)
    score, worth = np.zeros((RAYS, 2 * lags + 1)), 0.0
    for signal in signals:
        slopes = slopes_along(signal[..., None], sigma_rays=2.0, sigma_steps=1.2)[..., 0]
        template = np.median(slopes[visible], axis=0)[middle - half : middle + half + 1]
        template = template - template.mean()
        part = slopes[:, middle - half - lags : middle + half + lags + 1]
        windows = np.lib.stride_tricks.sliding_window_view(part, template.size, axis=1)
        apart = windows - windows.mean(2, keepdims=True)
        size = np.sqrt((apart**2).sum(2) * (template**2).sum()) + 1e-9
        noise = np.median(((apart[visible, lags] - template) ** 2).sum(1))
        weight = float((template**2).sum() / (noise + 1e-12))
        score += weight * (apart @ template) / size
        worth += weight
    score /= worth + 1e-12
    best = score.argmax(1).clip(1, 2 * lags - 1)
    every_ray = np.arange(RAYS)
    before, here, after = (score[every_ray, best + k] for k in (-1, 0, 1))
    bend = np.minimum(before - 2 * here + after, -1e-9)
    shift = (0.5 * (before - after) / bend).clip(-1, 1)
    return (best - lags + shift) * step, here


def _edge_in_profile(rays: Array, distances: Array, visible: Array) -> tuple[float, float]:
    """Where in the median profile the edge lies, and how far its readings lie apart.

    Brightness: the line's darkest point if both its flanks are as steep, the steepest point of the
    sharper flank if they differ (a step), and in between in proportion. Colour: the steepest point of the tint, which shading leaves
    alone; brightness is heard beside it as long as both agree.
    """
    logs = logs_of(rays)
    line, steepest, share = _line_and_step(np.median(logs.mean(2)[visible], axis=0), distances)
    by_light = (1 - share) * line + share * steepest
    tints = np.median(tints_in(logs)[visible], axis=0)
    change = _tint_change(tints)
    if (size := float(np.linalg.norm(change))) < CLEAR_TINT:
        return by_light, abs(line - steepest) * math.sqrt(share * (1 - share))
    slope = np.gradient(_smooth(tints @ (change / size)))
    weight = np.where(np.abs(distances - 1) < _NEAR, np.maximum(slope, 0), 0) ** 2
    by_tint = float((weight * distances).sum() / (weight.sum() + 1e-12))
    if abs(by_light - by_tint) > _AGREE:
        return by_tint, 0.002
    return 0.5 * (by_light + by_tint), 0.5 * abs(by_light - by_tint)


def _line_and_step(light: Array, distances: Array) -> tuple[float, float, float]:
    """Place of a dark line and of a step in a profile, and how much of a step it is (0..1).

    A line is a dip no wider than the wall's own shading; without one, all is step.
    """
    light = _smooth(light)
    slope = np.abs(np.gradient(light))
    near = np.abs(distances - 1) < _NEAR
    steepest = int(np.where(near, slope, 0).argmax())
    darkest = int(np.where(near, light, np.inf).argmin())
    off = distances - distances[darkest]
    high = float(light[(off < 0) & (off > -_BESIDE)].max(initial=light[darkest]))
    low = float(light[(off > 0) & (off < _BESIDE)].max(initial=light[darkest]))
    depth, dip = max(high, low) - light[darkest], min(high, low) - light[darkest]
    if dip < 0.15 * depth or dip < 0.01:
        return float(distances[steepest]), float(distances[steepest]), 1.0
    flanks = [np.where((off * side > 0) & (off * side < _NEAR), slope, 0) for side in (-1, 1)]
    inner, outer = (float(flank.max()) for flank in flanks)
    sharper = int(flanks[int(outer > inner)].argmax())
    share = abs(inner - outer) / (inner + outer + 1e-9)
    return float(distances[darkest]), float(distances[sharper]), share


def _smooth(profile: Array) -> Array:
    """Smooth a profile a little."""
    return np.asarray(cv2.GaussianBlur(profile[None].astype(np.float32), (0, 0), 1.0)[0], float)
