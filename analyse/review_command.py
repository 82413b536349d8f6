"""The command that opens the review page, with its statistics."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from analyse.command_options import GridOption, QuadratOption, RingsOption
from analyse.plan import Trial, grid_from
from detect.command_options import spelled
from detect.errors import OptionWrong
from detect.gather import gather_sheets
from detect.readers import whole


def review(
    sheets: Annotated[
        Path,
        typer.Argument(
            help="A sheet (NAME.sheet.json, as detect writes it), or a folder of sheets.",
            metavar="SHEET|DIR",
            show_default=False,
        ),
    ],
    quadrat: QuadratOption = None,
    grid: GridOption = None,
    rings: RingsOption = None,
    port: Annotated[
        str | None,
        typer.Option(
            "--port",
            help="Port of this computer to use. Default: the one used last for the folder, or a"
            " free one.",
            metavar="N",
            show_default=False,
        ),
    ] = None,
    spot_check: Annotated[
        str | None,
        typer.Option(
            "--spot-check",
            help="Draw this many quadrats at random, to be marked without seeing the detections; then"
            " compare.",
            metavar="N",
            show_default=False,
        ),
    ] = None,
    seed: Annotated[
        str | None,
        typer.Option(
            "--seed",
            help=f"Seed of the draw of --spot-check. Default: {Trial().seed}.",
            metavar="N",
            show_default=False,
        ),
    ] = None,
    no_open: Annotated[
        bool, typer.Option("--no-open", help="Leave the browser closed; the address is printed.")
    ] = False,
) -> None:
    """Check spots by eye on a page: strike, place, move, and see what becomes of the verdict."""
    laid = grid_from({"quadrat": quadrat, "grid": grid, "rings": rings}, named=spelled)
    number = whole(port, "--port")
    if number is not None and not 0 <= number < 65536:
        raise OptionWrong(f"--port must be from 0 to 65535, not {number}; 0 is any free one.")
    drawn, own_seed = whole(spot_check, "--spot-check"), whole(seed, "--seed")
    if own_seed is not None and drawn is None:
        raise OptionWrong(f"--seed {own_seed} is for --spot-check; leave it out.")
    paths = gather_sheets([sheets])
    from analyse.panel import PanelOf  # these load what help can do without
    from detect.review.serving import serve

    checker = None
    if drawn is not None:
        from analyse.checking import CheckerOf
        from analyse.quadrat_draw import SpotCheckOptions

        chosen_seed = Trial().seed if own_seed is None else own_seed
        checker = CheckerOf(laid, SpotCheckOptions(quadrats=drawn, seed=chosen_seed))
    serve(
        paths,
        PanelOf(laid),
        port=number,
        open_page=not no_open,
        say=typer.echo,
        checker=checker,
    )
