"""Find the spots of a photograph: the detector from end to end."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.doubt import MODELS, DoubtModel
from detect.errors import OptionWrong
from detect.judge import Judgement, judged
from detect.own_colour import own_colours
from detect.photograph import Photograph
from detect.picture_doubt import CALIBRATIONS, Evidence, PictureCalibration
from detect.scale import Scale
from detect.sizes import learn_diameters
from detect.spots import Spots
from detect.taught import Taught
from detect.tiles import Progress, Task, Tiling, found_in_pieces
from detect.view import View, grid_of, view_of
from detect.wanted import DetectOptions, Kind

# Diameters looked for when none are given but a scale is known, in millimetres (common practice).
_USUAL_MM: dict[Kind, tuple[float, float]] = {
    "colonies": (0.8, 6.0),
    "seedlings": (8.0, 60.0),
    "lesions": (0.8, 8.0),
}
_DIGITS = 9  # of a diameter in pixels: 2.4 mm at 0.1 mm per pixel are 24 px and no hair less
# The working map is reduced until the smallest object measures this many pixels; leaves need more.
_WORKING_PX, _WORKING_PX_PLANTS = 8.0, 16.0
# A colony, seedling or lesion is no smaller or larger than these multiples of the range asked for:
# what is larger is a glare, what is smaller a torn leaf or a speck.
_AT_LEAST, _AT_MOST = 0.6, 1.2
_ALL_LEFT_OUT = (
    "What was taught leaves out every candidate in this photograph; look at it, and teach with more"
    " photographs or detect without --taught"
)


@dataclass(frozen=True, slots=True)
class Found:
    """Spots, and what the detector settled on to find them.

    Parameters
    ----------
    spots : Spots
    settings : dict
        Plain values for the sheet: kind, diameters in pixels, direction of the contrast in L*, a*,
        b*, the ground's noise, the working scale, the highest doubt kept, the calibration of the
        doubt, and the number of tiles where the picture was cut into some.
    evidence : Evidence
        What the picture as a whole says about its spots.
    """

    spots: Spots
    settings: dict[str, Any]
    evidence: Evidence


def find_spots(
    photograph: Photograph,
    area: StudyArea,
    options: DetectOptions,
    *,
    scale: Scale | None = None,
    model: DoubtModel | None = None,
    calibration: PictureCalibration | None = None,
    taught: Taught | None = None,
    tiling: Tiling | None = None,
    progress: Progress | None = None,
) -> Found:
    """Find the objects of a photograph within its study area.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
        Only spots whose centre lies in it are returned.
    options : DetectOptions
    scale : Scale or None
        Needed when diameters are given in millimetres.
    model : DoubtModel or None
        Weights of the doubt; None takes those that were taught, or else those of the kind.
    calibration : PictureCalibration or None
        What the model's doubt is worth; None takes what goes with the weights.
    taught : Taught or None
        What corrections taught: it completes `options`.
    tiling : Tiling or None
        When and how a very large picture is judged in tiles, so that it need not fit into memory;
        None takes the defaults.
    progress : callable or None
        Called with (done, total) after each tile.

    Returns
    -------
    Found
        Spots, ordered from top to bottom, and the settings they were found with.

    Raises
    ------
    OptionWrong
        If diameters are in millimetres and no scale is known, or exceed the area.
    """
    model = model or (MODELS[options.kind] if taught is None else taught.model)
    direction = None if taught is None else taught.direction_for(options)
    options = options if taught is None else taught.completed(options)
    smallest, largest = _diameters(photograph, area, options, scale, model, direction)
    looked_at = _with_its_surroundings(area, largest)
    grid = grid_of(photograph, looked_at, shrink=_shrink(options.kind, smallest))
    calibrated = taught is not None and taught.calibration is not None  # it is applied already
    task = Task(
        photograph,
        looked_at,
        grid,
        smallest * grid.shrink,
        largest * grid.shrink,
        options,
        model,
        calibration or (PictureCalibration() if calibrated else CALIBRATIONS[options.kind]),
        partial(_kept, area=area, kind=options.kind, smallest_px=smallest, largest_px=largest),
        direction,
        None if taught is None else partial(_taught_doubt, taught),
    )
    pieces = found_in_pieces(task, tiling or Tiling(), progress=progress)
    constants, standard = pieces.yardstick.constants, pieces.standard
    highest = options.highest_doubt
    if highest is None:
        highest = round(float(standard.worth.applied(standard.limit)), 6)
    settings = {
        "kind": options.kind,
        "diameter_px": [round(smallest, 2), round(largest, 2)],
        "colour": options.colour,
        "direction_lab": [round(float(v), 4) for v in constants.direction],
        "noise_lab": round(constants.noise, 4),
        "working_px_per_px": round(grid.shrink, 6),
        "highest_doubt": highest,
        "doubt_calibration": [round(standard.worth.intercept, 6), round(standard.worth.slope, 6)],
    }
    tiles = {} if pieces.tiles is None else {"tiles": pieces.tiles}
    return Found(task.kept(pieces.spots), settings | tiles, standard.evidence)


def _taught_doubt(taught: Taught, view: View, judgement: Judgement) -> NDArray[np.float64]:
    """Return the doubt that corrections taught, of the candidates of a view."""
    return taught.doubt(judgement.doubt, own_colours(view.lab, judgement.candidates))


def left_out_by_teaching(
    photograph: Photograph,
    area: StudyArea,
    options: DetectOptions,
    *,
    scale: Scale | None,
    taught: Taught,
) -> tuple[str, ...]:
    """Say, of a photograph in which a taught detector found nothing, whether it did so for that.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    options : DetectOptions
        As a person asked.
    scale : Scale or None
    taught : Taught

    Returns
    -------
    tuple of str
        A note where spots of that size are found without what was taught; else empty.
    """
    sized = replace(options, diameter=options.diameter or taught.diameter)
    untaught = find_spots(photograph, area, sized, scale=scale)
    return (_ALL_LEFT_OUT,) if len(untaught.spots) else ()


def look_at(
    photograph: Photograph,
    area: StudyArea,
    options: DetectOptions,
    diameters_px: tuple[float, float],
    *,
    model: DoubtModel,
    direction: NDArray[np.float64] | None = None,
) -> tuple[View, Judgement]:
    """Reduce a photograph as its smallest objects allow, and judge the candidates in it.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    options : DetectOptions
        Their `diameter` is not looked at.
    diameters_px : pair of float
        Smallest and largest diameter in photograph pixels.
    model : DoubtModel
    direction : ndarray of shape (3,) or None
        Direction in L*, a*, b* from ground to object, where it is known.

    Returns
    -------
    tuple of View and Judgement
    """
    smallest, largest = diameters_px
    looked_at = _with_its_surroundings(area, largest)
    view = view_of(photograph, looked_at, shrink=_shrink(options.kind, smallest))
    small, large = smallest * view.shrink, largest * view.shrink
    return view, judged(view, small, large, options, model, direction=direction)


def _shrink(kind: Kind, smallest_px: float) -> float:
    """How far a photograph is reduced, so that the smallest object stays large enough."""
    working = _WORKING_PX_PLANTS if kind == "seedlings" else _WORKING_PX
    return min(1.0, working / smallest_px)


def _kept(
    spots: Spots, *, area: StudyArea, kind: Kind, smallest_px: float, largest_px: float
) -> Spots:
    """Return the spots centred in the area and, for a kind, near the sizes asked for; in order."""
    spots = spots.where(area.contains(spots.centres))
    if kind != "spots":
        size = 2 * spots.radius
        near = (size >= _AT_LEAST * smallest_px) & (size <= _AT_MOST * largest_px)
        spots = spots.where(near)
    return spots.where(np.lexsort((spots.x, spots.y))).renumbered()


def _with_its_surroundings(area: StudyArea, largest_px: float) -> StudyArea:
    """Return the part to look at: a plot and a little more, since its ground goes on beyond.

    An object across the edge of a plot is then measured whole, and counts if its own centre lies
    within. Beyond a dish or a leaf lies something else.
    """
    if area.kind != "plot":
        return area
    return replace(area, polygon=area.polygon.buffer(largest_px))


def _diameters(
    photograph: Photograph,
    area: StudyArea,
    options: DetectOptions,
    scale: Scale | None,
    model: DoubtModel,
    direction: NDArray[np.float64] | None,
) -> tuple[float, float]:
    """Smallest and largest diameter in photograph pixels: given, usual for the kind, or learned."""
    mm_per_px = None
    if scale is not None:
        mm_per_px = float(scale.mm_per_px([area.polygon.centroid.coords[0]])[0])
    if options.diameter is not None:
        smallest, largest = (round(d.to_px(mm_per_px), _DIGITS) for d in options.diameter)
    elif mm_per_px is not None and options.kind in _USUAL_MM:
        smallest, largest = (round(d / mm_per_px, _DIGITS) for d in _USUAL_MM[options.kind])
    else:
        smallest, largest = learn_diameters(photograph, area, options, model, direction=direction)
    x0, y0, x1, y1 = area.polygon.bounds
    asked = largest if options.diameter is not None else 0.0
    for word, diameter, room in (
        ("smallest", smallest, min(x1 - x0, y1 - y0)),
        ("largest", asked, max(x1 - x0, y1 - y0)),
    ):
        if diameter > room:
            raise OptionWrong(
                f"The {word} diameter ({diameter:.4g} px) is larger than the study area"
                f" ({x1 - x0:.0f} x {y1 - y0:.0f} px); give smaller diameters."
            )
    if largest < 3.0:
        raise OptionWrong(
            f"Objects of at most {largest:.1f} px cannot be seen; give larger diameters or take"
            " the photograph from closer."
        )
    return max(smallest, 2.0), largest
