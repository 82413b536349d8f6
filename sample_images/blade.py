"""One leaf blade laid on a board: outline with teeth, veins, relief, holes, colour."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from camera import Camera, Points
from colonies import outline, radial
from texture import Layer, cells, cloud, smooth_line, soft, step, stroke


@dataclass(frozen=True, slots=True, kw_only=True)
class Leaf:
    """A leaf in millimetres: the stalk's end of the blade lies at -length/2 on its own long axis."""

    seed: int
    length: float = 150.0
    half_width: float = 44.0
    turn_deg: float = 8.0
    at: tuple[float, float] = (0.0, -6.0)
    bend: float = 0.03
    lobes: float = 0.05
    teeth_mm: float = 1.1
    side_veins: int = 8
    holes: int = 3
    green: tuple[float, float, float] = (0.070, 0.155, 0.032)
    yellowing: float = 0.3
    taper: tuple[float, float] = (0.72, 0.98)

    def __post_init__(self) -> None:
        if self.length <= 2 * self.half_width * 0.6:
            raise ValueError(
                f"A leaf {self.length} mm long and {2 * self.half_width} mm wide is too broad; make it longer."
            )


def _middle(leaf: Leaf, s: Points) -> Points:
    """Give how far the midrib lies off the long axis at the shares `s` of the length, in mm."""
    return np.asarray(leaf.bend * leaf.length * (np.sin(np.pi * s) - 0.35 * np.sin(2 * np.pi * s)))


def half_width(leaf: Leaf, s: Points, side: int) -> Points:
    """Give the half width in mm at the shares `s` of the length, on one side (-1 or 1) of the midrib."""
    rng = np.random.default_rng([leaf.seed, 31 + side])
    s = np.clip(s, 0, 1)
    low, high = leaf.taper
    top = low / (low + high)
    shape = s**low * (1 - s) ** high / (top**low * (1 - top) ** high)
    wave = np.zeros_like(s)
    for k in (3, 5, 8, 11):
        wave += rng.normal(0, 1 / math.sqrt(k)) * np.sin(
            2 * np.pi * k * s / 2 + rng.uniform(0, 6.3)
        )
    count = 25 + rng.integers(0, 4)
    tooth = (s + 0.012 * np.sin(9 * s + rng.uniform(0, 6))) * count
    saw = np.where((f := tooth % 1.0) < 0.72, f / 0.72, (1 - f) / 0.28)
    deep = 0.6 + 0.5 * rng.random(count + 3)[np.clip(tooth.astype(int), 0, count + 2)]
    fade = np.clip(np.minimum(s, 1 - s) / 0.06, 0, 1)
    whole = leaf.half_width * shape * (1 + leaf.lobes * wave) * rng.uniform(0.95, 1.05)
    return np.asarray(np.maximum(whole + leaf.teeth_mm * (saw - 0.5) * deep * fade, 0.0))


def to_scene(leaf: Leaf, s: Points, across: Points) -> Points:
    """Map shares of the length and mm across to scene millimetres, (n, 2)."""
    a = math.radians(leaf.turn_deg)
    x, y = (s - 0.5) * leaf.length, across + _middle(leaf, s)
    return np.column_stack(
        [
            x * math.cos(a) - y * math.sin(a) + leaf.at[0],
            x * math.sin(a) + y * math.cos(a) + leaf.at[1],
        ]
    )


def to_leaf(
    leaf: Leaf, x: npt.NDArray[np.floating], y: npt.NDArray[np.floating]
) -> tuple[Points, Points]:
    """Map scene millimetres to the share of the length and mm across."""
    a = math.radians(leaf.turn_deg)
    dx, dy = x - leaf.at[0], y - leaf.at[1]
    s = (dx * math.cos(a) + dy * math.sin(a)) / leaf.length + 0.5
    return np.asarray(s), np.asarray(
        dy * math.cos(a) - dx * math.sin(a) - _middle(leaf, np.clip(s, -0.3, 1.3))
    )


def inside(leaf: Leaf, points: Points, *, margin: float = 0.0) -> npt.NDArray[np.bool_]:
    """Tell which (n, 2) scene points lie on the blade, `margin` mm within its edge (measured across)."""
    s, across = to_leaf(leaf, points[:, 0], points[:, 1])
    room = np.where(across < 0, half_width(leaf, s, -1), half_width(leaf, s, 1)) - np.abs(across)
    return np.asarray((room > margin) & (s > 0) & (s < 1))


def edge_line(leaf: Leaf, *, samples: int = 900) -> Points:
    """Give the closed outline of the blade in scene millimetres, (n, 2)."""
    s = (1 - np.cos(np.linspace(0, np.pi, samples))) / 2
    lower = to_scene(leaf, s, half_width(leaf, s, 1))
    upper = to_scene(leaf, s, -half_width(leaf, s, -1))
    return np.vstack([upper, lower[::-1]])


