"""The one command line: `strewn detect`, `review`, `analyse`, `survey` and `score`."""

from __future__ import annotations

import errno
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer
from typer.core import TyperGroup

from analyse import review_command, spot_check_command
from analyse.command_options import (
    GridOption,
    HolesOption,
    QuadratOption,
    RingsOption,
    SeedOption,
    SimulationsOption,
)
from analyse.errors import AnalyseError
from analyse.plan import RECIPE_NAME, Plan, Trial, grid_from, plan_from
from detect import commands, score_command
from detect.batch import Failure, do_each, workers_for
from detect.command_options import (
    OUT,
    AreaOption,
    ColourOption,
    CornersOption,
    CutDishOption,
    DiameterOption,
    DishOption,
    FocalLengthOption,
    HeightOption,
    HighestDoubtOption,
    InsetOption,
    KeepOption,
    KindOption,
    LensOption,
    LineLengthOption,
    LineOption,
    MmPerPixelOption,
    OutOption,
    PlainCommand,
    PlainHelp,
    PlantedOption,
    PlotOption,
    PolarityOption,
    RulerOption,
    ScaleUncertaintyOption,
    SensorWidthOption,
    TaughtOption,
    WorkersOption,
    spelled,
    with_units,
)
from detect.errors import DetectError, OptionWrong, PhotographFailed, RequestWrong
from detect.files import make_folder
from detect.gather import gather_photographs
from detect.readers import whole
from detect.requests import tool_version
from detect.terminal import exit_if_failed, progress_on_terminal, show_failures, show_path

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analyse.analysis import Analysed
    from analyse.recipe import Recipe

TABLES, RECIPE = "Tables", "Recipe"


class PlainGroup(PlainHelp, TyperGroup):
    """Commands whose troubles are told in a sentence; only a bug keeps its traceback."""

    def invoke(self, ctx: Any) -> Any:
        """Run a command, and end with 2 for a wrong request, 1 for a failed photograph."""
        try:
            return super().invoke(ctx)
        except PhotographFailed as trouble:
            _end(str(trouble), 1)
        except (DetectError, AnalyseError) as trouble:
            _end(str(trouble), 2)
        except MemoryError:
            _end("This does not fit into memory; use fewer --workers or smaller photographs.", 1)
        except OSError as trouble:
            if trouble.errno != errno.ENOSPC:
                raise
            _end("The disk is full; make room, or name another folder for --out.", 2)
        except KeyboardInterrupt:
            _end("Interrupted. What was finished is kept.", 130)


def _end(sentence: str, code: int) -> None:
    """Say what is wrong and end the command."""
    typer.echo(f"Error: {sentence}" if code != 130 else sentence, err=True)
    raise typer.Exit(code)


app = typer.Typer(
    cls=PlainGroup,
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    help="From photographs of dishes, plots and leaves to checked counts and a verdict on whether"
    " the spots lie at random.",
)
app.command("detect", cls=PlainCommand)(commands.detect)


def _show_version(wanted: bool) -> None:
    """Print the version and end."""
    if wanted:
        typer.echo(f"strewn {tool_version()}")
        raise typer.Exit


@app.callback()
def _whole(
    version: Annotated[
        bool,
        typer.Option("--version", help="Show the version.", callback=_show_version, is_eager=True),
    ] = False,
) -> None:
    """Take the options that stand before a command."""


