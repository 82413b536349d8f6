"""The command that draws a spot check, and compares what a person counted with the detector."""

from __future__ import annotations

import getpass
import uuid
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from analyse.command_options import CHANCE, GridOption, QuadratOption, RingsOption
from analyse.plan import Trial, grid_from
from detect.command_options import OUTPUT, spelled
from detect.errors import OptionWrong, RequestWrong
from detect.files import make_folder, write_text_atomically
from detect.gather import gather_sheets
from detect.readers import whole
from detect.terminal import number_text, show_path, show_table

if TYPE_CHECKING:
    from analyse.grid_options import GridOptions
    from analyse.spot_check import SpotCheck
    from detect.review.record import Record
    from detect.spot_check import Checked

_EXPLAINED = (
    "95 % limits hold for rare and for clustered errors; the detector is trusted where both limits"
    " of the difference estimate lie within 10 % of its count and neither recall nor precision is"
    " below 90 %."
)


def spot_check(
    sheet: Annotated[
        Path,
        typer.Argument(
            help="A sheet (NAME.sheet.json, as detect writes it).",
            metavar="SHEET",
            show_default=False,
        ),
    ],
    draw: Annotated[
        str | None,
        typer.Option(
            "--draw",
            help="Draw this many quadrats at random, and write their list and their pictures.",
            metavar="N",
            show_default=False,
        ),
    ] = None,
    counts: Annotated[
        Path | None,
        typer.Option(
            "--counts",
            help="The list with its column count filled in: compare it with the detector.",
            metavar="CSV",
            show_default=False,
        ),
    ] = None,
    quadrat: QuadratOption = None,
    grid: GridOption = None,
    rings: RingsOption = None,
    seed: Annotated[
        str | None,
        typer.Option(
            "--seed",
            help=f"Seed of the draw. Default: {Trial().seed}.",
            metavar="N",
            show_default=False,
            rich_help_panel=CHANCE,
        ),
    ] = None,
    who: Annotated[
        str | None,
        typer.Option(
            "--who",
            help="Who counts. Default: the login name.",
            metavar="NAME",
            show_default=False,
        ),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option(
            "--out",
            help="Folder for the list and the pictures. Default: that of the sheet.",
            metavar="DIR",
            show_default=False,
            rich_help_panel=OUTPUT,
        ),
    ] = None,
) -> None:
    """Count some random quadrats by eye, and learn how many there are and whether to trust the rest."""
    laid = grid_from({"quadrat": quadrat, "grid": grid, "rings": rings}, named=spelled)
    number, drawn_by = whole(draw, "--draw"), whole(seed, "--seed")
    _check_options(number, counts, {"--seed": seed, "--quadrat": quadrat, "--grid": grid}, rings)
    paths = gather_sheets([sheet])
    if len(paths) != 1:
        raise RequestWrong(f"{sheet} holds {len(paths)} sheets; name one of them.")
    from detect.review.record import Record

    record = Record(paths[0])
    record.refresh()
    name = who or _login_name()
    if number is not None:
        _draw(record, laid, number, Trial().seed if drawn_by is None else drawn_by, name, out)
        return
    known = _known(record)
    if counts is not None:
        from analyse.hand_counts import read_hand_counts

        told = read_hand_counts(counts, known.draw)
        _amend(record, [_marks(known, each, count, name) for each, count in told.items()])
    _show(record)


def _check_options(
    number: int | None, counts: Path | None, laid: dict[str, str | None], rings: str | None
) -> None:
    """Refuse options that cannot apply together."""
    if number is not None and counts is not None:
        raise OptionWrong("--draw and --counts cannot apply together; draw first, then count.")
    for option, value in {**laid, "--rings": rings}.items():
        if number is None and value is not None:
            raise OptionWrong(
                f"{option} {value} is for drawing; give it together with --draw, or leave it out."
            )


def _draw(
    record: Record, laid: GridOptions, number: int, seed: int, who: str, out: Path | None
) -> None:
    """Draw, keep the draw in the log, and write the list and the pictures."""
    from analyse.blind_pictures import form_html
    from analyse.hand_counts import form_csv
    from analyse.quadrat_draw import SpotCheckOptions, draw_for_sheet
    from detect.outcome import photograph_of
    from detect.spot_check import latest_spot_check

    state = record.amended.state()
    draw = draw_for_sheet(state, laid, SpotCheckOptions(quadrats=number, seed=seed))
    known = latest_spot_check(record.amended.log, record.amended.active)
    if known is None or known.draw != draw:
        values = {"what": "spot_check_drawn", "draw": draw.as_dict()}
        _amend(record, [{"id": str(uuid.uuid4()), "who": who, **values}])
    folder = make_folder(record.path.parent if out is None else out)
    listed = folder / f"{state.stem}.spot_check.csv"
    write_text_atomically(listed, form_csv(draw, state.scale))
    typer.echo(
        f"Drawn: {number} of {sum(draw.sizes)} quadrats, seed {seed}. Count them without looking at"
        " the detections, fill in the column count, and give the table back with --counts."
    )
    show_path("List", listed)
    photograph = photograph_of(state, record.path.parent)
    if photograph is None:
        typer.echo(
            f"Note: {state.photograph.name} is not to be found, so there are no pictures.", err=True
        )
        return
    pictures = folder / f"{state.stem}.spot_check.html"
    write_text_atomically(pictures, form_html(state, draw, photograph))
    show_path("Pictures", pictures)


def _known(record: Record) -> Checked:
    """Return the spot check that was drawn."""
    from detect.spot_check import latest_spot_check

    known = latest_spot_check(record.amended.log, record.amended.active)
    if known is None:
        raise RequestWrong(
            f"No spot check was drawn for {record.path.name}; draw one with --draw 10 first."
        )
    return known


def _marks(known: Checked, quadrat: int, count: int, who: str) -> dict[str, Any]:
    """Return what was counted in one quadrat, as a change for the log."""
    return {
        "id": str(uuid.uuid4()),
        "who": who,
        "what": "spot_check_marked",
        "of": known.id,
        "quadrat": quadrat,
        "count": count,
    }


def _amend(record: Record, asked: list[dict[str, Any]]) -> None:
    """Write changes to the log, or say why that cannot be."""
    answer = record.amend(asked)
    if answer.trouble is not None:
        raise answer.trouble
    if answer.refused:
        raise RequestWrong(answer.refused[0].message)


def _show(record: Record) -> None:
    """Show what the spot check says."""
    from analyse.spot_check import spot_check_of

    amended = record.amended
    check = spot_check_of(amended.sheet, amended.log)
    if check is None:
        known = _known(record)
        left = len(known.draw.quadrats) - len(known.marked)
        raise RequestWrong(
            f"{left} of the {len(known.draw.quadrats)} quadrats drawn for {record.path.name} are not"
            " counted yet; count them on the page, or give the filled-in list with --counts."
        )
    show_table(("estimate", "value", "95 % from", "to"), _lines(check))
    typer.echo(check.sentence)
    typer.echo(_EXPLAINED)


def _lines(check: SpotCheck) -> list[tuple[str, str, str, str]]:
    """Return the estimates as lines of a table."""
    known = {
        "objects, difference": check.total,
        "objects, ratio": check.by_ratio,
        "objects per cm2": check.density,
        "recall": check.recall,
        "precision": check.precision,
    }
    return [
        (name, number_text(each.value), number_text(each.low), number_text(each.high))
        for name, each in known.items()
        if each is not None
    ]


def _login_name() -> str:
    """Return the name a person is logged in under."""
    try:
        return getpass.getuser()
    except (OSError, KeyError, ImportError):
        return "somebody"
