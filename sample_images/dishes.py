"""Dishes: clear plastic, agar, colonies and clutter, seen from above by a slightly tilted camera."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from bench import Bench, draw_bench
from camera import Camera, Points
from colonies import Colonies, layers, paint
from dish_clutter import Clutter, bubbles, drops, fibres, glare, pen, scratches
from light import Exposure, Picture, Sun, develop
from patterns import Ground, Plan, place_clearly
from texture import Layer, cloud, grain, soft, step

INNER_MM = 43.0  # half the known inner diameter, at the agar's edge
AGAR_MM = 4.0  # height of the agar's surface
TOP_MM = 14.0  # height of the rim
LID_MM = 16.5
KEEP_OFF_MM = 1.25  # no centre nearer to the edge than this


@dataclass(frozen=True, slots=True, kw_only=True)
class Dish:
    """One photograph of a dish, as data."""

    seed: int
    camera: Camera
    bench: Bench
    sun: Sun
    exposure: Exposure
    clutter: Clutter
    plan: Plan
    agar: tuple[float, float, float] = (0.20, 0.140, 0.062)
    clear: tuple[float, float, float] = (0.62, 0.54, 0.38)
    sorts: tuple[float, ...] = (0.62, 0.2, 0.1, 0.05, 0.03)
    lid: bool = True


def ground() -> Ground:
    """Give where colonies may lie (a margin inside the wall) and the study area, in mm."""
    reach = INNER_MM - KEEP_OFF_MM
    study = INNER_MM - 1.0
    return Ground(
        bounds=(-study, -study, study, study),
        inside=lambda p: np.hypot(p[:, 0], p[:, 1]) < reach - 0.05,
        study=lambda p: np.hypot(p[:, 0], p[:, 1]) < study,
    )


def colonies_of(dish: Dish) -> Colonies:
    """Place the colonies of a dish; each lies at least its own radius inside the wall."""
    rng = np.random.default_rng([dish.seed, 11])
    xy = place_clearly(dish.plan, ground(), dish.seed)
    radii = dish.plan.radii_mm.copy()
    room = INNER_MM - 0.15 - np.hypot(xy[:, 0], xy[:, 1])
    radii = np.minimum(radii, np.maximum(room, 0.62))
    xy = (
        xy
        * (
            np.minimum(
                1.0, (INNER_MM - 0.05 - radii) / np.maximum(np.hypot(xy[:, 0], xy[:, 1]), 1e-9)
            )
        )[:, None]
    )
    weights = np.asarray(dish.sorts) / sum(dish.sorts)
    sort = rng.choice(len(weights), size=len(xy), p=weights)
    return Colonies(xy_mm=xy, radius_mm=radii, sort=sort, seed=dish.seed + 5)


def truth(dish: Dish) -> Points:
    """Give x, y and radius of every colony in pixels, (n, 3)."""
    colonies = colonies_of(dish)
    at = dish.camera.to_pixels(colonies.xy_mm, z_mm=AGAR_MM)
    scale = dish.camera.px_per_mm_at(colonies.xy_mm, z_mm=AGAR_MM)
    return np.column_stack([at, colonies.radius_mm * scale])


def _lobes(angle: Layer, at_deg: float, *pairs: tuple[float, float, float]) -> Layer:
    """Sum highlights along a rim: each is (degrees from the light, width, level)."""
    out = np.zeros_like(angle)
    for offset, width, level in pairs:
        away = (angle - np.float32(np.radians(at_deg + offset)) + np.pi) % (2 * np.pi) - np.pi
        out += np.float32(level) * np.exp(-((away / np.float32(np.radians(width))) ** 2))
    return out


def _shadow(bench: Layer, dish: Dish, x: Layer, y: Layer) -> Layer:
    """Darken the bench by the dish's soft shadow, with the light its wall gathers."""
    throw_x, throw_y = (t * 9.0 for t in dish.sun.throw)
    r = np.hypot(x - np.float32(throw_x), y - np.float32(throw_y))
    wall = np.exp(-(((r - 44.0) / 2.4) ** 2))
    disc = step(46.5, 42.0, r)
    contact = np.exp(-((np.clip(np.hypot(x, y) - 44.5, 0, None) / 1.8) ** 2))
    side = (x * throw_x + y * throw_y) / (np.hypot(x, y) * np.hypot(throw_x, throw_y) + 1e-6)
    gathered = np.exp(-(((r - 48.3) / 0.8) ** 2)) * np.clip(side - 0.35, 0, 1)
    dim = (1 - 0.42 * wall) * (1 - 0.16 * disc) * (1 - 0.40 * contact) * (1 + 0.55 * gathered)
    return np.asarray(bench * soft(dim.astype(np.float32), 1.5)[..., None], dtype=np.float32)


