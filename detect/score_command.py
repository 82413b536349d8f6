"""The command that measures how well spots were found, against objects marked by hand."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated

import typer

from detect.amended import current_state
from detect.amendments import read_amendments
from detect.batch import Each, Failure, do_each
from detect.breakdown import Part, parts_csv, parts_of
from detect.command_options import OUTPUT
from detect.compared import Compared, compare_sheet, joined, score_csv, usual_radius_of
from detect.errors import RequestWrong
from detect.files import make_folder, write_bytes_atomically, write_text_atomically
from detect.gather import gather_sheets
from detect.lengths import Length, parse_length
from detect.outcome import photograph_of
from detect.reliability import area_under_curve, reliability, reliability_csv
from detect.sheet import Sheet, read_sheet
from detect.terminal import exit_if_failed, number_text, show_failures, show_path, show_table
from detect.truth import read_truth

_EXPLAINED = (
    "Precision: real of what is found; recall: found of what is there; F1: both in one; RMSE: how"
    " far centres lie off; AUC: how well doubt tells false spots from real ones (0.5 not at all, 1"
    " perfectly); ECE: how far doubt is off on average, of few spots mostly by chance."
)


def score(
    sheets: Annotated[
        list[Path],
        typer.Argument(
            help="Sheets (NAME.sheet.json, as detect writes them), or folders of them.",
            metavar="SHEET|DIR",
            show_default=False,
        ),
    ],
    truth: Annotated[
        Path,
        typer.Option(
            "--truth",
            help="Folder with a table for each photograph, such as dish_01.csv for dish_01.jpg, with"
            " the columns x and y in pixels, and r (radius in pixels) where it was marked.",
            metavar="DIR",
            show_default=False,
        ),
    ],
    radius: Annotated[
        str | None,
        typer.Option(
            "--radius",
            help="Radius of objects whose radius was not marked, such as 6px or 0.5mm. Default: the"
            " median of those marked in the photograph, or half the middle of the diameters that were"
            " looked for.",
            metavar="LENGTH",
            show_default=False,
        ),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option(
            "--out",
            help="Folder for tables (score.csv, score_by.csv, reliability.csv), the reliability"
            " diagram, and each photograph with what was found, missed and invented.",
            metavar="DIR",
            show_default=False,
            rich_help_panel=OUTPUT,
        ),
    ] = None,
) -> None:
    """Measure how well spots were found, against objects that you marked by hand."""
    usual = None if radius is None else parse_length(radius, name="--radius")
    paths = gather_sheets(sheets)
    if not truth.is_dir():
        raise RequestWrong(f"There is no folder {truth}; --truth names a folder of CSV tables.")
    if out is not None:
        make_folder(out)
    results = do_each(SCORE, [ScoreTask(path, truth, usual, out) for path in paths])
    scored = [result for result in results if not isinstance(result, Failure)]
    failures = [result for result in results if isinstance(result, Failure)]
    compared = [each.compared for each in scored]
    if compared:
        parts = parts_of(compared)
        show_scores(compared)
        show_parts([part for part in parts if part.name == "all"])
        typer.echo(_EXPLAINED)
        for each in scored:
            for note in each.notes:
                typer.echo(f"{each.compared.name}: {note}", err=True)
        if out is not None:
            write_tables(compared, parts, out)
            show_path("Tables, diagram and pictures", out)
    show_failures(failures)
    exit_if_failed(failures, len(results))


def show_scores(compared: Sequence[Compared]) -> None:
    """Print scores, and those of all photographs together."""
    rows = [*compared, joined(compared)] if len(compared) > 1 else compared
    header = ("photograph", "truth", "found", "precision", "recall", "F1", "count error")
    show_table((*header, "RMSE px", "RMSE mm", "AUC", "ECE"), [_score_cells(row) for row in rows])


def _score_cells(each: Compared) -> tuple[str, ...]:
    """Return the cells of one line of the table of scores."""
    row = each.accuracy
    doubt, false = each.doubts
    figures = (row.rmse_px, row.rmse_mm, area_under_curve(doubt, false))
    return (
        row.name,
        str(row.truth),
        str(row.found),
        number_text(row.precision),
        number_text(row.recall),
        number_text(row.f1),
        f"{row.count_error:+d}" if row.count_error else "0",
        *(number_text(value) for value in figures),
        number_text(reliability(doubt, false).error, 2),
    )


def show_parts(parts: Sequence[Part]) -> None:
    """Print a table of recall by radius, and one by crowding."""
    for by, title in (("radius", "true radius"), ("crowding", "nearest neighbour")):
        rows = [part for part in parts if part.by == by]
        if rows:
            typer.echo("")
        show_table(
            (title, "truth", "found", "recall", "RMSE px"),
            [
                (
                    _class_text(part),
                    str(part.truth),
                    str(part.matched),
                    number_text(part.recall),
                    number_text(part.rmse_px),
                )
                for part in rows
            ],
        )
    typer.echo("")


def _class_text(part: Part) -> str:
    """Name one class: its bounds and their unit."""
    unit = "sums of radii" if part.by == "crowding" else part.unit
    if part.high == float("inf"):
        return f"{part.low:g} {unit} or more"
    if part.by == "crowding" and part.low == 0:
        return f"below {part.high:g} {unit}"
    return f"{number_text(part.low)} to {number_text(part.high)} {unit}"


def write_tables(compared: Sequence[Compared], parts: Sequence[Part], out: Path) -> None:
    """Write the tables and the reliability diagram."""
    write_text_atomically(out / "score.csv", score_csv(compared))
    write_text_atomically(out / "score_by.csv", parts_csv(parts))
    doubt, false = joined(compared).doubts
    write_text_atomically(out / "reliability.csv", reliability_csv(doubt, false))
    if doubt.size:
        from detect.reliability_chart import figure_png, reliability_figure

        equal, wide = reliability(doubt, false), reliability(doubt, false, binning="width")
        area = area_under_curve(doubt, false)
        figure = reliability_figure(equal, wide, doubt, false, area)
        write_bytes_atomically(out / "reliability.png", figure_png(figure))


@dataclass(frozen=True, slots=True)
class ScoreTask:
    """One sheet to be scored, where its truth lies, and where its picture goes."""

    path: Path
    truth: Path
    radius: Length | None
    out: Path | None


@dataclass(frozen=True, slots=True)
class Scored:
    """One sheet beside its truth, and what should be known about the comparison."""

    compared: Compared
    notes: tuple[str, ...]


def _score_one(task: ScoreTask) -> Scored:
    """Score one sheet, and draw its picture."""
    state = current_state(read_sheet(task.path), read_amendments(task.path))
    table = task.truth / f"{state.stem}.csv"
    if not table.is_file():
        raise RequestWrong(
            f"There is no {table.name} in {task.truth}; add it, or leave the sheet out."
        )
    truth = read_truth(table)
    notes: list[str] = []
    usual = None
    if not truth.known.all():
        usual = _usual_px(task.radius, state) or usual_radius_of(state, truth)
        notes.append(
            f"{(~truth.known).sum()} of {truth.known.size} objects have no radius in the truth;"
            f" {number_text(usual)} px is taken."
        )
    compared = compare_sheet(state, truth, usual_radius_px=usual)
    if task.out is not None:
        photograph = photograph_of(state, task.path.parent)
        if photograph is None:
            notes.append("the photograph is not where it was detected, so it is not drawn.")
        else:
            from detect.scored_picture import scored_jpeg

            picture = scored_jpeg(photograph, state.area, compared)
            write_bytes_atomically(task.out / f"{state.stem}.scored.jpg", picture)
    return Scored(compared, tuple(notes))


def _usual_px(radius: Length | None, sheet: Sheet) -> float | None:
    """Return a radius given on the command line in pixels of the photograph."""
    if radius is None:
        return None
    mm_per_px = None
    if sheet.scale is not None:
        middle = sheet.area.polygon.centroid
        mm_per_px = float(sheet.scale.mm_per_px([[middle.x, middle.y]])[0])
    return radius.to_px(mm_per_px)


def _name_of(task: ScoreTask) -> str:
    """Return the file name that a failure is listed under."""
    return task.path.name


SCORE = Each(_score_one, _name_of)
