"""What is asked of a photograph, as typed on the command line or in a recipe, and its carrying out."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, fields, replace
from functools import cache
from hashlib import sha256
from importlib.metadata import version
from pathlib import Path
from typing import Any

from detect.area import (
    StudyArea,
    area_with_data,
    dish_area,
    frame_area,
    leaf_area,
    plot_area,
    polygon_area,
)
from detect.batch import Progress
from detect.dish import Dish, find_dish
from detect.errors import OptionWrong, PhotographUnreadable
from detect.lengths import Length
from detect.lens import Lens
from detect.photograph import Photograph, read_photograph
from detect.planted import PlantedOptions
from detect.readers import READERS, AreaWord, CutDish
from detect.scale import Scale
from detect.scale_request import ScaleRequest, check_one_scale
from detect.sheet import SCHEMA, PhotographIdentity, Sheet
from detect.taught import Taught
from detect.taught_file import identity_of, read_taught
from detect.wanted import DetectOptions


@dataclass(frozen=True, slots=True)
class AreaRequest:
    """Where spots count.

    Parameters
    ----------
    where : {"dish", "frame", "plot", "leaf"}, Path or None
        A word, a file with a polygon in pixels, or None for what goes with the scale: the dish
        with a dish, the plot with corners, else the whole frame.
    inset : Length or None
        How far the area's edge steps inwards.
    cut_dish : {"refuse", "use"} or None
        What to do with a dish that the frame cuts; None is as "refuse".
    """

    where: AreaWord | Path | None = None
    inset: Length | None = None
    cut_dish: CutDish | None = None


@dataclass(frozen=True, slots=True)
class DetectRequest:
    """All that is asked of a photograph: what to find, at which scale, and where.

    Parameters
    ----------
    options : DetectOptions
        What to find.
    scale : ScaleRequest
        What is known about lengths.
    area : AreaRequest
        Where spots count.
    taught : Taught or None
        What corrections taught: it completes the options.
    planted : PlantedOptions or None
        How objects are planted to measure what is missed; None for not at all.

    Raises
    ------
    OptionWrong
        If the plot is the area and its corners are missing, an inset has no area to act on, or
        what was taught is about another kind.
    """

    options: DetectOptions = field(default_factory=DetectOptions)
    scale: ScaleRequest = field(default_factory=ScaleRequest)
    area: AreaRequest = field(default_factory=AreaRequest)
    taught: Taught | None = None
    planted: PlantedOptions | None = None

    def __post_init__(self) -> None:
        if self.taught is not None and self.taught.kind != self.options.kind:
            raise OptionWrong(
                f"What was learned is about {self.taught.kind}, but {self.options.kind} are asked"
                " for; leave the kind out, or learn from sheets of that kind."
            )
        if self.where == "plot" and self.scale.corners is None:
            raise OptionWrong(
                "The area plot needs the positions of its corners and its size;"
                " give corners and plot."
            )
        if self.area.inset is not None and self.area.where is None and self.where == "frame":
            raise OptionWrong(
                f"The inset {self.area.inset} has no edge to step in from; give an area as well."
            )

        if self.area.cut_dish is not None and not self.needs_dish:
            raise OptionWrong(
                f"What to do with a cut dish ({self.area.cut_dish}) is said, but no dish is looked for;"
                " give the dish's diameter or the area dish as well."
            )

    @property
    def needs_dish(self) -> bool:
        """Whether a dish is looked for."""
        return self.where == "dish" or self.scale.dish is not None

    @property
    def where(self) -> AreaWord | Path:
        """Where spots count: as asked, or what goes with the scale."""
        if self.area.where is not None:
            return self.area.where
        if self.scale.dish is not None:
            return "dish"
        return "frame" if self.scale.corners is None else "plot"

    def as_dict(self) -> dict[str, Any]:
        """Return what was asked as plain values for a file, in the words of a recipe."""
        asked: dict[str, Any] = {}
        for part in (self.options, self.scale, self.area):
            asked |= {entry.name: _plain(getattr(part, entry.name)) for entry in fields(part)}
        asked.pop("where")
        asked["area"] = _plain(self.where)
        if isinstance(self.where, Path) and self.where.is_file():
            asked["area_sha256"] = sha256(self.where.read_bytes()).hexdigest()
        if self.taught is not None:
            asked["taught_sha256"] = identity_of(self.taught)
        asked["planted"] = None if self.planted is None else self.planted.rounds
        return {name: value for name, value in asked.items() if value is not None}


def detect_photograph(
    path: Path, request: DetectRequest, *, progress: Progress | None = None
) -> tuple[Photograph, Sheet]:
    """Find the spots of one photograph.

    Parameters
    ----------
    path : Path
        The photograph.
    request : DetectRequest
        What to find, at which scale, and where.
    progress : callable, optional
        Called with (done, total) after each round of planted objects if some are asked for, else
        after each tile of a photograph that is cut into some.

    Returns
    -------
    tuple of Photograph and Sheet

    Raises
    ------
    PhotographFailed
        If this photograph cannot be done.
    RequestWrong
        If what is asked does not fit it.
    """
    from detect.find import (
        find_spots,
        left_out_by_teaching,
    )  # loads scipy, which help can do without

    photograph = read_photograph(path)
    if request.planted is not None:  # copies are planted in memory: what is too large is told now
        photograph = replace(photograph, stored=photograph.stored.copy())
    request.scale.check_positions(photograph)
    cut = request.area.cut_dish or "refuse"
    dish = find_dish(photograph, cut=cut) if request.needs_dish else None
    scale = request.scale.resolve(photograph, dish) or _own_scale(photograph)
    area = _study_area(photograph, request, scale, dish)
    area = area_with_data(area, photograph.seen)
    found = find_spots(
        photograph,
        area,
        request.options,
        scale=scale,
        taught=request.taught,
        progress=progress if request.planted is None else None,
    )
    notes = photograph.notes
    if request.taught is not None and len(found.spots) == 0:
        notes += left_out_by_teaching(
            photograph, area, request.options, scale=scale, taught=request.taught
        )
    settings = {
        "request": request.as_dict(),
        "detector": found.settings,
        "notes": list(notes),
    }
    if dish is not None and dish.notes:
        settings["dish"] = list(dish.notes)
    identity = PhotographIdentity.of(photograph)
    sheet = Sheet(SCHEMA, tool_version(), identity, scale, area, settings, found.spots)
    if request.planted is None:
        return photograph, sheet
    from detect.rounds import measure_planted  # loads scipy likewise

    planted = measure_planted(
        photograph,
        area,
        request.options,
        found,
        scale=scale,
        taught=request.taught,
        planted=request.planted,
        progress=progress,
    )
    return photograph, replace(sheet, planted=planted)


@cache
def tool_version() -> str:
    """Return the version of this program."""
    return version("strewn")


def _own_scale(photograph: Photograph) -> Scale | None:
    """Return the scale that a georeferenced raster brings along."""
    if photograph.georeference is None:
        return None
    try:
        return photograph.georeference.scale()
    except PhotographUnreadable as trouble:
        raise PhotographUnreadable(f"{photograph.name}: {trouble}.") from trouble


def _study_area(
    photograph: Photograph, request: DetectRequest, scale: Scale | None, dish: Dish | None
) -> StudyArea:
    """Find where spots count, then step in from the edge, at the scale of the area's middle."""
    inset = request.area.inset
    if inset is None:
        return _whole_area(photograph, request, scale, dish, 0.0)
    mm_per_px: float | None = None
    if scale is not None:
        middle = _whole_area(photograph, request, scale, dish, 0.0).polygon.centroid
        mm_per_px = float(scale.mm_per_px([[middle.x, middle.y]])[0])
    return _whole_area(photograph, request, scale, dish, inset.to_px(mm_per_px))


