"""Pictures of a finished result: they draw what the findings hold and compute nothing."""

from __future__ import annotations

import io
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any

import matplotlib as mpl
import numpy as np
import shapely
from matplotlib.collections import LineCollection, PathCollection
from matplotlib.colors import LinearSegmentedColormap, Normalize
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch
from matplotlib.path import Path as Outline
from matplotlib.patheffects import withStroke
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from analyse import look
from analyse.drawn import DrawnFrequencies, DrawnPicture, DrawnResiduals
from analyse.marks import (
    CIRCLE,
    CROSS,
    DIAMOND,
    Points,
    cells,
    label_place,
    middle,
    photograph_inches,
    rings,
    stamped,
)
from analyse.pattern import DOUBTFUL
from analyse.wording import signed

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from analyse.findings import Findings
    from detect.photograph import PixelsFloat
    from detect.sheet import Sheet

Mapped = Callable[[Points], Points]

RESIDUAL_COLOURS = LinearSegmentedColormap.from_list(
    "fewer_more", look.RESIDUAL_STEPS
).with_extremes(bad=look.UNKNOWN)


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
    to_px = None if sheet.scale is None else sheet.scale.to_px
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
    _frame(axes, pattern.area.bounds, pattern.unit)
    discs = np.column_stack([pattern.points, np.zeros(len(pattern))])
    quadrats, labels = _draw_grid(axes, findings, None, discs, on_photograph=False)
    axes.add_collection(
        LineCollection(rings([pattern.area]), colors=look.INK, linewidths=1.4), autolim=False
    )
    size = float(np.clip(6.0 - len(pattern) / 400.0, 2.0, 6.0))
    axes.plot(*pattern.points.T, "o", ms=size, mfc="#1f8a80", mec="white", mew=0.5)
    return DrawnPicture({"counted": pattern.points}, quadrats, labels)


def draw_residuals(axes: Axes, findings: Findings) -> DrawnResiduals:
    """Draw the map of standardised residuals, count against expectation, of all quadrats.

    Parameters
    ----------
    axes : matplotlib Axes
        Gets the unit of the grid as its coordinates, y downwards.
    findings : Findings
        Result whose quadrats have known places.

    Returns
    -------
    DrawnResiduals
        Values in the order of the quadrats.

    Raises
    ------
    ValueError
        If the places of the quadrats are unknown.
    """
    values = np.asarray(findings.residuals, dtype=np.float64)
    polygons = cells(findings)
    paths = [_outline(polygon) for polygon in polygons]
    norm = Normalize(-look.RESIDUAL_LIMIT, look.RESIDUAL_LIMIT)
    filled = PathCollection(
        paths, cmap=RESIDUAL_COLOURS, norm=norm, edgecolors=look.RULE, linewidths=0.6
    )
    filled.set_array(np.ma.masked_invalid(values))
    axes.add_collection(filled, autolim=False)
    outlined = np.abs(np.nan_to_num(values)) >= look.NOTABLE
    notable = [path for path, beyond in zip(paths, outlined, strict=True) if beyond]
    rim = PathCollection(notable, facecolors="none", edgecolors=look.INK, linewidths=1.5, zorder=2)
    axes.add_collection(rim, autolim=False)
    _frame(axes, shapely.GeometryCollection(polygons).bounds, findings.unit)
    axes.set_anchor("S")
    _draw_colour_bar(axes, filled)
    return DrawnResiduals(values, outlined, _draw_values(axes, polygons, values, outlined))


