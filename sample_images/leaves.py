"""Leaves: a blade with lesions on a light board beside a bar of known length."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from blade import Leaf, draw_blade, draw_veins, edge_line, holes, inside, to_scene
from camera import Camera, Points
from lesions import Lesions, Marks, draw_lesions
from light import Exposure, Picture, Sun, cast_shadow, develop, gloss, lambert
from patterns import Ground, Plan, place_clearly
from texture import Layer, cloud, grain, moved, sampled, smooth_line, soft, step, stroke

BAR_MM, BAND_MM, BAR_TALL_MM = 50.0, 10.0, 4.0
Board = Literal["white paper", "grey board", "buff card"]
BOARD: dict[Board, tuple[float, float, float]] = {
    "white paper": (0.60, 0.595, 0.57),
    "grey board": (0.40, 0.415, 0.43),
    "buff card": (0.53, 0.45, 0.33),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class LeafShot:
    """One photograph of a leaf, as data."""

    seed: int
    camera: Camera
    leaf: Leaf
    plan: Plan
    sun: Sun
    exposure: Exposure
    board: Board = "white paper"
    bar_at: tuple[float, float, float] = (-30.0, 50.0, 1.5)
    drop_at: tuple[float, float, float] = (0.62, 14.0, 3.4)
    scratches: int = 5
    dust: int = 30


def ground(leaf: Leaf) -> Ground:
    """Give where lesions may lie, and the study area, in mm."""
    edge = edge_line(leaf)
    gaps = holes(leaf)

    def free(points: Points) -> Points:
        apart = (
            np.hypot(points[:, None, 0] - gaps[None, :, 0], points[:, None, 1] - gaps[None, :, 1])
            - gaps[None, :, 2]
        )
        return np.asarray(apart.min(axis=1, initial=99.0) > 2.2)

    x0, y0 = edge.min(axis=0)
    x1, y1 = edge.max(axis=0)
    return Ground(
        bounds=(float(x0), float(y0), float(x1), float(y1)),
        inside=lambda p: inside(leaf, p, margin=2.0) & free(p).astype(bool),
        study=lambda p: inside(leaf, p),
    )


def lesions_of(shot: LeafShot) -> Lesions:
    """Place the lesions of a leaf."""
    xy = place_clearly(shot.plan, ground(shot.leaf), shot.seed)
    return Lesions(xy_mm=xy, radius_mm=shot.plan.radii_mm, seed=shot.seed + 5)


def truth(shot: LeafShot) -> Points:
    """Give x, y and radius (dead tissue with its rim) of every lesion in pixels, (n, 3)."""
    lesions = lesions_of(shot)
    scale = shot.camera.px_per_mm_at(lesions.xy_mm)
    return np.column_stack([shot.camera.to_pixels(lesions.xy_mm), lesions.radius_mm * scale])


def bar_mm(shot: LeafShot) -> Points:
    """Give the two ends of the reference bar in mm, (2, 2)."""
    x, y, turn = shot.bar_at
    a = math.radians(turn)
    half = 0.5 * BAR_MM * np.array([math.cos(a), math.sin(a)])
    return np.array([np.array([x, y]) - half, np.array([x, y]) + half])


def _board(shot: LeafShot, rng: np.random.Generator) -> Layer:
    scale, shape = shot.camera.px_per_mm, shot.camera.shape
    tooth = (
        1
        + 0.018 * grain(shape, rng, sigma=1.1)
        + 0.012 * cloud(shape, rng, size=2.5 * scale, slope=1.3)
    )
    tooth = tooth + 0.022 * cloud(shape, rng, size=60 * scale, slope=2.6)
    hairs = np.zeros(shape, np.float32)
    for _ in range(160):
        start = rng.uniform((0, 0), (shape[1], shape[0]))
        a = rng.uniform(0, 2 * np.pi) + np.cumsum(rng.normal(0, 0.5, 4))
        walk = np.cumsum(
            np.column_stack([np.cos(a), np.sin(a)]) * rng.uniform(0.2, 0.7) * scale, axis=0
        )
        stroke(
            hairs,
            smooth_line(start + walk, samples=14),
            rng.uniform(0.5, 1.1),
            rng.uniform(0.1, 0.4),
        )
    wave = 0.5 * scale * cloud(shape, rng, size=55 * scale, slope=3.0)
    lit = lambert(wave.astype(np.float32), shot.sun) / np.float32(shot.sun.towards[2])
    tone = tooth * (1 - 0.22 * soft(hairs, 0.5)) * (0.5 + 0.5 * lit)
    return np.asarray(np.asarray(BOARD[shot.board], np.float32) * tone[..., None], dtype=np.float32)


def _bar(picture: Layer, shot: LeafShot, x: Layer, y: Layer, rng: np.random.Generator) -> None:
    """Lay a strip of card with the printed bar on the board, in place."""
    cx, cy, turn = shot.bar_at
    a, scale = math.radians(turn), shot.camera.px_per_mm
    u = (x - np.float32(cx)) * np.float32(math.cos(a)) + (y - np.float32(cy)) * np.float32(
        math.sin(a)
    )
    v = (y - np.float32(cy)) * np.float32(math.cos(a)) - (x - np.float32(cx)) * np.float32(
        math.sin(a)
    )
    card = np.clip(
        (np.minimum(32.5 - np.abs(u + 0.4), 6.4 - np.abs(v - 0.5 - 0.006 * u))) * scale + 0.5, 0, 1
    )
    fallen = soft(
        moved(
            card.astype(np.float32),
            shot.sun.throw[0] * 0.7 * scale,
            shot.sun.throw[1] * 0.7 * scale,
        ),
        0.22 * scale,
    )
    picture *= (1 - 0.38 * fallen * (1 - card))[..., None]
    rag = 0.12 * grain(shot.camera.shape, rng, sigma=1.2)
    at = (u + BAR_MM / 2) / BAND_MM
    nearest = np.abs(at - np.round(at)) * BAND_MM
    dark = (np.floor(at).astype(int) % 2 == 0) & (np.abs(u) < BAR_MM / 2)
    ink = np.clip(np.where(dark, np.minimum(nearest, 1.0), -nearest) * scale + 0.5 + rag, 0, 1)
    beyond = np.clip((BAR_MM / 2 - np.abs(u)) * scale + 0.5 + rag, 0, 1)
    tall = np.clip((BAR_TALL_MM / 2 - np.abs(v)) * scale + 0.5 + rag, 0, 1)
    frame = np.exp(-(((np.abs(v) - BAR_TALL_MM / 2 + 0.12) / 0.1) ** 2)) * beyond
    ink = np.maximum(ink * beyond * tall, 0.85 * frame)
    patchy = 0.97 + 0.012 * cloud(shot.camera.shape, rng, size=1.5 * scale, slope=1.3)
    white = (
        np.array([0.68, 0.68, 0.66], np.float32)
        * (1 + 0.01 * grain(shot.camera.shape, rng, sigma=1.0))[..., None]
    )
    face = white + (np.array([0.032, 0.032, 0.036], np.float32) - white) * (ink * patchy)[..., None]
    picture[:] = picture + (face - picture) * card[..., None]


def _drop(picture: Layer, shot: LeafShot, x: Layer, y: Layer) -> None:
    """Set a drop of water on the blade, in place: it magnifies, darkens on the lit side and shines."""
    s, across, radius = shot.drop_at
    cx, cy = to_scene(shot.leaf, np.array([s]), np.array([across]))[0]
    scale, sun = shot.camera.px_per_mm, shot.sun
    u, v = shot.camera.to_pixels(np.array([[cx, cy]]))[0]
    dx, dy = (
        (x - np.float32(cx)) / np.float32(radius),
        (y - np.float32(cy)) / np.float32(0.86 * radius),
    )
    wob = 1 + 0.05 * np.cos(3 * np.arctan2(dy, dx) + 1) + 0.04 * np.cos(2 * np.arctan2(dy, dx))
    rho = np.hypot(dx, dy) / wob
    inner = step(1 + 0.6 / (radius * scale), 1 - 0.6 / (radius * scale), rho)
    away = dx * sun.towards[0] + dy * sun.towards[1]
    fallen = soft(
        moved(inner, sun.throw[0] * 0.25 * radius * scale, sun.throw[1] * 0.25 * radius * scale),
        0.12 * radius * scale,
    )
    picture *= (1 - 0.45 * fallen * (1 - inner))[..., None]
    columns, rows = np.meshgrid(
        np.arange(x.shape[1], dtype=np.float32), np.arange(x.shape[0], dtype=np.float32)
    )
    pull = np.float32(0.55) + 0.45 * np.clip(rho, 0, 1) ** 3
    through = sampled(
        picture,
        np.float32(u) + (columns - np.float32(u)) * pull,
        np.float32(v) + (rows - np.float32(v)) * pull,
    )
    glow = np.exp(-(((dx + 0.55 * sun.towards[0]) ** 2 + (dy + 0.55 * sun.towards[1]) ** 2) / 0.18))
    through = (
        through
        * (0.92 - 0.30 * away + 0.55 * glow)[..., None]
        * (1 - 0.30 * np.exp(-(((rho - 0.97) / 0.07) ** 2)))[..., None]
    )
    px, py = dx - np.float32(0.42 * sun.towards[0]), dy - np.float32(0.42 * sun.towards[1])
    spark = step(0.17, 0.10, np.maximum(np.abs(px + 0.3 * py), np.abs(py - 0.2 * px)))
    through = through + (0.9 * spark)[..., None]
    picture[:] = picture + (through - picture) * inner[..., None]


def _finish(picture: Layer, shot: LeafShot, cover: Layer, rng: np.random.Generator) -> None:
    """Add dust and small bright scratches on the blade, in place."""
    bright = np.zeros(shot.camera.shape, np.float32)
    scale = shot.camera.px_per_mm
    for _ in range(shot.scratches):
        start = to_scene(
            shot.leaf, rng.uniform(0.2, 0.8, 1), rng.uniform(-0.6, 0.6, 1) * shot.leaf.half_width
        )[0]
        run = rng.normal(0, 3.0, 2)
        nodes = np.array([start, start + 0.5 * run + rng.normal(0, 0.25, 2), start + run])
        stroke(
            bright,
            shot.camera.to_pixels(smooth_line(nodes, samples=30)),
            rng.uniform(0.9, 1.8),
            rng.uniform(0.4, 0.9),
        )
    for _ in range(shot.dust):
        at = rng.uniform((0, 0), (shot.camera.width, shot.camera.height))
        stroke(
            bright,
            at + np.array([[0.0, 0.0], rng.normal(0, 0.1, 2) * scale]),
            rng.uniform(0.7, 2.0),
            rng.uniform(0.2, 0.6),
        )
    picture += (0.20 * soft(bright, 0.5))[..., None] * (0.35 + 0.65 * cover[..., None])


def _tissue(colour: Layer, marks: Marks, veins_side: Layer) -> Layer:
    """Lay halo and dead tissue over the healthy colour; veins show faintly through the halo."""
    yellow = np.array([0.31, 0.27, 0.035], np.float32) * (0.82 + 0.25 * veins_side)[..., None]
    out = colour + (yellow - colour) * (0.88 * marks.halo)[..., None]
    return np.asarray(
        out + (marks.colour * (1 + 0.3 * veins_side)[..., None] - out) * marks.dead[..., None],
        dtype=np.float32,
    )


def draw(shot: LeafShot, *, shrink: float = 1.0) -> Picture:
    """Draw a leaf as an 8-bit photograph (rows, columns, 3), red first."""
    shot = replace(shot, camera=shot.camera.shrunk(shrink))
    camera, sun = shot.camera, shot.sun
    rng = np.random.default_rng([shot.seed, 3])
    scale = camera.px_per_mm
    x, y = camera.grid()
    picture = _board(shot, rng)
    _bar(picture, shot, x, y, rng)
    veins = draw_veins(shot.leaf, camera, rng)
    blade = draw_blade(shot.leaf, camera, veins, x, y, rng)
    marks = draw_lesions(lesions_of(shot), camera, x, y)
    lifted = 2.2 + 1.3 * cloud(camera.shape, rng, size=70 * scale, slope=3.2)
    far = soft(
        moved(blade.cover, sun.throw[0] * 2.6 * scale, sun.throw[1] * 2.6 * scale), 0.85 * scale
    )
    near = soft(
        moved(blade.cover, sun.throw[0] * 0.8 * scale, sun.throw[1] * 0.8 * scale), 0.3 * scale
    )
    mix = step(0.8, 3.6, lifted)
    dim = 1 - 0.52 * (near * (1 - mix) + far * mix) - 0.16 * soft(blade.cover, 2.2 * scale)
    picture *= np.clip(dim, 0.2, 1)[..., None]
    colour = _tissue(blade.colour, marks, veins.side)
    height = (
        blade.height
        - marks.sunk * scale
        + 0.012 * scale * grain(camera.shape, rng, sigma=0.12 * scale) * (1 + 2.5 * marks.dead)
    )
    height = height.astype(np.float32)
    lit = (
        lambert(height, sun)
        / np.float32(sun.towards[2])
        * (0.55 + 0.45 * cast_shadow(height, sun, reach=5 * scale, penumbra=0.4 * scale))
    )
    tone = 0.36 + 0.70 * lit
    wax = (
        gloss(soft(height, 0.12 * scale), sun, power=26)
        * (1 - 0.85 * marks.dead)
        * (1 - 0.5 * veins.rib)
    )
    body = colour * tone[..., None] + (0.085 * wax * (1 - 0.35 * veins.net))[..., None] * np.array(
        [0.92, 1.0, 1.05], np.float32
    )
    body = body * (1 + 0.25 * np.exp(-(((blade.cover - 0.5) / 0.3) ** 2)))[..., None]
    picture = picture + (body - picture) * blade.cover[..., None]
    _drop(picture, shot, x, y)
    _finish(picture, shot, blade.cover, rng)
    return develop(picture.astype(np.float32), shot.exposure, rng)
