"""Finished results to draw and report: small, seeded, each of a different kind."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import ArrayLike

from analyse.findings import Findings, analyse_pattern
from analyse.grid_options import GridOptions
from analyse.pattern import pattern_from_sheet
from detect.area import StudyArea
from detect.lengths import Length
from detect.photograph import Photograph
from detect.scale import Scale, ScaleSource
from detect.sheet import SCHEMA, PhotographIdentity, Sheet
from detect.spots import Spots

WIDTH, HEIGHT = 400, 300
TILT = [[0.25, 0.01, -4.0], [0.0, 0.26, -2.0], [0.0, 1e-4, 1.0]]


def photograph(name: str = "bed.png", width: int = WIDTH, height: int = HEIGHT) -> Photograph:
    """A grey ramp with coloured noise."""
    rng = np.random.default_rng(3)
    ramp = np.linspace(40, 200, width)[None, :, None]
    pixels = ramp + rng.normal(0, 12, (height, width, 3))
    return Photograph(Path(name), "ab" * 32, np.clip(pixels, 0, 255).astype(np.uint8))


def sheet_of(
    points_px: ArrayLike,
    *,
    name: str = "bed.png",
    matrix: list[list[float]] | None = None,
    source: ScaleSource = "corners",
    area: shapely.Polygon | None = None,
) -> Sheet:
    """A sheet of found spots of radius 5 pixels, in pixels only unless a matrix is given."""
    points = np.asarray(points_px, dtype=np.float64).reshape(-1, 2)
    scale = None
    if matrix is not None:
        scale = Scale(np.array(matrix), source, 0.004, "rectangle 100 x 75 mm")
    outline = shapely.box(20, 20, 380, 280) if area is None else area
    return Sheet(
        SCHEMA,
        "0.1.0",
        PhotographIdentity(name, "ab" * 32, WIDTH, HEIGHT, "2026-05-04T10:11:12"),
        scale,
        StudyArea(outline, "plot", "four corner marks"),
        {"request": {"kind": "spots", "diameter": ["4px", "20px"]}, "detector": {}, "notes": []},
        Spots.found_at(points[:, 0], points[:, 1], np.full(len(points), 5.0)),
    )


def scattered(n: int, *, seed: int = 5) -> np.ndarray:
    """Points in the plot, in pixels."""
    return np.random.default_rng(seed).uniform((25, 25), (375, 275), (n, 2))


def amended(sheet: Sheet) -> Sheet:
    """The same sheet with a struck, a placed and a doubtful spot: rows 0, 1 and 2."""
    spots = sheet.spots
    row = np.arange(len(spots))
    doubt = np.where(row == 2, 0.9, 0.1)
    return replace(sheet, spots=replace(spots, counted=row != 0, found=row != 1, doubt=doubt))


def findings_of(sheet: Sheet, *, side: str | None = None) -> Findings:
    """Findings of a sheet, by the rule or with squares of a side such as "40px"."""
    grid = None
    if side is not None:
        unit = side.lstrip("0123456789.")
        grid = GridOptions(side=Length(float(side.removesuffix(unit)), unit))  # type: ignore[arg-type]
    return analyse_pattern(pattern_from_sheet(sheet, ()), grid, seed=7, simulations=199)
