"""Photograph -> one signed contrast map: how far each pixel stands out from its own background.

The background's colour is learned from the picture and followed across it, so gradients of light
drop out; the colour direction in which things stand out is learned too, unless it is named.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import cv2
import numpy as np
from numpy.typing import NDArray

Colour = Literal["auto", "grey", "green", "red", "blue", "yellow", "brown", "purple"]
Polarity = Literal["auto", "dark", "bright"]
Map = NDArray[np.float32]
Mask = NDArray[np.bool_]

# Directions in L*, a*, b* along which a named colour stands out from a neutral ground.
_DIRECTIONS: dict[str, tuple[float, float, float]] = {
    "green": (-0.4, -1.0, 0.2),
    "red": (0.0, 1.0, 0.4),
    "blue": (0.0, 0.0, -1.0),
    "yellow": (0.0, 0.0, 1.0),
    "brown": (-0.8, 0.4, 0.4),
    "purple": (-0.3, 0.8, -0.8),
}
_SAMPLE = 60_000


@dataclass(frozen=True, slots=True, eq=False)
class Contrast:
    """A signed contrast map; objects are positive.

    Parameters
    ----------
    map : ndarray of shape (height, width), float32
        Contrast with the local background along `direction`, 0 outside the study area.
    noise : float
        Robust standard deviation of the background, in the map's units.
    grain : float
        Robust standard deviation of what changes from pixel to pixel, in the map's units.
    threshold : float
        Contrast above which a pixel is more likely object than ground.
    direction : ndarray of shape (3,)
        Unit direction in L*, a*, b* that points from ground to object.
    sureness : float
        How plainly the picture tells objects from ground, 0 (a guess) to 1.5; infinite where the
        side was given.
    """

    map: Map
    noise: float
    grain: float
    threshold: float
    direction: NDArray[np.float64]
    sureness: float

    def __post_init__(self) -> None:
        self.map.setflags(write=False)
        self.direction.setflags(write=False)


def to_lab(pixels: Map) -> Map:
    """Turn red, green and blue into lightness and two axes of hue.

    Parameters
    ----------
    pixels : ndarray of shape (height, width, 3), float32
        sRGB values, 0..1.

    Returns
    -------
    ndarray of shape (height, width, 3), float32
        L* (0..100), a* and b* under white D65.

    References
    ----------
    CIE 15:2004, Colorimetry, 3rd edition, section 8.2.1 (CIELAB). IEC 61966-2-1:1999 (sRGB).
    """
    return np.asarray(cv2.cvtColor(pixels, cv2.COLOR_RGB2Lab), dtype=np.float32)


def contrast_map(
    lab: Map,
    inside: Mask,
    *,
    largest_px: float,
    smallest_px: float,
    colour: Colour = "auto",
    polarity: Polarity = "auto",
    flipped: bool = False,
    calming: float = 0.5,
    many_colours: bool = False,
    direction: NDArray[np.float64] | None = None,
) -> Contrast:
    """Measure how far each pixel stands out from the local background.

    Parameters
    ----------
    lab : ndarray of shape (height, width, 3), float32
        The photograph in L*, a*, b*.
    inside : ndarray of bool, shape (height, width)
        The study area; pixels outside it have no say and get contrast 0.
    largest_px, smallest_px : float
        Range of object diameters in pixels of `lab`.
    colour : Colour
        "auto" learns the direction from the picture; "grey" uses lightness alone.
    polarity : Polarity
        Whether objects are darker or lighter than the ground; "auto" decides by the picture. A
        named colour has its own direction.
    flipped : bool
        Take the side that "auto" would not have taken.
    calming : float
        Power of a channel's spread on the ground by which it is divided before a direction is
        learned: 0 gives plain principal axes, 1 has no say for channels in which the ground varies.
    many_colours : bool
        Objects of several colours are looked for: departures across the direction count as well.
    direction : ndarray of shape (3,) or None
        Direction in L*, a*, b* from ground to object, where it is known; nothing is learned from
        the picture then, and objects are of one colour.

    Returns
    -------
    Contrast

    Notes
    -----
    The background is a local mean in which pixels far from the picture's commonest colour have
    next to no weight (redescending weights [1]_).
    The direction is the first principal axis [2]_, about zero, of the deviations that stand clear
    of the ground, each capped at their median length so that one rare strong colour cannot take it.
    The base threshold is Otsu's [3]_, but no more than four times the noise or 0.4 of what is
    usual above that. The grain comes from a mask that is blind to slopes and edges [4]_.

    References
    ----------
    .. [1] Geman S, McClure DE (1987). Statistical methods for tomographic image reconstruction.
       Bulletin of the International Statistical Institute 52(4), 5-21.
    .. [2] Pearson K (1901). On lines and planes of closest fit to systems of points in space.
       Philosophical Magazine 2, 559-572.
    .. [3] Otsu N (1979). A threshold selection method from gray-level histograms. IEEE
       Transactions on Systems, Man, and Cybernetics 9, 62-66.
    .. [4] Immerkaer J (1996). Fast noise variance estimation. Computer Vision and Image
       Understanding 64, 300-302.
    """
    background = _background(lab, inside, smallest_px, largest_px)
    known = direction is not None
    if direction is None:
        signed, direction, sureness = _project(
            lab - background, inside, colour, polarity, largest_px, flipped, calming
        )
    else:
        direction = direction / np.linalg.norm(direction)
        signed, sureness = (lab - background) @ direction.astype(np.float32), np.inf
    noise, threshold = _noise_and_threshold(signed[inside])
    ground = inside & (signed < 0.5 * threshold)
    if ground.sum() > 0.05 * inside.sum():
        background = _local_mean(
            lab, ground.astype(np.float32), smallest_px, largest_px, background
        )
        signed = np.asarray((lab - background) @ direction.astype(np.float32))
        if colour == "green" and not known:
            signed = _only_hued(signed, lab - background, direction)
        noise, threshold = _noise_and_threshold(signed[inside])
    if many_colours and colour == "auto" and not known:
        signed = _with_other_colours(signed, lab - background, direction, inside)
        noise, threshold = _noise_and_threshold(signed[inside])
    signed[~inside] = 0.0
    grain = _grain(lab @ direction.astype(np.float32), inside)
    return Contrast(np.ascontiguousarray(signed), noise, grain, threshold, direction, sureness)


def _thin(values: NDArray[np.float32]) -> NDArray[np.float32]:
    """Every so many rows, so that about `_SAMPLE` stay."""
    return values[:: max(1, len(values) // _SAMPLE)]


def _commonest(sample: Map) -> NDArray[np.float32]:
    """Mode of (n, 3) colours: fullest cell of a smoothed coarse histogram, then mean shift."""
    low, high = np.percentile(sample, [0.5, 99.5], axis=0)
    cell = float(np.clip((high - low).max() / 40, 0.25, 6.0))
    bins = np.maximum(1, np.ceil((high - low) / cell).astype(int) + 2)
    index = np.clip(((sample - low) / cell).astype(int) + 1, 0, bins - 1)
    counts = np.bincount(np.ravel_multi_index(tuple(index.T), tuple(bins)), minlength=bins.prod())
    cube = counts.reshape(bins).astype(np.float64)
    for axis in range(3):
        padded = np.pad(cube, [(1, 1) if a == axis else (0, 0) for a in range(3)])
        n = bins[axis]
        parts = [np.take(padded, range(k, k + n), axis=axis) for k in range(3)]
        cube = parts[0] + parts[1] + parts[2]
    fullest = np.array(np.unravel_index(np.argmax(cube), tuple(bins)))
    mode = (fullest - 0.5) * cell + low
    for _ in range(5):
        near = ((sample - mode) ** 2).sum(axis=1) < (2 * cell) ** 2
        if not near.any():
            break
        mode = sample[near].mean(axis=0)
    return np.asarray(mode, dtype=np.float32)


def _background(lab: Map, inside: Mask, smallest_px: float, largest_px: float) -> Map:
    """Background colour everywhere: the commonest colour, then followed by local robust means."""
    shrink = min(1.0, 4.0 / smallest_px)
    small = cv2.resize(lab, None, fx=shrink, fy=shrink, interpolation=cv2.INTER_AREA)
    small_inside = cv2.resize(
        inside.astype(np.float32), small.shape[1::-1], interpolation=cv2.INTER_AREA
    )
    usable = small_inside > 0.5
    if not usable.any():
        usable = small_inside > 0
    background: Map = np.broadcast_to(_commonest(_thin(small[usable])), small.shape)
    for _ in range(3):
        distance2 = ((small - background) ** 2).sum(axis=2)
        reach = max(1.0, 2.0 * float(np.percentile(np.sqrt(_thin(distance2[usable])), 10)))
        weight = (usable / (1.0 + distance2 / reach**2) ** 2).astype(np.float32)
        background = _smooth_ratio(small, weight, 1.5 * largest_px * shrink, background)
    return np.asarray(cv2.resize(background, lab.shape[1::-1], interpolation=cv2.INTER_LINEAR))


def _local_mean(lab: Map, weight: Map, smallest_px: float, largest_px: float, fallback: Map) -> Map:
    """Weighted local mean, computed on a small map and enlarged."""
    shrink = min(1.0, 4.0 / smallest_px)
    small = cv2.resize(
        lab * weight[..., None], None, fx=shrink, fy=shrink, interpolation=cv2.INTER_AREA
    )
    small_weight = cv2.resize(weight, small.shape[1::-1], interpolation=cv2.INTER_AREA)
    small /= np.maximum(small_weight, 1e-6)[..., None]
    small_fallback = cv2.resize(fallback, small.shape[1::-1], interpolation=cv2.INTER_AREA)
    mean = _smooth_ratio(small, small_weight, 1.5 * largest_px * shrink, small_fallback)
    return np.asarray(cv2.resize(mean, lab.shape[1::-1], interpolation=cv2.INTER_LINEAR))


def _smooth_ratio(values: Map, weight: Map, sigma: float, fallback: Map) -> Map:
    """Gaussian mean of (h, w, 3) values under weights; `fallback` where no weight reaches."""
    top = _blur(values * weight[..., None], sigma)
    bottom = _blur(weight, sigma)[..., None]
    tiny = 1e-4
    return np.asarray((top + tiny * fallback) / (bottom + tiny), dtype=np.float32)


def _blur(values: Map, sigma: float) -> Map:
    """Gaussian blur; wide ones on a reduced map, where they are exact enough and cheap."""
    reduce = int(max(1, min(sigma // 4, min(values.shape[:2]) // 4)))
    if reduce == 1:
        return np.asarray(cv2.GaussianBlur(values, (0, 0), sigma, borderType=cv2.BORDER_REFLECT))
    size = (max(1, values.shape[1] // reduce), max(1, values.shape[0] // reduce))
    small = cv2.resize(values, size, interpolation=cv2.INTER_AREA)
    small = cv2.GaussianBlur(small, (0, 0), sigma / reduce, borderType=cv2.BORDER_REFLECT)
    return np.asarray(cv2.resize(small, values.shape[1::-1], interpolation=cv2.INTER_LINEAR))


def _project(
    deviation: Map,
    inside: Mask,
    colour: Colour,
    polarity: Polarity,
    largest_px: float,
    flipped: bool,
    calming: float,
) -> tuple[Map, NDArray[np.float64], float]:
    """Deviation along the wanted direction, the direction from ground to object, and sureness."""
    if colour in _DIRECTIONS:
        direction = np.array(_DIRECTIONS[colour])
        direction /= np.linalg.norm(direction)
        signed = deviation @ direction.astype(np.float32)
        if colour == "green":
            signed = _only_hued(signed, deviation, direction)
        return signed, direction, np.inf
    if colour == "grey":
        direction = np.array([1.0, 0.0, 0.0])
    else:
        direction = _principal_axis(_thin(deviation[inside]), calming)
    signed = deviation @ direction.astype(np.float32)
    if polarity == "auto":
        evidence = _evidence(signed, inside, largest_px) * (-1.0 if flipped else 1.0)
    else:
        evidence = np.inf * (direction[0] or 1.0) * (1.0 if polarity == "bright" else -1.0)
    side = 1.0 if evidence > 0 else -1.0
    return signed * np.float32(side), direction * side, abs(float(evidence))


def _with_other_colours(
    signed: Map, deviation: Map, direction: NDArray[np.float64], inside: Mask
) -> Map:
    """Contrast raised where the colour departs across the direction, four times further than is usual.

    An orange colony among cream ones hardly stands out along the axis of cream.
    """
    across2 = (deviation**2).sum(axis=2) - (deviation @ direction.astype(np.float32)) ** 2
    across = np.sqrt(np.maximum(across2, 0.0))
    extra = np.maximum(across - 4.0 * float(np.median(_thin(across[inside]))), 0.0)
    # What lies on the other side in lightness (ink, shadow, where objects are light) stays out.
    same_side = np.sign(direction[0]).astype(np.float32) * deviation[..., 0] > -0.5 * extra
    raised = np.where(same_side, np.maximum(signed, 0.0) + extra, signed)
    return np.asarray(np.where(extra > 0, raised, signed), dtype=np.float32)


def _only_hued(signed: Map, deviation: Map, direction: NDArray[np.float64]) -> Map:
    """Contrast of a named colour where the hue itself departs; elsewhere none above zero."""
    hue = deviation[..., 1:] @ direction[1:].astype(np.float32)
    return np.where(hue > 2.0, signed, np.minimum(signed, 0.0)).astype(np.float32)


def _principal_axis(sample: Map, calming: float) -> NDArray[np.float64]:
    """First principal axis about zero of the clear deviations, lengths capped at their median.

    Channels in which the ground itself varies much have less say.
    """
    spread = 1.4826 * np.median(np.abs(sample), axis=0) + 0.5
    metric = (spread / spread.max()) ** -calming
    sample = sample * metric
    length = np.linalg.norm(sample, axis=1)
    clear = sample[length > 3.0 * np.percentile(length, 30)]
    if len(clear) < 20:
        clear = sample[length >= np.percentile(length, 90)]
    length = np.maximum(np.linalg.norm(clear, axis=1), 1e-6)
    capped = (clear * np.minimum(1.0, np.median(length) / length)[:, None]).astype(np.float64)
    _, vectors = np.linalg.eigh(capped.T @ capped)
    axis = vectors[:, -1] * metric
    return np.asarray(axis / np.linalg.norm(axis))


def _evidence(signed: Map, inside: Mask, largest_px: float) -> float:
    """Evidence that objects are positive: skewness, and which side falls apart in pieces."""
    values = _thin(signed[inside]).astype(np.float64)
    spread = float(np.sqrt((values**2).mean())) or 1.0
    third = float((np.clip(values / spread, -4, 4) ** 3).mean())
    return float(_piecewise(signed, inside, largest_px) + 0.5 * np.tanh(third))


def _piecewise(signed: Map, inside: Mask, largest_px: float) -> float:
    """-1..1: positive when the upper side of Otsu's cut falls apart in pieces below largest_px."""
    upper = (signed > _otsu(_thin(signed[inside]))) & inside
    size = max(3, round(0.5 * largest_px) | 1)
    element = cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (size, size))
    ground = cv2.morphologyEx((~upper & inside).astype(np.uint8), cv2.MORPH_OPEN, element).sum()
    things = cv2.morphologyEx(upper.astype(np.uint8), cv2.MORPH_OPEN, element).sum()
    return float((int(ground) - int(things)) / max(1, int(ground) + int(things)))


