"""What lies on and about a dish and does not count: writing, glare, bubbles, drops, fibres, scratches."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from camera import Camera, Points
from colonies import outline, radial
from handwriting import written
from light import Sun
from texture import Layer, cloud, sampled, smooth_line, soft, step, stroke

Glare = Literal["window", "lamp", "tubes", "none"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Clutter:
    """How much of what does not count a dish carries. The defaults are a rather clean dish."""

    label: str = "A1"
    label_at: tuple[float, float, float] = (-18.0, 30.0, 0.0)
    ink: tuple[float, float, float] = (0.02, 0.02, 0.03)
    second: str = ""
    second_at: tuple[float, float, float] = (12.0, -33.0, 180.0)
    sector_lines: int = 0
    glare: Glare = "window"
    glare_at: tuple[float, float] = (-14.0, -12.0)
    glare_level: float = 0.10
    bubbles: int = 4
    drops: int = 0
    fibres: int = 5
    scratches: int = 4


def pen(clutter: Clutter, camera: Camera, rng: np.random.Generator) -> Layer:
    """Give how much ink of the writing under the dish covers each pixel, mirrored as seen from above."""
    ink = np.zeros(camera.shape, np.float32)
    lines: list[tuple[Points, Points]] = []
    for text, (x, y, turn), size in (
        (clutter.label, clutter.label_at, 8.0),
        (clutter.second, clutter.second_at, 5.0),
    ):
        a = np.radians(turn)
        spin = np.array([[np.cos(a), np.sin(a)], [-np.sin(a), np.cos(a)]])
        for line, width in written(text, rng, height_mm=size):
            mirrored = line * (-1, 1) + (0.35 * size * len(text), -0.5 * size)
            lines.append((mirrored @ spin + (x, y), width))
    for k in range(clutter.sector_lines):
        a = np.pi * k / clutter.sector_lines + 0.4
        nodes = np.array([(-1.0, 0.0), (-0.3, 0.01), (0.4, -0.01), (1.0, 0.0)]) * 42.5
        bent = np.column_stack([nodes[:, 0], nodes[:, 1] + rng.normal(0, 0.5, 4)])
        spin = np.array([[np.cos(a), np.sin(a)], [-np.sin(a), np.cos(a)]])
        swell = 1 + 0.05 * np.cumsum(rng.normal(0, 0.4, 80))
        lines.append((smooth_line(bent @ spin, samples=80), np.clip(swell, 0.8, 1.4)))
    for line, width in lines:
        stroke(ink, camera.to_pixels(line, z_mm=0.0), width * 0.75 * camera.px_per_mm, 1.0)
    patchy = 0.86 + 0.07 * cloud(camera.shape, rng, size=1.2 * camera.px_per_mm, slope=1.4)
    return np.asarray(soft(ink * patchy, 0.05 * camera.px_per_mm), dtype=np.float32)


def glare(
    clutter: Clutter, x_mm: Layer, y_mm: Layer, rng: np.random.Generator, px_per_mm: float
) -> Layer:
    """Give the mirror image of a window or lamp in a slightly uneven surface, 0 to 1."""
    shape = (x_mm.shape[0], x_mm.shape[1])
    if clutter.glare == "none":
        return np.zeros(shape, np.float32)
    bend = [0.22 * cloud(shape, rng, size=30 * px_per_mm, slope=2.8) for _ in range(2)]
    turn = np.float32(rng.uniform(-0.5, 0.5))
    dx, dy = (
        x_mm - np.float32(clutter.glare_at[0]) + bend[0],
        y_mm - np.float32(clutter.glare_at[1]) + bend[1],
    )
    u, v = dx * np.cos(turn) + dy * np.sin(turn), dy * np.cos(turn) - dx * np.sin(turn)
    v = v - np.float32(0.12) * u  # seen askew
    if clutter.glare == "window":
        pane = step(7.7, 6.7, np.abs(u)) * step(10.6, 9.2, np.abs(v))
        bars = 1 - 0.85 * (
            step(0.75, 0.3, np.abs(u + 0.5)) + step(0.7, 0.25, np.abs(v - 2.4))
        ).clip(0, 1)
        trees = step(
            -0.3, 0.5, v * 0.16 - 0.62 + 0.4 * cloud(shape, rng, size=5 * px_per_mm, slope=1.7)
        )
        sky = (0.95 + 0.03 * v + 0.06 * cloud(shape, rng, size=9 * px_per_mm, slope=2.2)) * (
            1 - 0.6 * trees
        )
        return np.asarray((pane * bars * sky).clip(0, 1.2), dtype=np.float32)
    if clutter.glare == "tubes":
        tubes = np.zeros(shape, np.float32)
        for at, wide in ((-3.4, 1.5), (3.0, 1.35)):
            tubes += np.exp(-(((u - np.float32(at)) / np.float32(wide)) ** 4))
            tubes += 0.16 * np.exp(-np.abs(u - np.float32(at)) / 2.6)
        return np.asarray(tubes * step(20, 14.5, np.abs(v - 0.3 * u)), dtype=np.float32)
    r = np.hypot(u * 1.15, v)
    return np.asarray(1.3 * step(4.4, 2.9, r) + 0.35 * np.exp(-((r / 7) ** 2)), dtype=np.float32)


def _box(camera: Camera, u: float, v: float, reach: float) -> tuple[slice, slice]:
    rows, columns = camera.shape
    return (
        slice(max(0, int(v - reach)), min(rows, int(v + reach) + 2)),
        slice(max(0, int(u - reach)), min(columns, int(u + reach) + 2)),
    )


def bubbles(
    picture: Layer, n: int, camera: Camera, z_mm: float, sun: Sun, rng: np.random.Generator
) -> None:
    """Set `n` bubbles under the agar's surface, in place: thin dark rings, clear within, one bright edge."""
    for _ in range(n):
        a, far = rng.uniform(0, 2 * np.pi), 40 * np.sqrt(rng.uniform(0.05, 0.95))
        at = np.array([[far * np.cos(a), far * np.sin(a)]])
        (u, v), scale = (
            camera.to_pixels(at, z_mm=z_mm)[0],
            float(camera.px_per_mm_at(at, z_mm=z_mm)[0]),
        )
        radius = scale * float(np.exp(rng.normal(np.log(0.75), 0.35)))
        box = _box(camera, u, v, 1.6 * radius + 4)
        y, x = np.mgrid[box].astype(np.float32)
        dx, dy = x - np.float32(u), y - np.float32(v)
        amplitude, phase, base = outline(rng, 0.012)
        rho = radial(dx / np.float32(radius), dy / np.float32(radius), amplitude, phase, base)
        width = max(0.09, 1.1 / radius)
        side = (dx * sun.towards[0] + dy * sun.towards[1]) / (np.hypot(dx, dy) + 1)
        ring = np.exp(-(((rho - 0.93) / width) ** 2))
        inner = step(1.0, 0.9, rho)
        far_side = np.exp(-(((rho - 0.8) / (1.3 * width)) ** 2)) * np.clip(-side, 0, 1) ** 2
        spark = np.exp(
            -(
                (dx - 0.55 * radius * sun.towards[0]) ** 2
                + (dy - 0.55 * radius * sun.towards[1]) ** 2
            )
            / 3.0
        )
        view = picture[box]
        view *= (1 - 0.42 * ring * (0.75 - 0.25 * side))[..., None]
        view *= (1 + 0.05 * inner)[..., None]
        view += (0.13 * far_side + 0.45 * spark * inner)[..., None]