def _agar(
    bench: Layer, ink: Layer, dish: Dish, at: tuple[Layer, Layer], rng: np.random.Generator
) -> Layer:
    """Lay agar over bench and writing: it tints, blurs and scatters, unevenly, darker at its edge."""
    scale = dish.camera.px_per_mm
    shape, r = dish.camera.shape, np.hypot(*at)
    under = soft(bench, 0.16 * scale)
    inked = (
        under * (1 - 0.93 * ink[..., None])
        + np.asarray(dish.clutter.ink, np.float32) * 0.5 * ink[..., None]
    )
    thick = (
        1
        + 0.10 * cloud(shape, rng, size=45 * scale, slope=3.0)
        + 0.035 * cloud(shape, rng, size=6 * scale, slope=2.0)
    )
    milk = np.asarray(dish.agar, np.float32) * thick[..., None]
    milk = milk * (1 + 0.012 * grain(shape, rng, sigma=0.9))[..., None]
    milk = milk * (1 - 0.45 * ink[..., None])
    specks = step(3.0, 4.2, grain(shape, rng, sigma=1.0))
    out = inked * np.asarray(dish.clear, np.float32) / np.maximum(thick, 0.4)[..., None] + milk
    inward = np.clip(np.float32(INNER_MM) - r, 0, None)
    x, y, _ = dish.sun.towards
    across = (at[0] * np.float32(-x) + at[1] * np.float32(-y)) / np.float32(INNER_MM)
    out = (
        out
        * (1 + 0.10 * across + 0.22 * np.clip(across, 0, None) ** 2 * np.exp(-inward / 7))[
            ..., None
        ]
    )
    edge = 1 - 0.36 * np.exp(-((inward / 0.55) ** 2)) - 0.12 * np.exp(-inward / 2.6)
    return np.asarray(out * (edge * (1 - 0.12 * specks))[..., None], dtype=np.float32)


def _wall(
    picture: Layer, bench: Layer, dish: Dish, r: Layer, angle: Layer, rng: np.random.Generator
) -> Layer:
    """Draw the clear wall between the agar's edge and the outer rim."""
    camera, sun = dish.camera, dish.sun
    shape, scale = camera.shape, camera.px_per_mm
    x_top, y_top = camera.grid(TOP_MM)
    r_top = np.hypot(x_top, y_top)
    wobble = 0.5 * cloud(shape, rng, size=9 * scale, slope=2.4)
    t = np.clip((r - INNER_MM) / np.maximum(r - INNER_MM + 43.7 - r_top, 0.05), 0, 1)
    near = _lobes(angle, sun.from_deg, (0, 24, 1.0), (31, 6, 0.5), (-40, 9, 0.4), (75, 16, 0.22))
    far = _lobes(
        angle, sun.from_deg + 180, (4, 30, 0.85), (-33, 7, 0.6), (52, 10, 0.3), (-80, 20, 0.2)
    )
    clear = soft(bench, 1.2) * 0.66 + np.asarray(dish.agar, np.float32) * 0.16 + 0.012
    streak = 0.7 * np.exp(-(((t - 0.30 - 0.05 * wobble) / 0.10) ** 2)) * far
    streak += 0.6 * np.exp(-(((t - 0.72 - 0.06 * wobble) / 0.13) ** 2)) * near
    streak += 0.10 * (1 + 0.5 * wobble) * (near + far) * t
    dark = 1 - 0.40 * np.exp(-((t / 0.16) ** 2)) - 0.35 * np.exp(-(((t - 1) / 0.12) ** 2))
    wall = clear * dark[..., None] + (0.46 * streak)[..., None]
    aa = 0.7 / scale
    out = picture + (wall - picture) * step(INNER_MM - aa, INNER_MM + aa, r)[..., None]
    crest = np.clip((r_top - 43.7) / 1.25, 0, 1)
    lip = soft(bench, 1.0) * 0.75 + 0.03
    shine = np.exp(-(((crest - 0.36 - 0.06 * wobble) / 0.17) ** 2)) * (
        0.16 + 0.85 * near + 0.5 * far
    )
    shine += 0.7 * np.exp(-(((crest - 0.86) / 0.09) ** 2)) * (0.08 + 0.6 * far + 0.3 * near)
    lip = (
        lip
        * (1 - 0.5 * np.exp(-((crest / 0.2) ** 2)) - 0.45 * np.exp(-(((crest - 1) / 0.14) ** 2)))[
            ..., None
        ]
    )
    lip = lip + (0.62 * shine * (1 + 0.22 * wobble))[..., None]
    out = out + (lip - out) * step(43.7 - aa, 43.7 + aa, r_top)[..., None]
    beyond = bench * (1 - 0.35 * np.exp(-np.clip(r_top - 44.95, 0, None) / 0.9))[..., None]
    return np.asarray(
        out + (beyond - out) * step(44.95 - aa, 44.95 + aa, r_top)[..., None], dtype=np.float32
    )


