"""The rows of tests.csv about nearest neighbours."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from analyse.judging import stream
from analyse.neighbours import (
    clark_evans,
    clark_evans_torus,
    donnelly,
    hopkins_skellam,
)
from analyse.set_covariance import rectangle_sides
from analyse.side_rows import SMALL_IF_CLUMPED, side_rows
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.said import Findings

Floats = NDArray[np.float64]

_PLAIN = "mean distance to the nearest neighbour over that at random (Clark and Evans 1954)"
_DONNELLY = "the same with the edge of a rectangle allowed for (Donnelly 1978)"
_TORUS = "the same with opposite sides joined (Clark and Evans 1954; Ripley 1981)"
_SKELLAM = (
    "squared distances from random places over those between neighbours (Hopkins and Skellam 1954)"
)
_NO_EDGE = "the edge is not allowed for: too large, the more so the fewer the points"


def distance_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield Clark and Evans' R, Donnelly's correction, and Hopkins and Skellam's A.

    Parameters
    ----------
    each : Findings
        Of one photograph or table.

    Yields
    ------
    list
        The cells of tests.csv after `photograph`; `n` is the number of points. Values are empty,
        and the notes say why, where there are too few points; nothing for a table of counts.
    """
    pattern = each.pattern
    if pattern is None:
        return
    points, area, n = pattern.points, pattern.area, len(pattern)
    plain = clark_evans(points, area)
    if plain.reason:
        yield ["clark_evans", None, None, None, None, _PLAIN, n, plain.reason]
        return
    lengths = f"mean distance {plain.mean:.6g} {pattern.unit}, expected {plain.expected:.6g}"
    yield ["clark_evans", plain.ratio, None, None, None, _PLAIN, n, f"{lengths}; {_NO_EDGE}"]
    note = f"normal p; {_NO_EDGE}"
    method = "R in standard errors (Clark and Evans 1954)"
    yield from side_rows("clark_evans_z", plain.z, plain, method, n, note, sides=SMALL_IF_CLUMPED)
    if rectangle_sides(area) is not None:
        yield from _in_rectangles(points, area, pattern.unit)
    skellam = hopkins_skellam(points, area, stream(each.seed, f"{each.name}, random places"))
    note = skellam.reason or f"{skellam.tests} random places, seed {each.seed}; above 1 clumped"
    value = None if skellam.reason else skellam.value
    yield ["hopkins_skellam", value, None, None, None, _SKELLAM, n, note]


def _in_rectangles(points: Floats, area: BaseGeometry, unit: str) -> Iterator[list[Cell]]:
    """Yield what is known in rectangles alone."""
    edge, torus = donnelly(points, area), clark_evans_torus(points, area)
    lengths = f"mean distance {edge.mean:.6g} {unit}, expected {edge.expected:.6g}"
    yield ["donnelly", edge.ratio, None, None, None, _DONNELLY, edge.n, lengths]
    method = "R in standard errors (Donnelly 1978)"
    yield from side_rows(
        "donnelly_z", edge.z, edge, method, edge.n, "normal p", sides=SMALL_IF_CLUMPED
    )
    note = "a check: the pattern is taken to go on beyond the edge"
    yield ["clark_evans_torus", torus.ratio, None, None, None, _TORUS, torus.n, note]
