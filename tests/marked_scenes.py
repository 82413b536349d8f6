"""Photographs of marks and bars of known place and size, seen by a tilted camera."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.photograph import Photograph
from tests.scenes import Layer, cloud, photograph_of

Points = NDArray[np.float64]
FINE = 5  # rays a pixel, each way
SOIL = (0.165, 0.112, 0.075)  # linear light
PAPER = (0.60, 0.595, 0.57)


def camera(
    width: int,
    height: int,
    *,
    px_per_mm: float,
    distance_mm: float,
    tilt_deg: float = 0.0,
    towards_deg: float = 0.0,
    roll_deg: float = 0.0,
) -> Points:
    """Homography from mm on a level plane, its origin seen in the picture's middle, to pixels."""
    tilt, towards, roll = (math.radians(v) for v in (tilt_deg, towards_deg, roll_deg))
    axis = np.array([math.cos(towards), math.sin(towards), 0.0])
    cross = np.array([[0, -axis[2], axis[1]], [axis[2], 0, -axis[0]], [-axis[1], axis[0], 0]])
    turn = np.eye(3) + math.sin(tilt) * cross + (1 - math.cos(tilt)) * cross @ cross
    about = np.array(
        [[math.cos(roll), -math.sin(roll), 0], [math.sin(roll), math.cos(roll), 0], [0, 0, 1]]
    )
    turn = about @ turn
    view = np.column_stack([turn[:, 0], turn[:, 1], [0.0, 0.0, distance_mm]])
    focal = px_per_mm * distance_mm
    lens = np.array([[focal, 0, (width - 1) / 2], [0, focal, (height - 1) / 2], [0, 0, 1.0]])
    return np.asarray(lens @ view)


def seen(matrix: Points, points: Points) -> Points:
    """Map (n, 2) mm to pixels."""
    mapped = np.column_stack([points, np.ones(len(points))]) @ matrix.T
    return np.asarray(mapped[:, :2] / mapped[:, 2:])


@dataclass(frozen=True)
class Card:
    """A flat printed thing: where it lies, how it is turned, how far it reaches, and its print."""

    centre_mm: tuple[float, float]
    turn_deg: float
    reach_mm: tuple[float, float]  # half its width and height
    dark: Callable[[Points, Points], NDArray[np.bool_]]  # of places along and across, in mm

    def covered(self, x: Points, y: Points) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
        """Tell for places in mm whether the card is there, and whether it is black there."""
        a = math.radians(self.turn_deg)
        dx, dy = x - self.centre_mm[0], y - self.centre_mm[1]
        u, v = dx * math.cos(a) + dy * math.sin(a), dy * math.cos(a) - dx * math.sin(a)
        there = (np.abs(u) <= self.reach_mm[0]) & (np.abs(v) <= self.reach_mm[1])
        return there, there & self.dark(u, v)


def plate(centre: tuple[float, float], *, turn_deg: float, side: float, black: float) -> Card:
    """White plate with a black square inside."""
    half = black / 2
    return Card(
        centre,
        turn_deg,
        (side / 2, side / 2),
        lambda u, v: (np.abs(u) <= half) & (np.abs(v) <= half),
    )


def fiducial(centre: tuple[float, float], *, turn_deg: float, side: float, number: int) -> Card:
    """White plate with a fiducial mark of two thirds its side."""
    dictionary = cv2.aruco.getPredefinedDictionary(cv2.aruco.DICT_4X4_50)
    cells = cv2.aruco.generateImageMarker(dictionary, number, 6) == 0
    mark = side * 2 / 3

    def dark(u: Points, v: Points) -> NDArray[np.bool_]:
        column, row = (np.floor((w / mark + 0.5) * 6).astype(int) for w in (u, v))
        inside = (column >= 0) & (column < 6) & (row >= 0) & (row < 6)
        return np.asarray(inside & cells[np.clip(row, 0, 5), np.clip(column, 0, 5)])

    return Card(centre, turn_deg, (side / 2, side / 2), dark)


def bar(
    centre: tuple[float, float], *, turn_deg: float, length: float, bands: int, spread: float = 0.0
) -> Card:
    """White card with a bar of black and white bands; `spread` mm more ink at every edge."""
    band = length / bands

    def dark(u: Points, v: Points) -> NDArray[np.bool_]:
        at = (u + length / 2) / band
        k = 2 * np.round((at - 0.5) / 2)  # the nearest black band
        k = np.clip(k, 0, bands - 1)
        return np.asarray(
            (np.abs(at - 0.5 - k) * band <= band / 2 + spread) & (np.abs(v) <= 0.08 * length)
        )

    return Card(centre, turn_deg, (0.62 * length, 0.15 * length), dark)


