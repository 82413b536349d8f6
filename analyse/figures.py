"""Pictures of a finished result: they draw what the findings hold and compute nothing."""

from __future__ import annotations

import io
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any

import matplotlib as mpl
import numpy as np
import shapely
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch
from matplotlib.path import Path as Outline
from matplotlib.patheffects import withStroke
from shapely.geometry.base import BaseGeometry

from analyse import look
from analyse.charts import RESIDUAL_COLOURS as RESIDUAL_COLOURS
from analyse.charts import draw_frequencies as draw_frequencies
from analyse.charts import draw_residuals as draw_residuals
from analyse.charts import frame
from analyse.drawn import DrawnPicture
from analyse.marks import (
    CIRCLE,
    CROSS,
    DIAMOND,
    Points,
    cells,
    label_place,
    photograph_inches,
    rings,
    stamped,
)
from analyse.pattern import DOUBTFUL

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from analyse.findings import Findings
    from detect.photograph import PixelsFloat
    from detect.scale import Scale
    from detect.sheet import Sheet

_PIECES = 64  # of the outline of a quadrat on a photograph whose lens bends it
Mapped = Callable[[BaseGeometry], BaseGeometry]


def photograph_figure(findings: Findings, sheet: Sheet) -> Figure:
    """Return what lies over a photograph in a report, on a transparent ground of its shape."""
    width, height = sheet.photograph.width, sheet.photograph.height
    with mpl.rc_context(look.STYLE):
        figure = Figure(photograph_inches(width, height))
        draw_photograph(figure.add_axes((0, 0, 1, 1)), findings, sheet)
    return figure


def residual_figure(findings: Findings) -> Figure:
    """Return the map of residuals as a figure of its own, as tall as the map needs."""
    height = _height_of(findings, 4.0, (1.6, 4.4)) + 1.2
    return plain_figure(draw_residuals, findings, width=4.8, height=height)


def points_figure(findings: Findings) -> Figure:
    """Return the map of points as a figure of its own, as tall as the map needs."""
    height = _height_of(findings, 6.8, (2.0, 6.2)) + 0.6
    return plain_figure(draw_points, findings, width=7.6, height=height)


def _height_of(findings: Findings, width: float, limits: tuple[float, float]) -> float:
    """Return how tall a map of the quadrats is at a width."""
    x0, y0, x1, y1 = shapely.total_bounds(cells(findings))
    return float(np.clip(width * (y1 - y0) / (x1 - x0), *limits))


def plain_figure(
    draw: Callable[[Axes, Findings], object], findings: Findings, *, width: float, height: float
) -> Figure:
    """Return a figure, in inches, with one of the drawings that need no photograph."""
    with mpl.rc_context(look.STYLE):
        figure = Figure((width, height), layout="constrained")
        draw(figure.subplots(), findings)
    return figure


def svg_text(figure: Figure) -> str:
    """Return a figure as SVG under our style, without its date and the like."""
    text, nothing = io.StringIO(), dict.fromkeys(("Date", "Creator", "Format", "Type"))
    with mpl.rc_context(look.STYLE):
        figure.savefig(text, format="svg", metadata=nothing, transparent=True, dpi=110)
    return text.getvalue()


def draw_photograph(
    axes: Axes, findings: Findings, sheet: Sheet, *, pixels: PixelsFloat | None = None
) -> DrawnPicture:
    """Draw a photograph with its spots, study area, quadrats and their counts.

    Parameters
    ----------
    axes : matplotlib Axes
        Gets the pixels of the photograph as its coordinates, y downwards.
    findings : Findings
        Result for this sheet.
    sheet : Sheet
        Its current state, amendments applied.
    pixels : ndarray of shape (height, width, 3) or None
        The photograph, of any size; None leaves the ground transparent, to lie over a picture.

    Returns
    -------
    DrawnPicture
        Coordinates in pixels of the photograph.
    """
    width, height = sheet.photograph.width, sheet.photograph.height
    if pixels is not None:
        extent = (-0.5, width - 0.5, height - 0.5, -0.5)
        axes.imshow(pixels, extent=extent, interpolation="antialiased")
    axes.set(xlim=(-0.5, width - 0.5), ylim=(height - 0.5, -0.5), aspect="equal")
    axes.set_axis_off()
    to_px = None if sheet.scale is None else _bent_to_px(sheet.scale)
    discs = np.column_stack([sheet.spots.centres, sheet.spots.radius])
    quadrats, labels = _draw_grid(axes, findings, to_px, discs, on_photograph=True)
    _draw_lines(axes, rings([sheet.area.polygon]), 1.6, dashes=(5, 3))
    return DrawnPicture(_draw_spots(axes, sheet), quadrats, labels)


