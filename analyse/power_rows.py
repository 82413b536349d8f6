"""The rows of tests.csv about what the counts would have shown."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING

from analyse.power import LEVEL, POWER, WIDE
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.said import Findings

_CLUSTER = "smallest clusters seen (Neyman and Scott 1958; gamma law of X2 by Neyman's cumulants)"
_SPACING = "smallest spacing seen (second order in the density, Matern 1960; scaled chi-square)"


def power_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the smallest clusters and the smallest spacing that would have been seen.

    Parameters
    ----------
    each : Findings
        Of one photograph or table.

    Yields
    ------
    list
        The cells of tests.csv after `photograph`; `n` is the number of quadrats. What so few
        points cannot show has no row.
    """
    seen = each.shown
    if seen is None:
        return
    at = f"with about {100 * POWER:.0f} % power, two-sided at {100 * LEVEL:g} %"
    others = "others of its cluster beside a spot, on average, clusters"
    for name, value, width in (
        ("cluster_seen", seen.cluster, "much narrower than a quadrat"),
        ("wide_cluster_seen", seen.wide_cluster, f"with a standard deviation of {WIDE:g} sides"),
    ):
        if math.isfinite(value):
            yield [name, value, None, None, None, _CLUSTER, seen.q, f"{others} {width}; {at}"]
    if math.isfinite(seen.spacing):
        note = f"kept by all, in sides of a quadrat; {at}"
        yield ["spacing_seen_sides", seen.spacing, None, None, None, _SPACING, seen.q, note]
    if math.isfinite(seen.length):
        name, note = f"spacing_seen_{seen.unit}", f"kept by all; {at}"
        yield [name, seen.length, None, None, None, _SPACING, seen.q, note]
