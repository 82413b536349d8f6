"""Draw plots of plants unlike the sample trial's: two narrow leaves, blades, rosettes, compact ones.

    python tests/benchmarks/other_plants.py [SEED ...]

Prints how many plants of each form are found in scenes of the given seeds (2000-2007 when none is
given; 1000-1099 may serve to fit the detector). Plants stand apart or touch; greens, soils,
shadows and crumbs vary from scene to scene.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from detect.photograph import Photograph
from tests.scenes import cloud, cover, developed, lay

FORMS = ("pair", "blades", "rosette", "compact")
SIZE = (620, 760)
DIAMETER_PX = (16.0, 44.0)  # of the circle of equal area
SOILS = ((0.42, 0.33, 0.25), (0.30, 0.27, 0.25), (0.55, 0.50, 0.44), (0.46, 0.30, 0.22))
GREENS = ((0.30, 0.50, 0.16), (0.22, 0.40, 0.18), (0.45, 0.58, 0.22), (0.30, 0.48, 0.33))


@dataclass(frozen=True)
class OtherPlot:
    """A drawn plot, its form of plant, and its truth as rows x, y, r in pixels."""

    form: str
    photograph: Photograph
    truth: NDArray[np.float64]


def leaf(
    shape: tuple[int, int],
    foot: tuple[float, float],
    angle: float,
    stalk: float,
    length: float,
    width: float,
    bend: float,
) -> NDArray[np.float32]:
    """Cover of one leaf: a stalk, then a blade of that length and width, widest in its middle."""
    y, x = np.mgrid[: shape[0], : shape[1]].astype(np.float32)
    dx, dy = x - np.float32(foot[0]), y - np.float32(foot[1])
    along = dx * np.cos(angle) + dy * np.sin(angle)
    across = dy * np.cos(angle) - dx * np.sin(angle) - bend * along**2 / length
    t = (along - stalk) / length
    half = np.where((t > 0) & (t < 1), width / 2 * np.sqrt(np.clip(4 * t * (1 - t), 0, 1)), 0)
    half = np.maximum(half, np.where((along > 0) & (along < stalk + 2), 0.7, 0))
    return cover((np.abs(across) - half).astype(np.float32)) * (half > 0)


def plant(
    form: str, shape: tuple[int, int], rng: np.random.Generator, radius: float
) -> list[NDArray[np.float32]]:
    """Covers of the leaves of a plant about the middle of `shape`, of about that equal radius."""
    foot = (shape[1] / 2 - 0.5, shape[0] / 2 - 0.5)
    turn, leaves = rng.uniform(0, 2 * np.pi), []
    if form == "pair":
        length = 2.4 * radius
        for k in range(2):
            angle = turn + np.pi * k + rng.normal(0, 0.2)
            size = length * rng.uniform(0.9, 1.1)
            leaves.append(
                leaf(
                    shape,
                    foot,
                    angle,
                    0.2 * size,
                    size,
                    size * rng.uniform(0.22, 0.36),
                    rng.normal(0, 0.08),
                )
            )
    elif form == "blades":
        n = int(rng.integers(2, 4))
        for k in range(n):
            angle = turn + 2 * np.pi * k / n + rng.normal(0, 0.35)
            size = 3.4 * radius / np.sqrt(n / 2) * rng.uniform(0.8, 1.15)
            leaves.append(
                leaf(
                    shape,
                    foot,
                    angle,
                    0.0,
                    size,
                    size * rng.uniform(0.12, 0.18),
                    rng.normal(0, 0.2),
                )
            )
    elif form == "rosette":
        n = int(rng.integers(3, 9))
        for k in range(n):
            angle = turn + 2 * np.pi * k / n + rng.normal(0, 0.15)
            size = 1.5 * radius * rng.uniform(0.75, 1.1)
            wide = size * min(0.9, 4.2 / n * rng.uniform(0.45, 0.7))
            leaves.append(leaf(shape, foot, angle, 0.25 * size, size, wide, rng.normal(0, 0.05)))
    else:
        y, x = np.mgrid[: shape[0], : shape[1]].astype(np.float32)
        angle = np.arctan2(y - foot[1], x - foot[0])
        lobes = int(rng.integers(3, 7))
        edge = radius * (1 + 0.1 * np.cos(lobes * (angle - turn)))
        leaves.append(cover((np.hypot(x - foot[0], y - foot[1]) - edge).astype(np.float32)))
    return leaves


def spread(rng: np.random.Generator, n: int, nearest: float) -> NDArray[np.float64]:
    """Positions and radii, no two nearer than `nearest` sums of radii; rows x, y, r."""
    rows: list[tuple[float, float, float]] = []
    height, width = SIZE
    for _ in range(6000):
        r = float(np.clip(np.exp(rng.normal(np.log(13), 0.22)), 8.5, 21))
        x, y = rng.uniform(40, width - 40), rng.uniform(40, height - 40)
        if all(np.hypot(x - a, y - b) > nearest * (r + c) for a, b, c in rows):
            rows.append((x, y, r))
        if len(rows) == n:
            break
    return np.array(rows)


def other_plot(seed: int, form: str) -> OtherPlot:
    """Draw one plot; the same for the same seed."""
    rng = np.random.default_rng([seed, FORMS.index(form), 77])
    reach = {"pair": 2.0, "blades": 2.3, "rosette": 1.35, "compact": 1.02}[form]
    truth = spread(rng, 36, reach * float(rng.choice([1.0, 0.85])))
    soil = np.array(SOILS[int(rng.integers(4))]) * rng.uniform(0.8, 1.1)
    green = np.array(GREENS[int(rng.integers(4))])
    image = np.ones((*SIZE, 3), np.float32) * soil.astype(np.float32)
    image *= (
        1
        + 0.05 * cloud(SIZE, rng, size=5)
        + 0.05 * cloud(SIZE, rng, size=2)
        + 0.06 * cloud(SIZE, rng, size=90)
    )[..., None]
    crumbs(image, rng)
    rows = []
    for x, y, r in truth:
        box = (int(9 * r) | 1, int(9 * r) | 1)
        leaves = plant(form, box, rng, float(r))
        left, top = round(float(x)) - box[1] // 2, round(float(y)) - box[0] // 2
        whole = np.clip(sum(leaves), 0, 1)
        dy, dx = np.mgrid[: box[0], : box[1]]
        rows.append(
            (
                left + (whole * dx).sum() / whole.sum(),
                top + (whole * dy).sum() / whole.sum(),
                np.sqrt(whole.sum() / np.pi),
            )
        )
        tone = green * (1 + 0.07 * rng.normal(size=3))
        paint(image, left + 2, top + 3, cv2.GaussianBlur(whole, (0, 0), 1.5) * 0.35, soil * 0.4)
        for one in leaves:
            paint(image, left, top, one, np.clip(tone * rng.uniform(0.85, 1.15), 0, 1))
    return OtherPlot(form, developed(image, rng, blur=0.7, noise=0.012), np.array(rows))


def crumbs(image: NDArray[np.float32], rng: np.random.Generator) -> None:
    """Stones, clods and straws: grey, brown or yellow, never green."""
    for _ in range(int(rng.integers(15, 40))):
        at = (int(rng.uniform(0, SIZE[1])), int(rng.uniform(0, SIZE[0])))
        stone = np.zeros(SIZE, np.float32)
        axes = (int(rng.uniform(3, 14)), int(rng.uniform(3, 10)))
        cv2.ellipse(stone, at, axes, float(rng.uniform(0, 180)), 0, 360, 1.0, -1, cv2.LINE_AA)
        tone = (0.55, 0.53, 0.5) if rng.random() < 0.5 else (0.3, 0.22, 0.16)
        lay(image, tone, stone * 0.8)
    for _ in range(int(rng.integers(3, 14))):
        x, y, a, n = (
            rng.uniform(0, SIZE[1]),
            rng.uniform(0, SIZE[0]),
            rng.uniform(0, 6.3),
            rng.uniform(30, 120),
        )
        straw = np.zeros(SIZE, np.float32)
        cv2.line(
            straw,
            (int(x), int(y)),
            (int(x + n * np.cos(a)), int(y + n * np.sin(a))),
            1.0,
            2,
            cv2.LINE_AA,
        )
        lay(image, (0.75, 0.66, 0.42), straw * 0.9)


def paint(
    image: NDArray[np.float32],
    left: int,
    top: int,
    alpha: NDArray[np.float32],
    colour: NDArray[np.float64],
) -> None:
    """Blend a colour under a cover whose corner lies at left, top, which may hang over the edge."""
    y0, x0 = max(0, -top), max(0, -left)
    y1 = min(alpha.shape[0], image.shape[0] - top)
    x1 = min(alpha.shape[1], image.shape[1] - left)
    if y1 > y0 and x1 > x0:
        lay(
            image[top + y0 : top + y1, left + x0 : left + x1],
            colour.astype(np.float32),
            alpha[y0:y1, x0:x1],
        )


def main() -> None:
    from detect.accuracy import Accuracy, match_spots, pooled
    from detect.area import frame_area
    from detect.find import find_spots
    from detect.lengths import Length
    from detect.wanted import DetectOptions

    options = DetectOptions(kind="seedlings", diameter=tuple(Length(v, "px") for v in DIAMETER_PX))
    seeds = [int(text) for text in sys.argv[1:]] or list(range(2000, 2008))
    everything = []
    for form in FORMS:
        scores = []
        for seed in seeds:
            made = other_plot(seed, form)
            area = frame_area(made.photograph.width, made.photograph.height)
            found = find_spots(made.photograph, area, options).spots
            match = match_spots(found.centres, made.truth[:, :2], made.truth[:, 2])
            scores.append(Accuracy(f"{form} {seed}", len(made.truth), len(found), len(match)))
        everything += scores
        total = pooled(scores)
        print(
            f"{form:8s} {total.truth:4d} plants, found {total.found:4d}: precision {total.precision:.3f}, recall {total.recall:.3f}, F1 {total.f1:.3f}",
            flush=True,
        )
    print(f"together F1 {pooled(everything).f1:.3f}")


if __name__ == "__main__":
    main()
