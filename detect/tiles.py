"""How a picture too large for one piece is cut into tiles, and what was found put together.

What the picture is judged by is learned once, from windows spread over it; every tile is then
judged by that, with enough of its neighbours around it that no object depends on where it was cut.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import shapely
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.calibration import Calibration
from detect.choice import choose
from detect.doubt import DoubtModel
from detect.judge import Judgement, Yardstick, judge_by, judged_together
from detect.photograph import Photograph
from detect.picture_doubt import LOOKED_AT, Evidence, PictureCalibration, evidence_of
from detect.regions import Candidates, Column, join
from detect.settle import settled_spots
from detect.spots import Spots
from detect.view import Span, View, WorkingGrid, part_of_view
from detect.wanted import DetectOptions
from detect.windows import views_that_teach

Progress = Callable[[int, int], None]
# A tile sees this many of the largest diameters around its core: the ground is followed over one
# and a half of them (standard deviation), and an object at the core's edge has neighbours.
_AROUND = 6.0
# Cores begin at multiples of this, so that maps reduced by small whole numbers fall alike.
_STEP = 240


@dataclass(frozen=True, slots=True)
class Tiling:
    """When and how a picture is cut; sizes in working pixels.

    Parameters
    ----------
    most_pixels : int
        A picture of no more than these is judged in one piece.
    core : int
        Side of a tile without what it sees around it; rounded to a multiple of 240.
    taught_by : int
        The picture is judged by what it teaches as a whole if it has no more pixels than these,
        else by windows spread over it that together have about as many.
    """

    most_pixels: int = 20_000_000
    core: int = 2640
    taught_by: int = 5_000_000


@dataclass(frozen=True, slots=True)
class Tile:
    """A part of the working grid: first column or row, and the one after the last.

    Parameters
    ----------
    core_columns, core_rows : tuple of int
        Where a spot's centre must lie to belong to the tile; cores cover the grid, each place once.
    columns, rows : tuple of int
        What the tile sees.
    """

    core_columns: Span
    core_rows: Span
    columns: Span
    rows: Span


@dataclass(frozen=True, slots=True)
class Standard:
    """What a doubt is worth in one picture, and up to which doubt spots are kept.

    Parameters
    ----------
    evidence : Evidence
        What the picture as a whole says about its spots.
    worth : Calibration
    limit : float
        Of the model's doubt, before it is calibrated.
    """

    evidence: Evidence
    worth: Calibration
    limit: float


@dataclass(frozen=True, slots=True, eq=False)
class Pieces:
    """What was found in a picture, from one piece or from tiles.

    Parameters
    ----------
    spots : Spots
        In photograph pixels.
    yardstick : Yardstick
        What all of it was judged by.
    standard : Standard
        What its doubts were held against.
    tiles : int or None
        How many tiles it was cut into; None for one piece.
    """

    spots: Spots
    yardstick: Yardstick
    standard: Standard
    tiles: int | None


@dataclass(frozen=True, slots=True, eq=False)
class Task:
    """What is looked for in which part of which photograph.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
        The part to look at.
    grid : WorkingGrid
    smallest_px, largest_px : float
        Diameters in working pixels.
    options : DetectOptions
    model : DoubtModel
    calibration : PictureCalibration
        What the model's doubt is worth, by what a picture says.
    kept : callable
        Keeps of some spots those that count.
    direction : ndarray of shape (3,) or None
        Direction in L*, a*, b* from ground to object, where it is known.
    taught_doubt : callable or None
        Gives the doubt that corrections taught, of a view and its judgement.
    """

    photograph: Photograph
    area: StudyArea
    grid: WorkingGrid
    smallest_px: float
    largest_px: float
    options: DetectOptions
    model: DoubtModel
    calibration: PictureCalibration
    kept: Callable[[Spots], Spots]
    direction: Column | None = None
    taught_doubt: Callable[[View, Judgement], Column] | None = None

    def taught(self, view: View, judgement: Judgement) -> Judgement:
        """Return a judgement with the doubt that corrections taught."""
        if self.taught_doubt is None:
            return judgement
        return replace(judgement, doubt=self.taught_doubt(view, judgement))

    def chosen(
        self, view: View, judgement: Judgement, worth: Calibration, limit: float
    ) -> tuple[NDArray[np.intp], Spots]:
        """Return the rows chosen up to a limit of the model's doubt, and the spots they are."""
        rows = choose(judgement.candidates, judgement.doubt, highest_doubt=limit)
        return rows, settled_spots(view, judgement, rows, worth, plants=self.plants)

    @property
    def plants(self) -> bool:
        """Whether plants are looked for."""
        return self.options.kind == "seedlings"


