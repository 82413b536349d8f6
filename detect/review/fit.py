"""Which circle fits the picture where a person clicked."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.photograph import Photograph
from detect.spots import Spots

_ANGLES = 48
_RADII = 40
_ACROSS = 48.0  # pixels that the largest radius has in the small picture that is worked on
_SMALLEST_PX = 1.5
_CLEAR = 3.0  # an edge must be so many times as strong as the usual one at other radii
_SHIFTS = (  # of the usual radius
    *((0.0, 0.0), (0.125, 0.0), (-0.125, 0.0), (0.0, 0.125), (0.0, -0.125)),
    *((0.25, 0.0), (-0.25, 0.0), (0.0, 0.25), (0.0, -0.25)),
    *((0.18, 0.18), (0.18, -0.18), (-0.18, 0.18), (-0.18, -0.18)),
)
_OVER_NOISE = 3.0  # how far the inside must stand out from the ring around it


@dataclass(frozen=True, slots=True)
class Fitted:
    """A circle, and whether the picture asked for it.

    Parameters
    ----------
    x, y : float
        Centre in pixels; where nothing is fitted, the click.
    radius : float
        In pixels; where nothing is fitted, the usual one.
    fitted : bool
        Whether a closed edge stands out.
    """

    x: float
    y: float
    radius: float
    fitted: bool


def usual_radius(spots: Spots, diameters_px: tuple[float, float] | None = None) -> float:
    """Return the median radius of the counted spots; without any, that of what was looked for."""
    radii = spots.radius[spots.counted]
    if radii.size:
        return float(np.median(radii))
    if diameters_px is not None:
        return 0.5 * float(np.sqrt(diameters_px[0] * diameters_px[1]))
    return 8.0


def fit_circle(photograph: Photograph, x: float, y: float, usual: float) -> Fitted:
    """Fit a circle to the picture near a point.

    Parameters
    ----------
    photograph : Photograph
    x, y : float
        Where, in pixels; within the picture.
    usual : float
        Radius in pixels to be expected; a third to three times as much is looked at, and centres up
        to some four tenths of it away.

    Returns
    -------
    Fitted

    Notes
    -----
    Of all circles the one is taken across which the colour, averaged along the circle, changes most.
    Colour is taken as the distance along the direction between the colour at the click and that of
    the surroundings. A circle is fitted only if that change is well above what it is at other radii.

    References
    ----------
    Daugman, J. G. (1993). High confidence visual recognition of persons by a test of statistical
    independence. IEEE Transactions on Pattern Analysis and Machine Intelligence 15, 1148-1161
    (equation 1: the derivative of the mean along a circle, maximised over centre and radius).
    """
    least, most = max(_SMALLEST_PX, usual / 3.0), max(3.0 * usual, 4.0 * _SMALLEST_PX)
    shrink = min(1.0, _ACROSS / most)
    reach = 1.3 * most + 2.0
    left, top = max(0, int(x - reach)), max(0, int(y - reach))
    right = min(photograph.width, int(x + reach) + 2)
    bottom = min(photograph.height, int(y + reach) + 2)
    pixels = photograph.pixels(shrink=shrink, box=(left, top, right, bottom), quick=True)
    sx, sy = pixels.shape[1] / (right - left), pixels.shape[0] / (bottom - top)
    # Pixel centres are at whole numbers, so the part's corner is half a pixel before its first.
    cx, cy = (x - left + 0.5) * sx - 0.5, (y - top + 0.5) * sy - 0.5
    signal = _signal(pixels, cx, cy, usual * sx)
    radii = np.linspace(least, most, _RADII) * sx
    best, found = 0.0, Fitted(x, y, usual, False)
    at, middle = (cx, cy, usual * sx), (0.0, 0.0)
    for shifts in (_SHIFTS, _around(0.125), _around(0.0625)):
        start = middle
        for dx, dy in np.add(start, shifts).tolist():
            step = (dx * usual * sx, dy * usual * sy)
            strength, radius = _sharpest(signal, cx + step[0], cy + step[1], radii)
            # A centre farther from the click must earn its place.
            strength *= 1.0 - 0.4 * float(np.hypot(dx, dy))
            if strength > best:
                best, middle = strength, (dx, dy)
                at = (cx + step[0], cy + step[1], radius)
                found = Fitted(x + step[0] / sx, y + step[1] / sy, radius / sx, True)
    if found.fitted and _inside(photograph, found) and _stands_out(signal, *at):
        return found
    return Fitted(x, y, usual, False)


def _around(step: float) -> tuple[tuple[float, float], ...]:
    """Return the eight places a step away."""
    ways = (-step, 0.0, step)
    return tuple((dx, dy) for dx in ways for dy in ways if dx or dy)


def _signal(pixels: NDArray[np.float32], cx: float, cy: float, usual: float) -> NDArray[np.float32]:
    """Return the picture along the direction between the colours at the click and around it."""
    rows, columns = np.indices(pixels.shape[:2])
    away = np.hypot(columns - cx, rows - cy)
    within = away <= max(1.0, 0.5 * usual)
    around = away >= min(1.8 * usual, 0.8 * float(away.max()))
    smooth = cv2.GaussianBlur(pixels, (0, 0), 0.8)
    step = np.median(smooth[within], axis=0) - np.median(smooth[around], axis=0)
    length = float(np.linalg.norm(step))
    direction = step / length if length > 1e-6 else np.full(3, 3**-0.5)
    signal: NDArray[np.float32] = (smooth @ direction).astype(np.float32)
    return signal


def _sharpest(
    signal: NDArray[np.float32], cx: float, cy: float, radii: NDArray[np.float64]
) -> tuple[float, float]:
    """Return how strong the strongest closed edge about a centre is (0 if none is clear), and its radius."""
    angles = np.linspace(0.0, 2.0 * np.pi, _ANGLES, endpoint=False)
    columns = (cx + radii[:, None] * np.cos(angles)).astype(np.float32)
    rows = (cy + radii[:, None] * np.sin(angles)).astype(np.float32)
    along = cv2.remap(signal, columns, rows, cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
    # Only where it falls outwards: the click is on the object. Each angle has its say up to a limit,
    # so that one bright neighbour makes no ring.
    falls = -np.gradient(along, radii, axis=0)
    limit = 2.0 * np.median(np.abs(falls), axis=1, keepdims=True) + 1e-6
    change = np.clip(falls, -limit, limit).mean(axis=1)
    at = int(np.argmax(change))
    usual_change = float(np.median(np.abs(change))) + 1e-4
    if change[at] < _CLEAR * usual_change or at in (0, len(radii) - 1):
        return 0.0, float(radii[at])
    before, here, after = change[at - 1], change[at], change[at + 1]
    bend = before - 2.0 * here + after
    shift = 0.0 if bend >= 0 else float(np.clip(0.5 * (before - after) / bend, -0.5, 0.5))
    return float(here), float(radii[at] + shift * (radii[1] - radii[0]))


def _stands_out(signal: NDArray[np.float32], cx: float, cy: float, radius: float) -> bool:
    """Whether a circle's inside differs from the ring around it by more than either varies."""
    rows, columns = np.indices(signal.shape)
    away = np.hypot(columns - cx, rows - cy) / radius
    inner, outer = signal[away <= 0.8], signal[(away >= 1.2) & (away <= 1.8)]
    if inner.size < 4 or outer.size < 8:
        return False
    middle = np.median(outer)
    spread = 1.4826 * float(np.median(np.abs(outer - middle))) + 1.0 / 255.0
    return float(np.median(inner) - middle) >= _OVER_NOISE * spread


def _inside(photograph: Photograph, found: Fitted) -> bool:
    """Whether a centre lies in the picture."""
    return -0.5 <= found.x <= photograph.width - 0.5 and -0.5 <= found.y <= photograph.height - 0.5
