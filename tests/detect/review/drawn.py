"""A small photograph whose objects and detections are known, so that a test knows where to click."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray
from shapely.geometry import box

from detect.area import StudyArea
from detect.scale import Scale
from detect.sheet import SCHEMA, PhotographIdentity, Sheet, write_sheet
from detect.spots import Spots

WIDTH, HEIGHT, RADIUS = 900, 700, 10.0
MISSED = (450.0, 350.0)  # an object without a spot
PAIR = ((204.0, 520.0), (220.0, 520.0))  # two objects seen as one
HALVES = ((600.0, 520.0), (612.0, 520.0))  # one object seen as two
FALSE = ((250.0, 250.0, 0.9), (550.0, 250.0, 0.8), (650.0, 350.0, 0.6))  # spots on nothing
AREA = (50.0, 50.0, 850.0, 650.0)


@dataclass(frozen=True)
class Laid:
    """A folder with one photograph and its sheet, and where the clear spots are."""

    folder: Path
    sheet: Path
    clear: tuple[tuple[float, float], ...]
    counted: int


def clear_places() -> tuple[tuple[float, float], ...]:
    """Where objects stand that were found as they are."""
    rows = [(x, y) for y in (100, 160, 440, 600) for x in range(100, 801, 100)]
    return tuple((float(x), float(y)) for x, y in rows)


def lay(folder: Path, name: str = "dish.png") -> Laid:
    """Draw the photograph and write its sheet."""
    folder.mkdir(parents=True, exist_ok=True)
    clear = clear_places()
    photograph = folder / name
    data = cv2.imencode(".png", _drawn([*clear, MISSED, *PAIR, (606.0, 520.0)]))[1].tobytes()
    photograph.write_bytes(data)
    pair = (212.0, 520.0)
    places = [*clear, pair, *HALVES, *((x, y) for x, y, _ in FALSE)]
    radius = [RADIUS] * len(clear) + [16.0, 7.0, 7.0] + [RADIUS] * len(FALSE)
    doubt = [0.01 + 0.001 * k for k in range(len(clear))] + [0.1] * 3 + [d for *_, d in FALSE]
    n = len(places)
    spots = Spots.found_at(
        np.array([x for x, _ in places]),
        np.array([y for _, y in places]),
        np.array(radius),
        contrast=np.full(n, 9.0),
        fill=np.ones(n),
        doubt=np.array(doubt),
    )
    identity = PhotographIdentity(name, hashlib.sha256(data).hexdigest(), WIDTH, HEIGHT, None)
    settings = {"request": {}, "detector": {"kind": "spots"}, "notes": [], "photograph_at": name}
    area = StudyArea(box(*AREA), "polygon", "given")
    scale = Scale.from_mm_per_pixel(0.1)
    sheet = Sheet(SCHEMA, "test", identity, scale, area, settings, spots)
    return Laid(folder, write_sheet(sheet, folder), clear, n)


def _drawn(places: list[tuple[float, float]]) -> NDArray[np.uint8]:
    """Draw light discs on a darker ground."""
    image = np.full((HEIGHT, WIDTH, 3), (70, 95, 110), dtype=np.uint8)
    image += np.random.default_rng(5).integers(0, 6, image.shape, dtype=np.uint8)
    for x, y in places:
        cv2.circle(image, (int(x), int(y)), int(RADIUS), (200, 225, 235), -1, cv2.LINE_AA)
    return image