def drops(
    picture: Layer, n: int, camera: Camera, z_mm: float, sun: Sun, rng: np.random.Generator
) -> None:
    """Set `n` drops of condensation on the lid near and beyond the rim, in place: small clear lenses."""
    rows, columns = camera.shape
    heart = rng.uniform(0, 2 * np.pi)
    for _ in range(n):
        a = rng.normal(heart, 0.8)
        far = 40.9 + min(abs(rng.normal(0.9, 1.4)), 4.4)
        at = np.array([[far * np.cos(a), far * np.sin(a)]])
        (u, v), scale = (
            camera.to_pixels(at, z_mm=z_mm)[0],
            float(camera.px_per_mm_at(at, z_mm=z_mm)[0]),
        )
        radius = scale * float(np.clip(np.exp(rng.normal(np.log(0.34), 0.5)), 0.12, 1.1))
        box = _box(camera, u, v, 1.5 * radius + 4)
        if box[0].stop - box[0].start < 6 or box[1].stop - box[1].start < 6:
            continue
        y, x = np.mgrid[box].astype(np.float32)
        dx, dy = x - np.float32(u), y - np.float32(v)
        amplitude, phase, base = outline(rng, 0.05)
        rho = radial(dx / np.float32(radius), dy / np.float32(radius), amplitude, phase, base)
        bent = np.clip(1 - rho**2, 0, 1) ** 0.5
        through = sampled(
            picture,
            np.clip(u - dx * (1.6 * bent + 0.2), 0, columns - 1).astype(np.float32),
            np.clip(v - dy * (1.6 * bent + 0.2), 0, rows - 1).astype(np.float32),
        )
        side = (dx * sun.towards[0] + dy * sun.towards[1]) / np.float32(radius)
        shaded = through * (0.78 - 0.28 * side + 0.1 * bent)[..., None]
        spark = np.exp(
            -(
                (dx - 0.45 * radius * sun.towards[0]) ** 2
                + (dy - 0.45 * radius * sun.towards[1]) ** 2
            )
            / 2.6
        )
        shaded = shaded + (0.6 * spark)[..., None]
        edge = np.exp(-(((rho - 0.97) / 0.16) ** 2))
        mask = step(1.06, 0.94, rho)[..., None]
        view = picture[box]
        view *= (1 - 0.28 * edge)[..., None]
        view[:] = view * (1 - mask) + shaded * mask


