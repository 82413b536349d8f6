"""Seedlings as small rosettes: two seed leaves and a few true leaves, each shaded and casting shadow."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from light import Sun
from texture import Layer, Points, grain, moved, soft, step


@dataclass(frozen=True, slots=True, kw_only=True)
class Blade:
    """One leaf: direction, whole length from the crown, half width, stalk share, and its look."""

    angle: float
    length: float
    half_width: float
    stalk: float
    round_tip: float
    teeth: float
    bend: float
    lift: float
    droop: float
    colour: tuple[float, float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class Seedling:
    """Leaves from lowest to highest, all lengths in mm; `shift` brings the middle of its area to 0, 0."""

    blades: tuple[Blade, ...]
    shift: tuple[float, float]
    radius_mm: float


def _colour(rng: np.random.Generator, plant: Points, young: float) -> tuple[float, float, float]:
    r, g, b = (
        plant * (1 + 0.05 * rng.standard_normal(3)) * rng.uniform(0.88, 1.1) * (1 + 0.35 * young)
    )
    return float(r * (1 + 0.25 * young)), float(g), float(b)


def grow(rng: np.random.Generator, radius_mm: float, leaves: int) -> Seedling:
    """Grow a seedling whose leaves together cover a circle of `radius_mm`.

    Parameters
    ----------
    rng
        Source of randomness.
    radius_mm
        Radius of the circle of equal area.
    leaves
        Number of true leaves, 0 to 6.
    """
    if not 0 <= leaves <= 6:
        raise ValueError(f"A seedling was asked for {leaves} true leaves; give 0 to 6.")
    plant = np.array([0.062, 0.150, 0.030]) * np.array(
        [rng.uniform(0.75, 1.45), rng.uniform(0.85, 1.15), rng.uniform(0.7, 1.3)]
    )
    turn = rng.uniform(0, 2 * np.pi)
    blades = []
    for k in range(2):
        blades.append(
            Blade(
                angle=turn + np.pi * k + rng.normal(0, 0.13),
                length=rng.uniform(0.9, 1.05) * (1.0 if leaves < 3 else 0.88),
                half_width=rng.uniform(0.2, 0.26),
                stalk=rng.uniform(0.28, 0.4),
                round_tip=rng.uniform(0.36, 0.46),
                teeth=0.0,
                bend=rng.normal(0, 0.06),
                lift=rng.uniform(0.45, 0.65),
                droop=rng.uniform(0.1, 0.3),
                colour=_colour(rng, plant, 0.05),
            )
        )
    pairs = turn + np.pi / 2
    for k in range(leaves):
        age = 1 - k / max(leaves, 1)
        blades.append(
            Blade(
                angle=pairs + (k % 2) * np.pi + (k // 2) * 1.15 + rng.normal(0, 0.22),
                length=(0.5 + 0.75 * age * (0.5 + leaves / 7)) * rng.uniform(0.8, 1.15),
                half_width=(0.17 + 0.14 * age) * rng.uniform(0.85, 1.15),
                stalk=rng.uniform(0.2, 0.32),
                round_tip=rng.uniform(0.52, 0.66),
                teeth=rng.uniform(0.08, 0.2),
                bend=rng.normal(0, 0.12),
                lift=rng.uniform(0.6, 0.9) + 0.2 * (1 - age),
                droop=rng.uniform(0.15, 0.5),
                colour=_colour(rng, plant, 0.65 * (1 - age)),
            )
        )
    return _fitted(tuple(blades), radius_mm)


def _fitted(blades: tuple[Blade, ...], radius_mm: float) -> Seedling:
    """Scale and shift leaves so that they cover the asked area about the origin."""
    fine = 60.0
    y, x = np.mgrid[-110:111, -110:111].astype(np.float32) / np.float32(fine)
    cover = np.zeros_like(x)
    for blade in blades:
        cover = np.maximum(cover, leaf_cover(blade, x, y, fine)[0])
    area = float(cover.sum()) / fine**2
    middle = float((x * cover).sum() / cover.sum()), float((y * cover).sum() / cover.sum())
    grow_by = radius_mm / math.sqrt(area / math.pi)
    return Seedling(
        blades=tuple(_scaled(b, grow_by) for b in blades),
        shift=(-middle[0] * grow_by, -middle[1] * grow_by),
        radius_mm=radius_mm,
    )


def _scaled(blade: Blade, factor: float) -> Blade:
    return replace(blade, length=blade.length * factor, half_width=blade.half_width * factor)


def leaf_cover(blade: Blade, x: Layer, y: Layer, px_per_unit: float) -> tuple[Layer, Layer, Layer]:
    """Give a leaf's cover (0 to 1), the way along it (0 to 1) and across it (-1 to 1)."""
    c, s = np.float32(math.cos(blade.angle)), np.float32(math.sin(blade.angle))
    along = np.asarray((x * c + y * s) / np.float32(blade.length), dtype=np.float32)
    across = (y * c - x * s) - np.float32(blade.bend * blade.length) * along**2
    q = np.clip((along - np.float32(blade.stalk)) / np.float32(1 - blade.stalk), 1e-4, 1 - 1e-4)
    peak = blade.round_tip
    shape = (q ** np.float32(0.62)) * ((1 - q) ** np.float32(peak))
    top = 0.62 / (0.62 + peak)
    shape = shape / np.float32(top**0.62 * (1 - top) ** peak)
    notch = 1 - np.float32(blade.teeth) * (
        0.5 + 0.5 * np.sign(across) * 0.2 + 0.5 * np.cos(q * np.float32(2 * np.pi * 5.5))
    )
    stalk = np.float32(0.045 * blade.length) * step(-0.02, 0.03, along) * step(0.6, 0.5, along)
    half = np.maximum(
        np.where(
            (along > blade.stalk) & (along < 1), np.float32(blade.half_width) * shape * notch, 0
        ),
        stalk,
    )
    cover = np.clip((half - np.abs(across)) * np.float32(px_per_unit) + 0.5, 0, 1) * (half > 0)
    side = np.clip(across / np.maximum(half, 1e-3), -1.5, 1.5)
    return np.asarray(cover, np.float32), along, np.asarray(side, np.float32)


