"""The tests over all sides and distances as rows of tables: tests, the p adjusted together, and curves."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

from analyse.departures import FAMILY, FAMILY_WORDS, departures_of
from detect.files import Cell, csv_text

if TYPE_CHECKING:
    from analyse.envelopes import Envelope
    from analyse.findings import Findings
    from analyse.global_tests import GlobalTests
    from analyse.holm import HolmFamily

DIGITS = 9
CURVE_COLUMNS = [
    "photograph",
    "curve",
    "x",
    "observed",
    "central",
    "low",
    "high",
    "unit",
    "null",
]
BESIDE_COLUMNS = [
    "p_sides_adjusted",
    "sides_depart",
    "side_of_departure",
    "p_distances_adjusted",
    "distances_depart",
    "distance_of_departure",
    "p_neighbours_adjusted",
    "neighbours_depart",
    "neighbour_distance_of_departure",
    "p_gradient",
    "denser_towards",
    "null",
    "cluster_seen",
    "spacing_seen",
    "length_unit",
]
BEYOND = "_beyond_trend"  # ends the names of tests against the fitted trend
_CURVES = {
    "vmr_by_side": "variance-to-mean ratio over quadrat sides",
    "l_function": "L function, translation correction (Ripley 1977; Besag 1977; Ohser 1983)",
    "pair_correlation": "pair correlation, translation correction (Stoyan and Stoyan 1994)",
    "nearest_neighbour": "distribution of nearest-neighbour distances (Diggle 1979)",
    "empty_space": "distribution of empty-space distances (Diggle 1979)",
}
_SOURCES = {
    "extreme rank length": "global envelope by extreme rank length (Myllymaki and others 2017;"
    " Mrkvicka and others 2020)",
    "studentised maximum deviation": "global envelope by studentised maximum deviation"
    " (Myllymaki and others 2015, 2017)",
}
_SIMULATED = "simulated given the number of points (Besag and Diggle 1977)"
_SIDES = {"clumped": "clumped side", "even": "even side", "two_sided": "twice the smaller side"}
_HOLM = f"Holm (1979) over {FAMILY_WORDS}"


def envelope_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the rows of the table of statistics, without the photograph.

    Parameters
    ----------
    each : Findings
        Any result; there is nothing to yield where no points are known.

    Yields
    ------
    list
        Statistic, distance of the greatest departure, no limits, p, method, points, notes; then
        the adjusted p of the family. Tests against the fitted trend end in ``_beyond_trend``.
    """
    yield from tested_rows(each, each.tests, each.holm, "")
    yield from tested_rows(each, each.beyond, each.beyond_holm, BEYOND)


def beside_cells(each: Findings) -> list[Cell]:
    """Return the cells of the summary about sides, distances and gradients.

    Parameters
    ----------
    each : Findings
        Any result.

    Returns
    -------
    list
        As many as `BESIDE_COLUMNS`, empty where not known. For each test of the family its adjusted
        p, in which direction it departs (``no`` where that p is above 5 %), and where its curve
        departs most; then the p of the gradient, which allows for clumping and for how many were
        tried, and where it is denser, whether or not that is more than chance; and the smallest
        clusters (others beside a spot) and spacing that the counts would have shown.
    """
    cells: list[Cell] = []
    found = (
        {}
        if each.tests is None or each.holm is None
        else {one.name: one for one in departures_of(each.tests.envelopes, each.holm)}
    )
    for name in FAMILY:
        one = found.get(name)
        cells += [None] * 3 if one is None else [one.adjusted, one.direction or "no", one.at]
    if each.trend is None:
        cells += [None] * 2
    else:
        p = min(each.trend.adjusted)
        cells += [p, each.trend.fits[each.trend.adjusted.index(p)].direction]
    cells.append(None if each.tests is None else each.tests.null)
    cells += [None] * 2 if each.shown is None else [each.shown.cluster, each.shown.length]
    return [*cells, each.unit]


