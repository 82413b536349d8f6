"""The options that several commands share, each written down once."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any, get_args

import typer
from typer.core import TyperCommand

from detect.contrast import Colour, Polarity
from detect.flight import HEIGHT_UNCERTAINTY
from detect.lengths import parse_length
from detect.planted import PlantedOptions
from detect.readers import AreaWord, CutDish, MarkKind
from detect.wanted import DetectOptions, Kind

WHAT, SCALE, AREA, OUTPUT = "What to find", "Scale", "Study area", "Output"
TRUST, LEARNING = "What is missed", "Learning from corrections"
OUT = Path("strewn-out")
_DEFAULTS = DetectOptions()
_SPELLED = {"dish": "--dish-mm", "line_length": "--line-mm", "ruler": "--ruler-mm"}


def _option(name: str, panel: str, text: str, metavar: str, default: Any = None) -> Any:
    """Return an option that is None unless given; `default` is what the help says."""
    text = text if default is None else f"{text} Default: {default}."
    return typer.Option(name, help=text, metavar=metavar, show_default=False, rich_help_panel=panel)


def _words(choices: Any) -> str:
    """Return the choices of an option as a phrase."""
    *most, last = get_args(choices)
    return f"{', '.join(most)} or {last}"


KindOption = Annotated[
    str | None,
    _option("--kind", WHAT, f"What the objects are: {_words(Kind)}.", "KIND", _DEFAULTS.kind),
]
DiameterOption = Annotated[
    str | None,
    _option(
        "--diameter",
        WHAT,
        "Smallest and largest diameter with a unit, such as 1-6mm or 12-80px.",
        "MIN-MAX",
        "by kind, or learned",
    ),
]
ColourOption = Annotated[
    str | None,
    _option("--colour", WHAT, f"Their colour: {_words(Colour)}.", "COLOUR", _DEFAULTS.colour),
]
PolarityOption = Annotated[
    str | None,
    _option(
        "--polarity",
        WHAT,
        f"Whether they are darker or brighter than the ground: {_words(Polarity)}.",
        "SIDE",
        _DEFAULTS.polarity,
    ),
]
HighestDoubtOption = Annotated[
    str | None,
    _option(
        "--highest-doubt",
        WHAT,
        "Leave out what is more doubtful than this: 0 is surely real, 1 surely false.",
        "0..1",
        "by kind",
    ),
]
LearnUnchangedOption = Annotated[
    bool,
    typer.Option(
        "--learn-unchanged",
        help="Learn from the sheets not marked as checked as well: they were looked at and are right as they stand.",
        rich_help_panel=LEARNING,
    ),
]
TaughtOption = Annotated[
    str | None,
    _option(
        "--taught",
        LEARNING,
        "Detect as an earlier --learn taught; other options given here win over it.",
        "FILE",
    ),
]
LearnOption = Annotated[
    Path | None,
    typer.Option(
        "--learn",
        help="Learn first from the sheets in this folder that a person has corrected.",
        metavar="DIR",
        show_default=False,
        rich_help_panel=LEARNING,
    ),
]
MmPerPixelOption = Annotated[
    str | None, _option("--mm-per-pixel", SCALE, "Millimetres per pixel.", "NUMBER")
]
DishOption = Annotated[
    str | None,
    _option("--dish-mm", SCALE, "Inner diameter of the dish in the picture, in mm.", "NUMBER"),
]
LineOption = Annotated[
    str | None,
    _option("--line", SCALE, "Both ends of a known length, in pixels.", "X1,Y1,X2,Y2"),
]
LineLengthOption = Annotated[
    str | None, _option("--line-mm", SCALE, "True length of that line, in mm.", "NUMBER")
]
RulerOption = Annotated[
    str | None,
    _option(
        "--ruler-mm", SCALE, "Length of a banded bar to be found in the picture, in mm.", "NUMBER"
    ),
]
CornersOption = Annotated[
    str | None,
    _option(
        "--corners",
        SCALE,
        "Corners of a known rectangle in pixels (top left, top right, bottom right, bottom left);"
        f" or {' or '.join(get_args(MarkKind))}, to be found there.",
        "X1,Y1,...|MARKS",
    ),
]
PlotOption = Annotated[
    str | None,
    _option("--plot", SCALE, "Width and height of that rectangle, such as 1000x750mm.", "WxH"),
]
HeightOption = Annotated[
    str | None,
    _option(
        "--height", SCALE, "Height of a camera that looked straight down, such as 30m.", "LENGTH"
    ),
]
FocalLengthOption = Annotated[
    str | None,
    _option("--focal-length", SCALE, "True focal length of its lens, such as 8.8mm.", "LENGTH"),
]
SensorWidthOption = Annotated[
    str | None,
    _option("--sensor-width", SCALE, "Longer side of its sensor, such as 13.2mm.", "LENGTH"),
]
LensOption = Annotated[
    str | None,
    _option(
        "--lens",
        SCALE,
        "Camera's lens: lens.toml, or a photograph of a chessboard by it; better a folder of several.",
        "FILE|DIR",
    ),
]
ScaleUncertaintyOption = Annotated[
    str | None,
    _option(
        "--scale-uncertainty",
        SCALE,
        "Standard uncertainty of the known length, such as 1%.",
        "PERCENT",
        f"{100 * HEIGHT_UNCERTAINTY:g}% with --height, else 0%",
    ),
]
AreaOption = Annotated[
    str | None,
    _option(
        "--area",
        AREA,
        f"Where objects count: {_words(AreaWord)}, or a GeoJSON file with a polygon in pixels, or on"
        " the raster's own map.",
        "WHERE",
        "dish with --dish-mm, plot with --corners, else frame",
    ),
]
InsetOption = Annotated[
    str | None,
    _option("--inset", AREA, "Step in from the edge of the area, such as 1mm or 20px.", "LENGTH"),
]
CutDishOption = Annotated[
    str | None,
    _option(
        "--cut-dish",
        AREA,
        f"What to do with a dish that the frame cuts: {_words(CutDish)}.",
        "WHAT",
        "refuse",
    ),
]
OutOption = Annotated[
    Path,
    typer.Option(
        "--out",
        help=f"Folder for the results. Default: {OUT}.",
        metavar="DIR",
        show_default=False,
        rich_help_panel=OUTPUT,
    ),
]
WorkersOption = Annotated[
    str | None,
    _option(
        "--workers", OUTPUT, "Processor cores to use, a photograph on each.", "N", "all, 8 at most"
    ),
]
KeepOption = Annotated[
    bool,
    typer.Option(
        "--keep-amendments",
        help="Carry hand edits over to the new detection instead of refusing it.",
        rich_help_panel=OUTPUT,
    ),
]


PlantedOption = Annotated[
    str | None,
    _option(
        "--planted",
        TRUST,
        "Set copies of clear spots into the photograph and see which are found again, in N rounds"
        f" ({PlantedOptions().rounds} unless said), each as long as a detection.",
        "[N]",
    ),
]


class PlainHelp:
    """Mixed into a command, it keeps the names of types (<bool>, <list[Path]>) out of the help."""

    def get_params(self, ctx: Any) -> list[Any]:
        """Return the options and arguments; what each takes is said by its own name alone."""
        params: list[Any] = super().get_params(ctx)  # type: ignore[misc]  # of the command
        for param in params:
            param.display_type = _no_type
        return params


class PlainCommand(PlainHelp, TyperCommand):
    """A command with plain help, in which --planted may stand without its number."""

    def parse_args(self, ctx: Any, args: list[str]) -> list[str]:
        """Read the words of a command line."""
        read: list[str] = super().parse_args(ctx, with_rounds(args))
        return read


def _no_type(*_unnamed: Any, **_named: Any) -> str:
    """Say nothing about the type of a parameter."""
    return ""


def with_rounds(words: list[str]) -> list[str]:
    """Return the words of a command line with a bare --planted given its usual number.

    Examples
    --------
    >>> with_rounds(["--planted", "dish.jpg"]), with_rounds(["--planted", "5", "dish.jpg"])
    (['--planted=8', 'dish.jpg'], ['--planted', '5', 'dish.jpg'])
    """
    usual = f"--planted={PlantedOptions().rounds}"
    following = [*words[1:], ""]
    return [
        usual if word == "--planted" and not _is_rounds(after) else word
        for word, after in zip(words, following, strict=True)
    ]


def _is_rounds(word: str) -> bool:
    """Whether a word is meant as a number of rounds: a number, or a bare word that is no file."""
    path = Path(word)
    file = path.suffix and not path.suffix[1:].isdigit()
    bare = word not in ("", ".", "..") and not word.startswith("-") and path.name == word
    return word.lstrip("+-").isdigit() or bool(bare and not file and not path.exists())


def spelled(key: str) -> str:
    """Return the option that a recipe's key is called on the command line."""
    return _SPELLED.get(key, f"--{key.replace('_', '-')}")


def with_units(values: dict[str, str | None]) -> dict[str, Any]:
    """Read the options whose unit their name says, by the keys of a recipe.

    Parameters
    ----------
    values : dict
        Texts of the options by the keys of a recipe; None where not given.

    Returns
    -------
    dict
        The same, with the dish, the line and the ruler as lengths in millimetres.

    Raises
    ------
    OptionWrong
        If one of them is no positive length.
    """
    read: dict[str, Any] = dict(values)
    for key in ("dish", "line_length", "ruler"):
        text = values.get(key)
        if text is not None:
            read[key] = parse_length(text, name=spelled(key), unit="mm")
    return read
