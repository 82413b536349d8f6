"""Which sheets a person has reviewed, and what they say about their photographs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from hashlib import sha256
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from detect.amended import current_state
from detect.amendments import amendments_path, read_amendments
from detect.changes import changes_of
from detect.errors import NothingLearned
from detect.gather import gather_sheets
from detect.readers import READERS
from detect.sheet import Sheet, read_sheet
from detect.wanted import DetectOptions

FEWEST_SPOTS = 10


@dataclass(frozen=True, slots=True, eq=False)
class Reviewed:
    """A sheet that a person has reviewed, and where its photograph lies.

    Parameters
    ----------
    sheet : Sheet
        With the amendments applied: what is counted is real, what is struck is none.
    photograph : Path
        The very file the sheet was made from.
    options : DetectOptions
        What was asked for when the sheet was made.
    """

    sheet: Sheet
    photograph: Path
    options: DetectOptions

    @property
    def real(self) -> NDArray[np.float64]:
        """Real objects within the study area, as rows x, y, radius in pixels."""
        return self._rows(self.sheet.spots.counted)

    @property
    def struck(self) -> NDArray[np.float64]:
        """What a person struck within the study area, as rows x, y, radius in pixels."""
        return self._rows(~self.sheet.spots.counted)

    @property
    def diameters_px(self) -> tuple[float, float]:
        """The range of diameters that was looked for, in pixels."""
        smallest, largest = self.sheet.settings["detector"]["diameter_px"]
        return float(smallest), float(largest)

    def halves(self) -> tuple[Reviewed, Reviewed]:
        """Return two reviewed halves of the study area, with equally many spots as far as can be."""
        polygon = self.sheet.area.polygon
        x0, y0, x1, y1 = polygon.bounds
        across = 0 if x1 - x0 >= y1 - y0 else 1
        # A little aside, so that no centre lies on the line between the halves.
        at = float(np.median(np.vstack([self.real, self.struck])[:, across])) + 0.01
        low, high = (x0, y0, x1, y1)[across], (x0, y0, x1, y1)[across + 2]
        at = float(np.clip(at, low + 0.3 * (high - low), high - 0.3 * (high - low)))
        first = (x0, y0, at, y1) if across == 0 else (x0, y0, x1, at)
        second = (at, y0, x1, y1) if across == 0 else (x0, at, x1, y1)
        one, other = (
            replace(self, sheet=replace(self.sheet, area=replace(self.sheet.area, polygon=part)))
            for part in (
                _polygons(polygon.intersection(shapely.box(*box))) for box in (first, second)
            )
        )
        return one, other

    def _rows(self, chosen: NDArray[np.bool_]) -> NDArray[np.float64]:
        """Return centres and radii of the chosen spots that lie in the area."""
        spots = self.sheet.spots.where(chosen)
        spots = spots.where(self.sheet.area.contains(spots.centres))
        return np.column_stack([spots.x, spots.y, spots.radius])


def gather_reviewed(folder: Path, *, unchanged: bool = False) -> tuple[list[Reviewed], int]:
    """Read the sheets of a folder that a person has reviewed.

    Parameters
    ----------
    folder : Path
        A folder of sheets, or one sheet; those that a person marked as checked count as reviewed.
    unchanged : bool
        A person has looked at all of them: those not marked as checked are right as they stand.

    Returns
    -------
    list of Reviewed
        In natural order.
    int
        How many sheets were left out, for nobody has marked them as checked.

    Raises
    ------
    NothingLearned
        If no sheet is marked as checked, the sheets ask for unlike things, a photograph is gone or
        changed, or fewer than ten spots were reviewed.
    RequestWrong
        If the folder holds no sheets.
    SheetUnreadable
        If a sheet or its amendments cannot be read.
    """
    paths = gather_sheets([folder])
    reviewed = [_reviewed(path) for path in paths if unchanged or _is_checked(path)]
    if not reviewed:
        raise NothingLearned(
            f"None of the {len(paths)} sheets in {folder} has been marked as checked. Review some and"
            " mark them, or add --learn-unchanged if all are right as they stand."
        )
    _check_alike(reviewed)
    spots = sum(len(each.real) + len(each.struck) for each in reviewed)
    if spots < FEWEST_SPOTS:
        raise NothingLearned(
            f"Only {spots} spots were reviewed in {folder}, and {FEWEST_SPOTS} are needed at least"
            " (30 to learn more than sizes); review more photographs."
        )
    return reviewed, len(paths) - len(reviewed)


def _polygons(geometry: BaseGeometry) -> BaseGeometry:
    """Return the polygons of a geometry, without the lines and points of a grazing cut."""
    parts = shapely.get_parts(geometry)
    return shapely.union_all([part for part in parts if part.geom_type == "Polygon"])


def _is_checked(path: Path) -> bool:
    """Whether a person has marked a sheet as checked, and it is as it was then."""
    amendments = read_amendments(path)
    return bool(amendments) and changes_of(read_sheet(path), amendments).is_checked


def _reviewed(path: Path) -> Reviewed:
    """Read one reviewed sheet and find its photograph."""
    sheet = read_sheet(path)
    state = current_state(sheet, read_amendments(amendments_path(path)))
    try:
        options = _options(sheet.settings["request"])
        _ = state.settings["detector"]["diameter_px"]
    except (KeyError, TypeError, AttributeError) as trouble:
        raise NothingLearned(
            f"{path.name} does not say how it was detected; detect its photograph again with"
            " --keep-amendments."
        ) from trouble
    return Reviewed(state, _photograph(path, sheet), options)


def _options(request: dict[str, object]) -> DetectOptions:
    """Read what was asked for when a sheet was made."""
    names = ("kind", "colour", "polarity", "highest_doubt")
    values = {name: READERS[name](request[name], name) for name in names if name in request}
    diameter = request.get("diameter")
    if isinstance(diameter, list):
        values["diameter"] = READERS["diameter"]("-".join(diameter), "diameter")
    return DetectOptions(**values)


def _photograph(path: Path, sheet: Sheet) -> Path:
    """Find the very photograph that a sheet was made from."""
    way = sheet.settings.get("photograph_at", sheet.photograph.name)
    places = [path.parent / str(way), path.parent / sheet.photograph.name]
    there = [place for place in places if place.is_file()]
    if not there:
        raise NothingLearned(
            f"The photograph of {path.name} is not at {places[0]}; put it there or beside the"
            " sheet, or take the sheet out."
        )
    for place in there:
        if sha256(place.read_bytes()).hexdigest() == sheet.photograph.sha256:
            return place
    raise NothingLearned(
        f"The photograph {there[0]} has changed since {path.name} was made (its sha256 differs);"
        " put the first one back, or take the sheet out."
    )


def _check_alike(reviewed: Sequence[Reviewed]) -> None:
    """Refuse sheets that ask for unlike objects."""
    first = reviewed[0]
    for name, plural in (("kind", "kinds"), ("colour", "colours"), ("polarity", "polarities")):
        for other in reviewed[1:]:
            here, there = getattr(first.options, name), getattr(other.options, name)
            if here != there:
                raise NothingLearned(
                    f"The sheets ask for different {plural} ({first.sheet.photograph.name}: {here},"
                    f" {other.sheet.photograph.name}: {there}); learn from one sort at a time."
                )
