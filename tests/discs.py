"""Small photographs of discs at known places, written to files, for tests of the commands."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

WIDTH, HEIGHT, RADIUS = 420, 320, 8.0
DIAMETER = "10-24px"


def scattered(n: int, *, seed: int, apart: float = 30.0) -> NDArray[np.float64]:
    """Places within the picture, none near another or the edge."""
    rng = np.random.default_rng(seed)
    places: list[NDArray[np.float64]] = []
    while len(places) < n:
        place = rng.uniform([20, 20], [WIDTH - 20, HEIGHT - 20])
        if all(np.hypot(*(place - other)) >= apart for other in places):
            places.append(place)
    return np.array(places).reshape(-1, 2)


def write_discs(path: Path, places: Sequence[Sequence[float]] | NDArray[np.float64]) -> Path:
    """Write light discs on a dark, slightly uneven and noisy ground."""
    rng = np.random.default_rng(len(path.name))
    y, x = np.mgrid[:HEIGHT, :WIDTH].astype(np.float32)
    picture = 70.0 + 0.03 * x
    for px, py in places:
        cover = np.clip(RADIUS + 0.5 - np.hypot(x - px, y - py), 0, 1)
        picture += (190.0 - picture) * cover
    colour = picture[..., None] * np.array([0.8, 0.95, 1.0])
    colour += rng.normal(0, 2.0, colour.shape)
    cv2.imwrite(str(path), np.clip(np.round(colour), 0, 255).astype(np.uint8))
    return path


def write_truth(path: Path, places: NDArray[np.float64]) -> None:
    """Write the table of truth that belongs to a photograph of discs."""
    rows = "".join(f"{x},{y},{RADIUS}\n" for x, y in places)
    path.write_text(f"x,y,r\n{rows}")
