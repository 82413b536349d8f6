"""Plots of seedlings: a bed of soil with four corner plates, drawn flat and then seen by a tilted camera."""

from __future__ import annotations

from dataclasses import dataclass, replace

import cv2
import numpy as np
from camera import Camera, Points
from light import Exposure, Picture, Sun, develop
from patterns import Ground, Plan, place_clearly
from seedlings import Seedling, grow, paint_seedling, shade_ground
from soil import Soil, draw_bed, light_bed
from straw import Litter, cast_litter, paint_litter, strew, weed_shade
from texture import Layer, cloud, grain, moved, soft, step

WIDTH_MM, HEIGHT_MM = 1000.0, 750.0
PLATE_MM, BLACK_MM = 60.0, 30.0
EDGE_MM = 5.0  # no crown nearer to the border than this, inside or outside
MARGIN_MM = 110.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Plot:
    """One photograph of a plot, as data."""

    seed: int
    camera: Camera
    soil: Soil
    sun: Sun
    exposure: Exposure
    plan: Plan
    litter: Litter
    leaves: tuple[int, int] = (2, 5)
    outside: int = 7
    sky: float = 0.36
    weed: bool = True


def corners_mm() -> Points:
    """Give the four corners of the rectangle: top left, top right, bottom right, bottom left, in mm."""
    x, y = WIDTH_MM / 2, HEIGHT_MM / 2
    return np.array([[-x, -y], [x, -y], [x, y], [-x, y]])


def _clear_of_plates(points: Points, reach: float) -> Points:
    away = np.abs(points[:, None, :] - corners_mm()[None]).max(axis=2)
    return np.asarray(away.min(axis=1) > PLATE_MM / 2 + reach)


def ground(largest_mm: float) -> Ground:
    """Give where crowns may lie, and the study area, in mm about the middle of the plot."""
    x, y = WIDTH_MM / 2, HEIGHT_MM / 2
    return Ground(
        bounds=(-x, -y, x, y),
        inside=lambda p: (
            (np.abs(p[:, 0]) < x - EDGE_MM)
            & (np.abs(p[:, 1]) < y - EDGE_MM)
            & _clear_of_plates(p, 1.3 * largest_mm).astype(bool)
        ),
        study=lambda p: (np.abs(p[:, 0]) < x) & (np.abs(p[:, 1]) < y),
    )


def _strangers(plot: Plot, inside: Points, rng: np.random.Generator) -> Points:
    """Place a few seedlings outside the rectangle."""
    x, y = WIDTH_MM / 2, HEIGHT_MM / 2
    kept: list[Points] = []
    while len(kept) < plot.outside:
        point = rng.uniform((-x - 75, -y - 75), (x + 75, y + 75))
        beyond = max(abs(point[0]) - x, abs(point[1]) - y)
        others = np.vstack([inside, *kept])
        free = np.hypot(*(others - point).T).min() > 30
        if beyond > 16 and free and _clear_of_plates(point[None], 26)[0]:
            kept.append(point)
    return np.asarray(kept)


def crop(plot: Plot) -> tuple[Points, list[Seedling], int]:
    """Grow all seedlings: centres in mm (those that count first), plants, and how many count."""
    radii = plot.plan.radii_mm
    xy = place_clearly(plot.plan, ground(float(radii.max())), plot.seed)
    rng = np.random.default_rng([plot.seed, 21])
    xy = np.vstack([xy, _strangers(plot, xy, rng)]) if plot.outside else xy
    radii = np.concatenate([radii, rng.choice(radii, plot.outside)])
    low, high = np.quantile(radii, (0.1, 0.95))
    plants = []
    for radius in radii:
        age = np.clip((radius - low) / max(high - low, 1e-9), 0, 1)
        leaves = round(
            plot.leaves[0] + age * (plot.leaves[1] - plot.leaves[0]) + rng.normal(0, 0.5)
        )
        plants.append(grow(rng, float(radius), int(np.clip(leaves, 2, 6))))
    return xy, plants, len(plot.plan.radii_mm)


def truth(plot: Plot) -> Points:
    """Give x, y and radius of equal area of every seedling in the rectangle, in pixels, (n, 3)."""
    xy, plants, n = crop(plot)
    radii = np.array([p.radius_mm for p in plants[:n]])
    return np.column_stack(
        [plot.camera.to_pixels(xy[:n]), radii * plot.camera.px_per_mm_at(xy[:n])]
    )