def _whole_area(
    photograph: Photograph,
    request: DetectRequest,
    scale: Scale | None,
    dish: Dish | None,
    inset_px: float,
) -> StudyArea:
    """Return the area asked for, `inset_px` pixels inwards."""
    where = request.where
    if isinstance(where, Path):
        return polygon_area(
            where,
            photograph.width,
            photograph.height,
            inset_px=inset_px,
            georeference=photograph.georeference,
        )
    if where == "dish" and dish is not None:
        return dish_area(dish, inset_px=inset_px, width=photograph.width, height=photograph.height)
    if where == "plot" and scale is not None:
        return plot_area(request.scale.plot_outline(scale), inset_px=inset_px)
    if where == "leaf":
        return leaf_area(photograph, inset_px=inset_px)
    return frame_area(photograph.width, photograph.height, inset_px=inset_px)


def parse_request(
    values: Mapping[str, Any], *, named: Callable[[str], str] = str, folder: Path | None = None
) -> DetectRequest:
    """Read what is asked from texts and numbers.

    Parameters
    ----------
    values : mapping of str to object
        The keys of a recipe: kind, diameter, colour, polarity, highest_doubt, mm_per_pixel, dish,
        line, line_length, corners, plot, area, inset, cut_dish, taught, planted. None counts as not given.
    named : callable
        Turns a key into the name the reader knows it by, for messages.
    folder : Path, optional
        Where the files of an area and of what was taught lie if their paths are relative.

    Returns
    -------
    DetectRequest

    Raises
    ------
    OptionWrong
        If a value is impossible or does not apply, or a key is unknown.
    TaughtUnreadable
        If the file of what was taught cannot be used.
    """
    given = {key: value for key, value in values.items() if value is not None}
    read: dict[str, Any] = {}
    for key, value in given.items():
        if key not in READERS:
            raise OptionWrong(f"{named(key)} is not known; use one of {', '.join(READERS)}.")
        read[key] = READERS[key](value, named(key))
    check_one_scale(read, named)
    if "area" in read:
        read["where"] = _existing(read.pop("area"), named("area"), folder)
    if "lens" in read:
        read["lens"] = _lens(read["lens"], named("lens"), folder)
    taught = None
    if "taught" in read:
        taught = read_taught(read["taught"] if folder is None else folder / read["taught"])
        read.setdefault("kind", taught.kind)
    return DetectRequest(
        DetectOptions(**_fitting(DetectOptions, read)),
        ScaleRequest(**_fitting(ScaleRequest, read)),
        AreaRequest(**_fitting(AreaRequest, read)),
        taught,
        read.get("planted"),
    )


def _fitting(record: type, read: dict[str, Any]) -> dict[str, Any]:
    """Choose the values that a record has fields for."""
    return {entry.name: read[entry.name] for entry in fields(record) if entry.name in read}


def _existing(where: AreaWord | Path, name: str, folder: Path | None) -> AreaWord | Path:
    """Return an area's file where it lies, or its word."""
    if not isinstance(where, Path):
        return where
    path = where if folder is None else folder / where
    if not path.is_file():
        raise OptionWrong(f"{name} names the file {path}, which does not exist; check its path.")
    return path


def _lens(given: Path, name: str, folder: Path | None) -> Lens:
    """Return a camera's lens from its file, or measured on the chessboards of a file or folder."""
    from detect.chessboard import lens_from

    path = given if folder is None else folder / given
    if not path.exists():
        raise OptionWrong(f"{name} names {path}, which does not exist; check its path.")
    return lens_from(path)


def _plain(value: Any) -> Any:
    """Turn a field into what JSON can hold."""
    if isinstance(value, Length):
        return str(value)
    if isinstance(value, Path):
        return value.name
    if isinstance(value, Lens):
        return value.as_dict()
    if isinstance(value, tuple):
        return [_plain(entry) for entry in value]
    return value
