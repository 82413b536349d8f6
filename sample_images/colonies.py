"""Colonies on agar: mixed, domed, slightly irregular, shaded by the same light as the dish."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from camera import Camera
from light import Sun, gloss, lambert
from texture import Layer, cloud, grain, moved, soft, step

Points = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Sort:
    """One sort of colony: colour in linear light, how opaque, how shiny, how high, how wavy."""

    colour: tuple[float, float, float]
    opaque: float
    shine: float
    dome: float
    wavy: float
    raised: float = 0.0
    edge: float = 0.72


SORTS = (
    Sort(colour=(0.54, 0.47, 0.30), opaque=0.93, shine=0.75, dome=0.21, wavy=0.012),
    Sort(
        colour=(0.58, 0.53, 0.41),
        opaque=0.86,
        shine=0.30,
        dome=0.13,
        wavy=0.026,
        raised=0.8,
        edge=0.55,
    ),
    Sort(colour=(0.56, 0.37, 0.075), opaque=0.96, shine=0.80, dome=0.28, wavy=0.008),
    Sort(colour=(0.50, 0.20, 0.15), opaque=0.92, shine=0.6, dome=0.24, wavy=0.012),
    Sort(colour=(0.56, 0.22, 0.05), opaque=0.95, shine=0.7, dome=0.26, wavy=0.010),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Colonies:
    """Colonies as columns: centre and radius of equal area in mm, sort, and a seed for their outline."""

    xy_mm: Points
    radius_mm: Points
    sort: npt.NDArray[np.int64]
    seed: int

    def __post_init__(self) -> None:
        if not len(self.xy_mm) == len(self.radius_mm) == len(self.sort):
            raise ValueError(
                "Colonies need one centre, radius and sort each; give columns of one length."
            )


@dataclass(frozen=True, slots=True, kw_only=True)
class Cover:
    """Colonies as layers: height in pixels, colour, how far each pixel is covered, and shine."""

    height: Layer
    colour: Layer
    cover: Layer
    shine: Layer


def outline(rng: np.random.Generator, wavy: float) -> tuple[Points, Points, float]:
    """Draw amplitudes and phases of a wavy outline, and the radius that keeps its area at pi."""
    orders = np.arange(2, 9)
    amplitude = (
        wavy * rng.standard_normal(len(orders)) * np.array([1.7, 1.1, 0.7, 0.45, 0.3, 0.25, 0.2])
    )
    phase = rng.uniform(0, 2 * np.pi, len(orders))
    return amplitude, phase, float(1 / np.sqrt(1 + 0.5 * (amplitude**2).sum()))


def radial(dx: Layer, dy: Layer, amplitude: Points, phase: Points, base: float) -> Layer:
    """Give distance from the centre in units of a wavy outline's own radius in that direction."""
    angle = np.arctan2(dy, dx)
    edge = np.full_like(dx, base)
    for k, (a, p) in enumerate(zip(amplitude, phase, strict=True), start=2):
        edge += np.float32(base * a) * np.cos(np.float32(k) * angle + np.float32(p))
    return np.asarray(np.hypot(dx, dy) / edge, dtype=np.float32)


