"""A reviewer who knows the truth: strikes what is false and places what was missed."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from detect.accuracy import match_spots
from detect.amendments import Amendment, amendments_path, append_amendment
from detect.sheet import Sheet, write_sheet


def review(
    sheet: Sheet,
    photograph: Path,
    truth: NDArray[np.float64],
    radius: NDArray[np.float64],
    folder: Path,
    *,
    usual_radius: float = 6.0,
    margin: float = 0.0,
) -> None:
    """Write a sheet and the amendments of a person who knows the truth, and marks it as checked.

    Where a radius is unknown (NaN), `usual_radius` says how near a spot must lie, and what is placed
    is as large as what was found. False spots nearer to the frame than `margin` are let stand.
    """
    settings = sheet.settings | {"photograph_at": str(photograph.resolve())}
    log = amendments_path(write_sheet(replace(sheet, settings=settings), folder))
    spots = sheet.spots
    match = match_spots(spots.centres, truth, np.where(np.isnan(radius), usual_radius, radius))
    size = np.array([sheet.photograph.width, sheet.photograph.height])
    edge = np.minimum(spots.centres, size - 1 - spots.centres).min(axis=1)
    false = np.setdiff1d(
        np.flatnonzero(edge >= margin) if margin else np.arange(len(spots)), match.found
    )
    typical = float(np.median(spots.radius)) if len(spots) else usual_radius
    changes: list[tuple[str, str | None, dict[str, float]]]
    changes = [("strike", spots.id[i], {}) for i in false]
    for k in np.setdiff1d(np.arange(len(truth)), match.truth):
        r = typical if np.isnan(radius[k]) else float(radius[k])
        x, y = (float(v) for v in np.clip(truth[k], 0, size - 1))
        changes.append(("place", f"p{k}", {"x": x, "y": y, "radius": r}))
    changes.append(("checked", None, {}))
    for k, (what, spot, values) in enumerate(changes):
        append_amendment(log, Amendment(str(k), "2026-01-01T12:00", "truth", what, spot, **values))