def draw_frequencies(axes: Axes, findings: Findings) -> DrawnFrequencies:
    """Draw how many quadrats hold 0, 1, 2, ... spots, seen and expected at random.

    Parameters
    ----------
    axes : matplotlib Axes
        Empty.
    findings : Findings
        Result with a Poisson fit.

    Returns
    -------
    DrawnFrequencies
        Heights in quadrats; pooled classes where the counts run higher than 40.

    Raises
    ------
    ValueError
        If the result has no frequencies.
    """
    fit = findings.poisson
    if fit is None:
        raise ValueError(f"{findings.name} has no frequencies to draw")
    single = len(fit.frequencies) <= look.MOST_SINGLE_COUNTS
    labels = tuple(map(str, range(len(fit.frequencies)))) if single else fit.labels
    observed = np.asarray(fit.frequencies if single else fit.observed, dtype=np.float64)
    expected = np.asarray(fit.poisson if single else fit.expected, dtype=np.float64)
    at = np.arange(len(labels))
    bars = axes.bar(
        at, observed, width=0.8, color=look.OBSERVED, edgecolor=look.INK, lw=0.6, label="seen"
    )
    line = axes.plot(at, expected, "-", color=look.EXPECTED, lw=1.4, marker="o", ms=4.5, mfc="white",
              mew=1.3, label="expected at random")  # fmt: skip
    every = int(np.ceil(len(labels) / 12))
    axes.set_xticks(at[::every], labels[::every])
    axes.yaxis.set_major_locator(MaxNLocator(5, integer=True))
    axes.set(xlabel="Spots in a quadrat", ylabel="Quadrats", xlim=(-0.7, len(labels) - 0.3))
    axes.set_ylim(0, max(observed.max(), expected.max()) * 1.22)
    axes.legend(
        handles=[bars, *line],
        frameon=False,
        loc="upper right",
        ncols=2,
        borderaxespad=0,
        handlelength=1.6,
    )
    axes.tick_params(axis="x", length=0)
    return DrawnFrequencies(labels, observed, expected)


def _draw_grid(
    axes: Axes, findings: Findings, mapped: Mapped | None, discs: Points, *, on_photograph: bool
) -> tuple[tuple[Points, ...], tuple[tuple[float, float, str], ...]]:
    """Draw the outlines of the quadrats and their counts, clear of the spots where they can be."""
    grid = findings.counts.grid
    if grid is None:
        return (), ()
    quadrats = [shapely.transform(cell, mapped) if mapped else cell for cell in grid.polygons]
    if on_photograph:
        _draw_lines(axes, rings(quadrats), 0.7)
    else:
        axes.add_collection(
            LineCollection(rings(quadrats), colors=look.RULE, linewidths=0.8), autolim=False
        )
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
    return tuple(shapely.get_coordinates(cell) for cell in quadrats), tuple(labels)


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


def _draw_values(
    axes: Axes, polygons: Sequence[BaseGeometry], values: Points, outlined: NDArray[np.bool_]
) -> tuple[tuple[float, float, str], ...]:
    """Write the residuals into the cells, or signs into the notable ones where cells are many."""
    few = len(polygons) < look.MOST_NUMBERS
    size = float(np.clip(60.0 / np.sqrt(len(polygons)), 5.0, 8.0)) if few else 6.5
    labels = []
    for k in np.flatnonzero(np.isfinite(values) if few else outlined).tolist():
        (x, y), text = middle(polygons[k]), signed(values[k])[: None if few else 1]
        colour = look.INK if abs(values[k]) < 0.72 * look.RESIDUAL_LIMIT else "white"
        weight = "bold" if outlined[k] else "normal"
        axes.text(
            x, y, text, size=size, color=colour, weight=weight, ha="center", va="center_baseline"
        )
        labels.append((x, y, text))
    return tuple(labels)


def _draw_colour_bar(axes: Axes, cells: PathCollection) -> None:
    """Draw the key of the residual map below it."""
    bar = axes.figure.colorbar(
        cells, ax=axes, orientation="horizontal", extend="both", shrink=0.7, aspect=32, pad=0.03
    )
    bar.set_ticks([-4, -2, 0, 2, 4], labels=["\u22124", "\u22122", "0", "+2", "+4"])
    bar.set_label("fewer than expected  \u2190  standardised residual  \u2192  more", size=8.5)
    bar.outline.set_linewidth(0.6)


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


def _frame(axes: Axes, bounds: tuple[float, ...], unit: str | None) -> None:
    """Set axes to a region with y downwards, and name them."""
    x0, y0, x1, y1 = bounds
    margin = 0.02 * max(x1 - x0, y1 - y0)
    axes.set(xlim=(x0 - margin, x1 + margin), ylim=(y1 + margin, y0 - margin), aspect="equal")
    x_name, y_name = (f"x ({unit})", f"y ({unit})") if unit else ("column", "row")
    axes.set(xlabel=x_name, ylabel=y_name)
    for along in (axes.xaxis, axes.yaxis):
        along.set_major_locator(MaxNLocator(6))


def _outline(polygon: BaseGeometry) -> Outline:
    """Return a polygon, holes included, as a path that can be filled."""
    parts = [Outline(ring, closed=True) for ring in rings([polygon])]
    return Outline.make_compound_path(*parts)