def holes(leaf: Leaf) -> Points:
    """Give x, y and radius in mm of the holes insects ate, (n, 3)."""
    rng = np.random.default_rng([leaf.seed, 47])
    s, side = rng.uniform(0.2, 0.75, leaf.holes), rng.choice([-1, 1], leaf.holes)
    across = np.array(
        [
            rng.uniform(0.3, 0.75) * half_width(leaf, s[k : k + 1], int(side[k]))[0]
            for k in range(leaf.holes)
        ]
    )
    return np.column_stack([to_scene(leaf, s, across * side), rng.uniform(1.3, 3.0, leaf.holes)])


def stalk_line(leaf: Leaf) -> Points:
    """Give the stalk as a line in scene millimetres, from the blade outwards."""
    s = np.linspace(0.02, -0.17, 24)
    return to_scene(leaf, s, np.asarray(0.06 * leaf.length * np.clip(-s, 0, None) ** 1.4 * 4))


@dataclass(frozen=True, slots=True, kw_only=True)
class Veins:
    """Veins in pixels: how far each pixel lies in a vein of each order (0 to 1)."""

    rib: Layer
    side: Layer
    net: Layer


def draw_veins(leaf: Leaf, camera: Camera, rng: np.random.Generator) -> Veins:
    """Draw the midrib, side veins with their forks, and the net between them."""
    scale = camera.px_per_mm
    rib, side = np.zeros(camera.shape, np.float32), np.zeros(camera.shape, np.float32)
    s = np.linspace(-0.02, 0.985, 140)
    line = camera.to_pixels(to_scene(leaf, s, np.zeros_like(s)))
    stroke(rib, line, (1.9 * (1 - s.clip(0, 1)) ** 0.8 + 0.35) * scale, 1.0)
    for direction in (-1, 1):
        for k in range(leaf.side_veins):
            start = 0.05 + 0.8 * (
                (k + 0.25 * direction + 0.5 + rng.normal(0, 0.12)) / leaf.side_veins
            )
            _side_vein(side, leaf, camera, start, direction, rng)
    net = cells(camera.shape, rng, spacing=3.0 * scale, warp=0.8 * scale, shrink=2.0)
    fine = cells(camera.shape, rng, spacing=1.15 * scale, warp=0.35 * scale, shrink=2.0)
    mesh = 0.8 * step(0.24 * scale, 0.03 * scale, net) + 0.4 * step(0.15 * scale, 0.0, fine)
    return Veins(rib=rib, side=side, net=np.clip(mesh, 0, 1).astype(np.float32))


def _side_vein(
    layer: Layer, leaf: Leaf, camera: Camera, start: float, direction: int, rng: np.random.Generator
) -> None:
    run = np.linspace(0, 1, 50)
    reach = float(half_width(leaf, np.array([min(start + 0.14, 0.97)]), direction)[0]) * 0.985
    forward = reach / leaf.length * (0.75 + 0.25 * rng.random()) * (0.7 + 0.6 * start)
    s = start + forward * (0.62 * run + 0.48 * run**2.6)
    across = direction * reach * (run - 0.10 * run**3) + 0.35 * np.sin(run * 9 + rng.uniform(0, 6))
    keep = inside(leaf, to_scene(leaf, s, across), margin=0.4)
    keep[:4] = True
    last = int(np.argmin(keep)) if not keep.all() else len(run)
    scale = camera.px_per_mm
    line = camera.to_pixels(to_scene(leaf, s[:last], across[:last]))
    stroke(layer, line, (0.72 * (1 - run[:last]) + 0.2) * scale, 0.95)
    for at in (18, 27, 35, 41):
        if at >= last - 3 or rng.random() < 0.6:
            continue
        length = rng.uniform(4, 9) * (1 - 0.4 * run[at])
        lift = np.linspace(0, 1, 16)
        ahead = 1 if at % 2 else -1
        fs = s[at] + (0.9 if ahead > 0 else -0.25) * length / leaf.length * lift * (
            0.6 + 0.4 * lift
        )
        fa = across[at] + direction * length * (0.55 * lift if ahead > 0 else 0.85 * lift)
        nodes = to_scene(leaf, fs, fa)
        ok = inside(leaf, nodes, margin=0.5)
        if ok[:3].all():
            stop = int(np.argmin(ok)) if not ok.all() else 16
            stroke(
                layer, camera.to_pixels(smooth_line(nodes[:stop], samples=24)), 0.24 * scale, 0.6
            )


@dataclass(frozen=True, slots=True, kw_only=True)
class Surface:
    """A blade as layers: how far it covers each pixel, colour, height in pixels, share of the length, way across."""

    cover: Layer
    colour: Layer
    height: Layer
    s: Layer
    across: Layer


