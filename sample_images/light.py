"""Light on surfaces, and what lens, sensor and file make of it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt
from texture import Layer, cloud, grain, moved, soft

Picture = npt.NDArray[np.uint8]


@dataclass(frozen=True, slots=True, kw_only=True)
class Sun:
    """A distant light: where in the picture it stands (0 = right, 90 = below) and how high."""

    from_deg: float
    elevation_deg: float = 45.0

    def __post_init__(self) -> None:
        if not 5 <= self.elevation_deg <= 90:
            raise ValueError(f"The light stands {self.elevation_deg} degrees high; give 5 to 90.")

    @property
    def towards(self) -> tuple[float, float, float]:
        """Unit vector towards the light: x right, y down, z up."""
        flat = math.cos(math.radians(self.elevation_deg))
        a = math.radians(self.from_deg)
        return flat * math.cos(a), flat * math.sin(a), math.sin(math.radians(self.elevation_deg))

    @property
    def throw(self) -> tuple[float, float]:
        """Where a point one unit high casts its shadow."""
        x, y, z = self.towards
        return -x / z, -y / z


@dataclass(frozen=True, slots=True, kw_only=True)
class Exposure:
    """Everything between the light and the file."""

    gain: float = 1.0
    tint: tuple[float, float, float] = (1.0, 1.0, 1.0)
    fall_off: float = 0.25
    slant: float = 0.12
    slant_deg: float = 200.0
    blotch: float = 0.03
    blur: float = 0.75
    shot: float = 0.0007
    read: float = 0.0025
    sharpen: float = 0.6
    contrast: float = 0.15
    quality: int = 87


def slopes(height: Layer) -> tuple[Layer, Layer]:
    """Give the slopes of a height map, along x and along y, in its own units per pixel."""
    gx = cv2.Sobel(height, cv2.CV_32F, 1, 0, ksize=3, scale=0.125, borderType=cv2.BORDER_REFLECT)
    gy = cv2.Sobel(height, cv2.CV_32F, 0, 1, ksize=3, scale=0.125, borderType=cv2.BORDER_REFLECT)
    return np.asarray(gx, dtype=np.float32), np.asarray(gy, dtype=np.float32)


def lambert(height: Layer, sun: Sun) -> Layer:
    """Give the cosine between surface and light, 0 where it faces away; a level surface gives its sine."""
    gx, gy = slopes(height)
    x, y, z = sun.towards
    lit = (z - gx * np.float32(x) - gy * np.float32(y)) / np.sqrt(1 + gx * gx + gy * gy)
    return np.asarray(np.maximum(lit, 0), dtype=np.float32)


def gloss(height: Layer, sun: Sun, *, power: float) -> Layer:
    """Give the mirror-like highlight of a surface seen from straight above."""
    gx, gy = slopes(height)
    x, y, z = sun.towards
    n = math.sqrt(x * x + y * y + (z + 1) ** 2)
    facing = ((z + 1) - gx * np.float32(x) - gy * np.float32(y)) / (
        n * np.sqrt(1 + gx * gx + gy * gy)
    )
    return np.asarray(np.maximum(facing, 0) ** np.float32(power), dtype=np.float32)


def cast_shadow(height: Layer, sun: Sun, *, reach: float, penumbra: float) -> Layer:
    """Give how much of the light reaches each point of a height map (heights in pixels), 0 to 1."""
    x, y, z = sun.towards
    flat = math.hypot(x, y)
    rise = z / flat
    over = np.full_like(height, -1e6)
    distance = 1.0
    while distance < reach:
        ray = moved(height, -distance * x / flat, -distance * y / flat) - np.float32(
            distance * rise
        )
        np.maximum(over, ray, out=over)
        distance *= 1.18
        distance += 0.4
    lit = np.clip(0.5 - (over - height) / np.float32(2 * penumbra), 0, 1)
    return np.asarray(lit, dtype=np.float32)


def uneven(shape: tuple[int, int], exposure: Exposure, rng: np.random.Generator) -> Layer:
    """Give the low-frequency unevenness of lamp and lens as a factor about 1."""
    rows, columns = shape
    y = np.linspace(-1, 1, rows, dtype=np.float32)[:, None]
    x = np.linspace(-1, 1, columns, dtype=np.float32)[None, :] * np.float32(columns / rows)
    far = (x * x + y * y) / np.float32(1 + (columns / rows) ** 2)
    a = math.radians(exposure.slant_deg)
    slant = 1 + np.float32(exposure.slant) * (
        x * np.float32(math.cos(a)) + y * np.float32(math.sin(a))
    )
    blotches = 1 + np.float32(exposure.blotch) * cloud(shape, rng, size=0.5 * rows, slope=3.0)
    fall_off = 1 - np.float32(exposure.fall_off) * far * (0.6 + 0.4 * far)
    return np.asarray(slant * blotches * fall_off, dtype=np.float32)


def _encode(linear: Layer, contrast: float) -> Layer:
    clipped = np.clip(linear, 0, None)
    rolled = np.where(clipped > 0.8, 0.8 + 0.2 * np.tanh((clipped - 0.8) / 0.25), clipped)
    out = np.where(
        rolled < 0.0031308, 12.92 * rolled, 1.055 * np.maximum(rolled, 1e-6) ** (1 / 2.4) - 0.055
    )
    curved = out + contrast * (out * out * (3 - 2 * out) - out)
    return np.asarray(np.clip(curved, 0, 1), dtype=np.float32)


def develop(scene: Layer, exposure: Exposure, rng: np.random.Generator) -> Picture:
    """Turn a scene in linear light (rows, columns, 3) into an 8-bit photograph, red first.

    Lens blur and fall-off, uneven light, shot and read noise with the colour noise smeared as by
    a sensor's colour mosaic, a tone curve, and light sharpening.
    """
    shape = (scene.shape[0], scene.shape[1])
    light = uneven(shape, exposure, rng)[..., None]
    raw = (
        soft(scene, exposure.blur)
        * light
        * (np.asarray(exposure.tint, np.float32) * np.float32(exposure.gain))
    )
    level = np.maximum(raw, 0)
    common = grain(shape, rng, sigma=0.55)[..., None]
    colour = np.stack([grain(shape, rng, sigma=1.3) for _ in range(3)], axis=-1)
    spread = np.sqrt(level * np.float32(exposure.shot) + np.float32(exposure.read**2))
    noisy = raw + spread * (0.5 * common + 0.45 * colour * np.array([1.2, 0.8, 1.4], np.float32))
    out = _encode(noisy, exposure.contrast)
    if exposure.sharpen:
        out = out + np.float32(exposure.sharpen) * (out - soft(out, 1.1))
    jitter = rng.uniform(-0.5, 0.5, shape).astype(np.float32)[..., None]
    return np.asarray(np.clip(np.round(out * 255 + 0.5 * jitter), 0, 255), dtype=np.uint8)


def jpeg(picture: Picture, quality: int) -> bytes:
    """Encode a photograph (red first) as JPEG."""
    ok, data = cv2.imencode(
        ".jpg",
        cv2.cvtColor(picture, cv2.COLOR_RGB2BGR),
        [cv2.IMWRITE_JPEG_QUALITY, quality, cv2.IMWRITE_JPEG_OPTIMIZE, 1],
    )
    if not ok:
        raise OSError(
            "The photograph could not be encoded as JPEG; check that OpenCV was built with it."
        )
    return bytes(data)
