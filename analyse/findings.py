"""From points or counts to everything that is said about them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from shapely.geometry.base import BaseGeometry

from analyse.chance import SEED, SIMULATIONS
from analyse.density import density_per_cm2
from analyse.errors import GridWrong
from analyse.judging import Subject, judged
from analyse.judging import stream as stream
from analyse.pattern import CountTable, Pattern
from analyse.quadrats import GridOptions, QuadratCounts, count_in_quadrats, lay_grid
from analyse.said import Findings as Findings


def analyse_points(
    points: ArrayLike,
    area: BaseGeometry | Sequence[float],
    *,
    name: str = "points",
    grid: GridOptions | None = None,
    seed: int = SEED,
    simulations: int = SIMULATIONS,
    workers: int = 1,
) -> Findings:
    """Analyse points in a study area, both in millimetres.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        x, y in millimetres; those outside the area are left out and counted.
    area : shapely geometry or (x0, y0, x1, y1)
        Study area in millimetres.
    name : str
        What the points are called in tables and reports.
    grid : GridOptions or None
        How to lay the quadrats; None for the rule.
    seed : int
        Seed of the simulations.
    simulations : int
        How many.
    workers : int
        How many processes share them; the result does not depend on it.

    Returns
    -------
    Findings

    Examples
    --------
    >>> points = [[x + 5, y + 5] for x in range(0, 100, 10) for y in range(0, 100, 10)]
    >>> print(analyse_points(points, (0, 0, 100, 100), grid=GridOptions(shape=(6, 6))).sentence)
    Evenly spaced: ...
    """
    pattern = Pattern.of(points, area, name=name)
    return analyse_pattern(pattern, grid, seed=seed, simulations=simulations, workers=workers)


def analyse_pattern(
    pattern: Pattern,
    grid_options: GridOptions | None = None,
    *,
    seed: int = SEED,
    simulations: int = SIMULATIONS,
    workers: int = 1,
) -> Findings:
    """Count a pattern in quadrats, test the counts and say what follows.

    Parameters
    ----------
    pattern : Pattern
        Points in a study area.
    grid_options : GridOptions or None
        How to lay the quadrats; None for the rule.
    seed : int
        Seed of the simulations, 0 or more. Together with the pattern's name it fixes the result,
        whatever else is analysed before or beside it.
    simulations : int
        How many.
    workers : int
        How many processes share them; the result does not depend on it.

    Returns
    -------
    Findings

    Raises
    ------
    GridWrong
        If the quadrats do not fit the study area.
    OptionWrong
        If the seed or the number of simulations is out of range.

    Notes
    -----
    Density limits are Garwood's exact Poisson limits of the count over the area. The area's
    relative standard uncertainty is twice that of a length; it is combined with the count's on
    the log scale, in quadrature of the half widths, and widens the limits.

    Examples
    --------
    >>> import shapely
    >>> from analyse.nulls import random_points
    >>> area = shapely.Point(0, 0).buffer(43)
    >>> points = random_points(area, 90, np.random.default_rng(7))
    >>> analyse_pattern(Pattern.of(points, area, name="dish")).verdict
    'no departure from random found'
    """
    options = grid_options or GridOptions()
    grid = lay_grid(pattern.area, len(pattern), options, pattern.unit, pattern.dish)
    seen = count_in_quadrats(pattern.points, grid)
    counts = QuadratCounts(seen, grid.area, grid.whole, grid, grid.row, grid.column)
    settings: dict[str, Any] = {
        "quadrats": grid.shape,
        "side": grid.side,
        "side_by_rule": options == GridOptions(join_below=options.join_below),
        "unit": pattern.unit,
        "rows": grid.rows,
        "columns": grid.columns,
        "join_below": options.join_below,
        "joined": grid.joined,
    }
    area, density = float(pattern.area.area), None
    if pattern.unit == "mm":
        density = density_per_cm2(len(pattern), area, pattern.relative_uncertainty)
    values = {name: getattr(pattern, name) for name in ("outside", "duplicates", "doubtful")}
    values["dish_notes"] = "; ".join(pattern.dish_notes)
    subject = Subject(
        pattern.name,
        pattern.unit,
        area,
        pattern,
        counts,
        density,
        pattern.flags,
        values,
        settings,
    )
    return judged(subject, seed, simulations, workers)


def analyse_counts(
    table: CountTable, *, seed: int = SEED, simulations: int = SIMULATIONS
) -> Findings:
    """Test the counts of a table in equal quadrats and say what follows.

    Parameters
    ----------
    table : CountTable
        Counts, with the side of a quadrat where it is known.
    seed : int
        Seed of the simulations, 0 or more.
    simulations : int
        How many.

    Returns
    -------
    Findings
        Area and density only where the side of a quadrat is known.

    Raises
    ------
    GridWrong
        If the side is in pixels.
    OptionWrong
        If the seed or the number of simulations is out of range.

    Examples
    --------
    >>> analyse_counts(CountTable("bed", np.array([0, 9, 0, 0, 8, 1, 0, 7, 0, 0]))).verdict
    'clumped'
    """
    q, side = table.counts.size, _counted_side(table)
    row, column = (None, None) if table.columns is None else np.divmod(np.arange(q), table.columns)
    areas = None if side is None else np.full(q, side * side)
    area = None if side is None else q * side * side
    n = int(table.counts.sum())
    settings: dict[str, Any] = {
        "quadrats": "counted" if table.rows is None else "square",
        "side": side,
        "side_by_rule": False,
        "unit": None if side is None else "mm",
        "rows": table.rows,
        "columns": table.columns,
        "joined": 0,
    }
    subject = Subject(
        table.name,
        None if side is None else "mm",
        area,
        None,
        QuadratCounts(table.counts, areas, np.ones(q, dtype=bool), None, row, column),
        None if area is None else density_per_cm2(n, area, 0.0),
        (
            *(("no_area",) if side is None else ()),
            *(("like_frequencies",) if table.like_frequencies else ()),
        ),
        {},
        settings,
    )
    return judged(subject, seed, simulations)


def _counted_side(table: CountTable) -> float | None:
    """Return the side of a counted quadrat in millimetres, where it is known."""
    if table.side is not None and table.side.in_pixels:
        raise GridWrong(
            f"--quadrat {table.side} is in pixels; give the side of a counted quadrat in mm."
        )
    return None if table.side is None else table.side.to_mm()