@app.command("analyse", cls=PlainCommand)
def analyse(
    inputs: Annotated[
        list[Path] | None,
        typer.Argument(
            help="Sheets (NAME.sheet.json, as detect writes them), folders of sheets, or tables of"
            " points with the columns x and y.",
            metavar="SHEET|DIR|CSV",
            show_default=False,
        ),
    ] = None,
    counts: Annotated[
        list[Path] | None,
        typer.Option(
            "--counts",
            help="A table of counts: a column count (beside a column frequency: one row per count and"
            " how many quadrats held it), or a bare rectangle of whole numbers.",
            metavar="CSV",
            show_default=False,
            rich_help_panel=TABLES,
        ),
    ] = None,
    area: Annotated[
        str | None,
        typer.Option(
            "--area",
            help="Study area of the tables of points: a rectangle, or a GeoJSON file.",
            metavar="X0,Y0,X1,Y1|FILE",
            show_default=False,
            rich_help_panel=TABLES,
        ),
    ] = None,
    unit: Annotated[
        str | None,
        typer.Option(
            "--unit",
            help="Unit of the tables of points and of --area. Default: mm.",
            metavar="mm|cm|m",
            show_default=False,
            rich_help_panel=TABLES,
        ),
    ] = None,
    transect: Annotated[
        bool,
        typer.Option(
            "--transect",
            help="The rows of a column count are contiguous quadrats, in their order along a line.",
            rich_help_panel=TABLES,
        ),
    ] = False,
    holes: HolesOption = None,
    quadrat: QuadratOption = None,
    grid: GridOption = None,
    rings: RingsOption = None,
    seed: SeedOption = None,
    simulations: SimulationsOption = None,
    out: OutOption = OUT,
    workers: WorkersOption = None,
) -> None:
    """Test whether spots lie at random, clumped or evenly: in quadrats, and at every distance."""
    from analyse.inputs import ANALYSE, Given, gather_inputs, shared_out

    laid = grid_from({"quadrat": quadrat, "grid": grid, "rings": rings}, named=spelled)
    trial = _with_chance(Trial(), seed, simulations)
    plate = whole(holes, "--holes")
    given = gather_inputs(
        Given(inputs or [], counts or [], area, unit, laid, trial, transect, plate)
    )
    tasks, processes = shared_out(given, workers_for(whole(workers, "--workers")))
    make_folder(out)
    with progress_on_terminal("Analysing", len(tasks)) as progress:
        results = do_each(ANALYSE, tasks, workers=processes, progress=progress)
    _finish(results, out, trial)


