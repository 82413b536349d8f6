"""What the tables say of a spot check: rows of tests.csv, and cells of summary.csv."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from analyse.density import Limits
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.said import Findings
    from analyse.spot_check import SpotCheck

SPOT_CHECK_SUMMARY_COLUMNS = [
    "spot_check_quadrats",
    "count_corrected",
    "count_corrected_low",
    "count_corrected_high",
    "density_corrected",
    "density_corrected_low",
    "density_corrected_high",
    "spot_check_recall",
    "spot_check_precision",
    "spot_check_trust",
]
_SOURCE = "stratified double sampling (Cochran 1977)"
_GUARDED = "mid-p gamma limits of both errors (Fay and Kim 2017; Zou and Donner 2008)"
_SHARES = "limits at the effective sample size (Korn and Graubard 1998)"


def spot_check_cells(findings: Findings) -> list[Cell]:
    """Return the cells of the summary: corrected count and density, recall, precision, trust.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of cells
        As `SPOT_CHECK_SUMMARY_COLUMNS`; all empty where there was no spot check.
    """
    check = findings.spot_check
    if check is None:
        return [None] * len(SPOT_CHECK_SUMMARY_COLUMNS)
    density: list[Cell] = [None] * 3 if check.density is None else _three(check.density)
    return [
        check.drawn,
        *_three(check.total),
        *density,
        None if check.recall is None else check.recall.value,
        None if check.precision is None else check.precision.value,
        check.trusted,
    ]


def spot_check_rows(findings: Findings) -> Iterator[list[Cell]]:
    """Yield the rows of the table of statistics, without the photograph.

    Parameters
    ----------
    findings : Findings

    Yields
    ------
    list
        Statistic, value, limits, no p, method, quadrats counted by eye, notes.
    """
    check = findings.spot_check
    if check is None:
        return
    note = (
        f"limits at 95 %; {check.drawn} of {check.quadrats} quadrats, seed {check.seed};"
        f" {check.counted} spots counted"
    )
    difference, ratio = f"difference estimate, {_SOURCE}", f"ratio estimate, {_SOURCE}"
    yield _row("count_corrected", check.total, f"{difference}, {_GUARDED}", check, note)
    if check.by_ratio is not None:
        yield _row("count_corrected_ratio", check.by_ratio, f"{ratio}, {_GUARDED}", check, note)
    for name, plain, method in (
        ("count_corrected_plain", check.plain, difference),
        ("count_corrected_ratio_plain", check.plain_ratio, ratio),
    ):
        if plain is not None:
            said = f"{note}; df {plain.df:.3g}; too narrow where errors are rare"
            yield _row(name, plain.limits(), f"{method}, Student's t", check, said)
    if check.density is not None:
        said = f"{note}; per cm2; widened by the uncertainty of the scale"
        yield _row("density_corrected", check.density, f"{difference}, {_GUARDED}", check, said)
    for name, share in (("recall", check.recall), ("precision", check.precision)):
        if share is not None:
            yield _row(f"spot_check_{name}", share, f"ratio of sums, {_SHARES}", check, note)


def _row(name: str, limits: Limits, method: str, check: SpotCheck, note: str) -> list[Cell]:
    """Return one row."""
    return [name, *_three(limits), None, method, check.drawn, note]


def _three(limits: Limits) -> list[Cell]:
    """Return a number with its limits."""
    return [limits.value, limits.low, limits.high]