def _otsu(values: NDArray[np.float32]) -> float:
    """Otsu's threshold on 256 bins between the 0.1 and 99.9 percentiles (Otsu 1979)."""
    low, high = np.percentile(values, [0.1, 99.9])
    if not high > low:
        return float(high)
    counts, edges = np.histogram(np.clip(values, low, high), bins=256)
    centres = 0.5 * (edges[:-1] + edges[1:])
    weight = np.cumsum(counts)[:-1].astype(np.float64)
    total = np.cumsum(counts * centres)
    rest = counts.sum() - weight
    mean_low = total[:-1] / np.maximum(weight, 1)
    mean_high = (total[-1] - total[:-1]) / np.maximum(rest, 1)
    between = weight * rest * (mean_low - mean_high) ** 2
    return float(centres[:-1][np.argmax(between)])


def _grain(values: Map, inside: Mask) -> float:
    """Noise from pixel to pixel: median size of Immerkaer's (1996) mask, which sees no slope."""
    mask = np.array([[1, -2, 1], [-2, 4, -2], [1, -2, 1]], dtype=np.float32) / 6.0
    seen = cv2.filter2D(np.asarray(values), -1, mask, borderType=cv2.BORDER_REFLECT)
    return 1.4826 * float(np.median(np.abs(_thin(seen[inside]))))


def _noise_and_threshold(values: NDArray[np.float32]) -> tuple[float, float]:
    """Robust noise from the side no object lies on, and the base threshold."""
    values = _thin(values)
    below = values[values < 0]
    noise = 1.4826 * float(np.median(-below)) if below.size else 0.0
    noise = max(noise, 1e-3)
    clear = values[values > 4.0 * noise]
    upper = max(4.0 * noise, 0.4 * float(np.median(clear))) if clear.size else 4.0 * noise
    return noise, max(min(_otsu(values), upper), noise)
