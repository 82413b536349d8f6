"""The table that a person fills in at a spot check, and the counts read back from it."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from analyse.errors import TableWrong
from analyse.rows import read_rows, whole_in
from detect.files import Cell, csv_text
from detect.scale import Scale
from detect.spot_check import MOST_MARKS, Draw, outline_of

FORM_COLUMNS = ["quadrat", "x_px", "y_px", "width_px", "height_px", "x_mm", "y_mm", "count"]
_DIGITS = 6


def form_csv(draw: Draw, scale: Scale | None) -> str:
    """Return the quadrats of a spot check as a table with an empty column for the counts.

    Parameters
    ----------
    draw : Draw
        What was drawn.
    scale : Scale or None
        For the columns in millimetres, which are empty without.

    Returns
    -------
    str
        In the order of the draw, which tells nothing of what was detected; no row tells it either.
    """
    rows = []
    for each in draw.quadrats:
        x0, y0, x1, y1 = outline_of(each.outline).bounds
        middle = np.array([[(x0 + x1) / 2, (y0 + y1) / 2]])
        mm: list[Cell] = [None, None] if scale is None else [*scale.to_mm(middle)[0].tolist()]
        rows.append([each.quadrat, *middle[0].tolist(), x1 - x0, y1 - y0, *mm, None])
    return csv_text(FORM_COLUMNS, rows, digits=_DIGITS)


def read_hand_counts(path: Path, draw: Draw) -> dict[int, int]:
    """Read what a person counted in the quadrats of a spot check.

    Parameters
    ----------
    path : Path
        A table with the columns quadrat and count; others are passed over.
    draw : Draw
        What was drawn.

    Returns
    -------
    dict of int to int
        Count of every quadrat that was drawn.

    Raises
    ------
    TableWrong
        If a column, a quadrat or a count is missing, or a quadrat comes twice or was not drawn.
    """
    header, *body = read_rows(path)
    names = [cell.lower() for cell in header.cells]
    for name in ("quadrat", "count"):
        if name not in names:
            raise TableWrong(
                f"{path.name} has no column {name!r} (its columns: {', '.join(header.cells)});"
                " fill in the table that strewn spot-check --draw wrote."
            )
    wanted = [each.quadrat for each in draw.quadrats]
    counts: dict[int, int] = {}
    for row in body:
        quadrat = whole_in(row, names.index("quadrat"), "quadrat")
        if quadrat not in wanted:
            raise TableWrong(
                f"{row.where}: quadrat {quadrat} was not drawn for this spot check"
                f" ({_listed(wanted)}); use the table that was written when it was drawn."
            )
        if quadrat in counts:
            raise TableWrong(f"{row.where}: quadrat {quadrat} comes twice; remove one of its rows.")
        count = whole_in(row, names.index("count"), "count")
        if count > MOST_MARKS:
            raise TableWrong(
                f"{row.where}: nobody counts {count:,} in one quadrat; a spot check takes up to"
                f" {MOST_MARKS:,}."
            )
        counts[quadrat] = count
    missing = [quadrat for quadrat in wanted if quadrat not in counts]
    if missing:
        raise TableWrong(
            f"{path.name} lacks {_listed(missing)} of the {len(wanted)} quadrats drawn; a sample with"
            " gaps is no random sample, so count these too (0 where nothing is there)."
        )
    return counts


def _listed(quadrats: list[int]) -> str:
    """Return numbers of quadrats in words, not too many."""
    shown = ", ".join(str(quadrat) for quadrat in quadrats[:12])
    more = f" and {len(quadrats) - 12} more" if len(quadrats) > 12 else ""
    return f"quadrat{'s' * (len(quadrats) != 1)} {shown}{more}"
