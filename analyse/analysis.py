"""One sheet or table analysed and its page drawn; and the files that come of many of them."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from numpy.typing import ArrayLike

from analyse.count_table import CountTable
from analyse.envelope_rows import curves_csv
from analyse.findings import Findings, analyse_counts, analyse_pattern
from analyse.grid_options import GridOptions
from analyse.pattern import Pattern, pattern_from_sheet
from analyse.plan import Trial
from analyse.positive_holes import crowding_of_holes
from analyse.quick import verdict_as_found
from analyse.report import RenderedPage, render_page, write_report
from analyse.spot_check import spot_check_of
from analyse.tables import quadrats_csv, summary_csv, tests_csv
from analyse.trust_rows import look_first_csv
from detect.amended import current_state
from detect.amendments import Amendment
from detect.batch import Failure
from detect.errors import RequestWrong
from detect.files import write_text_atomically
from detect.photograph import Photograph
from detect.sheet import Sheet


@dataclass(frozen=True, slots=True)
class Analysed:
    """What one photograph or table gave.

    Parameters
    ----------
    findings : Findings
        The numbers.
    page : RenderedPage
        Its part of the report, drawn.
    factors : dict of str
        Treatment, block, dilution.
    """

    findings: Findings
    page: RenderedPage
    factors: dict[str, str] = field(default_factory=dict)


def analyse_sheet(
    sheet: Sheet,
    amendments: Sequence[Amendment],
    photograph: Photograph | None,
    *,
    grid: GridOptions,
    trial: Trial,
    factors: dict[str, str] | None = None,
    workers: int = 1,
    holes: int | None = None,
) -> Analysed:
    """Analyse the spots of a sheet as people left them, and draw its page.

    Parameters
    ----------
    sheet : Sheet
        As found.
    amendments : sequence of Amendment
        Hand edits.
    photograph : Photograph or None
        For the pictures; None where it is not at hand.
    grid : GridOptions
        How to lay the quadrats.
    trial : Trial
        Seed and number of simulations.
    factors : dict of str, optional
        Treatment, block, dilution.
    workers : int
        How many processes share the simulations.
    holes : int or None
        Of the sampler's plate that is photographed, where it has holes.

    Returns
    -------
    Analysed
    """
    pattern = pattern_from_sheet(sheet, amendments)
    chance = {"seed": trial.seed, "simulations": trial.simulations}
    findings = analyse_pattern(pattern, grid, workers=workers, **chance)
    if amendments:
        findings = replace(
            findings,
            verdict_before=verdict_as_found(sheet, grid, **chance),
            spot_check=spot_check_of(sheet, amendments),
        )
    findings = _with_holes(findings, [findings.n], holes)
    state = current_state(sheet, amendments)
    return Analysed(
        findings, render_page(findings, state, photograph, factors=factors), factors or {}
    )


def analyse_table(
    table: Pattern | CountTable,
    *,
    grid: GridOptions,
    trial: Trial,
    workers: int = 1,
    holes: int | None = None,
) -> Analysed:
    """Analyse a table of points or of counts, and draw its page.

    Parameters
    ----------
    table : Pattern or CountTable
        Points in their area, or counts.
    grid : GridOptions
        How to lay the quadrats over points.
    trial : Trial
        Seed and number of simulations.
    workers : int
        How many processes share the simulations over sides and distances of points.
    holes : int or None
        Of a sampler's plate, where each count is of one plate's filled holes.

    Returns
    -------
    Analysed
    """
    chance = {"seed": trial.seed, "simulations": trial.simulations}
    if isinstance(table, CountTable):
        findings = analyse_counts(table, **chance)
    else:
        findings = analyse_pattern(table, grid, workers=workers, **chance)
    counts = table.counts if isinstance(table, CountTable) else [findings.n]
    findings = _with_holes(findings, counts, holes)
    return Analysed(findings, render_page(findings))


def _with_holes(findings: Findings, counts: ArrayLike, holes: int | None) -> Findings:
    """Correct filled holes of plates, where there are holes."""
    if holes is None:
        return findings
    return replace(findings, crowding=crowding_of_holes(counts, holes))


def write_results(
    results: Sequence[Analysed], failures: Sequence[Failure], folder: Path, trial: Trial
) -> Path:
    """Write quadrats.csv, summary.csv, tests.csv, curves.csv, look_first.csv and report.html.

    Parameters
    ----------
    results : sequence of Analysed
        One per photograph or table, in order.
    failures : sequence of Failure
        Photographs that could not be done, which the report lists.
    folder : Path
        Where to; it exists.
    trial : Trial
        Title and seed.

    Returns
    -------
    Path
        The report.

    Raises
    ------
    RequestWrong
        If two results bear one name, so that their rows could not be told apart.
    """
    findings = [result.findings for result in results]
    _check_names(findings)
    factors = {result.findings.name: result.factors for result in results}
    write_text_atomically(folder / "quadrats.csv", quadrats_csv(findings))
    write_text_atomically(folder / "summary.csv", summary_csv(findings, factors=factors))
    write_text_atomically(folder / "tests.csv", tests_csv(findings))
    write_text_atomically(folder / "curves.csv", curves_csv(findings))
    write_text_atomically(folder / "look_first.csv", look_first_csv(findings))
    report = folder / "report.html"
    write_report(
        [result.page for result in results],
        report,
        title=trial.title,
        failures=[(failure.name, failure.reason) for failure in failures],
        seed=trial.seed,
    )
    return report


def _check_names(findings: Sequence[Findings]) -> None:
    """Refuse two results of one name: neither rows nor chance could tell them apart."""
    names = Counter(each.name for each in findings)
    name, often = names.most_common(1)[0] if names else ("", 0)
    if often > 1:
        raise RequestWrong(
            f"{often} of the sheets or tables are about one photograph ({name}); leave out"
            " all but one, or analyse them one at a time with different folders for --out."
        )
