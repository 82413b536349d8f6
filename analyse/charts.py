"""Charts of a finished result: the map of residuals, and the frequencies of counts."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import shapely
from matplotlib.collections import PathCollection
from matplotlib.colors import LinearSegmentedColormap, Normalize
from matplotlib.path import Path as Outline
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from analyse import look
from analyse.drawn import DrawnFrequencies, DrawnResiduals
from analyse.marks import Points, cells, middle, rings
from analyse.wording import signed

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from analyse.findings import Findings

RESIDUAL_COLOURS = LinearSegmentedColormap.from_list(
    "fewer_more", look.RESIDUAL_STEPS
).with_extremes(bad=look.UNKNOWN)


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
    many = len(paths) > look.MOST_VECTOR_SPOTS
    filled.set_rasterized(many)
    filled.set_array(np.ma.masked_invalid(values))
    axes.add_collection(filled, autolim=False)
    outlined = np.abs(np.nan_to_num(values)) >= look.NOTABLE
    notable = [path for path, beyond in zip(paths, outlined, strict=True) if beyond]
    rim = PathCollection(notable, facecolors="none", edgecolors=look.INK, linewidths=1.5, zorder=2)
    rim.set_rasterized(many)
    axes.add_collection(rim, autolim=False)
    frame(axes, shapely.GeometryCollection(polygons).bounds, findings.unit)
    axes.set_anchor("S")
    _draw_colour_bar(axes, filled)
    return DrawnResiduals(values, outlined, _draw_values(axes, polygons, values, outlined))


def draw_frequencies(axes: Axes, findings: Findings) -> DrawnFrequencies:
    """Draw how many quadrats hold 0, 1, 2, ... spots, seen and as both fitted laws expect.

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
    lines = axes.plot(at, expected, "-", color=look.EXPECTED, lw=1.4, marker="o", ms=4.5,
              mfc="white", mew=1.3, label="Poisson (random)")  # fmt: skip
    clumped = _clumped_law(findings, single)
    if clumped is not None:
        lines += axes.plot(at, clumped, "--", color=look.SPREAD, lw=1.4, marker="s", ms=4.2,
                  mfc="white", mew=1.2, label="negative binomial")  # fmt: skip
    every = int(np.ceil(len(labels) / 12))
    axes.set_xticks(at[::every], labels[::every])
    axes.yaxis.set_major_locator(MaxNLocator(5, integer=True))
    axes.set(xlabel="Spots in a quadrat", ylabel="Quadrats", xlim=(-0.7, len(labels) - 0.3))
    highest = [shown.max() for shown in (observed, expected, clumped) if shown is not None]
    axes.set_ylim(0, max(highest) * 1.05)
    axes.figure.legend(
        handles=[bars, *lines], loc="outside upper left", ncols=3, frameon=False, fontsize=8.0,
        handlelength=1.8, columnspacing=1.2, borderaxespad=0.0,
    )  # fmt: skip
    axes.tick_params(axis="x", length=0)
    return DrawnFrequencies(labels, observed, expected, clumped)


def _clumped_law(findings: Findings, single: bool) -> NDArray[np.float64] | None:
    """Return what the negative binomial law expects, where it is another than the Poisson law."""
    law, poisson = findings.negative_binomial, findings.poisson
    if law is None or poisson is None or law.poisson_limit:
        return None
    return law.law if single else law.expected_in(poisson.classes)


def frame(axes: Axes, bounds: tuple[float, ...], unit: str | None) -> None:
    """Set axes to a region with y downwards, and name them."""
    x0, y0, x1, y1 = bounds
    margin = 0.02 * max(x1 - x0, y1 - y0)
    axes.set(xlim=(x0 - margin, x1 + margin), ylim=(y1 + margin, y0 - margin), aspect="equal")
    x_name, y_name = (f"x ({unit})", f"y ({unit})") if unit else ("column", "row")
    axes.set(xlabel=x_name, ylabel=y_name)
    for along in (axes.xaxis, axes.yaxis):
        along.set_major_locator(MaxNLocator(6))


def _draw_values(
    axes: Axes, polygons: Sequence[BaseGeometry], values: Points, outlined: NDArray[np.bool_]
) -> tuple[tuple[float, float, str], ...]:
    """Write the residuals into the cells, signs into the notable ones of many, none into dots."""
    if len(polygons) > look.MOST_COUNTS:
        return ()
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


def _outline(polygon: BaseGeometry) -> Outline:
    """Return a polygon, holes included, as a path that can be filled."""
    parts = [Outline(ring, closed=True) for ring in rings([polygon])]
    return Outline.make_compound_path(*parts)