def _lid(picture: Layer, dish: Dish, rng: np.random.Generator) -> None:
    """Put a clear lid on the dish, in place: a faint haze, and an edge of two lines."""
    camera, sun = dish.camera, dish.sun
    x, y = camera.grid(LID_MM)
    x, y = x - np.float32(rng.normal(0, 0.25)), y - np.float32(rng.normal(0, 0.25))
    r, angle = np.hypot(x, y), np.arctan2(y, x)
    wobble = cloud(camera.shape, rng, size=14 * camera.px_per_mm, slope=2.2)
    edge = 46.4
    near = _lobes(angle, sun.from_deg, (-6, 20, 1.0), (38, 5, 0.45), (-58, 12, 0.3))
    far = _lobes(angle, sun.from_deg + 180, (9, 22, 0.8), (-45, 8, 0.4))
    outer = np.exp(-(((r - edge + 0.12) / 0.15) ** 2))
    inner = np.exp(-(((r - edge + 1.25 + 0.05 * wobble) / 0.2) ** 2))
    dark = np.exp(-(((r - edge - 0.16) / 0.17) ** 2)) + 0.7 * np.exp(
        -(((r - edge + 0.6) / 0.26) ** 2)
    )
    picture *= (1 - 0.42 * dark)[..., None]
    picture += (
        (0.05 + 0.5 * near + 0.34 * far) * outer + (0.02 + 0.28 * near + 0.3 * far) * inner
    )[..., None] * 0.8
    picture += (0.004 * step(edge, edge - 0.5, r) * (1 + 0.4 * wobble))[..., None]


def draw(dish: Dish, *, shrink: float = 1.0) -> Picture:
    """Draw a dish as an 8-bit photograph (rows, columns, 3), red first."""
    dish = replace(dish, camera=dish.camera.shrunk(shrink))
    camera = dish.camera
    rng = np.random.default_rng([dish.seed, 3])
    scale = camera.px_per_mm
    x0, y0 = camera.grid(0.0)
    bench = _shadow(draw_bench(dish.bench, x0, y0, dish.sun, scale, rng), dish, x0, y0)
    x, y = camera.grid(AGAR_MM)
    r, angle = np.hypot(x, y), np.arctan2(y, x)
    out = _agar(bench, pen(dish.clutter, camera, rng), dish, (x, y), rng)
    bubbles(out, dish.clutter.bubbles, camera, AGAR_MM, dish.sun, rng)
    layered = layers(colonies_of(dish), camera, x, y, z_mm=AGAR_MM)
    out = paint(out, layered, dish.sun, px_per_mm=scale, rng=rng)
    mirror = glare(dish.clutter, x, y, rng, scale)
    if not dish.lid:  # the agar mirrors; colonies break the image
        mirror = (
            mirror * (1 - 0.8 * step(0.2, 0.7, layered.cover)) * step(INNER_MM, INNER_MM - 0.6, r)
        )
    out = out + (dish.clutter.glare_level * soft(mirror, 0.12 * scale))[..., None] * np.array(
        [0.95, 1.0, 1.06], np.float32
    )
    rim = np.exp(-(((r - INNER_MM + 0.8) / 0.22) ** 2)) * _lobes(
        angle, dish.sun.from_deg + 180, (0, 34, 1.0), (60, 9, 0.4)
    )
    out = out + (0.13 * rim)[..., None]
    out = _wall(out, bench, dish, r, angle, rng)
    if dish.lid:
        _lid(out, dish, rng)
    drops(out, dish.clutter.drops, camera, LID_MM, dish.sun, rng)
    scratches(out, dish.clutter.scratches, camera, LID_MM if dish.lid else TOP_MM, rng)
    fibres(out, dish.clutter.fibres, camera, LID_MM if dish.lid else AGAR_MM, rng)
    return develop(out, dish.exposure, rng)
