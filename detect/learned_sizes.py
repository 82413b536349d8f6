"""How large the objects of reviewed photographs are, as a range to look for."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from detect.lengths import Length
from detect.reviewed import Reviewed

Range = tuple[Length, Length]


@dataclass(frozen=True, slots=True)
class SizeOptions:
    """How a range of sizes is learned.

    Parameters
    ----------
    quantiles : pair of float
        Quantiles of the real diameters between which the range runs.
    margin : float
        Factor by which the range goes beyond them on either side.
    """

    quantiles: tuple[float, float] = (0.05, 0.95)
    margin: float = 1.2


def learned_range(
    reviewed: Sequence[Reviewed], options: SizeOptions, *, in_mm: bool
) -> Range | None:
    """Learn the range of diameters from real objects.

    Parameters
    ----------
    reviewed : sequence of Reviewed
    options : SizeOptions
    in_mm : bool
        In millimetres, for which every sheet needs a scale; else in pixels.

    Returns
    -------
    pair of Length or None
        Between quantiles of the diameters, a margin added; None from fewer than five objects.
    """
    diameters = np.concatenate(
        [2.0 * each.real[:, 2] * (_mm_per_px(each) if in_mm else 1.0) for each in reviewed]
    )
    if diameters.size < 5:
        return None
    low, high = np.quantile(diameters, options.quantiles)
    unit = "mm" if in_mm else "px"
    smallest, largest = (
        float(f"{value:.4g}") for value in (low / options.margin, high * options.margin)
    )
    return Length(smallest, unit), Length(largest, unit)  # type: ignore[arg-type]  # one of both


def in_pixels(sizes: Range, reviewed: Reviewed) -> tuple[float, float]:
    """Return a range of diameters in the pixels of a reviewed photograph."""
    mm_per_px = None if reviewed.sheet.scale is None else _mm_per_px(reviewed)
    smallest, largest = (length.to_px(mm_per_px) for length in sizes)
    return max(smallest, 2.0), max(largest, 3.0)


def _mm_per_px(reviewed: Reviewed) -> float:
    """Millimetres per pixel in the middle of a photograph's study area."""
    scale = reviewed.sheet.scale
    if scale is None:
        raise ValueError(f"{reviewed.sheet.photograph.name} has no scale")
    return float(scale.mm_per_px([reviewed.sheet.area.polygon.centroid.coords[0]])[0])