def layers(colonies: Colonies, camera: Camera, x_mm: Layer, y_mm: Layer, *, z_mm: float) -> Cover:
    """Lay all colonies out as layers; where two meet, the higher one is seen."""
    shape = camera.shape
    height, cover, shine = (np.zeros(shape, np.float32) for _ in range(3))
    colour = np.zeros((*shape, 3), np.float32)
    rng = np.random.default_rng(colonies.seed)
    centres = camera.to_pixels(colonies.xy_mm, z_mm=z_mm)
    scales = camera.px_per_mm_at(colonies.xy_mm, z_mm=z_mm)
    mottle = cloud(shape, rng, size=6 * camera.px_per_mm / 20, slope=1.4)
    for k in range(len(centres)):
        sort = SORTS[colonies.sort[k]]
        radius, scale = float(colonies.radius_mm[k]), float(scales[k])
        amplitude, phase, base = outline(rng, sort.wavy * rng.uniform(0.6, 1.5))
        reach = radius * scale * 1.3 + 3
        u, v = centres[k]
        box = (
            slice(max(0, int(v - reach)), min(shape[0], int(v + reach) + 2)),
            slice(max(0, int(u - reach)), min(shape[1], int(u + reach) + 2)),
        )
        dx = (x_mm[box] - np.float32(colonies.xy_mm[k, 0])) / np.float32(radius)
        dy = (y_mm[box] - np.float32(colonies.xy_mm[k, 1])) / np.float32(radius)
        rho = radial(dx, dy, amplitude, phase, base)
        dome, raised = sort.dome * rng.uniform(0.8, 1.2), sort.raised * rng.uniform(0.3, 1.3)
        flat = np.clip(1 - rho**2, 0, None)
        steep = rng.uniform(0.62, 0.9) if sort.raised == 0 else 0.5
        mound = np.exp(-((rho / 0.42) ** 2)) * np.minimum(1, 3 * flat)
        profile = flat**steep * (1 - 0.55 * raised) + 0.5 * raised * mound
        rise = (dome * radius * scale) * profile
        edge = max(0.07, 0.9 / (radius * scale))
        seen = step(1 + edge, 1 - edge, rho) * np.float32(sort.opaque * rng.uniform(0.94, 1.0))
        seen *= sort.edge + (1 - sort.edge) * step(1.0, 0.62, rho)
        wins = (rise > height[box]) | ((height[box] <= 0) & (seen > cover[box]))
        hue = (
            np.asarray(sort.colour) * rng.uniform(0.86, 1.08) * (1 + 0.018 * rng.standard_normal(3))
        )
        ring = 1 - 0.10 * np.exp(-(((rho - rng.uniform(0.5, 0.8)) / 0.14) ** 2)) * raised
        depth = (0.93 + 0.08 * step(0.9, 0.1, rho) + 0.03 * mottle[box]) * ring
        colour[box][wins] = (depth[..., None] * hue.astype(np.float32))[wins]
        shine[box][wins] = sort.shine * rng.uniform(0.6, 1.3)
        height[box] = np.where(wins, np.maximum(rise, height[box]), height[box])
        cover[box] = np.maximum(cover[box], seen)
    return Cover(height=height, colour=colour, cover=cover, shine=shine)


def paint(
    agar: Layer, layered: Cover, sun: Sun, *, px_per_mm: float, rng: np.random.Generator
) -> Layer:
    """Paint colonies over an agar picture in linear light, with their two shadows."""
    throw_x, throw_y = sun.throw
    near = soft(
        moved(layered.cover, throw_x * 0.22 * px_per_mm, throw_y * 0.22 * px_per_mm),
        0.16 * px_per_mm,
    )
    deep = soft(
        moved(layered.cover, throw_x * 2.4 * px_per_mm, throw_y * 2.4 * px_per_mm), 0.5 * px_per_mm
    )
    ground = agar * (1 - 0.30 * near[..., None]) * (1 - 0.20 * deep[..., None])
    rough = grain(layered.height.shape, rng, sigma=1.6) * 0.035 * step(0.0, 1.0, layered.height)
    height = soft(layered.height, 0.05 * px_per_mm) + rough.astype(np.float32)
    level = np.float32(sun.towards[2])
    within = soft(lambert(height, sun) * layered.cover, 0.10 * px_per_mm)
    within /= soft(layered.cover, 0.10 * px_per_mm) + 0.02
    lit = 0.70 + 0.20 * lambert(height, sun) / level + 0.14 * within / level
    ceiling = Sun(from_deg=sun.from_deg + 130, elevation_deg=74)
    spark = step(0.35, 0.75, gloss(height, sun, power=260)) * layered.shine * 0.75
    spark += step(0.4, 0.9, gloss(height, ceiling, power=500)) * layered.shine * 0.16
    spark += gloss(height, sun, power=16) * layered.shine * 0.045
    spark *= layered.cover > 0.4
    body = layered.colour * lit[..., None] + soft(spark.astype(np.float32), 0.6)[..., None]
    weight = layered.cover[..., None]
    return np.asarray(ground * (1 - weight) + body * weight, dtype=np.float32)
