"""The tables of an analysis: quadrats, one row per photograph, and one row per statistic."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

from analyse.block_rows import block_rows
from analyse.count_rows import COUNT_SUMMARY_COLUMNS, count_rows, count_summary_cells
from analyse.crowding_rows import CROWDING_SUMMARY_COLUMNS, crowding_cells, crowding_rows
from analyse.dispersion import Dispersion
from analyse.dispersion_rows import dispersion_rows
from analyse.distance_rows import distance_rows
from analyse.envelope_rows import BESIDE_COLUMNS, beside_cells, envelope_rows
from analyse.findings import Findings
from analyse.plain_rows import EYES_COLUMNS, eyes_cells, plain_rows
from analyse.power_rows import power_rows
from analyse.reviewing import REVIEW_SUMMARY_COLUMNS, review_cells
from analyse.spot_check_rows import (
    SPOT_CHECK_SUMMARY_COLUMNS,
    spot_check_cells,
    spot_check_rows,
)
from analyse.trend_rows import trend_rows
from analyse.trust_rows import TRUST_SUMMARY_COLUMNS, trust_cells, trust_rows
from analyse.unseen import planted_cells, planted_rows
from detect.files import Cell, csv_text

DIGITS = 9
QUADRAT_COLUMNS = [
    "photograph",
    "quadrat",
    "row",
    "column",
    "x_mm",
    "y_mm",
    "area_mm2",
    "whole",
    "count",
    "expected",
    "residual",
    "x_px",
    "y_px",
    "area_px2",
]
SUMMARY_COLUMNS = [
    "photograph",
    "count",
    "area_mm2",
    "density_per_cm2",
    "density_low",
    "density_high",
    "quadrat_mm",
    "quadrats",
    "mean",
    "variance",
    "vmr",
    "chi2",
    "df",
    "p_clumped",
    "p_even",
    "p_two_sided",
    "p_simulated",
    "verdict",
    "whole_quadrats",
    "vmr_by_area",
    "chi2_whole",
    "df_whole",
    "p_clumped_whole",
    "p_even_whole",
    "p_two_sided_whole",
    "p_simulated_clumped",
    "p_simulated_even",
    "vmr_seen_low",
    "vmr_seen_high",
    "quadrat_area_mm2",
    "quadrat_px",
    "area_px2",
    "simulations",
    "seed",
    "rests_on",
    "flags",
    "sentence",
    "planted_recall",
    "planted_recall_low",
    "planted_recall_high",
    "blind_distance",
    "blind_distance_mm",
    *COUNT_SUMMARY_COLUMNS,
    *REVIEW_SUMMARY_COLUMNS,
    *BESIDE_COLUMNS,
    *SPOT_CHECK_SUMMARY_COLUMNS,
    *CROWDING_SUMMARY_COLUMNS,
    *EYES_COLUMNS,
    *TRUST_SUMMARY_COLUMNS,
]
TEST_COLUMNS = ["photograph", "statistic", "value", "low", "high", "p", "method", "n", "notes"]


def quadrats_csv(findings: Sequence[Findings]) -> str:
    """Return every quadrat of every photograph as CSV.

    Parameters
    ----------
    findings : sequence of Findings
        One per photograph or table.

    Returns
    -------
    str
        Quadrats, rows and columns are numbered from 1 at the top left; places and areas in
        millimetres are empty where no scale is known, and pixel cells where one is.

    Examples
    --------
    >>> from analyse.findings import CountTable, analyse_counts
    >>> bed = analyse_counts(CountTable("bed", [0, 9, 1, 0, 8, 0]), simulations=99)
    >>> print(quadrats_csv([bed]).splitlines()[2])
    bed,2,,,,,,true,9,3.0,3.79473319,,,
    """
    rows = (row for each in findings for row in _quadrats(each))
    return csv_text(QUADRAT_COLUMNS, rows, digits=DIGITS)


def summary_csv(
    findings: Sequence[Findings], *, factors: Mapping[str, Mapping[str, str]] | None = None
) -> str:
    """Return one row per photograph as CSV.

    Parameters
    ----------
    findings : sequence of Findings
        One per photograph or table.
    factors : mapping from photograph name to (factor, value), or None
        Treatment, block and the like, which become columns at the end.

    Returns
    -------
    str

    Notes
    -----
    ``mean``, ``variance`` and ``vmr`` are of whole quadrats; ``chi2``, ``df`` and the p after them
    are of all ``quadrats``, with expected counts by area, and ``vmr_by_area`` is their chi2 / df.
    ``k`` with its limits is of whole quadrats, and ``k_note`` says what an empty one means;
    ``density_low_clumped`` and ``density_high_clumped`` are of all, by area.
    ``p_simulated`` is two-sided and what the verdict rests on; ``p_simulated_plain`` and
    ``verdict_plain`` are without the detector's eyes. Columns that end in ``_whole`` are
    the chi-square test of whole quadrats.

    Examples
    --------
    >>> from analyse.findings import CountTable, analyse_counts
    >>> bed = analyse_counts(CountTable("bed", [0, 9, 1, 0, 8, 0]), simulations=99)
    >>> print(summary_csv([bed], factors={"bed": {"treatment": "A"}}).splitlines()[1][:8])
    bed,18,,
    """
    known = factors or {}
    names = list(dict.fromkeys(name for each in known.values() for name in each))
    rows = (
        [*_summary(each), *(known.get(each.name, {}).get(name, "") for name in names)]
        for each in findings
    )
    return csv_text([*SUMMARY_COLUMNS, *names], rows, digits=DIGITS)


def tests_csv(findings: Sequence[Findings]) -> str:
    """Return one row per statistic of every photograph as CSV.

    Parameters
    ----------
    findings : sequence of Findings
        One per photograph or table.

    Returns
    -------
    str
        ``n`` is the number of quadrats behind a statistic, for the density that of points. The
        flags of a photograph end the notes of each of its rows, since rows travel alone.

    Examples
    --------
    >>> from analyse.findings import CountTable, analyse_counts
    >>> bed = analyse_counts(CountTable("bed", [0, 9, 1, 0, 8, 0]), simulations=99)
    >>> [row for row in tests_csv([bed]).splitlines() if row.startswith("bed,vmr,")][0]
    'bed,vmr,6.13333333,,,,variance-to-mean ratio,6,whole quadrats; flags: no_area few_quadrats rough_chi_square'
    """
    rows = (
        [each.name, *row[:-1], _flagged(row[-1], each)]
        for each in findings
        for part in _PARTS
        for row in part(each)
    )
    return csv_text(TEST_COLUMNS, rows, digits=DIGITS)


def _flagged(note: Cell, each: Findings) -> str:
    """Return a note with the flags of its photograph."""
    return f"{note}; flags: {' '.join(each.flags)}" if each.flags else str(note)


def _quadrats(each: Findings) -> Iterator[list[Cell]]:
    """Yield the quadrats of one photograph as rows."""
    counts, grid = each.counts, each.counts.grid
    for k in range(len(counts)):
        place: list[Cell] = [None, None] if grid is None else [grid.x[k], grid.y[k]]
        place.append(None if counts.area is None else counts.area[k])
        nothing: list[Cell] = [None] * 3
        yield [
            each.name,
            k + 1,
            None if counts.row is None else counts.row[k] + 1,
            None if counts.column is None else counts.column[k] + 1,
            *(place if each.unit == "mm" else nothing),
            bool(counts.whole[k]),
            counts.counts[k],
            each.expected[k],
            each.residuals[k],
            *(place if each.unit == "px" else nothing),
        ]


def _summary(each: Findings) -> list[Cell]:
    """Return the row of one photograph, without its factors."""
    everything, whole, density = each.dispersion_all, each.dispersion_whole, each.density
    side, simulated = each.settings["side"], each.simulated
    mm, px = each.unit == "mm", each.unit == "px"
    grid = each.counts.grid
    return [
        each.name,
        each.n,
        each.area if mm else None,
        *([None] * 3 if density is None else [density.value, density.low, density.high]),
        side if mm else None,
        everything.q,
        *([None] * 3 if whole is None else [whole.mean, whole.variance, whole.vmr]),
        *_tested(everything),
        simulated.p_two_sided,
        each.verdict,
        int(each.counts.whole.sum()),
        everything.vmr,
        *_tested(whole),
        simulated.p_clumped,
        simulated.p_even,
        *each.detectable,
        grid.full_area if grid is not None and mm else None,
        side if px else None,
        each.area if px else None,
        simulated.simulations,
        each.seed,
        each.rests_on,
        " ".join(each.flags),
        each.sentence,
        *planted_cells(each.pattern),
        *count_summary_cells(each),
        *review_cells(each),
        *beside_cells(each),
        *spot_check_cells(each),
        *crowding_cells(each),
        *eyes_cells(each),
        *trust_cells(each),
    ]


def _tested(seen: Dispersion | None) -> list[Cell]:
    """Return X2, its degrees of freedom and its three p."""
    if seen is None:
        return [None] * 5
    return [seen.chi2, seen.df, seen.p_clumped, seen.p_even, seen.p_two_sided]


def _planted_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield what planted objects showed."""
    return planted_rows(each.pattern)


_PARTS = (
    dispersion_rows,
    _planted_rows,
    count_rows,
    power_rows,
    trend_rows,
    distance_rows,
    block_rows,
    envelope_rows,
    spot_check_rows,
    crowding_rows,
    plain_rows,
    trust_rows,
)
