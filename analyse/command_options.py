"""The options that `analyse` and `survey` share: how quadrats are laid and chance is simulated."""

from __future__ import annotations

from typing import Annotated

import typer

from analyse.plan import Trial

GRID, CHANCE = "Quadrats", "Simulation"

QuadratOption = Annotated[
    str | None,
    typer.Option(
        "--quadrat",
        help="Side of square quadrats, such as 10mm. Default: by rule, about 2 spots in each.",
        metavar="LENGTH",
        show_default=False,
        rich_help_panel=GRID,
    ),
]
GridOption = Annotated[
    str | None,
    typer.Option(
        "--grid",
        help="Divide the rectangle round the area into rows x columns, such as 5x5.",
        metavar="RxC",
        show_default=False,
        rich_help_panel=GRID,
    ),
]
RingsOption = Annotated[
    str | None,
    typer.Option(
        "--rings",
        help="Divide a dish into rings x sectors of equal area, such as 3x8.",
        metavar="RxS",
        show_default=False,
        rich_help_panel=GRID,
    ),
]
HolesOption = Annotated[
    str | None,
    typer.Option(
        "--holes",
        help="The plates are of an air sampler with so many holes: also give the positive-hole count"
        " (each row of a table of counts is one plate's filled holes).",
        metavar="N",
        show_default=False,
    ),
]
SeedOption = Annotated[
    str | None,
    typer.Option(
        "--seed",
        help="Seed of the simulations: the same seed gives the same results."
        f" Default: {Trial().seed}, or the recipe's.",
        metavar="N",
        show_default=False,
        rich_help_panel=CHANCE,
    ),
]
SimulationsOption = Annotated[
    str | None,
    typer.Option(
        "--simulations",
        help="Random patterns that each photograph is compared with."
        f" Default: {Trial().simulations}, or the recipe's.",
        metavar="N",
        show_default=False,
        rich_help_panel=CHANCE,
    ),
]