def found_in_pieces(task: Task, tiling: Tiling, *, progress: Progress | None = None) -> Pieces:
    """Find the spots of a picture in one piece, or tile by tile where it is too large for that.

    Parameters
    ----------
    task : Task
    tiling : Tiling
    progress : callable or None
        Called with (done, total) after each tile.

    Returns
    -------
    Pieces
        Each spot once: it is taken from the tile whose core holds it, and where two tiles see
        one object at their seam differently the less doubtful sight of it is kept.
    """
    whole = task.grid.pixels <= tiling.most_pixels
    views = views_that_teach(
        task.photograph,
        task.area,
        task.grid.wanted,
        task.largest_px,
        task.grid.pixels if whole else tiling.taught_by,
    )
    judgements, yardstick = _learned(task, views)
    standard = _standard(task, views, judgements)
    if whole:
        _, spots = task.chosen(views[0], judgements[0], standard.worth, standard.limit)
        return Pieces(spots, yardstick, standard, None)
    del views, judgements  # their memory is needed
    tiles = cut_tiles(task.grid, core=tiling.core, around=int(np.ceil(_AROUND * task.largest_px)))
    tiles = [tile for tile in tiles if _touches(task, tile)]
    parts: list[_Part] = []
    for done, tile in enumerate(tiles, start=1):
        parts.append(_judged_tile(task, tile, yardstick, standard))
        if progress is not None:
            progress(done, len(tiles))
    return Pieces(_put_together(parts, standard.limit), yardstick, standard, len(tiles))


def _standard(task: Task, views: Sequence[View], judgements: Sequence[Judgement]) -> Standard:
    """Settle what a doubt is worth, from what is seen in the views that teach."""
    seen = [
        task.kept(task.chosen(view, judgement, Calibration(), LOOKED_AT)[1])
        for view, judgement in zip(views, judgements, strict=True)
    ]
    evidence = evidence_of(
        np.concatenate([2 * spots.radius for spots in seen]),
        np.concatenate([spots.doubt for spots in seen]),
    )
    worth = task.calibration.of(evidence)
    highest = task.options.highest_doubt
    limit = task.options.most_doubt if highest is None else float(worth.inverse.applied(highest))
    return Standard(evidence, worth, limit)


def _learned(task: Task, views: Sequence[View]) -> tuple[list[Judgement], Yardstick]:
    """Judge views by what they teach together, and by what corrections taught."""
    judgements, yardstick = judged_together(
        views,
        task.smallest_px,
        task.largest_px,
        task.options,
        task.model,
        direction=task.direction,
    )
    taught = [task.taught(view, each) for view, each in zip(views, judgements, strict=True)]
    return taught, yardstick


