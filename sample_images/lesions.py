"""Lesions on a leaf: brown dead tissue with a darker rim and a yellow halo."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from camera import Camera, Points
from colonies import outline, radial
from texture import Layer, cloud, grain, step


@dataclass(frozen=True, slots=True, kw_only=True)
class Lesions:
    """Lesions as columns: centre and radius in mm of the dead tissue with its rim (not the halo)."""

    xy_mm: Points
    radius_mm: Points
    seed: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Marks:
    """Lesions as layers: dead tissue (0 to 1), halo (0 to 1), colour of the dead tissue, sinking in mm."""

    dead: Layer
    halo: Layer
    colour: Layer
    sunk: Layer


TAN = np.array([0.31, 0.215, 0.125], np.float32)
BROWN = np.array([0.098, 0.048, 0.021], np.float32)
DARK = np.array([0.036, 0.017, 0.010], np.float32)


def draw_lesions(lesions: Lesions, camera: Camera, x: Layer, y: Layer) -> Marks:
    """Lay all lesions out as layers; where two meet they run into one another."""
    rng = np.random.default_rng(lesions.seed)
    shape, scale = camera.shape, camera.px_per_mm
    nearest = np.full(shape, 9.0, np.float32)
    dead, halo, sunk = (np.zeros(shape, np.float32) for _ in range(3))
    colour = np.zeros((*shape, 3), np.float32)
    rag = cloud(shape, rng, size=1.3 * scale, slope=1.5)
    fine = grain(shape, rng, sigma=1.0)
    centres = camera.to_pixels(lesions.xy_mm)
    for (u, v), (cx, cy), radius in zip(centres, lesions.xy_mm, lesions.radius_mm, strict=True):
        reach = radius * scale * 3.2 + 6
        box = (
            slice(max(0, int(v - reach)), min(shape[0], int(v + reach) + 2)),
            slice(max(0, int(u - reach)), min(shape[1], int(u + reach) + 2)),
        )
        amplitude, phase, base = outline(rng, rng.uniform(0.015, 0.05))
        dx, dy = (
            (x[box] - np.float32(cx)) / np.float32(radius),
            (y[box] - np.float32(cy)) / np.float32(radius),
        )
        rho = radial(dx, dy, amplitude, phase, base) + 0.035 * rag[box]
        old = float(np.clip((radius - 0.75) / 0.9 + rng.normal(0, 0.35), 0, 1))
        aa = max(rng.uniform(0.06, 0.16), 0.9 / (radius * scale))
        here = step(1 + aa, 1 - aa, rho)
        spread = rng.uniform(0.45, 1.1)
        yellow = np.exp(-((np.clip(rho - 0.9, 0, None) / spread) ** 1.7)) * rng.uniform(0.7, 1.0)
        wins = rho < nearest[box]
        tone = _tissue(rho, old, rag[box], fine[box], rng)
        colour[box][wins] = tone[wins]
        nearest[box] = np.minimum(nearest[box], rho)
        dead[box] = np.maximum(dead[box], here)
        halo[box] = 1 - (1 - halo[box]) * (1 - yellow)
        sunk[box] = np.maximum(
            sunk[box], 0.28 * step(1.1, 0.75, rho) - 0.05 * old * step(0.6, 0.2, rho)
        )
    return Marks(dead=dead, halo=halo, colour=colour, sunk=sunk)


def _tissue(rho: Layer, old: float, rag: Layer, fine: Layer, rng: np.random.Generator) -> Layer:
    """Colour dead tissue from its middle outwards; an old lesion has a pale papery middle with dark specks."""
    middle = step(rng.uniform(0.62, 0.78), rng.uniform(0.3, 0.45), rho + 0.05 * rag) * old
    rim = np.exp(-(((rho - rng.uniform(0.84, 0.92)) / rng.uniform(0.11, 0.17)) ** 2))
    tone = BROWN * np.exp(0.10 * rag + 0.05 * fine)[..., None] * rng.uniform(0.8, 1.25)
    tone = (
        tone
        + (TAN * rng.uniform(0.7, 1.2) * (1 + 0.12 * rag)[..., None] - tone)
        * (0.9 * middle)[..., None]
    )
    ring = 1 - 0.16 * old * np.cos(2 * np.pi * (rho * rng.uniform(3.0, 4.5))) * (rho < 0.8)
    specks = step(1.5, 2.3, fine) * middle
    tone = tone * (ring * (1 - 0.55 * specks))[..., None]
    return np.asarray(tone + (DARK - tone) * (0.82 * rim)[..., None], dtype=np.float32)
