"""The report: one file without outside requests, the verdict first, every number traced back."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from importlib.metadata import version
from importlib.resources import files
from pathlib import Path
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from analyse.curve_charts import LOOKS, curve_figure
from analyse.embedding import data_uri, photograph_jpeg, svg_bytes
from analyse.figures import (
    draw_frequencies,
    photograph_figure,
    plain_figure,
    points_figure,
    residual_figure,
)
from analyse.findings import Findings
from analyse.page_words import page_words
from analyse.trust_charts import trust_figure
from detect.files import write_text_atomically
from detect.photograph import Photograph, read_photograph
from detect.sheet import Sheet

TITLE = "Counts and dispersion"
_FIGURES = ("photograph", "marks", "points", "residuals", "frequencies", "trust", *LOOKS)


@dataclass(frozen=True, slots=True, eq=False)
class ReportPage:
    """What one photograph or table brings to the report.

    Parameters
    ----------
    findings : Findings
        The numbers.
    sheet : Sheet or None
        Current state of the sheet the findings are about, amendments applied; None for a table.
    photograph : Photograph, Path or None
        The picture, or where it is; without it the spots are drawn on white.
    factors : mapping of str to str
        Treatment, block, dilution.
    """

    findings: Findings
    sheet: Sheet | None = None
    photograph: Photograph | Path | None = None
    factors: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class RenderedPage:
    """A page with its figures drawn and its words set; plain values, so it passes between processes.

    Parameters
    ----------
    name : str
        File name of the photograph or table.
    words : dict
        What the template prints.
    figures : dict of str to bytes
        Pictures by name: ``photograph`` (JPEG), ``marks`` (SVG to lie over it), ``points``,
        ``residuals``, ``frequencies``, ``trust`` and the curves of `analyse.curve_charts.LOOKS` (SVG). Those
        that cannot be drawn are missing.
    """

    name: str
    words: dict[str, Any]
    figures: dict[str, bytes]

    def __repr__(self) -> str:
        return f"<RenderedPage {self.name}: figures {', '.join(self.figures)}>"


def page_figures(page: ReportPage) -> dict[str, bytes]:
    """Draw the figures of a page.

    Parameters
    ----------
    page : ReportPage
        The finished result.

    Returns
    -------
    dict of str to bytes
        See `RenderedPage`.

    Raises
    ------
    PhotographFailed
        If the photograph is given as a path and cannot be read.
    """
    findings, sheet, photograph = page.findings, page.sheet, page.photograph
    figures = {}
    if sheet is not None and photograph is not None:
        if isinstance(photograph, Path):
            photograph = read_photograph(photograph)
        figures["photograph"] = photograph_jpeg(photograph)
        figures["marks"] = svg_bytes(photograph_figure(findings, sheet))
    elif findings.pattern is not None:
        figures["points"] = svg_bytes(points_figure(findings))
    if findings.n > 0 and (findings.counts.grid is not None or findings.counts.row is not None):
        figures["residuals"] = svg_bytes(residual_figure(findings))
    if findings.n > 0 and findings.poisson is not None:
        figure = plain_figure(draw_frequencies, findings, width=4.8, height=3.9)
        figures["frequencies"] = svg_bytes(figure)
    doubt = None if findings.trust is None else findings.trust.doubt
    if doubt is not None and doubt.count.low < doubt.count.high:
        figures["trust"] = svg_bytes(trust_figure(doubt, findings.density))
    if findings.tests is not None and findings.unit is not None:
        for name in LOOKS:
            if name in findings.tests.envelopes:
                figure = curve_figure(findings.tests.envelopes[name], findings.unit)
                figures[name] = svg_bytes(figure)
    return figures


def render_page(
    findings: Findings,
    sheet: Sheet | None = None,
    photograph: Photograph | Path | None = None,
    *,
    factors: Mapping[str, str] | None = None,
) -> RenderedPage:
    """Draw the figures and set the words of one photograph, for instance in a worker process.

    Parameters
    ----------
    findings : Findings
        The numbers.
    sheet : Sheet or None
        Current state of its sheet, amendments applied; None for a table.
    photograph : Photograph, Path or None
        The picture, or where it is.
    factors : mapping of str to str, optional
        Treatment, block, dilution.

    Returns
    -------
    RenderedPage

    Raises
    ------
    PhotographFailed
        If the photograph is given as a path and cannot be read.
    """
    page = ReportPage(findings, sheet, photograph, dict(factors or {}))
    words = page_words(findings, sheet, page.factors)
    return RenderedPage(findings.name, words, page_figures(page))


def write_report(
    pages: Sequence[RenderedPage],
    path: Path,
    *,
    seed: int,
    title: str = TITLE,
    failures: Sequence[tuple[str, str]] = (),
) -> Path:
    """Write the report.

    Parameters
    ----------
    pages : sequence of RenderedPage
        In the order they are to appear.
    path : Path
        The file.
    seed : int
        Seed of the simulations.
    title : str
        Name of the trial.
    failures : sequence of (name, reason)
        Photographs that could not be done.

    Returns
    -------
    Path
        `path`.

    Raises
    ------
    FolderNotWritable
        If it cannot be written; no part of a file is left.
    """
    write_text_atomically(path, report_html(pages, seed=seed, title=title, failures=failures))
    return path


def report_html(
    pages: Sequence[RenderedPage],
    *,
    seed: int,
    title: str = TITLE,
    failures: Sequence[tuple[str, str]] = (),
) -> str:
    """Return the report as `write_report` writes it; the same text for the same pages."""
    environment = Environment(
        loader=PackageLoader("analyse"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    # The style is our own file, so it may stand unescaped.
    style = Markup(files("analyse").joinpath("templates", "report.css").read_text("utf-8"))
    return environment.get_template("report.html").render(
        title=title,
        pages=[_inlined(page) for page in pages],
        failures=failures,
        seed=seed,
        version=version("strewn"),
        style=style,
    )


def _inlined(page: RenderedPage) -> dict[str, Any]:
    """Return the words of a page with its figures as data addresses."""
    drawn = {name: data_uri(data) for name, data in page.figures.items()}
    figures = dict.fromkeys(_FIGURES) | drawn
    return page.words | {"name": page.name, "figures": figures}