def draw_blade(
    leaf: Leaf, camera: Camera, veins: Veins, x: Layer, y: Layer, rng: np.random.Generator
) -> Surface:
    """Draw the healthy blade, not yet lit."""
    scale, shape = camera.px_per_mm, camera.shape
    s64, across64 = to_leaf(leaf, x, y)
    s, across = s64.astype(np.float32), across64.astype(np.float32)
    width = np.where(across64 < 0, half_width(leaf, s64, -1), half_width(leaf, s64, 1)).astype(
        np.float32
    )
    gap = (width - np.abs(across)) * ((s > 0) & (s < 1))
    cover = np.clip(gap * np.float32(0.8 * scale) + 0.5, 0, 1) * (gap > -1) * ((s > 0) & (s < 1))
    stalk = np.zeros(shape, np.float32)
    line = camera.to_pixels(stalk_line(leaf))
    stroke(stalk, line, np.linspace(2.0, 3.0, len(line)) * scale, 1.0)
    eaten, brown = _eaten(leaf, x, y, scale)
    cover = np.maximum(cover * (1 - eaten), stalk * (s < 0.03))
    mottle = 0.12 * cloud(shape, rng, size=30 * scale, slope=2.2) + 0.06 * cloud(
        shape, rng, size=2.2 * scale, slope=1.5
    )
    green = np.asarray(leaf.green, np.float32) * np.exp(mottle)[..., None]
    old = (
        leaf.yellowing
        * step(0.5, -0.05, gap / np.float32(leaf.half_width))
        * step(-0.8, 1.6, cloud(shape, rng, size=30 * scale, slope=2.2))
    )
    green = green + (np.array([0.23, 0.22, 0.035], np.float32) - green) * old[..., None]
    near = soft(np.maximum(veins.side, veins.rib), 1.1 * scale)
    green = (
        green
        * (1 - 0.10 * step(0.0, 0.5, soft(veins.side, 2.6 * scale)))[..., None]
        * (1 + 0.30 * near)[..., None]
    )
    pale = np.array([0.185, 0.255, 0.085], np.float32)
    for order, weight in (
        (veins.net, 0.42),
        (veins.side, 0.55),
        (veins.rib, 0.82),
        (stalk * (s < 0.05), 0.85),
    ):
        green = green + (pale - green) * (weight * order)[..., None]
    green = (
        green
        + (np.array([0.11, 0.06, 0.025], np.float32) - green) * np.clip(brown, 0, 1)[..., None]
    )
    bulge = (
        -1.0 * soft(veins.side, 0.75 * scale)
        - 1.5 * soft(veins.rib, 1.0 * scale)
        - 0.9 * soft(veins.side, 1.7 * scale)
        - 0.035 * soft(veins.net, 0.16 * scale)
    )
    bulge += 0.55 * soft(veins.rib, 0.3 * scale) + 0.22 * soft(veins.side, 0.14 * scale)
    height = scale * (bulge + 0.34 * cloud(shape, rng, size=10 * scale, slope=3.7))
    fold = -np.abs(across) * np.float32(0.16) * (1 - np.exp(-np.abs(across) / 5)) + 1.0 * cloud(
        shape, rng, size=60 * scale, slope=3.2
    )
    ruffle = np.clip(1 - gap / 9, 0, 1) ** 2 * np.sin(
        s * 46 + np.sign(across) * 1.3 + 0.8 * cloud(shape, rng, size=40 * scale, slope=3.0)
    )
    height = height + scale * (fold + 0.9 * ruffle)
    return Surface(
        cover=cover.astype(np.float32),
        colour=green.astype(np.float32),
        height=height.astype(np.float32),
        s=s,
        across=across,
    )


def _eaten(leaf: Leaf, x: Layer, y: Layer, scale: float) -> tuple[Layer, Layer]:
    """Give the holes insects ate, and their thin brown edges."""
    rng = np.random.default_rng([leaf.seed, 48])
    eaten, brown = np.zeros_like(x), np.zeros_like(x)
    for hx, hy, radius in holes(leaf):
        amplitude, phase, base = outline(rng, 0.075)
        dx, dy = (
            (x - np.float32(hx)) / np.float32(radius),
            (y - np.float32(hy)) / np.float32(radius),
        )
        rho = radial(dx, dy, amplitude, phase, base)
        aa = 0.7 / (radius * scale)
        eaten = np.maximum(eaten, step(1 + aa, 1 - aa, rho))
        brown = np.maximum(brown, 0.9 * np.exp(-(np.clip(rho - 1, 0, None) * radius / 0.28)))
    return eaten.astype(np.float32), brown.astype(np.float32)