@dataclass(frozen=True, kw_only=True)
class MarkedScene:
    """Cards on the ground, in sun and shadow, with soil and plants over parts of them."""

    cards: tuple[Card, ...]
    matrix: Points  # mm to pixels
    width: int = 1500
    height: int = 1150
    ground: tuple[float, float, float] = SOIL
    rough: float = 0.3
    shadow: float = 0.0  # how much of the light a shadow across the picture takes
    dirt: float = 0.0  # crumbs on the cards, as a share of their area
    worn: float = 0.0  # pixels by which printed edges are frayed
    leaves: tuple[tuple[float, float, float], ...] = ()  # x, y, radius in mm, over anything
    blur: float = 0.8
    noise: float = 0.01
    sharpened: float = 0.0
    quality: int = 92
    seed: int = 1

    def draw(self) -> Photograph:
        """Draw the photograph."""
        rng = np.random.default_rng(self.seed)
        shape = (self.height, self.width)
        crumbs = cloud(shape, rng, size=2.2) + 0.7 * cloud(shape, rng, size=7)
        image = np.asarray(self.ground, np.float32) * np.exp(self.rough * crumbs)[..., None]
        fray = [self.worn * cloud(shape, rng, size=3.0) for _ in range(2)]
        for card in self.cards:
            self._lay(image, card, fray)
        if self.dirt:
            bits = cloud(shape, rng, size=3.5)
            over = np.clip((bits - np.quantile(bits, 1 - self.dirt)) * 4, 0, 1)
            image += (0.7 * np.asarray(SOIL, np.float32) - image) * over[..., None]
        self._leaves(image, rng)
        if self.shadow:
            edge = cloud(shape, rng, size=500) + 0.15 * cloud(shape, rng, size=60)
            image *= (1 - self.shadow * np.clip(0.5 + 6 * edge, 0, 1))[..., None]
        fall = np.linspace(1.06, 0.9, self.width, dtype=np.float32)
        image = cv2.GaussianBlur(image * fall[None, :, None], (0, 0), self.blur)
        image = np.clip(1.25 * image, 0, None)
        image += self.noise * np.sqrt(image + 0.02) * rng.normal(size=image.shape)
        tone = np.clip(image, 0, 1).astype(np.float32) ** np.float32(1 / 2.2)
        if self.sharpened:
            tone = tone + self.sharpened * (tone - cv2.GaussianBlur(tone, (0, 0), 1.2))
        stored = np.round(255 * np.clip(tone, 0, 1)).astype(np.uint8)
        _, written = cv2.imencode(
            ".jpg", stored[..., ::-1], [cv2.IMWRITE_JPEG_QUALITY, self.quality]
        )
        return photograph_of(cv2.imdecode(written, cv2.IMREAD_COLOR)[..., ::-1])

    def _lay(self, image: Layer, card: Card, fray: list[Layer]) -> None:
        """Lay a card, by the share of each pixel's rays that meet it."""
        reach = float(np.hypot(*card.reach_mm))
        corners = np.array(card.centre_mm) + reach * np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]])
        box = seen(self.matrix, corners)
        left, top = np.maximum(np.floor(box.min(axis=0)), 0).astype(int)
        right, bottom = np.minimum(np.ceil(box.max(axis=0)) + 1, (self.width, self.height)).astype(
            int
        )
        if right <= left or bottom <= top:
            return
        back = np.linalg.inv(self.matrix)
        there = np.zeros((bottom - top, right - left), np.float32)
        black = np.zeros_like(there)
        fx, fy = (layer[top:bottom, left:right] for layer in fray)
        v, u = np.mgrid[top:bottom, left:right].astype(np.float64)
        for dy in (np.arange(FINE) + 0.5) / FINE - 0.5:
            for dx in (np.arange(FINE) + 0.5) / FINE - 0.5:
                at = np.stack([u + dx + fx, v + dy + fy, np.ones_like(u)], axis=-1) @ back.T
                on, dark = card.covered(at[..., 0] / at[..., 2], at[..., 1] / at[..., 2])
                there += on
                black += dark
        there, black = there / FINE**2, black / FINE**2
        view = image[top:bottom, left:right]
        white = np.asarray(PAPER, np.float32) * (there - black)[..., None]
        view *= (1 - there)[..., None]
        view += white + np.float32(0.025) * black[..., None]

    def _leaves(self, image: Layer, rng: np.random.Generator) -> None:
        """Lay some oval green leaves over everything."""
        for cx, cy, radius in self.leaves:
            (px, py), (qx, _) = seen(self.matrix, np.array([[cx, cy], [cx + radius, cy]]))
            r, a = max(abs(qx - px), 2.0), rng.uniform(0, np.pi)
            left, top = max(0, int(px - r - 2)), max(0, int(py - r - 2))
            view = image[top : max(top, int(py + r + 3)), left : max(left, int(px + r + 3))]
            y, x = np.mgrid[: view.shape[0], : view.shape[1]].astype(np.float32)
            x, y = x + left - px, y + top - py
            du, dv = x * np.cos(a) + y * np.sin(a), y * np.cos(a) - x * np.sin(a)
            cover = np.clip((1 - np.hypot(du / r, dv / (0.45 * r))) * 0.45 * r + 0.5, 0, 1)
            view += (np.array([0.06, 0.17, 0.03], np.float32) - view) * cover[..., None]