def fibres(picture: Layer, n: int, camera: Camera, z_mm: float, rng: np.random.Generator) -> None:
    """Drop `n` textile fibres and some dust specks on the dish, in place."""
    light, dark = (np.zeros(camera.shape, np.float32) for _ in range(2))
    for k in range(n):
        start = rng.normal(0, 24, 2)
        heading = rng.uniform(0, 2 * np.pi) + np.cumsum(rng.normal(0, 0.55, 9))
        pace = rng.uniform(0.5, 1.4)
        walk = np.cumsum(pace * np.column_stack([np.cos(heading), np.sin(heading)]), axis=0)
        line = camera.to_pixels(smooth_line(start + walk, samples=70), z_mm=z_mm)
        layer = dark if k % 4 == 3 else light
        stroke(layer, line, rng.uniform(0.05, 0.1) * camera.px_per_mm, rng.uniform(0.3, 0.75))
    for _ in range(12 * n):
        at = rng.uniform((0, 0), (camera.width, camera.height))
        line = at + np.array([[0.0, 0.0], rng.normal(0, 1.5, 2)])
        stroke(light, line, rng.uniform(0.6, 2.0), rng.uniform(0.15, 0.5))
    picture *= 1 - 0.75 * soft(dark, 0.5)[..., None]
    picture += soft(light, 0.5)[..., None] * np.array([0.24, 0.24, 0.26], np.float32)


def scratches(
    picture: Layer, n: int, camera: Camera, z_mm: float, rng: np.random.Generator
) -> None:
    """Scratch the clear plastic `n` times, in place: thin, faint, bright, broken."""
    layer = np.zeros(camera.shape, np.float32)
    for _ in range(n):
        start, run = rng.uniform(-30, 30, 2), rng.normal(0, 13, 2)
        nodes = np.array([start, start + 0.5 * run + rng.normal(0, 0.7, 2), start + run])
        line = camera.to_pixels(smooth_line(nodes, samples=60), z_mm=z_mm)
        stroke(layer, line, rng.uniform(0.7, 1.5), rng.uniform(0.2, 0.7))
    broken = step(-0.6, 0.8, cloud(camera.shape, rng, size=6 * camera.px_per_mm, slope=1.6))
    picture += (0.09 * soft(layer, 0.5) * broken)[..., None]
