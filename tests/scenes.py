"""Named synthetic photographs with known truth."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.photograph import Photograph

Rgb = tuple[float, float, float]
Layer = NDArray[np.float32]


def photograph_of(
    image: NDArray[np.generic], *, name: str = "scene.png", bits: int = 8
) -> Photograph:
    """Wrap (height, width[, 3]) values, 0..1 or as stored, as a photograph."""
    array = np.asarray(image)
    if array.dtype not in (np.uint8, np.uint16):
        kind = np.uint8 if bits == 8 else np.uint16
        array = np.round(np.clip(array, 0, 1) * np.iinfo(kind).max).astype(kind)
    if array.ndim == 2:
        array = np.dstack([array] * 3)
    return Photograph(Path(name), "0" * 64, np.ascontiguousarray(array))


def cloud(shape: tuple[int, int], rng: np.random.Generator, *, size: float) -> Layer:
    """Smooth random unevenness of standard deviation 1 and about `size` pixels."""
    small = (max(3, int(shape[0] / size) + 2), max(3, int(shape[1] / size) + 2))
    noise = rng.normal(size=small).astype(np.float32)
    grown = cv2.resize(noise, shape[::-1], interpolation=cv2.INTER_CUBIC)
    return np.asarray((grown - grown.mean()) / (grown.std() + 1e-9), dtype=np.float32)


def cover(distance: Layer) -> Layer:
    """Antialiased cover of a shape from the signed distance (pixels) to its outline, inside < 0."""
    return np.clip(0.5 - distance, 0, 1).astype(np.float32)


def lay(image: Layer, colour: Rgb | Layer, alpha: Layer) -> None:
    """Blend a colour over an image, in place."""
    image += (np.asarray(colour, dtype=np.float32) - image) * alpha[..., None]


def developed(image: Layer, rng: np.random.Generator, *, blur: float, noise: float) -> Photograph:
    """Blur, add sensor noise and wrap."""
    image = cv2.GaussianBlur(image, (0, 0), blur)
    image = image + noise * rng.normal(size=image.shape).astype(np.float32)
    return photograph_of(image)


@dataclass(frozen=True, kw_only=True)
class DishScene:
    """A round dish from above, its rim higher than its agar, as a drawing with known truth."""

    width: int = 1200
    height: int = 1000
    cx: float = 610.3
    cy: float = 489.6
    radius: float = 400.0  # inner edge
    ratio: float = 1.0  # short over long axis
    angle_deg: float = 0.0  # of the long axis
    wall: float = 0.04  # its width as a fraction of the radius
    lean: tuple[float, float] = (0.0, 0.0)  # shift of the rim against the agar, pixels
    bench: Rgb = (0.13, 0.12, 0.12)
    agar: Rgb = (0.72, 0.66, 0.48)
    rim: Rgb = (0.5, 0.5, 0.5)
    highlights: float = 0.5
    shadow: float = 0.3
    n_colonies: int = 60
    to_edge: bool = False  # colonies only near the edge
    glare: bool = False
    light: float = 0.12  # unevenness
    noise: float = 0.012
    blur: float = 0.9
    seed: int = 1

    def normalised(self, shift: tuple[float, float] = (0.0, 0.0)) -> Layer:
        """Distance from the centre over that of the inner ellipse in the same direction."""
        y, x = np.mgrid[: self.height, : self.width].astype(np.float32)
        turn = np.radians(self.angle_deg)
        dx, dy = x - self.cx - shift[0], y - self.cy - shift[1]
        u = (dx * np.cos(turn) + dy * np.sin(turn)) / self.radius
        v = (-dx * np.sin(turn) + dy * np.cos(turn)) / (self.radius * self.ratio)
        return np.hypot(u, v).astype(np.float32)

    def draw(self) -> Photograph:
        """Draw the scene."""
        rng = np.random.default_rng(self.seed)
        shape = (self.height, self.width)
        y, x = np.mgrid[: self.height, : self.width].astype(np.float32)
        image = np.ones((*shape, 3), np.float32) * np.asarray(self.bench, np.float32)
        image *= (1 + 0.05 * cloud(shape, rng, size=60))[..., None]
        inner, outer = self.normalised(), self.normalised(self.lean) / (1 + self.wall)
        shaded = self.normalised((self.lean[0] + 0.03 * self.radius, self.lean[1] + 12))
        image *= (1 - self.shadow * np.clip(1.2 - 8 * np.abs(shaded - 1.0), 0, 1))[..., None]
        theta = np.arctan2(y - self.cy, x - self.cx)
        shine = np.exp(-(((theta + 2.0) / 0.5) ** 2)) + 0.7 * np.exp(-(((theta - 1.1) / 0.3) ** 2))
        rim = np.asarray(self.rim, np.float32) * (1 + self.highlights * (shine - 0.3))[..., None]
        lay(image, rim, cover((outer - 1) * self.radius * (1 + self.wall)))
        agar = (
            np.asarray(self.agar, np.float32) * (1 + 0.04 * cloud(shape, rng, size=150))[..., None]
        )
        agar = agar * (1 - 0.15 * np.exp(-np.clip(1 - inner, 0, None) / 0.015))[..., None]
        lay(image, agar, cover((inner - 1) * self.radius))
        self._colonies(image, x, y, rng)
        if self.glare:
            patch = cover(np.maximum(np.abs(x - self.cx + 150) - 60, np.abs(y - self.cy + 90) - 90))
            lay(image, (0.95, 0.96, 1.0), 0.8 * cv2.GaussianBlur(patch, (0, 0), 3))
        image *= (1 + self.light * (x / self.width - y / self.height))[..., None]
        return developed(image, rng, blur=self.blur, noise=self.noise)

    def _colonies(self, image: Layer, x: Layer, y: Layer, rng: np.random.Generator) -> None:
        for _ in range(self.n_colonies):
            r = rng.uniform(0.012, 0.03) * self.radius
            reach = 1 - 1.05 * r / (self.radius * self.ratio)
            low = 0.85 if self.to_edge else 0.0
            s, t = np.sqrt(rng.uniform((low * reach) ** 2, reach**2)), rng.uniform(0, 2 * np.pi)
            turn = np.radians(self.angle_deg)
            u, v = s * self.radius * np.cos(t), s * self.radius * self.ratio * np.sin(t)
            px = self.cx + u * np.cos(turn) - v * np.sin(turn)
            py = self.cy + u * np.sin(turn) + v * np.cos(turn)
            rows = slice(max(int(py - r - 2), 0), int(py + r + 3))
            columns = slice(max(int(px - r - 2), 0), int(px + r + 3))
            window = (rows, columns)
            distance = np.hypot(x[window] - px, y[window] - py) - r
            lay(image[window], (0.93, 0.9, 0.78), cover(distance))


DISHES: dict[str, DishScene] = {
    "dark bench": DishScene(),
    "light bench": DishScene(bench=(0.78, 0.78, 0.76), rim=(0.6, 0.6, 0.6), seed=2),
    "clear agar": DishScene(
        bench=(0.60, 0.58, 0.55), agar=(0.62, 0.60, 0.56), rim=(0.66, 0.65, 0.63), seed=3
    ),
    "crowded to the edge": DishScene(n_colonies=160, to_edge=True, seed=4),
    "off centre and small": DishScene(cx=420.2, cy=560.8, radius=270.0, seed=5),
    "fills the frame": DishScene(cx=598.0, cy=501.0, radius=470.0, wall=0.03, seed=6),
    "tilted": DishScene(ratio=0.96, angle_deg=35.0, lean=(6.0, -9.0), glare=True, seed=7),
    "glare and empty": DishScene(n_colonies=0, glare=True, highlights=1.0, seed=8),
    "red agar on white": DishScene(
        bench=(0.9, 0.9, 0.88), agar=(0.55, 0.12, 0.1), rim=(0.8, 0.75, 0.74), seed=9
    ),
    "noisy and dim": DishScene(
        bench=(0.05, 0.05, 0.05), agar=(0.2, 0.18, 0.12), rim=(0.16,) * 3, noise=0.03, seed=10
    ),
}


@dataclass(frozen=True, kw_only=True)
class LeafScene:
    """One leaf on a plain background, with lesions, holes, a shadow, a ruler and a stalk."""

    width: int = 1200
    height: int = 900
    half_length: float = 430.0
    half_width: float = 240.0
    angle_deg: float = 12.0
    background: Rgb = (0.86, 0.86, 0.84)
    green: Rgb = (0.25, 0.42, 0.16)
    n_lesions: int = 25
    n_holes: int = 3
    shadow: float = 0.35
    stalk: bool = True
    light: float = 0.12
    noise: float = 0.012
    seed: int = 1

    def _distance(self, shift: float = 0.0) -> tuple[Layer, Layer, Layer]:
        """Rough signed distance to the blade's outline, and the place along and across it."""
        y, x = np.mgrid[: self.height, : self.width].astype(np.float32)
        turn = np.radians(self.angle_deg)
        dx, dy = x - self.width / 2 - shift, y - self.height / 2 - shift
        u = (dx * np.cos(turn) + dy * np.sin(turn)) / self.half_length
        v = (-dx * np.sin(turn) + dy * np.cos(turn)) / self.half_width
        reach = np.clip(1 - u * u, 0, None) * (1 - 0.35 * u) + 0.02 * np.sin(40 * u)
        return np.where(np.abs(u) < 1, (np.abs(v) - reach) * self.half_width, 99.0), u, v

    def _places(self, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
        """Spread places well within the blade, as u and v."""
        u = rng.uniform(-0.7, 0.7, n)
        return np.column_stack([u, rng.uniform(-0.8, 0.8, n) * (1 - u * u) * (1 - 0.35 * u)])

    def draw(self) -> tuple[Photograph, NDArray[np.bool_]]:
        """Draw the scene; return it with the true mask of the blade without its holes."""
        rng = np.random.default_rng(self.seed)
        shape = (self.height, self.width)
        distance, u, v = self._distance()
        image = np.ones((*shape, 3), np.float32) * np.asarray(self.background, np.float32)
        image *= (1 + 0.01 * cloud(shape, rng, size=80))[..., None]
        shade = cv2.GaussianBlur(cover(self._distance(shift=9.0)[0]), (0, 0), 5)
        image *= (1 - self.shadow * shade)[..., None]
        ground = image.copy()
        green = (
            np.asarray(self.green, np.float32) * (1 + 0.15 * cloud(shape, rng, size=40))[..., None]
        )
        stalk = np.maximum(np.abs(v * self.half_width) - 7, (u + 0.9) * self.half_length)
        if self.stalk:
            lay(image, green, cover(stalk.astype(np.float32)))
        blade = cover(distance.astype(np.float32))
        lay(image, green, blade)
        for place in self._places(self.n_lesions, rng):
            r = rng.uniform(5, 16)
            away = np.hypot((u - place[0]) * self.half_length, (v - place[1]) * self.half_width)
            lay(image, (0.62, 0.56, 0.2), cover((away - 1.5 * r).astype(np.float32)) * blade)
            lay(image, (0.36, 0.24, 0.16), cover((away - r).astype(np.float32)) * blade)
        truth = distance <= 0
        for place in self._places(self.n_holes, rng):
            away = np.hypot((u - place[0]) * self.half_length, (v - place[1]) * self.half_width)
            hole = (away - 17).astype(np.float32)
            lay(image, ground, cover(hole))
            truth &= hole > 0
        cv2.rectangle(image, (60, self.height - 70), (420, self.height - 25), (0.95,) * 3, -1)
        for i in (0, 2, 4):
            left = 90 + 60 * i
            cv2.rectangle(
                image, (left, self.height - 60), (left + 60, self.height - 40), (0.1,) * 3, -1
            )
        ramp = np.linspace(-0.5, 0.5, self.width, dtype=np.float32)
        image *= (1 + self.light * ramp)[None, :, None]
        return developed(image, rng, blur=0.8, noise=self.noise), truth


LEAVES: dict[str, LeafScene] = {
    "white paper": LeafScene(),
    "grey board": LeafScene(background=(0.5, 0.5, 0.52), seed=2, angle_deg=-20.0),
    "black cloth": LeafScene(background=(0.07, 0.07, 0.08), shadow=0.1, seed=3),
    "yellowing leaf": LeafScene(green=(0.55, 0.52, 0.2), seed=4),
    "no stalk, many lesions": LeafScene(stalk=False, n_lesions=90, n_holes=0, seed=5),
    "small leaf": LeafScene(half_length=230.0, half_width=110.0, n_holes=2, seed=6),
}


def soil(seed: int = 1) -> Photograph:
    """Bare crumbly ground: edges everywhere, no outline."""
    rng = np.random.default_rng(seed)
    shape = (900, 1200)
    layers = sum(cloud(shape, rng, size=s) * w for s, w in ((4, 0.5), (15, 0.6), (60, 0.5)))
    brown = np.array([0.36, 0.27, 0.19], np.float32) * (1 + 0.3 * np.asarray(layers))[..., None]
    return developed(brown.astype(np.float32), rng, blur=0.7, noise=0.01)


def text_page(seed: int = 1) -> Photograph:
    """A page of lettering."""
    rng = np.random.default_rng(seed)
    page = np.full((1000, 800, 3), 235, np.uint8)
    for line in range(60, 960, 34):
        words = "".join(rng.choice(list("abcdefghij klmnop qrst")) for _ in range(38))
        cv2.putText(page, words, (50, line), cv2.FONT_HERSHEY_SIMPLEX, 0.8, (30, 30, 30), 2)
    return photograph_of(page)


def plain_noise(seed: int = 1) -> Photograph:
    """Nothing but noise."""
    return photograph_of(0.5 + 0.1 * np.random.default_rng(seed).normal(size=(700, 900)))


def scattered(
    n: int,
    *,
    radius: tuple[float, float],
    gap: float = 4.0,
    size: tuple[int, int] = (420, 320),
    seed: int = 1,
) -> NDArray[np.float64]:
    """Discs as rows x, y, r within a frame of (width, height), each `gap` from all others."""
    rng = np.random.default_rng(seed)
    discs: list[NDArray[np.float64]] = []
    for _ in range(100_000):
        r = rng.uniform(*radius)
        place = rng.uniform([r + gap, r + gap], [size[0] - r - gap, size[1] - r - gap])
        if all(np.hypot(*(place - d[:2])) > r + d[2] + gap for d in discs):
            discs.append(np.array([*place, r]))
        if len(discs) == n:
            return np.array(discs)
    raise RuntimeError(f"{n} discs do not fit")


@dataclass(frozen=True, kw_only=True)
class SpotScene:
    """Discs, domes or rings on an uneven, noisy ground."""

    discs: NDArray[np.float64]  # rows x, y, r
    width: int = 420
    height: int = 320
    form: str = "disc"  # or "dome" (half height at r) or "ring" (open within 0.4 r)
    ground: Rgb = (0.62, 0.56, 0.45)
    colour: Rgb = (0.33, 0.28, 0.2)
    light: float = 0.12  # from left to right
    texture: float = 0.01
    noise: float = 0.012
    blur: float = 0.7
    bits: int = 8
    seed: int = 1

    def alpha(self, x: Layer, y: Layer, disc: NDArray[np.float64]) -> Layer:
        """How much of the object's colour each pixel takes."""
        away = np.hypot(x - disc[0], y - disc[1]).astype(np.float32)
        if self.form == "dome":
            return np.sqrt(np.clip(1 - 0.75 * (away / disc[2]) ** 2, 0, 1)).astype(np.float32)
        whole = cover(away - np.float32(disc[2]))
        if self.form == "ring":
            whole = whole - 0.7 * cover(away - np.float32(0.4 * disc[2]))
        return whole

    def draw(self) -> Photograph:
        """Draw the scene."""
        rng = np.random.default_rng(self.seed)
        shape = (self.height, self.width)
        y, x = np.mgrid[: self.height, : self.width].astype(np.float32)
        image = np.ones((*shape, 3), np.float32) * np.asarray(self.ground, np.float32)
        for disc in np.asarray(self.discs).reshape(-1, 3):
            lay(image, self.colour, self.alpha(x, y, disc))
        image *= (1 + self.light * (x / self.width - 0.5))[..., None]
        image *= (1 + self.texture * cloud(shape, rng, size=9))[..., None]
        image = cv2.GaussianBlur(image, (0, 0), self.blur)
        image += self.noise * rng.normal(size=image.shape).astype(np.float32)
        return photograph_of(image, bits=self.bits)


def rosette(
    shape: tuple[int, int],
    centre: tuple[float, float],
    radius: float,
    *,
    leaves: int,
    turn: float = 0.0,
) -> Layer:
    """Cover of a plant whose oval leaves stand around its centre, the longest tip at `radius`."""
    y, x = np.mgrid[: shape[0], : shape[1]].astype(np.float32)
    plant = np.zeros(shape, np.float32)
    for k in range(leaves):
        angle = turn + 2 * np.pi * k / leaves
        dx = x - centre[0] - 0.56 * radius * np.cos(angle)
        dy = y - centre[1] - 0.56 * radius * np.sin(angle)
        along = (dx * np.cos(angle) + dy * np.sin(angle)) / (0.44 * radius)
        across = (-dx * np.sin(angle) + dy * np.cos(angle)) / (0.24 * radius)
        plant = np.maximum(plant, cover((np.hypot(along, across) - 1) * 0.24 * radius))
        stalk = (x - centre[0]) * np.cos(angle) + (y - centre[1]) * np.sin(angle)
        aside = -(x - centre[0]) * np.sin(angle) + (y - centre[1]) * np.cos(angle)
        reach = np.maximum(np.abs(stalk - 0.1 * radius) - 0.1 * radius, np.abs(aside) - 1.5)
        plant = np.maximum(plant, cover(reach.astype(np.float32)))
    return plant