def cut_tiles(grid: WorkingGrid, *, core: int, around: int) -> list[Tile]:
    """Cut a grid into tiles whose cores cover it, each of which sees some pixels around its core.

    Parameters
    ----------
    grid : WorkingGrid
    core : int
        Side of a core, rounded to a multiple of 240 working pixels.
    around : int
        Working pixels seen around a core at least.

    Returns
    -------
    list of Tile
        Row by row.
    """
    step = max(1, round(core / _STEP)) * _STEP
    margin = -(-around // 80) * 80

    def spans(length: int) -> list[tuple[Span, Span]]:
        # A rest of less than half a core goes to its neighbour.
        starts = list(range(0, max(1, length - step // 2), step))
        ends = [*starts[1:], length]
        return [
            ((a, b), (max(0, a - margin), min(length, b + margin)))
            for a, b in zip(starts, ends, strict=True)
        ]

    return [
        Tile(core_x, core_y, seen_x, seen_y)
        for core_y, seen_y in spans(grid.height)
        for core_x, seen_x in spans(grid.width)
    ]


@dataclass(frozen=True, slots=True, eq=False)
class _Part:
    """What one tile holds: its chosen regions in working pixels of the grid, and their spots."""

    regions: Candidates
    doubt: NDArray[np.float64]
    spots: Spots
    at_seam: NDArray[np.bool_]


def _touches(task: Task, tile: Tile) -> bool:
    """Tell whether any of the study area lies in the tile's core."""
    grid = task.grid
    (x0, x1), (y0, y1) = tile.core_columns, tile.core_rows
    core = shapely.box(
        grid.left + x0 / grid.shrink_x - 0.5,
        grid.top + y0 / grid.shrink_y - 0.5,
        grid.left + x1 / grid.shrink_x - 0.5,
        grid.top + y1 / grid.shrink_y - 0.5,
    )
    return bool(task.area.polygon.intersects(core))


def _judged_tile(task: Task, tile: Tile, yardstick: Yardstick, standard: Standard) -> _Part:
    """Judge one tile, and keep what belongs to its core or lies just beyond a seam."""
    view = part_of_view(task.photograph, task.area, task.grid, tile.columns, tile.rows)
    judgement = judge_by(
        view, task.smallest_px, task.largest_px, task.options, task.model, yardstick
    )
    judgement = task.taught(view, judgement)
    rows, spots = task.chosen(view, judgement, standard.worth, standard.limit)
    regions = _moved(judgement.candidates.where(rows), tile.columns[0], tile.rows[0])
    slack = 0.5 * task.smallest_px
    deep = _depth(regions, tile, task.grid)
    keep = deep > -slack
    return _Part(
        regions.where(keep),
        judgement.doubt[rows[keep]],
        spots.where(keep),
        (deep < 3.0 * task.largest_px)[keep],
    )


def _moved(regions: Candidates, x: int, y: int) -> Candidates:
    """Regions of a tile in working pixels of the whole grid."""
    columns = {name: getattr(regions, name) for name in Candidates.__dataclass_fields__}
    return Candidates(**(columns | {"x": regions.x + x, "y": regions.y + y}))


def _depth(regions: Candidates, tile: Tile, grid: WorkingGrid) -> Column:
    """How deep within the core each centre lies, from the nearest seam; edges are no seams."""
    deep = np.full(len(regions), np.inf)
    for at, (first, last), length in (
        (regions.x, tile.core_columns, grid.width),
        (regions.y, tile.core_rows, grid.height),
    ):
        if first > 0:
            deep = np.minimum(deep, at - (first - 0.5))
        if last < length:
            deep = np.minimum(deep, (last - 0.5) - at)
    return deep


def _put_together(parts: Sequence[_Part], limit: float) -> Spots:
    """Put the tiles' spots together; near seams the least doubtful of several sights is kept."""
    if not parts:
        return Spots.none()
    regions = join([part.regions for part in parts])
    doubt = np.concatenate([part.doubt for part in parts])
    seam = np.flatnonzero(np.concatenate([part.at_seam for part in parts]))
    chosen = choose(regions.where(seam), doubt[seam], highest_doubt=limit)
    keep = np.ones(len(regions), dtype=bool)
    keep[seam] = False
    keep[seam[chosen]] = True
    columns = [
        np.concatenate([getattr(part.spots, name) for part in parts])[keep]
        for name in ("x", "y", "radius", "contrast", "fill", "doubt")
    ]
    x, y, radius, contrast, fill, doubts = columns
    return Spots.found_at(x, y, radius, contrast=contrast, fill=fill, doubt=doubts)