CORNERS_MM = np.array([[-500.0, -375], [500, -375], [500, 375], [-500, 375]])


def plot_scene(
    seed: int, kind: str = "plates", *, hidden: tuple[int, ...] = (), tilt_deg: float | None = None
) -> tuple[MarkedScene, Points]:
    """A plot of 1000 x 750 mm with its marks, drawn by chance from a seed; and its homography."""
    rng = np.random.default_rng([seed, 12])
    tilt = float(rng.uniform(0, 20)) if tilt_deg is None else tilt_deg
    matrix = camera(
        1500,
        1150,
        px_per_mm=float(rng.uniform(0.95, 1.12)),
        distance_mm=float(rng.uniform(1700, 2600)),
        tilt_deg=tilt,
        towards_deg=float(rng.uniform(0, 360)),
        roll_deg=float(rng.uniform(-8, 8)),
    )
    side = float(rng.uniform(48, 80))
    black = side * float(rng.uniform(0.5, 0.68))
    cards = []
    for k, (x, y) in enumerate(CORNERS_MM):
        turn = float(rng.uniform(0, 360))
        if k in hidden:
            continue
        if kind == "plates":
            cards.append(plate((x, y), turn_deg=turn, side=side, black=black))
        else:
            cards.append(fiducial((x, y), turn_deg=turn, side=side, number=k))
    leaves = []
    for x, y in rng.uniform((-560, -430), (560, 430), (30, 2)):
        clear = np.abs(CORNERS_MM - (x, y)).max(axis=1).min() > 0.75 * side
        leaves += [(float(x), float(y), float(rng.uniform(6, 18)))] if clear else []
    if rng.random() < 0.3:  # a leaf over the white of one plate
        x, y = CORNERS_MM[int(rng.integers(4))]
        leaves.append((x + 0.5 * side, y + 0.1 * side, 0.18 * side))
    scene = MarkedScene(
        cards=tuple(cards),
        matrix=matrix,
        rough=float(rng.uniform(0.15, 0.35)),
        shadow=float(rng.choice([0.0, 0.4, 0.6])),
        dirt=float(rng.uniform(0, 0.02)),
        worn=float(rng.uniform(0, 0.4)),
        leaves=tuple(leaves),
        blur=float(rng.uniform(0.6, 1.3)),
        noise=float(rng.uniform(0.005, 0.03)),
        sharpened=float(rng.choice([0.0, 0.5])),
        quality=int(rng.integers(80, 96)),
        seed=seed,
    )
    return scene, matrix


def bar_scene(seed: int, *, bars: int = 1) -> tuple[MarkedScene, Points]:
    """A board with a bar of 50 mm at any turn, drawn by chance from a seed; and its ends in pixels."""
    rng = np.random.default_rng([seed, 13])
    matrix = camera(
        1500,
        1150,
        px_per_mm=float(rng.uniform(5, 9)),
        distance_mm=float(rng.uniform(350, 600)),
        tilt_deg=float(rng.uniform(0, 20)),
        towards_deg=float(rng.uniform(0, 360)),
        roll_deg=float(rng.uniform(0, 360)),
    )
    cards, ends = [], np.zeros((2, 2))
    for k in range(bars):
        turn = float(rng.uniform(0, 360))
        centre = (
            float(rng.uniform(-22, 22)),
            float(rng.uniform(-14, 14)) + 34 * (k - 0.5) * (bars > 1),
        )
        cards.append(
            bar(
                centre,
                turn_deg=turn if bars == 1 else 0.0,
                length=50.0,
                bands=int(rng.choice([5, 7, 9, 11])),
                spread=float(rng.uniform(-0.05, 0.08)),
            )
        )
        half = 25.0 * np.array([math.cos(math.radians(turn)), math.sin(math.radians(turn))])
        ends = seen(matrix, np.array([centre - half, centre + half]))
    scene = MarkedScene(
        cards=tuple(cards),
        matrix=matrix,
        ground=(0.4, 0.41, 0.42) if rng.random() < 0.5 else (0.33, 0.28, 0.2),
        rough=0.02,
        shadow=float(rng.choice([0.0, 0.3])),
        worn=float(rng.uniform(0, 0.3)),
        blur=float(rng.uniform(0.6, 1.3)),
        noise=float(rng.uniform(0.005, 0.03)),
        sharpened=float(rng.choice([0.0, 0.5])),
        quality=int(rng.integers(80, 96)),
        seed=seed,
    )
    return scene, ends
