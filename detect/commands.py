"""The command that finds spots."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated

import typer

from detect.batch import Each, Failure, Progress, do_each, workers_for
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
    LearnOption,
    LearnUnchangedOption,
    LensOption,
    LineLengthOption,
    LineOption,
    MmPerPixelOption,
    OutOption,
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
from detect.errors import OptionWrong
from detect.files import make_folder, write_text_atomically
from detect.gather import gather_photographs
from detect.lens import Lens
from detect.outcome import write_detection
from detect.overlay import DOUBTFUL
from detect.readers import whole
from detect.requests import DetectRequest, detect_photograph, parse_request, tool_version
from detect.reviewed import Reviewed, gather_reviewed
from detect.sheet import Sheet
from detect.taught import Taught, told
from detect.taught_file import TAUGHT_NAME, taught_text
from detect.terminal import (
    exit_if_failed,
    progress_on_terminal,
    quoted,
    show_failures,
    show_path,
    show_table,
    tiles_on_terminal,
)

_MOST_NOTES = 6  # on the terminal


def detect(
    photographs: Annotated[
        list[Path],
        typer.Argument(
            help="Photographs, or folders of them.", metavar="PHOTO", show_default=False
        ),
    ],
    kind: KindOption = None,
    diameter: DiameterOption = None,
    colour: ColourOption = None,
    polarity: PolarityOption = None,
    highest_doubt: HighestDoubtOption = None,
    learn: LearnOption = None,
    learn_unchanged: LearnUnchangedOption = False,
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
    out: OutOption = OUT,
    keep_amendments: KeepOption = False,
    workers: WorkersOption = None,
) -> None:
    """Find the spots of photographs: colonies, seedlings, lesions."""
    if learn_unchanged and learn is None:
        raise OptionWrong("--learn-unchanged needs --learn DIR beside it; give both.")
    reviewed = None if learn is None else _reviewed(learn, learn_unchanged, kind, taught)
    request = parse_request(
        with_units(
            {
                "kind": kind if reviewed is None else reviewed[0].options.kind,
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
            }
        ),
        named=spelled,
    )
    paths = gather_photographs(photographs)
    make_folder(out)
    if reviewed is not None:
        request = replace(request, taught=_learned(reviewed, out))
    _show_overruled(request)
    tasks = [DetectTask(path, request, out, keep_amendments) for path in paths]
    # Of one photograph the rounds of planted objects or its tiles are shown, of many the photographs.
    rounds = 0 if request.planted is None or len(tasks) > 1 else request.planted.rounds
    with (
        progress_on_terminal("Planting" if rounds else "Detecting", rounds or len(tasks)) as bar,
        tiles_on_terminal("Detecting in tiles") as tiles,
    ):
        if len(tasks) == 1:
            tasks, bar = [replace(tasks[0], progress=bar if rounds else tiles)], None
        cores = workers_for(whole(workers, "--workers"))
        results = do_each(DETECT, tasks, workers=cores, progress=bar)
    done = [result for result in results if not isinstance(result, Failure)]
    failures = [result for result in results if isinstance(result, Failure)]
    show_table(("photograph", "spots", "doubtful", "scale"), [line.cells() for line in done])
    if done:
        write_lens(request.scale.lens, out)
        _show_notes(done)
        show_path("Sheets, points and overlays", out)
        folder = quoted(out)
        typer.echo(
            f"Look at the overlays, then test the pattern: strewn analyse {folder} --out {folder}"
        )
    show_failures(failures)
    exit_if_failed(failures, len(results))


def _reviewed(
    folder: Path, unchanged: bool, kind: str | None, taught: str | None
) -> list[Reviewed]:
    """Read the sheets to learn from, and say what is left out."""
    if taught is not None:
        raise OptionWrong("--learn and --taught both say what was learned; keep one of them.")
    reviewed, left_out = gather_reviewed(folder, unchanged=unchanged)
    own = reviewed[0].options.kind
    if kind not in (None, own):
        raise OptionWrong(
            f"--kind {kind} is asked for, but the sheets in {folder} are of {own};"
            " leave --kind out, or learn from sheets of that kind."
        )
    if left_out:
        sheets = "1 sheet" if left_out == 1 else f"{left_out} sheets"
        typer.echo(f"Nothing is learned from {sheets} that nobody has marked as checked.", err=True)
    return reviewed


def write_lens(lens: Lens | None, folder: Path) -> None:
    """Write the lens that was used, if any, to be given the next time."""
    if lens is not None:
        write_text_atomically(folder / "lens.toml", lens.as_toml())


def _learned(reviewed: list[Reviewed], out: Path) -> Taught:
    """Learn, write down what was learned, and say it."""
    from detect.learning import learn, looks_at_most  # loads scipy, which help can do without

    with progress_on_terminal("Learning", looks_at_most(len(reviewed))) as progress:
        taught = learn(reviewed, tool_version=tool_version(), progress=progress)
    path = out / TAUGHT_NAME
    write_text_atomically(path, taught_text(taught))
    typer.echo(told(taught))
    show_path("What was learned", path)
    return taught


def _show_overruled(request: DetectRequest) -> None:
    """Say on stderr which given options win over what was learned."""
    if request.taught is None:
        return
    for name in request.taught.overruled(request.options):
        typer.echo(f"{spelled(name)} as given is used instead of what was learned.", err=True)


def _show_notes(done: list[DetectLine]) -> None:
    """Say on stderr what is to be known of single photographs; of many, that the sheets say it."""
    notes = [f"{line.name}: {note}" for line in done for note in line.notes]
    for note in notes[:_MOST_NOTES]:
        typer.echo(f"Note: {note}", err=True)
    if len(notes) > _MOST_NOTES:
        more = len(notes) - _MOST_NOTES
        typer.echo(f"Note: {more} more such note{'s' * (more > 1)} in the sheets.", err=True)


@dataclass(frozen=True, slots=True)
class DetectTask:
    """One photograph to be detected, and where its results go."""

    path: Path
    request: DetectRequest
    folder: Path
    keep_amendments: bool
    progress: Progress | None = None  # of one photograph alone, for it is not sent to others


@dataclass(frozen=True, slots=True)
class DetectLine:
    """What the table says about one photograph."""

    name: str
    spots: int
    doubtful: int
    scale: str
    notes: tuple[str, ...] = ()  # on its file, what was taught, and its dish

    @classmethod
    def of(cls, state: Sheet) -> DetectLine:
        """Return the line of a sheet with its hand edits applied."""
        counted = state.spots.where(state.spots.counted)
        doubtful = int((counted.doubt > DOUBTFUL).sum())
        notes = (*state.settings.get("notes", ()), *state.settings.get("dish", ()))
        return cls(state.photograph.name, len(counted), doubtful, scale_text(state), notes)

    def cells(self) -> tuple[str, str, str, str]:
        """Return the cells of its line."""
        return self.name, str(self.spots), str(self.doubtful), self.scale


def scale_text(sheet: Sheet) -> str:
    """Return the scale in the middle of a sheet's area, and its source, for a table."""
    if sheet.scale is None:
        return "none: in pixels only"
    middle = sheet.area.polygon.centroid
    mm_per_px = float(sheet.scale.mm_per_px([[middle.x, middle.y]])[0])
    return f"{mm_per_px:.4g} mm per pixel ({sheet.scale.source})"


def _detect_one(task: DetectTask) -> DetectLine:
    """Detect one photograph and write its results."""
    photograph, sheet = detect_photograph(task.path, task.request, progress=task.progress)
    outcome = write_detection(photograph, sheet, task.folder, keep_amendments=task.keep_amendments)
    return DetectLine.of(outcome.state)


def _name_of(task: DetectTask) -> str:
    """Return the file name that a failure is listed under."""
    return task.path.name


DETECT = Each(_detect_one, _name_of)
