"""What a dish stands on: woven cloth, or a worn bench top."""

from __future__ import annotations

from typing import Literal

import numpy as np
from light import Sun, lambert
from texture import Layer, cloud, grain, resized, smooth_line, soft, step, stroke

Bench = Literal["dark cloth", "pale cloth", "slate", "green mat", "wood"]

GROUND: dict[Bench, tuple[float, float, float]] = {
    "dark cloth": (0.028, 0.034, 0.055),
    "pale cloth": (0.52, 0.51, 0.47),
    "slate": (0.050, 0.054, 0.058),
    "green mat": (0.020, 0.070, 0.055),
    "wood": (0.21, 0.125, 0.065),
}


def draw_bench(
    bench: Bench, x_mm: Layer, y_mm: Layer, sun: Sun, px_per_mm: float, rng: np.random.Generator
) -> Layer:
    """Draw the surface under a dish in linear light, (rows, columns, 3)."""
    base = np.asarray(GROUND[bench], np.float32)
    shape = x_mm.shape
    big = cloud((shape[0], shape[1]), rng, size=30 * px_per_mm, slope=2.6)
    if bench in ("dark cloth", "pale cloth"):
        tone = _cloth(x_mm, y_mm, sun, px_per_mm, rng)
    elif bench == "wood":
        tone = _wood(x_mm, y_mm, px_per_mm, rng)
    else:
        tone = _worn(x_mm.shape, px_per_mm, rng)
    hue = np.stack([1 + 0.02 * big, np.ones_like(big), 1 - 0.02 * big], axis=-1)
    return np.asarray(base * (tone * (1 + 0.05 * big))[..., None] * hue, dtype=np.float32)


def _cloth(x_mm: Layer, y_mm: Layer, sun: Sun, px_per_mm: float, rng: np.random.Generator) -> Layer:
    shape = (x_mm.shape[0], x_mm.shape[1])
    wander = [0.9 * cloud(shape, rng, size=40 * px_per_mm, slope=2.6) for _ in range(2)]
    tremble = [0.05 * cloud(shape, rng, size=1.5 * px_per_mm, slope=1.6) for _ in range(2)]
    turn, pitch = rng.uniform(-0.12, 0.12), 0.46
    u = (x_mm * np.cos(turn) + y_mm * np.sin(turn) + wander[0] + tremble[0]) / np.float32(pitch)
    v = (y_mm * np.cos(turn) - x_mm * np.sin(turn) + wander[1] + tremble[1]) / np.float32(pitch)
    over = (np.floor(u).astype(int) + np.floor(v).astype(int)) % 2
    fu, fv = u - np.floor(u) - 0.5, v - np.floor(v) - 0.5
    warp = np.sqrt(np.clip(1 - (fu * 2) ** 2, 0, 1)) * (0.6 + 0.4 * np.cos(np.pi * fv))
    weft = np.sqrt(np.clip(1 - (fv * 2) ** 2, 0, 1)) * (0.6 + 0.4 * np.cos(np.pi * fu))
    thread = np.where(over == 1, warp, weft).astype(np.float32)
    slubs = np.exp(0.07 * cloud(shape, rng, size=3 * px_per_mm, slope=1.3))
    fold = 14 * px_per_mm * 0.06 * cloud(shape, rng, size=50 * px_per_mm, slope=3.0)
    lit = lambert(fold.astype(np.float32), sun) / np.float32(sun.towards[2])
    fluff = 1 + 0.06 * grain(shape, rng, sigma=0.9)
    return np.asarray(
        (0.70 + 0.42 * thread) * slubs * (0.35 + 0.65 * lit) * fluff, dtype=np.float32
    )


def _worn(shape: tuple[int, ...], px_per_mm: float, rng: np.random.Generator) -> Layer:
    flat = (shape[0], shape[1])
    specks = step(2.2, 3.2, grain(flat, rng, sigma=0.05 * px_per_mm))
    tone = (
        1
        + 0.10 * cloud(flat, rng, size=2 * px_per_mm, slope=1.2)
        + 0.06 * grain(flat, rng, sigma=0.8)
        + 0.9 * specks
    )
    marks = np.zeros(flat, np.float32)
    for _ in range(26):
        start = rng.uniform(0, (shape[1], shape[0]))
        run = rng.normal(0, 14 * px_per_mm, 2)
        line = smooth_line(
            np.array([start, start + 0.5 * run + rng.normal(0, px_per_mm, 2), start + run]),
            samples=40,
        )
        stroke(marks, line, rng.uniform(0.8, 2.2), rng.uniform(0.1, 0.45))
    wiped = cloud(flat, rng, size=18 * px_per_mm, slope=2.0)
    return np.asarray(tone * (1 + 0.08 * wiped) + soft(marks, 0.6), dtype=np.float32)


def _wood(x_mm: Layer, y_mm: Layer, px_per_mm: float, rng: np.random.Generator) -> Layer:
    shape = (x_mm.shape[0], x_mm.shape[1])
    bend = 1.6 * cloud(shape, rng, size=110 * px_per_mm, slope=3.0)
    across = y_mm + bend + 0.03 * x_mm
    streaks = np.zeros(shape, np.float32)
    for pitch, weight in ((7.0, 0.35), (2.3, 0.45), (0.8, 0.4), (0.3, 0.3)):
        knots = rng.standard_normal(4096).astype(np.float32)
        at = (
            across / np.float32(pitch)
            + 2000
            + 0.35 * cloud(shape, rng, size=60 * px_per_mm, slope=2.6)
        )
        k = np.floor(at).astype(int) % 4095
        f = at - np.floor(at)
        f = f * f * (3 - 2 * f)
        streaks += np.float32(weight) * (knots[k] * (1 - f) + knots[k + 1] * f)
    noise = rng.standard_normal((shape[0], max(8, shape[1] // 24))).astype(np.float32)
    pores = resized(np.ascontiguousarray(noise), shape)
    return np.asarray(np.exp(0.20 * streaks - 0.16 * step(0.9, 2.2, pores)), dtype=np.float32)