def _plates(
    picture: Layer, dim: Layer, origin: Points, scale: float, sun: Sun, rng: np.random.Generator
) -> None:
    """Lay the four plates flat on a lit bed, in place, with worn paint, crumbs and a thin shadow."""
    for corner in corners_mm():
        u, v = (corner - origin) * scale
        reach = PLATE_MM * scale
        box = (
            slice(max(0, int(v - reach)), int(v + reach)),
            slice(max(0, int(u - reach)), int(u + reach)),
        )
        y, x = np.mgrid[box].astype(np.float32)
        a = np.float32(rng.normal(0, 0.07))
        dx, dy = x - np.float32(u), y - np.float32(v)
        across, along = dx * np.cos(a) + dy * np.sin(a), dy * np.cos(a) - dx * np.sin(a)
        far = np.maximum(np.abs(across), np.abs(along))
        shape = (far.shape[0], far.shape[1])
        wear = 0.25 * cloud(shape, rng, size=3 * scale, slope=1.4)
        plate = np.clip(PLATE_MM / 2 * scale - far + 0.5, 0, 1)
        black = np.clip(BLACK_MM / 2 * scale - far + 0.5 + 0.3 * wear, 0, 1)
        white = (
            np.array([0.50, 0.50, 0.475], np.float32)
            * (0.95 + 0.05 * cloud(shape, rng, size=30 * scale, slope=2.4))[..., None]
        )
        dust = step(0.6, 2.6, cloud(shape, rng, size=26 * scale, slope=1.7))[..., None]
        face = white + (np.array([0.020, 0.020, 0.021], np.float32) - white) * black[..., None]
        face = face + (np.array([0.22, 0.16, 0.105], np.float32) - face) * (
            0.03 + 0.42 * dust * (1 - 0.85 * black[..., None])
        )
        crumbs = step(
            2.1,
            2.6,
            grain(shape, rng, sigma=0.9 * scale)
            + 0.5 * dust[..., 0] * (1 - black)
            + step(22, 30, far / scale) * 0.5,
        )
        shadow = soft(moved(crumbs, sun.throw[0] * 1.2 * scale, sun.throw[1] * 1.2 * scale), 0.6)
        face = face * (1 - 0.5 * shadow[..., None])
        face = face + (np.array([0.10, 0.07, 0.045], np.float32) - face) * crumbs[..., None]
        bevel = np.exp(-(((PLATE_MM / 2 * scale - far) / 1.2) ** 2)) * np.where(
            across * sun.towards[0] + along * sun.towards[1] > 0, 0.10, -0.14
        )
        fallen = soft(moved(plate, sun.throw[0] * 3 * scale, sun.throw[1] * 3 * scale), 1.0)
        view = picture[box]
        view *= (1 - 0.55 * fallen * (1 - plate))[..., None] * (
            1 - 0.3 * soft(plate, 2 * scale) * (1 - plate)
        )[..., None]
        face = face * (1 + bevel)[..., None] * (0.42 + 0.72 * dim[box])[..., None]
        view[:] = view * (1 - plate[..., None]) + face.astype(np.float32) * plate[..., None]


def draw_flat(plot: Plot, scale: float) -> tuple[Layer, Points]:
    """Draw the lit ground straight from above at `scale` pixels per mm; give it with its origin in mm."""
    rng = np.random.default_rng([plot.seed, 3])
    camera = plot.camera
    frame = (
        np.array([[0.0, 0.0], [camera.width, 0], [camera.width, camera.height], [0, camera.height]])
        - 0.5
    )
    seen = camera.to_mm(frame)
    origin = seen.min(axis=0) - 12
    size = np.ceil((seen.max(axis=0) + 12 - origin) * scale).astype(int)
    shape = (int(size[1]), int(size[0]))
    bed = draw_bed(plot.soil, shape, scale, rng)
    pieces = strew(plot.litter, shape, rng)
    shade = weed_shade(shape, scale, plot.sun, rng) if plot.weed else np.ones(shape, np.float32)
    dim = shade.copy()
    cast_litter(dim, pieces, scale, plot.sun)
    xy, plants, _ = crop(plot)
    at = (xy - origin) * scale
    for (u, v), plant in zip(at, plants, strict=True):
        shade_ground(dim, plant, u, v, scale, plot.sun)
    picture = light_bed(bed, plot.sun, scale, dim, sky=plot.sky)
    paint_litter(picture, pieces, shade, scale, plot.sun, rng)
    _plates(picture, dim, origin, scale, plot.sun, rng)
    for k in np.argsort([p.radius_mm for p in plants], kind="stable"):
        paint_seedling(picture, plants[k], at[k, 0], at[k, 1], scale, plot.sun, rng, shade)
    return picture, origin


def draw(plot: Plot, *, shrink: float = 1.0) -> Picture:
    """Draw a plot as an 8-bit photograph (rows, columns, 3), red first."""
    plot = replace(plot, camera=plot.camera.shrunk(shrink))
    camera = plot.camera
    scale = 1.2 * camera.px_per_mm
    flat, origin = draw_flat(plot, scale)
    to_mm = np.array([[1 / scale, 0, origin[0]], [0, 1 / scale, origin[1]], [0, 0, 1.0]])
    seen = np.asarray(
        cv2.warpPerspective(
            soft(flat, 0.45),
            camera.plane() @ to_mm,
            (camera.width, camera.height),
            flags=cv2.INTER_CUBIC,
            borderMode=cv2.BORDER_REFLECT,
        ),
        dtype=np.float32,
    )
    return develop(np.maximum(seen, 0), plot.exposure, np.random.default_rng([plot.seed, 4]))
