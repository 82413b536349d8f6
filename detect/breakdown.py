"""Which objects are missed: the small or the large ones, the crowded or the free ones."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from detect.compared import Compared, Objects, joined
from detect.files import csv_text

By = Literal["radius", "crowding"]
PART_COLUMNS = (
    "photograph",
    "by",
    "unit",
    "low",
    "high",
    "truth",
    "matched",
    "recall",
    "rmse_px",
    "rmse_mm",
)
# Distances to the nearest true neighbour, in sums of both radii: below 1 discs overlap.
CROWDING_EDGES = (0.0, 1.0, 1.5, 3.0, math.inf)


@dataclass(frozen=True, slots=True)
class Part:
    """What became of the true objects of one class.

    Parameters
    ----------
    name : str
        Photograph, or what is summed up.
    by : {"radius", "crowding"}
        What the classes go by.
    unit : str
        "mm" or "px" for radii, "radii" for crowding.
    low, high : float
        Bounds of the class: `low` belongs to it, `high` to the next, or to it if there is none.
    truth, matched : int
        True objects, and how many of them were found.
    rmse_px, rmse_mm : float
        Root mean squared distance of the pairs; NaN without pairs, or without a scale.
    """

    name: str
    by: By
    unit: str
    low: float
    high: float
    truth: int
    matched: int
    rmse_px: float
    rmse_mm: float

    @property
    def recall(self) -> float:
        """Share of the objects that were found; NaN without objects."""
        return self.matched / self.truth if self.truth else math.nan


def parts_of(compared: Sequence[Compared]) -> list[Part]:
    """Divide the true objects by radius and by crowding.

    Parameters
    ----------
    compared : sequence of Compared
        One photograph each.

    Returns
    -------
    list of Part
        For each photograph and for all together ("all", last): quarters of the marked radii of all
        photographs, in millimetres where every photograph has a scale (fewer classes where many
        radii are equal, none where none was marked), then the classes of crowding.
    """
    everything = joined(compared)
    unit = "mm" if np.isfinite(everything.objects.radius_mm).all() else "px"
    edges = _quarters(_radii(everything.objects, unit))
    parts: list[Part] = []
    for each in (*compared, everything):
        objects = each.objects
        sizes = np.where(objects.known, _radii(objects, unit, known=False), np.nan)
        parts += _parts(each, "radius", unit, sizes, edges)
        parts += _parts(each, "crowding", "radii", objects.apart, np.array(CROWDING_EDGES))
    return parts


def parts_csv(parts: Sequence[Part]) -> str:
    """Return parts as a table in long form; an empty `high` has no bound."""
    rows = [
        (
            part.name,
            part.by,
            part.unit,
            part.low,
            part.high if math.isfinite(part.high) else None,
            part.truth,
            part.matched,
            part.recall,
            part.rmse_px,
            part.rmse_mm,
        )
        for part in parts
    ]
    return csv_text(PART_COLUMNS, rows, digits=6)


def _radii(objects: Objects, unit: str, *, known: bool = True) -> NDArray[np.float64]:
    """Return radii in a unit, of all objects or of those whose radius was marked."""
    radii = objects.radius_mm if unit == "mm" else objects.radius
    return radii[objects.known] if known else radii


def _quarters(radii: NDArray[np.float64]) -> NDArray[np.float64]:
    """Bounds of quarters of equal number; fewer where bounds coincide."""
    if not radii.size:
        return np.empty(0)
    edges = np.unique(np.quantile(radii, [0.0, 0.25, 0.5, 0.75, 1.0]))
    return np.repeat(edges, 2) if edges.size == 1 else edges


def _parts(
    each: Compared,
    by: By,
    unit: str,
    values: NDArray[np.float64],
    edges: NDArray[np.float64],
) -> list[Part]:
    """Divide the objects of one photograph at the edges; the last class holds its upper bound."""
    objects = each.objects
    parts: list[Part] = []
    for k in range(len(edges) - 1):
        last = k == len(edges) - 2
        inside = (values >= edges[k]) & (
            (values < edges[k + 1]) | (last & (values <= edges[k + 1]))
        )
        hit = inside & objects.hit
        parts.append(
            Part(
                each.name,
                by,
                unit,
                float(edges[k]),
                float(edges[k + 1]),
                int(inside.sum()),
                int(hit.sum()),
                _rms(objects.off_px[hit]),
                _rms(objects.off_mm[hit]),
            )
        )
    return parts


def _rms(values: NDArray[np.float64]) -> float:
    """Root mean square; NaN of nothing."""
    return math.sqrt(float((values**2).mean())) if values.size else math.nan