def _lit(blade: Blade, along: Layer, side: Layer, sun: Sun, rough: Layer) -> Layer:
    """Shade a leaf: folded along its midrib, arching, with lighter veins."""
    c, s = math.cos(blade.angle), math.sin(blade.angle)
    down = blade.droop * (along * 2.2 - 1.0) - 0.12
    fold = 0.34 * np.tanh(side * 4) * (0.55 + 0.45 * np.abs(side)) - 0.42 * side**3
    fold = fold + 0.10 * rough
    nx, ny = down * c + (-fold) * (-s), down * s + (-fold) * c
    x, y, z = sun.towards
    lit = np.maximum((nx * x + ny * y + z) / np.sqrt(1 + nx * nx + ny * ny), 0) / z
    sheen = (
        np.maximum(
            (nx * x + ny * y + z + 1) / np.sqrt(1 + nx * nx + ny * ny) / math.sqrt(2 + 2 * z), 0
        )
        ** 28
    )
    rib = np.exp(-((side / 0.10) ** 2)) * step(1.0, 0.55, along)
    veins = 0.5 + 0.5 * np.cos(2 * np.pi * (along * 6.5 - 1.1 * np.abs(side)))
    tone = (0.50 + 0.62 * lit) * (0.94 + 0.10 * veins * (1 - rib) + 0.05 * rough)
    body = np.asarray(blade.colour, np.float32) * tone[..., None].astype(np.float32)
    pale = np.array([0.16, 0.21, 0.085], np.float32) * tone[..., None].astype(np.float32)
    stalk = step(blade.stalk + 0.12, blade.stalk - 0.05, along)
    body = body + (pale - body) * np.clip(0.5 * rib + 0.75 * stalk, 0, 0.9)[..., None]
    return np.asarray(
        body + (0.045 * sheen)[..., None] * np.array([0.9, 1.0, 1.1], np.float32), dtype=np.float32
    )


def _window(shape: tuple[int, ...], u: float, v: float, reach: float) -> tuple[slice, slice]:
    return (
        slice(max(0, int(v - reach)), min(shape[0], int(v + reach) + 2)),
        slice(max(0, int(u - reach)), min(shape[1], int(u + reach) + 2)),
    )


def shade_ground(dim: Layer, plant: Seedling, u: float, v: float, scale: float, sun: Sun) -> None:
    """Multiply the shadow of a seedling standing at pixel u, v into `dim` in place (1 = full light)."""
    longest = max(b.length for b in plant.blades)
    reach = longest * scale * 2.2 + 8
    box = _window(dim.shape, u, v, reach)
    y, x = np.mgrid[box].astype(np.float32)
    x, y = (
        (x - np.float32(u)) / np.float32(scale) - np.float32(plant.shift[0]),
        (y - np.float32(v)) / np.float32(scale) - np.float32(plant.shift[1]),
    )
    throw = sun.throw
    dark = np.zeros_like(x)
    for blade in plant.blades:
        high = blade.lift * blade.length
        cover = leaf_cover(
            blade, x - np.float32(throw[0] * high), y - np.float32(throw[1] * high), scale
        )[0]
        dark = np.maximum(dark, soft(cover, 0.45 + 0.06 * high * scale))
        under = leaf_cover(blade, x, y, scale)[0]
        dark = np.maximum(dark, 0.5 * soft(under, 0.12 * longest * scale))
    dim[box] *= 1 - 0.86 * dark


def paint_seedling(
    picture: Layer,
    plant: Seedling,
    u: float,
    v: float,
    scale: float,
    sun: Sun,
    rng: np.random.Generator,
    shade: Layer,
) -> None:
    """Paint a seedling whose middle stands at pixel u, v into a lit picture, in place."""
    longest = max(b.length for b in plant.blades)
    box = _window(picture.shape, u, v, longest * scale * 1.7 + 4)
    y, x = np.mgrid[box].astype(np.float32)
    x, y = (
        (x - np.float32(u)) / np.float32(scale) - np.float32(plant.shift[0]),
        (y - np.float32(v)) / np.float32(scale) - np.float32(plant.shift[1]),
    )
    rough = grain((x.shape[0], x.shape[1]), rng, sigma=0.7 * scale)
    view, sunlit = picture[box], shade[box]
    for blade in plant.blades:
        cover, along, side = leaf_cover(blade, x, y, scale)
        high = 0.5 * blade.lift * blade.length * scale
        below = soft(moved(cover, sun.throw[0] * high, sun.throw[1] * high), 0.6 + 0.1 * high)
        view *= (1 - 0.42 * below * (1 - cover))[..., None]
        body = _lit(blade, along, side, sun, rough) * (0.42 + 0.58 * sunlit)[..., None]
        view[:] = view * (1 - cover[..., None]) + body * cover[..., None]
