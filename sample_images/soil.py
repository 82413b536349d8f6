"""Crumbly soil seen from above: clods, crumbs, stones, cracks, damp patches, lit by the sun."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from light import Sun, cast_shadow, lambert
from texture import Layer, Points, cells, cloud, grain, soft, step


@dataclass(frozen=True, slots=True, kw_only=True)
class Soil:
    """How a soil looks: dry colour in linear light, how cloddy, stony, cracked and damp (0 to 1)."""

    colour: tuple[float, float, float] = (0.150, 0.104, 0.066)
    cloddy: float = 0.5
    stony: float = 0.3
    cracked: float = 0.0
    damp: float = 0.4
    mossy: float = 0.0


def _lump(
    rng: np.random.Generator, radius: float, rough: float, power: float
) -> tuple[Layer, npt.NDArray[np.bool_]]:
    """Draw one clod or stone: its height in units of its radius, and its mask."""
    reach = int(np.ceil(radius * 1.5)) + 1
    y, x = np.mgrid[-reach : reach + 1, -reach : reach + 1].astype(np.float32)
    a, squash = rng.uniform(0, np.pi), rng.uniform(0.62, 1.0)
    u, v = x * np.cos(a) + y * np.sin(a), (y * np.cos(a) - x * np.sin(a)) / squash
    angle = np.arctan2(v, u)
    edge = np.ones_like(u)
    for k in range(2, 7):
        edge += np.float32(rough * rng.standard_normal() / k**0.6) * np.cos(
            k * angle + np.float32(rng.uniform(0, 6.3))
        )
    rho = np.hypot(u, v) / (radius * np.clip(edge, 0.45, 1.5))
    dome = np.clip(1 - rho**power, 0, None) ** 0.6
    lean = rng.normal(0, 0.18, 2)
    tilt = 1 + (lean[0] * u + lean[1] * v) / radius
    return np.asarray(dome * tilt, np.float32), np.asarray(rho < 1, np.bool_)


def _strew_lumps(
    height: Layer, tone: Layer, rng: np.random.Generator, sizes: Points, *, stones: bool
) -> Layer:
    """Set lumps of given radii (px) into the height map and the tone map, in place; give where they lie."""
    rows, columns = height.shape
    where = np.zeros(height.shape, np.float32)
    for radius in np.sort(sizes)[::-1]:
        dome, mask = _lump(rng, float(radius), 0.07 if stones else 0.16, 2.6 if stones else 2.2)
        reach = dome.shape[0] // 2
        cx, cy = int(rng.integers(0, columns)), int(rng.integers(0, rows))
        box = (
            slice(max(0, cy - reach), min(rows, cy + reach + 1)),
            slice(max(0, cx - reach), min(columns, cx + reach + 1)),
        )
        part = (
            slice(box[0].start - cy + reach, box[0].stop - cy + reach),
            slice(box[1].start - cx + reach, box[1].stop - cx + reach),
        )
        base = float(height[min(cy, rows - 1), min(cx, columns - 1)]) * 0.7
        top = base + (dome[part] * rng.uniform(0.35, 0.75) - rng.uniform(0.05, 0.3)) * radius
        wins = mask[part] & (top > height[box])
        height[box][wins] = top[wins]
        tone[box][wins] = np.exp(rng.normal(0, 0.24 if stones else 0.16))
        where[box][wins] = rng.uniform(0.35, 1.0) if stones else 1.0
    return where


def _sizes(rng: np.random.Generator, n: int, least: float, most: float, power: float) -> Points:
    u = rng.uniform(0, 1, n)
    return np.asarray((least**-power + u * (most**-power - least**-power)) ** (-1 / power))


@dataclass(frozen=True, slots=True, kw_only=True)
class Bed:
    """A bed of soil as layers: colour in linear light before shading, height in pixels."""

    colour: Layer
    height: Layer


def draw_bed(soil: Soil, shape: tuple[int, int], scale: float, rng: np.random.Generator) -> Bed:
    """Draw bare soil at `scale` pixels per mm."""
    area = shape[0] * shape[1] / scale**2
    height = 5.0 * scale * cloud(shape, rng, size=160 * scale, slope=2.4)
    height += (0.5 + 0.9 * soil.cloddy) * scale * cloud(shape, rng, size=14 * scale, slope=1.9)
    tone = np.ones(shape, np.float32)
    clods = _sizes(
        rng,
        int(area * (0.012 + 0.014 * soil.cloddy)),
        1.3 * scale,
        (8 + 18 * soil.cloddy) * scale,
        2.3,
    )
    _strew_lumps(height, tone, rng, clods, stones=False)
    stones = _sizes(rng, int(area * 0.0011 * soil.stony), 1.8 * scale, 15 * scale, 1.9)
    stony = _strew_lumps(height, tone, rng, stones, stones=True)
    crumbs = np.maximum(grain(shape, rng, sigma=0.55 * scale), -0.6) * 0.42 * scale
    crumbs += np.maximum(grain(shape, rng, sigma=1.3 * scale), -0.3) * 0.5 * scale
    crumbs += 0.2 * scale * grain(shape, rng, sigma=0.3 * scale)
    fresh = step(-0.9, 0.9, cloud(shape, rng, size=90 * scale, slope=2.2))
    height += crumbs * (0.45 + 0.75 * fresh) * (1 - 0.88 * (stony > 0))
    height += 0.08 * scale * grain(shape, rng, sigma=0.9) * (stony > 0)
    if soil.cracked:
        wall = cells(shape, rng, spacing=105 * scale, warp=9 * scale, shrink=2.0)
        wall += 0.25 * scale * cloud(shape, rng, size=6 * scale, slope=1.5)
        wide = (1.25 + 0.75 * cloud(shape, rng, size=120 * scale, slope=2.4)) * scale * soil.cracked
        gap = step(1.0, 0.25, wall / np.maximum(wide, 0.05)) * (wide > 0.35 * scale)
        height -= gap * 7 * scale * (1 - 0.7 * (stony > 0.0))
        tone *= 1 - 0.35 * gap
    return Bed(
        colour=_colour(soil, shape, scale, tone, stony, rng), height=np.asarray(height, np.float32)
    )


def _colour(
    soil: Soil,
    shape: tuple[int, int],
    scale: float,
    tone: Layer,
    stony: Layer,
    rng: np.random.Generator,
) -> Layer:
    wet = soil.damp * step(-0.4, 1.3, cloud(shape, rng, size=260 * scale, slope=2.5))
    tone = tone * np.exp(0.11 * cloud(shape, rng, size=5 * scale, slope=1.2)) * (1 - 0.5 * wet)
    earth = np.asarray(soil.colour, np.float32) * tone[..., None]
    warm = 0.05 * cloud(shape, rng, size=50 * scale, slope=1.8)
    earth *= np.stack([1 + warm, np.ones_like(warm), 1 - 1.3 * warm], axis=-1)
    sand = step(2.5, 3.3, grain(shape, rng, sigma=0.32 * scale))
    dark = step(2.6, 3.4, grain(shape, rng, sigma=0.5 * scale))
    earth = earth * (1 + 1.5 * sand[..., None]) * (1 - 0.6 * dark[..., None])
    veined = 1 + 0.12 * cloud(shape, rng, size=4 * scale, slope=1.4)
    grey = np.array([0.21, 0.195, 0.175], np.float32) * (tone * veined)[..., None]
    ochre = np.array([0.27, 0.19, 0.115], np.float32) * (tone * veined)[..., None]
    rock = np.where((stony > 0.75)[..., None], ochre, grey)
    earth = np.where((stony > 0)[..., None], rock, earth)
    if soil.mossy:
        patch = step(1.15, 2.0, cloud(shape, rng, size=110 * scale, slope=1.9)) * step(
            -1, 0.8, cloud(shape, rng, size=5 * scale, slope=1.2)
        )
        film = np.array([0.068, 0.076, 0.038], np.float32) * (0.75 + 0.3 * tone)[..., None]
        earth = earth + (film - earth) * (0.72 * soil.mossy * patch * (stony <= 0))[..., None]
    return np.asarray(earth, dtype=np.float32)


def light_bed(bed: Bed, sun: Sun, scale: float, shade: Layer, *, sky: float) -> Layer:
    """Light a bed: sun with cast shadows (and `shade`, 1 = full sun), the sky's share dimmed in hollows."""
    height = soft(bed.height, 0.35)
    lit = lambert(height, sun) / np.float32(sun.towards[2])
    open_sun = cast_shadow(height, sun, reach=26 * scale, penumbra=0.5 * scale) * shade
    hollow = np.zeros_like(height)
    for size, weight in ((1.5, 0.5), (5.0, 0.3), (14.0, 0.2)):
        below = (soft(height, size * scale) - height) / np.float32(size * scale)
        hollow += np.float32(weight) * np.clip(below * 1.5, -0.5, 1.0)
    diffuse = np.clip(sky * (1 - 0.85 * hollow), 0.2 * sky, 2 * sky)
    sun_part = ((1.12 - sky) * lit * open_sun)[..., None] * np.array([1.04, 1.0, 0.93], np.float32)
    sky_part = diffuse[..., None] * np.array([0.93, 1.0, 1.13], np.float32)
    return np.asarray(bed.colour * (sun_part + sky_part), dtype=np.float32)