def curves_csv(findings: Sequence[Findings]) -> str:
    """Return every curve with its global band as CSV, so that anyone can draw the figures again.

    Parameters
    ----------
    findings : sequence of Findings
        One per photograph or table.

    Returns
    -------
    str
        One row per side or distance; those of nothing but counts have none.

    Examples
    --------
    >>> from analyse.findings import analyse_points
    >>> lattice = [(x + 0.5, y + 0.5) for x in range(8) for y in range(8)]
    >>> found = analyse_points(lattice, (0, 0, 8, 8), simulations=99)
    >>> print(curves_csv([found]).splitlines()[0])
    photograph,curve,x,observed,central,low,high,unit,null
    """
    rows = (
        [each.name, *row]
        for each in findings
        for tests in (each.tests, each.beyond)
        if tests is not None
        for row in _points_of(each, tests)
    )
    return csv_text(CURVE_COLUMNS, rows, digits=DIGITS)


def tested_rows(
    each: Findings, tests: GlobalTests | None, family: HolmFamily | None, ending: str
) -> Iterator[list[Cell]]:
    """Yield the tests against one null, and their adjusted p, their names with an ending.

    Parameters
    ----------
    each : Findings
        For its number of points and seed.
    tests : GlobalTests or None
        Nothing is yielded without them.
    family : HolmFamily or None
        Their adjusted p.
    ending : str
        Of each name.

    Yields
    ------
    list
        As `envelope_rows` does.
    """
    if tests is None:
        return
    for name, seen in tests.envelopes.items():
        note = (
            f"{_where(seen)}; null: {tests.null}; {seen.simulations} simulations, seed {each.seed}"
        )
        if family is None or name not in family.names:
            note += "; for reading, not for the verdict"
        method = f"{_CURVES[name]}; {_SOURCES[seen.measure]}"
        yield [f"{name}{ending}", seen.at, None, None, seen.p, method, each.n, note]
    yield from _indices(each, tests, ending)
    for name, _, adjusted in family or ():
        note = "judged together; the quadrat test as asked comes first and is not one of them"
        yield [f"{name}{ending}_adjusted", None, None, None, adjusted, _HOLM, each.n, note]


def _indices(each: Findings, tests: GlobalTests, ending: str) -> Iterator[list[Cell]]:
    """Yield the two indices of neighbours, judged by the same simulations, a row for each side."""
    note = f"null: {tests.null}; {tests.simulations} simulations, seed {each.seed}"
    for name, seen, source in (
        ("clark_evans", tests.clark_evans, "Clark and Evans 1954"),
        ("hopkins_skellam", tests.hopkins_skellam, "Hopkins and Skellam 1954"),
    ):
        for side, words in _SIDES.items():
            p = getattr(seen, f"p_{side}")
            method = f"{source}, {_SIMULATED}, {words}"
            said = f"expected {seen.expected:.6g}; {note}"
            value: Cell = seen.value
            if not math.isfinite(seen.value):
                value, said = None, f"infinite: every point coincides with another; {said}"
            statistic = f"{name}_simulated{ending}_{side}"
            yield [statistic, value, None, None, p, method, each.n, said]


def _where(seen: Envelope) -> str:
    """Say on which side of the band the curve lies at its greatest departure."""
    band = f"the global band at {100 * (1 - seen.level):g} %"
    if seen.side is None:
        return f"value: where it departs most, within {band}"
    return f"value: where it departs most, {seen.side} {band}"


def _points_of(each: Findings, tests: GlobalTests) -> Iterator[list[Cell]]:
    """Yield the points of all curves against one null."""
    for name, seen in tests.envelopes.items():
        columns = (seen.x, seen.observed, seen.central, seen.low, seen.high)
        for row in zip(*(column.tolist() for column in columns), strict=True):
            yield [name, *row, each.unit, tests.null]
