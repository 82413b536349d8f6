"""What `strewn analyse` is given: sheets with their photographs, tables of points, tables of counts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from shapely.geometry.base import BaseGeometry

from analyse.analysis import Analysed, analyse_sheet, analyse_table
from analyse.count_table import read_counts
from analyse.errors import AnalyseError
from analyse.grid_options import GridOptions
from analyse.plan import Trial
from analyse.point_table import read_points
from analyse.positive_holes import MOST_HOLES
from analyse.region import TableUnit, area_from_option
from detect.amendments import amendments_path, read_amendments
from detect.batch import Each
from detect.errors import DetectError, OptionWrong, RequestWrong
from detect.gather import gather_sheets
from detect.outcome import photograph_of
from detect.sheet import read_sheet

_MANY = 4  # files from which starting a process for each core is worth its second or two


@dataclass(frozen=True, slots=True)
class Input:
    """One file to be analysed.

    Parameters
    ----------
    path : Path
        A sheet, a table of points, or a table of counts.
    grid : GridOptions
        How to lay the quadrats.
    trial : Trial
        Seed and number of simulations.
    area : shapely geometry or None
        Study area of a table of points, in millimetres.
    unit : {"mm", "cm", "m"}
        Unit of a table of points.
    counts : bool
        Whether it is a table of counts.
    transect : bool
        Whether its counts stand in the order of a line of quadrats.
    processes : int
        How many share its simulations.
    holes : int or None
        Of the sampler's plate that its counts, or its points together, are of.
    """

    path: Path
    grid: GridOptions
    trial: Trial
    area: BaseGeometry | None = None
    unit: TableUnit = "mm"
    counts: bool = False
    transect: bool = False
    processes: int = 1
    holes: int | None = None


@dataclass(frozen=True, slots=True)
class Given:
    """What was given on the command line, before it is known which option is for which file.

    Parameters
    ----------
    paths : sequence of Path
        Sheets, folders of sheets, tables of points.
    counts : sequence of Path
        Tables of counts.
    area : str or None
        Study area of the tables of points.
    unit : str or None
        Unit of the tables of points and of `area`.
    grid : GridOptions
        How to lay the quadrats.
    trial : Trial
        Seed and number of simulations.
    transect : bool
        Whether the tables of counts are transects.
    holes : int or None
        Of the sampler's plates that everything given is of.
    """

    paths: Sequence[Path]
    counts: Sequence[Path] = ()
    area: str | None = None
    unit: str | None = None
    grid: GridOptions = field(default_factory=GridOptions)
    trial: Trial = field(default_factory=Trial)
    transect: bool = False
    holes: int | None = None


def gather_inputs(given: Given) -> list[Input]:
    """List what is to be analysed: sheets, then tables of points, then tables of counts.

    Parameters
    ----------
    given : Given
        Paths and options as typed.

    Returns
    -------
    list of Input

    Raises
    ------
    RequestWrong
        If nothing is given, a path does not exist, two files have one name, or an option cannot
        apply to any of them.
    AnalyseError
        If the area of the tables cannot be read.
    """
    tables = [path for path in given.paths if path.suffix.lower() == ".csv"]
    others = [path for path in given.paths if path.suffix.lower() != ".csv"]
    for path in (*tables, *given.counts):
        if not path.is_file():
            raise RequestWrong(f"{path} does not exist; check the path.")
    _check_options(given, tables, others)
    area, unit = None, _table_unit(given.unit)
    if given.area is not None:
        area = area_from_option(given.area, unit)
    chosen = (given.grid, given.trial)
    inputs = [Input(path, *chosen) for path in gather_sheets(others)]
    inputs += [Input(path, *chosen, area, unit) for path in tables]
    inputs += [Input(path, *chosen, counts=True, transect=given.transect) for path in given.counts]
    _check_names(inputs)
    return [replace(each, holes=given.holes) for each in inputs]


def shared_out(inputs: Sequence[Input], cores: int) -> tuple[list[Input], int | None]:
    """Share cores among files: few are done one after another on all of them, many one on each.

    Parameters
    ----------
    inputs : sequence of Input
        What is to be analysed.
    cores : int
        To use in all.

    Returns
    -------
    (inputs, workers)
        With the processes each may use; and what `detect.batch.do_each` takes for its workers.

    Raises
    ------
    RequestWrong
        If there is no core.
    """
    if cores < 1:
        raise RequestWrong(f"--workers must be 1 or more, not {cores}.")
    if len(inputs) < _MANY:
        return [replace(each, processes=cores) for each in inputs], None
    return list(inputs), cores


def analyse_input(each: Input) -> Analysed:
    """Read and analyse one file."""
    if each.counts:
        table = read_counts(each.path, side=each.grid.side, transect=each.transect)
        return analyse_table(table, grid=each.grid, trial=each.trial, holes=each.holes)
    if each.area is not None:
        points = read_points(each.path, area=each.area, unit=each.unit)
        return analyse_table(
            points, grid=each.grid, trial=each.trial, workers=each.processes, holes=each.holes
        )
    sheet = read_sheet(each.path)
    amendments = read_amendments(amendments_path(each.path))
    photograph = photograph_of(sheet, each.path.parent)
    return analyse_sheet(
        sheet,
        amendments,
        photograph,
        grid=each.grid,
        trial=each.trial,
        workers=each.processes,
        holes=each.holes,
    )


def _table_unit(text: str | None) -> TableUnit:
    """Read the unit of tables, millimetres unless said."""
    match text:
        case None | "mm":
            return "mm"
        case "cm":
            return "cm"
        case "m":
            return "m"
    raise OptionWrong(f"--unit must be mm, cm or m, not {text!r}.")


def _check_options(given: Given, tables: Sequence[Path], others: Sequence[Path]) -> None:
    """Refuse options that apply to nothing given, and tables that lack theirs."""
    if not (tables or others or given.counts):
        raise RequestWrong("Nothing to analyse; name sheets, their folder, or tables (CSV).")
    if tables and given.area is None:
        raise OptionWrong(
            f"{tables[0].name} is a table of points, which needs its study area; give --area"
            " X0,Y0,X1,Y1 or a GeoJSON file (for a table of counts, use --counts)."
        )
    for name, value in (("--area", given.area), ("--unit", given.unit)):
        if value is not None and not tables:
            raise OptionWrong(
                f"{name} {value} is for tables of points; a sheet has its own, and counts have"
                " none. Leave it out."
            )
    if given.holes is not None and not 1 <= given.holes <= MOST_HOLES:
        raise OptionWrong(f"--holes must be from 1 to {MOST_HOLES}, not {given.holes}.")
    if given.transect and not given.counts:
        raise OptionWrong("--transect is for tables of counts; give them with --counts.")
    for name, way in (("--grid", given.grid.shape), ("--rings", given.grid.rings)):
        if way is not None and given.counts:
            raise OptionWrong(
                f"{name} {way[0]}x{way[1]} cannot apply to a table of counts, whose quadrats are"
                " laid already; leave it out."
            )


def _check_names(inputs: Sequence[Input]) -> None:
    """Refuse two files whose rows in the results could not be told apart."""
    seen: dict[str, Path] = {}
    for each in inputs:
        other = seen.setdefault(each.path.name, each.path)
        if other is not each.path:
            raise RequestWrong(
                f"{other} and {each.path} have one name ({each.path.name}); rename one, or analyse"
                " them one at a time with different folders for --out."
            )


def name_of(each: Input) -> str:
    """Return the file name that a failure is listed under."""
    return each.path.name


ANALYSE = Each(analyse_input, name_of, (DetectError, AnalyseError))