def draw_points(axes: Axes, findings: Findings) -> DrawnPicture:
    """Draw points without a photograph: the study area, its quadrats, their counts, the points.

    Parameters
    ----------
    axes : matplotlib Axes
        Gets the unit of the pattern as its coordinates, y downwards.
    findings : Findings
        Result for a pattern of points.

    Returns
    -------
    DrawnPicture
        Coordinates in the unit of the pattern.

    Raises
    ------
    ValueError
        If the result is that of a table of counts, which has no points.
    """
    pattern = findings.pattern
    if pattern is None:
        raise ValueError(f"{findings.name} has no points to draw")
    frame(axes, pattern.area.bounds, pattern.unit)
    discs = np.column_stack([pattern.points, np.zeros(len(pattern))])
    quadrats, labels = _draw_grid(axes, findings, None, discs, on_photograph=False)
    axes.add_collection(
        LineCollection(rings([pattern.area]), colors=look.INK, linewidths=1.4), autolim=False
    )
    size = float(np.clip(6.0 - len(pattern) / 400.0, 2.0, 6.0))
    many = len(pattern) > look.MOST_VECTOR_SPOTS
    axes.plot(*pattern.points.T, "o", ms=size, mfc="#1f8a80", mec="white", mew=0.5, rasterized=many)
    return DrawnPicture({"counted": pattern.points}, quadrats, labels)


def _bent_to_px(scale: Scale) -> Mapped:
    """Return what puts a cell in mm on the photograph; its edges in short pieces where a lens bends them."""

    def mapped(cell: BaseGeometry) -> BaseGeometry:
        if scale.lens is not None:
            cell = shapely.segmentize(cell, cell.length / _PIECES)
        return shapely.transform(cell, scale.to_px)

    return mapped


def _draw_grid(
    axes: Axes, findings: Findings, mapped: Mapped | None, discs: Points, *, on_photograph: bool
) -> tuple[tuple[Points, ...], tuple[tuple[float, float, str], ...]]:
    """Draw the outlines of the quadrats and their counts, clear of the spots where they can be."""
    grid = findings.counts.grid
    if grid is None:
        return (), ()
    quadrats = [mapped(cell) if mapped else cell for cell in grid.polygons]
    if on_photograph:
        _draw_lines(axes, rings(quadrats), 0.7)
    else:
        axes.add_collection(
            LineCollection(
                rings(quadrats),
                colors=look.RULE,
                linewidths=0.8,
                rasterized=len(quadrats) > look.MOST_VECTOR_SPOTS,
            ),
            autolim=False,
        )
    outlines = tuple(shapely.get_coordinates(cell) for cell in quadrats)
    if len(quadrats) > look.MOST_COUNTS:
        return outlines, ()
    per_unit = _points_per_unit(axes)
    sizes = np.clip(0.2 * np.sqrt([cell.area for cell in quadrats]) * per_unit, 4.5, 9.5)
    labels = []
    for cell, count, size in zip(quadrats, findings.counts.counts, sizes, strict=True):
        text = str(int(count))
        em = float(size / per_unit)
        x, y = label_place(cell, (0.66 * len(text) + 0.4) * em, 1.3 * em, spots=discs)
        labels.append((x, y, text))
        ground = {"boxstyle": "square,pad=0.16", "fc": look.HALO, "alpha": 0.66, "lw": 0}
        axes.text(
            x, y, text, size=size, ha="center", va="center_baseline",
            color="white" if on_photograph else look.SOFT,
            bbox=ground if on_photograph and len(quadrats) <= look.MOST_BOXES else None,
        )  # fmt: skip
    return outlines, tuple(labels)


def _draw_spots(axes: Axes, sheet: Sheet) -> dict[str, Points]:
    """Draw every spot with the sign of its standing, origin and doubt."""
    spots = sheet.spots
    radii = np.maximum(spots.radius, look.SMALLEST_MARK / _points_per_unit(axes))
    doubtful = spots.counted & spots.found & (spots.doubt > DOUBTFUL)
    kinds = {
        "counted": (spots.counted & spots.found & ~doubtful, look.COUNTED, CIRCLE),
        "doubtful": (doubtful, look.DOUBTFUL_COLOUR, CIRCLE),
        "placed": (spots.counted & ~spots.found, look.PLACED, DIAMOND),
        "struck": (~spots.counted, look.STRUCK, CROSS),
    }
    drawn = {}
    for name, (chosen, colour, shape) in kinds.items():
        drawn[name] = spots.centres[chosen]
        if chosen.any():
            path = Outline(*stamped(shape, spots.centres[chosen], radii[chosen]))
            few = int(chosen.sum()) <= look.MOST_VECTOR_SPOTS
            halo = [withStroke(linewidth=3.0, foreground=look.HALO, alpha=0.55)] if few else None
            patch = PathPatch(path, fc="none", ec=colour, lw=1.4, path_effects=halo, label=name)
            patch.set_rasterized(not few)
            axes.add_patch(patch)
    beside = drawn["doubtful"] + (radii[doubtful] * 0.85)[:, None] * [1.0, -1.0]
    axes.plot(*beside.T, "s", ms=4.5, mfc=look.DOUBTFUL_COLOUR, mec=look.HALO, mew=0.8)
    return drawn


def _points_per_unit(axes: Axes) -> float:
    """Return the points of the figure that one unit of the x axis takes."""
    start, end = axes.get_xlim()
    return float(72.0 / axes.figure.dpi * axes.bbox.width / abs(end - start))


def _draw_lines(
    axes: Axes, lines: Sequence[Points], width: float, *, dashes: tuple[int, int] | None = None
) -> None:
    """Draw white lines with a dark halo, to be seen on any photograph."""
    style: Any = (0, dashes) if dashes else "solid"
    axes.add_collection(
        LineCollection(lines, colors=look.HALO, linewidths=width + 1.3, alpha=0.5), autolim=False
    )
    axes.add_collection(
        LineCollection(lines, colors="white", linewidths=width, linestyles=[style], alpha=0.9),
        autolim=False,
    )