@app.command("survey", cls=PlainCommand)
def survey(
    folder: Annotated[
        Path,
        typer.Argument(help="Folder of photographs.", metavar="FOLDER", show_default=False),
    ],
    recipe: Annotated[
        Path | None,
        typer.Option(
            "--recipe",
            help="How each photograph is treated, instead of the options below."
            f" Default: {RECIPE_NAME} in the folder, if there is one.",
            metavar="FILE",
            show_default=False,
            rich_help_panel=RECIPE,
        ),
    ] = None,
    kind: KindOption = None,
    diameter: DiameterOption = None,
    colour: ColourOption = None,
    polarity: PolarityOption = None,
    highest_doubt: HighestDoubtOption = None,
    taught: TaughtOption = None,
    mm_per_pixel: MmPerPixelOption = None,
    dish_mm: DishOption = None,
    line: LineOption = None,
    line_mm: LineLengthOption = None,
    ruler_mm: RulerOption = None,
    corners: CornersOption = None,
    plot: PlotOption = None,
    height: HeightOption = None,
    focal_length: FocalLengthOption = None,
    sensor_width: SensorWidthOption = None,
    lens: LensOption = None,
    scale_uncertainty: ScaleUncertaintyOption = None,
    area: AreaOption = None,
    inset: InsetOption = None,
    cut_dish: CutDishOption = None,
    planted: PlantedOption = None,
    quadrat: QuadratOption = None,
    grid: GridOption = None,
    rings: RingsOption = None,
    seed: SeedOption = None,
    simulations: SimulationsOption = None,
    out: OutOption = OUT,
    keep_amendments: KeepOption = False,
    workers: WorkersOption = None,
) -> None:
    """Detect and test all photographs of a folder, by its recipe or by one set of options."""
    from analyse.survey import survey as survey_photographs

    typed = {
        "kind": kind,
        "diameter": diameter,
        "colour": colour,
        "polarity": polarity,
        "highest_doubt": highest_doubt,
        "taught": taught,
        "mm_per_pixel": mm_per_pixel,
        "dish": dish_mm,
        "line": line,
        "line_length": line_mm,
        "ruler": ruler_mm,
        "corners": corners,
        "plot": plot,
        "height": height,
        "focal_length": focal_length,
        "sensor_width": sensor_width,
        "lens": lens,
        "scale_uncertainty": scale_uncertainty,
        "area": area,
        "inset": inset,
        "cut_dish": cut_dish,
        "planted": planted,
        "quadrat": quadrat,
        "grid": grid,
        "rings": rings,
    }
    if folder.is_file():
        raise RequestWrong(
            f"{folder} is a file, and a survey takes a folder of photographs;"
            " give its folder, or use detect for one photograph."
        )
    if not folder.is_dir():
        raise RequestWrong(f"There is no folder {folder}; check the path.")
    paths = gather_photographs([folder])
    read = _recipe(folder, recipe, typed)
    if read is None:
        plan = plan_from(with_units(typed), named=spelled)
        plans: dict[str, Plan | Failure] = {path.name: plan for path in paths}
    else:
        plans = read.plans(path.name for path in paths)
    trial = _with_chance(Trial() if read is None else read.trial, seed, simulations)
    make_folder(out)
    with progress_on_terminal("Surveying", len(paths)) as progress:
        results = survey_photographs(
            paths,
            plans,
            out,
            trial=trial,
            keep_amendments=keep_amendments,
            workers=workers_for(whole(workers, "--workers")),
            progress=progress,
        )
    lenses = {
        own.request.scale.lens
        for path, result in zip(paths, results, strict=True)
        if isinstance(own := plans[path.name], Plan) and not isinstance(result, Failure)
    }
    if len(lenses) == 1:
        commands.write_lens(lenses.pop(), out)
    _finish(results, out, trial)


app.command("score", cls=PlainCommand)(score_command.score)

app.command("review", cls=PlainCommand)(review_command.review)

app.command("spot-check", cls=PlainCommand)(spot_check_command.spot_check)


def _recipe(folder: Path, recipe: Path | None, typed: dict[str, str | None]) -> Recipe | None:
    """Read the recipe that was named, or else the one in the folder, if any."""
    from analyse.recipe import read_recipe

    path = recipe
    if path is None and (folder / RECIPE_NAME).is_file():
        path = folder / RECIPE_NAME
    if path is None:
        return None
    given = [spelled(key) for key, value in typed.items() if value is not None]
    if given:
        raise OptionWrong(
            f"{given[0]} cannot apply beside the recipe {path}, which says how photographs are"
            " treated; write it there."
        )
    return read_recipe(path)


def _with_chance(trial: Trial, seed: str | None, simulations: str | None) -> Trial:
    """Let the command line's seed and number of simulations win."""
    own_seed, own_simulations = whole(seed, "--seed"), whole(simulations, "--simulations")
    return Trial(
        trial.title,
        trial.seed if own_seed is None else own_seed,
        trial.simulations if own_simulations is None else own_simulations,
    )


def _finish(results: Sequence[Analysed | Failure], out: Path, trial: Trial) -> None:
    """Write the files, show the table and the troubles, and end with the right code."""
    from analyse.analysis import write_results
    from analyse.lines import show_findings

    done = [result for result in results if not isinstance(result, Failure)]
    failures = [result for result in results if isinstance(result, Failure)]
    if done:
        report = write_results(done, failures, out, trial)
        show_findings([result.findings for result in done])
        show_path("Tables", out)
        show_path("Report", report)
    show_failures(failures)
    exit_if_failed(failures, len(results))


def main() -> None:
    """Run the command line."""
    for stream in (sys.stdout, sys.stderr):
        # A file name may hold what the terminal cannot show; that is no reason to stop.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="backslashreplace")
    app()
