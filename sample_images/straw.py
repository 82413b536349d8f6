"""What lies on a bed and does not count: straw, one dead leaf, and the shadow of a weed beside the plot."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from light import Sun
from seedlings import Blade, leaf_cover
from texture import Layer, Points, cloud, grain, moved, resized, soft, step


@dataclass(frozen=True, slots=True, kw_only=True)
class Litter:
    """How much straw lies about, how long it is (mm), and how many dead leaves."""

    straws: int = 60
    long_mm: float = 45.0
    dead_leaves: int = 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Piece:
    """One piece of litter at pixel u, v."""

    u: float
    v: float
    blade: Blade
    leaf: bool
    high_mm: float


def strew(litter: Litter, shape: tuple[int, int], rng: np.random.Generator) -> list[Piece]:
    """Scatter litter over a bed."""
    pieces = []
    wind = rng.uniform(0, np.pi)
    for k in range(litter.straws + litter.dead_leaves):
        leaf = k >= litter.straws
        length = (
            rng.uniform(38, 52)
            if leaf
            else float(np.clip(np.exp(rng.normal(math.log(litter.long_mm), 0.6)), 8, 190))
        )
        tone = rng.uniform(0.6, 1.15)
        dead = (0.115 * tone, 0.060 * tone, 0.026 * tone)
        pale = np.array([0.36, 0.27, 0.125]) * tone * (1 + 0.06 * rng.standard_normal(3))
        blade = Blade(
            angle=rng.uniform(0, 2 * np.pi) if rng.random() < 0.6 else wind + rng.normal(0, 0.5),
            length=length,
            half_width=length * rng.uniform(0.26, 0.33) if leaf else rng.uniform(0.6, 1.7),
            stalk=0.14 if leaf else 0.0,
            round_tip=0.6,
            teeth=0.12 if leaf else 0.0,
            bend=rng.normal(0, 0.15 if leaf else 0.03),
            lift=0.12,
            droop=0.5,
            colour=dead if leaf else (float(pale[0]), float(pale[1]), float(pale[2])),
        )
        u, v = rng.uniform(0, shape[1]), rng.uniform(0, shape[0])
        if leaf:
            u, v = rng.uniform(0.25, 0.75) * shape[1], rng.uniform(0.25, 0.75) * shape[0]
        pieces.append(Piece(u=u, v=v, blade=blade, leaf=leaf, high_mm=rng.uniform(0.8, 3.0)))
    return pieces


def _cover(piece: Piece, x: Layer, y: Layer, scale: float) -> tuple[Layer, Layer, Layer]:
    blade = piece.blade
    if piece.leaf:
        return leaf_cover(blade, x, y, scale)
    c, s = np.float32(math.cos(blade.angle)), np.float32(math.sin(blade.angle))
    along = np.asarray((x * c + y * s) / np.float32(blade.length), dtype=np.float32)
    across = y * c - x * s - np.float32(blade.bend * blade.length) * (along - 0.5) ** 2 * 4
    ragged = 0.06 * np.sin(across * 5 / np.float32(blade.half_width) + np.float32(blade.length))
    ends = np.clip(
        (np.minimum(along, 1 + ragged - along)) * np.float32(blade.length * scale) + 0.5, 0, 1
    )
    cover = (
        np.clip((np.float32(blade.half_width) - np.abs(across)) * np.float32(scale) + 0.5, 0, 1)
        * ends
    )
    return (
        np.asarray(cover, np.float32),
        along,
        np.asarray(across / np.float32(blade.half_width), np.float32),
    )


def _grid(
    piece: Piece, shape: tuple[int, ...], scale: float
) -> tuple[tuple[slice, slice], Layer, Layer]:
    reach = piece.blade.length * scale * 1.25 + 10
    box = (
        slice(max(0, int(piece.v - reach)), min(shape[0], int(piece.v + reach) + 2)),
        slice(max(0, int(piece.u - reach)), min(shape[1], int(piece.u + reach) + 2)),
    )
    y, x = np.mgrid[box].astype(np.float32)
    return (
        box,
        (x - np.float32(piece.u)) / np.float32(scale),
        (y - np.float32(piece.v)) / np.float32(scale),
    )


def cast_litter(dim: Layer, pieces: list[Piece], scale: float, sun: Sun) -> None:
    """Multiply the shadows of litter into `dim`, in place."""
    for piece in pieces:
        box, x, y = _grid(piece, dim.shape, scale)
        cover = _cover(piece, x, y, scale)[0]
        high = piece.high_mm * scale * (1.6 if piece.leaf else 1.0)
        fallen = soft(moved(cover, sun.throw[0] * high, sun.throw[1] * high), 0.5 + 0.12 * high)
        dim[box] *= 1 - 0.75 * fallen


def paint_litter(
    picture: Layer,
    pieces: list[Piece],
    shade: Layer,
    scale: float,
    sun: Sun,
    rng: np.random.Generator,
) -> None:
    """Paint litter onto a lit bed, in place; soil crumbs hide parts of it."""
    buried = step(
        0.9, 1.5, cloud((shade.shape[0], shade.shape[1]), rng, size=12 * scale, slope=1.5)
    )
    for piece in pieces:
        box, x, y = _grid(piece, shade.shape, scale)
        cover, along, side = _cover(piece, x, y, scale)
        c, s = math.cos(piece.blade.angle), math.sin(piece.blade.angle)
        fine = (x.shape[0], x.shape[1])
        if piece.leaf:
            curl = 0.9 * side + 0.5 * cloud(fine, rng, size=9 * scale, slope=2.0)
            veins = (
                1
                - 0.35 * np.exp(-((side / 0.07) ** 2))
                + 0.18 * np.cos(2 * np.pi * (along * 7 - 1.3 * np.abs(side)))
            )
            streak = veins * np.exp(0.2 * cloud(fine, rng, size=6 * scale, slope=1.5))
        else:
            curl = 1.1 * side
            fibre = np.interp(side, np.linspace(-1.2, 1.2, 9), rng.normal(1, 0.13, 9)).astype(
                np.float32
            )
            node = 1 - 0.4 * np.exp(
                -(((along - rng.uniform(0.2, 0.8)) * piece.blade.length / 1.1) ** 2)
            )
            streak = fibre * node * (1 + 0.07 * grain(fine, rng, sigma=1.2))
        nx, ny = -s * curl, c * curl
        tx, ty, tz = sun.towards
        lit = np.maximum((nx * tx + ny * ty + tz) / np.sqrt(1 + curl * curl), 0) / tz
        body = (
            np.asarray(piece.blade.colour, np.float32)
            * (streak * (0.42 + 0.68 * lit * shade[box]))[..., None]
        )
        weight = (cover * (1 - (0.35 if piece.leaf else 0.95) * buried[box]))[..., None]
        view = picture[box]
        view[:] = view * (1 - weight) + body.astype(np.float32) * weight


def weed_shade(shape: tuple[int, int], scale: float, sun: Sun, rng: np.random.Generator) -> Layer:
    """Give the soft shadow of a tall weed that stands outside the picture, 1 = full sun."""
    coarse = 4
    small = (shape[0] // coarse, shape[1] // coarse)
    y, x = np.mgrid[0 : small[0], 0 : small[1]].astype(np.float32) * np.float32(coarse / scale)
    side = np.array([shape[1], shape[0]]) / scale
    tx, ty, _ = sun.towards
    flat = math.hypot(tx, ty)
    heart = side / 2 + np.array([tx, ty]) / flat * min(
        0.5 * side[0] * flat / abs(tx), 0.5 * side[1] * flat / abs(ty)
    )
    lean: Points = np.array([-tx, -ty]) / flat
    dark = np.zeros(small, np.float32)
    for k in range(13):
        base = heart + lean * 17 * (k - 3) + rng.normal(0, 12, 2)
        blade = Blade(
            angle=float(np.arctan2(lean[1], lean[0]) + rng.normal(0, 0.9)),
            length=rng.uniform(70, 140),
            half_width=rng.uniform(11, 20),
            stalk=0.2,
            round_tip=0.6,
            teeth=0.1,
            bend=rng.normal(0, 0.2),
            lift=0.0,
            droop=0.0,
            colour=(0.0, 0.0, 0.0),
        )
        cover = leaf_cover(blade, x - np.float32(base[0]), y - np.float32(base[1]), scale / coarse)[
            0
        ]
        dark = np.maximum(dark, soft(cover, (1.6 + 0.45 * k) * scale / coarse))
    return np.asarray(1 - 0.72 * np.clip(resized(dark, shape), 0, 1), dtype=np.float32)
