"""Grids: exact areas, no point lost, published counts, and invariances."""

from __future__ import annotations

import math

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely import affinity
from shapely.geometry.base import BaseGeometry

from analyse.errors import GridWrong
from analyse.nulls import random_points
from analyse.pattern import Circle
from analyse.quadrats import (
    Grid,
    GridOptions,
    QuadratCounts,
    count_in_quadrats,
    lay_grid,
)
from detect.lengths import Length
from tests.analyse import published

LEAF = shapely.Polygon(
    [(0, 0), (40, 8), (90, -10), (100, 50), (70, 60), (95, 100), (30, 90), (10, 60), (-15, 40)],
    [[(40, 30), (60, 30), (60, 55), (40, 50)]],
)
DISH = shapely.Point(43, 43).buffer(43, quad_segs=90)
ISLANDS = shapely.MultiPolygon([shapely.box(0, 0, 21, 21), shapely.box(44.9, 44.9, 46, 46)])
AREAS: dict[str, BaseGeometry] = {
    "rectangle": shapely.box(0, 0, 100, 60),
    "dish": DISH,
    "leaf": LEAF,
    "islands": ISLANDS,
}


def laid(area: BaseGeometry, side: float | None = None, n: int = 100) -> Grid:
    """Lay squares of a side in millimetres, or by rule."""
    return lay_grid(area, n, GridOptions(side=None if side is None else Length(side, "mm")))


@pytest.mark.parametrize("side", [None, 7.0, 10.0, 19.0])
@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
def test_quadrats_are_the_area_without_overlap(area: BaseGeometry, side: float | None) -> None:
    grid = laid(area, side)
    assert grid.area.sum() == pytest.approx(area.area, rel=1e-9)
    union = shapely.union_all(grid.polygons)
    assert union.symmetric_difference(area).area < 1e-6 * area.area
    assert shapely.area(np.array(grid.polygons)) == pytest.approx(grid.area, rel=1e-9)
    assert grid.area.min() >= 0.25 * grid.full_area
    assert (grid.area[grid.whole] >= 0.998 * grid.full_area).all()


@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
def test_every_point_is_counted_where_it_lies(area: BaseGeometry) -> None:
    points = random_points(area, 500, np.random.default_rng(4))
    grid = laid(area, 9.0)
    counts = count_in_quadrats(points, grid)
    assert counts.sum() == 500
    plain = [int(shapely.contains_xy(cell, *points.T).sum()) for cell in grid.polygons]
    assert counts.tolist() == plain


def test_published_counts_of_cells_and_redwood() -> None:
    """Ripley (1977) and Strauss (1975): 5 x 5 counts with the top row first, y upwards.

    Ours run with y downwards, so that the rows come in the opposite order.
    """
    wanted = {
        "cells": "1 1 1 3 0/2 3 2 1 2/1 1 2 2 3/1 2 2 2 2/1 2 2 2 1",
        "redwood": "0 1 4 3 6/2 0 0 8 0/5 5 3 0 2/1 1 6 0 2/0 6 3 1 3",
    }
    windows = {"cells": published.CELLS_WINDOW, "redwood": published.REDWOOD_WINDOW}
    for name, text in wanted.items():
        points = published.points(name)
        grid = lay_grid(shapely.box(*windows[name]), len(points), GridOptions(shape=(5, 5)))
        counts = count_in_quadrats(points, grid).reshape(5, 5)
        assert [" ".join(map(str, row)) for row in counts[::-1]] == text.split("/")


def test_default_side_does_not_look_at_the_points() -> None:
    assert laid(DISH, n=90).side == laid(affinity.translate(DISH, 1000, -3), n=90).side


@pytest.mark.parametrize("n", [0, 1, 9, 10, 40, 1000])
@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
def test_the_rule_always_lays_a_grid(area: BaseGeometry, n: int) -> None:
    assert len(lay_grid(area, n)) >= 2


def test_squares_are_centred_and_cells_half_open() -> None:
    grid = laid(shapely.box(0, 0, 25, 20), 10.0)
    assert (grid.rows, grid.columns) == (2, 3)
    assert np.unique(grid.x).tolist() == [2.5, 12.5, 22.5]
    assert grid.area.tolist() == [75, 100, 75] * 2
    assert grid.whole.tolist() == [False, True, False] * 2
    assert count_in_quadrats([[7.5, 10.0], [0, 0], [25, 20], [17.5, 3]], grid).tolist() == [
        1, 0, 1, 0, 1, 1,
    ]  # fmt: skip


def test_rows_and_columns_divide_the_box_exactly() -> None:
    grid = lay_grid(shapely.box(10, 20, 110, 80), 30, GridOptions(shape=(3, 4)))
    assert (grid.rows, grid.columns, grid.shape, grid.side) == (3, 4, "rectangle", None)
    assert grid.area.tolist() == pytest.approx([500.0] * 12)
    assert grid.whole.all()
    assert grid.row.tolist() == [r for r in range(3) for _ in range(4)]
    assert grid.column.tolist() == list(range(4)) * 3
    assert grid.x[:4].tolist() == [22.5, 47.5, 72.5, 97.5]


def test_a_plot_a_hair_off_its_size_gets_no_extra_quadrats() -> None:
    area = shapely.Polygon([(0, 0), (1000.02, 0.01), (999.99, 750.03), (-0.01, 749.98)])
    grid = laid(area, 50.0)
    assert (grid.rows, grid.columns, len(grid)) == (15, 20, 300)
    assert grid.whole.all()
    assert grid.area.sum() == pytest.approx(area.area, rel=1e-12)


def test_a_small_piece_joins_its_neighbour() -> None:
    grid = lay_grid(
        shapely.Polygon([(0, 0), (30, 0), (30, 1), (22, 2), (22, 10), (0, 10)]),
        9,
        GridOptions(shape=(1, 3)),
    )
    assert len(grid) == 3
    piece = shapely.Polygon([(0, 0), (30, 0), (30, 1), (21, 1), (21, 10), (0, 10)])
    grid = lay_grid(piece, 9, GridOptions(shape=(1, 3)))
    assert (len(grid), grid.joined) == (2, 1)
    assert grid.area.tolist() == pytest.approx([100, 119])
    assert grid.whole.tolist() == [True, False]
    assert grid.column.tolist() == [0, 1]
    assert count_in_quadrats([[29, 0.5], [12, 5]], grid).tolist() == [0, 2]
    apart = lay_grid(piece, 9, GridOptions(shape=(1, 3), join_below=0.0))
    assert (len(apart), apart.joined) == (3, 0)
    assert apart.area.tolist() == pytest.approx([100, 100, 19])


def test_a_small_piece_joins_a_clipped_neighbour_before_a_whole_one() -> None:
    """The small cell (0, 1) has the longer edge with the whole cell (0, 0)."""
    area = shapely.union_all(
        [shapely.box(0, 0, 10, 20), shapely.box(10, 4, 12, 10), shapely.box(10, 10, 20, 19)]
    )
    grid = lay_grid(area, 9, GridOptions(shape=(2, 2)))
    assert grid.whole.tolist() == [True, True, False]
    assert grid.area.tolist() == pytest.approx([100, 100, 102])


def test_an_island_without_neighbours_joins_the_nearest() -> None:
    grid = laid(ISLANDS, 10.0)
    small = [k for k, cell in enumerate(grid.polygons) if cell.geom_type == "MultiPolygon"]
    assert len(small) == 1
    assert count_in_quadrats([[45.5, 45.5]], grid)[small[0]] == 1


def test_pieces_of_nothing_but_edges_are_dropped() -> None:
    """A cell that the area meets in a line and a sliver keeps its polygon only."""
    area = shapely.Polygon([(0, 0), (10, 0), (10, 4), (20, 4), (20, 10), (10, 10), (10, 5), (0, 5)])
    grid = lay_grid(area, 9, GridOptions(shape=(1, 2), join_below=0.0))
    assert all(cell.geom_type in ("Polygon", "MultiPolygon") for cell in grid.polygons)
    assert grid.area.sum() == pytest.approx(area.area)


def test_a_point_on_the_very_edge_of_the_area_is_not_lost() -> None:
    """The tip touches a cell that holds none of the area."""
    area = shapely.Polygon([(0, 0), (20, 0), (20, 10), (10, 10), (0, 10)])
    hung = area.union(shapely.Polygon([(0, 10), (5, 20), (5, 10)]))
    grid = lay_grid(hung, 9, GridOptions(shape=(2, 2), join_below=0.0))
    assert len(grid) == 3
    assert count_in_quadrats([[11.0, 10.0]], grid).tolist() == [0, 1, 0]


@given(
    st.integers(0, 2**32),
    st.floats(-1e4, 1e4),
    st.floats(-1e4, 1e4),
    st.sampled_from(sorted(AREAS)),
)
@settings(max_examples=25, deadline=None)
def test_moving_everything_changes_no_count(seed: int, dx: float, dy: float, name: str) -> None:
    points = random_points(AREAS[name], 60, np.random.default_rng(seed))
    here = count_in_quadrats(points, laid(AREAS[name], 13.0))
    there = laid(affinity.translate(AREAS[name], dx, dy), 13.0)
    assert count_in_quadrats(points + np.array([dx, dy]), there).tolist() == here.tolist()


@given(st.integers(0, 2**32), st.integers(1, 3))
@settings(max_examples=25, deadline=None)
def test_quarter_turns_keep_the_counts(seed: int, turns: int) -> None:
    """Counts come in another order; the ragged area has no ties in joining."""
    points = random_points(LEAF, 80, np.random.default_rng(seed))
    turned = points
    for _ in range(turns):
        turned = np.column_stack([-turned[:, 1], turned[:, 0]])
    area = affinity.rotate(LEAF, 90 * turns, origin=(0, 0))
    one, other = laid(LEAF, 12.0), laid(area, 12.0)
    assert np.sort(other.area) == pytest.approx(np.sort(one.area))
    assert sorted(count_in_quadrats(turned, other)) == sorted(count_in_quadrats(points, one))


@given(st.integers(0, 2**32), st.floats(0.01, 1000))
@settings(max_examples=25, deadline=None)
def test_the_unit_does_not_matter(seed: int, factor: float) -> None:
    points = random_points(DISH, 60, np.random.default_rng(seed))
    scaled = affinity.scale(DISH, factor, factor, origin=(0, 0))
    grid = laid(scaled, 11.0 * factor)
    here = count_in_quadrats(points, laid(DISH, 11.0))
    assert count_in_quadrats(points * factor, grid).tolist() == here.tolist()


@given(st.permutations(range(40)))
@settings(max_examples=20, deadline=None)
def test_the_order_of_points_does_not_matter(order: list[int]) -> None:
    points = random_points(DISH, 40, np.random.default_rng(1))
    grid = laid(DISH, 20.0)
    assert (
        count_in_quadrats(points[order], grid).tolist() == count_in_quadrats(points, grid).tolist()
    )


@pytest.mark.parametrize("rings", [(3, 8), (1, 6), (4, 1), (2, 2)])
def test_rings_and_sectors_of_a_dish_have_equal_area(rings: tuple[int, int]) -> None:
    grid = lay_grid(DISH, 90, GridOptions(rings=rings), dish=Circle(43, 43, 43))
    share = DISH.area / math.prod(rings)
    assert len(grid) == math.prod(rings)
    assert grid.area == pytest.approx(np.full(len(grid), share), rel=2e-4)
    assert grid.area.sum() == pytest.approx(DISH.area, rel=1e-9)
    assert grid.whole.all()
    assert (grid.shape, grid.side, grid.rows, grid.columns) == ("sectors", None, *rings)
    points = random_points(DISH, 2000, np.random.default_rng(3))
    counts = count_in_quadrats(points, grid)
    plain = [int(shapely.contains_xy(cell, *points.T).sum()) for cell in grid.polygons]
    assert counts.sum() == 2000
    assert np.abs(counts - plain).sum() <= 4  # points within the breadth of an arc's chord


def test_sectors_of_a_dish_seen_at_a_slant_count_by_their_true_area() -> None:
    slanted = affinity.scale(DISH, 1.0, 0.8)
    radius = math.sqrt(slanted.area / math.pi)
    grid = lay_grid(slanted, 90, GridOptions(rings=(2, 6)), dish=Circle(43, 43, radius))
    assert grid.area.sum() == pytest.approx(slanted.area, rel=1e-9)
    assert not grid.whole.all()
    points = random_points(slanted, 4000, np.random.default_rng(3))
    counts = count_in_quadrats(points, grid)
    assert counts.sum() == 4000
    assert counts / 4000 == pytest.approx(grid.area / slanted.area, abs=0.025)


def test_sectors_start_at_the_right_and_run_clockwise_on_the_picture() -> None:
    grid = lay_grid(DISH, 90, GridOptions(rings=(1, 4)), dish=Circle(43, 43, 43))
    below_right = count_in_quadrats([[60.0, 60.0]], grid)  # y runs down
    assert below_right.tolist() == [1, 0, 0, 0]
    assert (grid.x[0] > 43, grid.y[0] > 43) == (True, True)


def test_arrays_cannot_be_changed() -> None:
    grid = laid(DISH, 20.0)
    with pytest.raises(ValueError, match="read-only"):
        grid.area[0] = 1.0


@pytest.mark.parametrize(
    ("options", "unit", "message"),
    [
        (GridOptions(side=Length(12, "cm")), "mm", r"A quadrat of 120 mm .*\(86 x 86 mm\)"),
        (
            GridOptions(side=Length(86, "mm")),
            "mm",
            r"A quadrat of 86 mm covers the whole study area \(86",
        ),
        (
            GridOptions(side=Length(0.1, "mm")),
            "mm",
            "the box around the study area into 739,600 cells, more than 100,000",
        ),
        (GridOptions(side=Length(9, "px")), "mm", "9px is in pixels, but the scale is known"),
        (GridOptions(side=Length(9, "mm")), "px", "9mm needs a scale, and none is known"),
        (GridOptions(rings=(3, 8)), "mm", "--rings needs a dish, and this study area is none"),
    ],
)
def test_quadrats_that_do_not_fit_are_refused(
    options: GridOptions, unit: str, message: str
) -> None:
    with pytest.raises(GridWrong, match=message):
        lay_grid(DISH, 60, options, unit)  # type: ignore[arg-type]


def test_a_single_quadrat_is_refused() -> None:
    options = GridOptions(side=Length(10, "mm"), join_below=0.9)
    with pytest.raises(GridWrong, match="only 1 quadrat in the study area; choose smaller"):
        lay_grid(shapely.box(0, 0, 10.4, 10), 60, options)


def test_pixels_serve_where_no_scale_is_known() -> None:
    grid = lay_grid(DISH, 60, GridOptions(side=Length(20, "px")), "px")
    assert (grid.side, grid.unit) == (20.0, "px")


def test_counts_without_grid_and_their_checks() -> None:
    counts = QuadratCounts(np.array([1, 2]), None, np.array([True, True]))
    assert (len(counts), counts.clipped_share) == (2, 0.0)
    half = QuadratCounts(np.array([1, 2]), np.array([3.0, 1.0]), np.array([True, False]))
    assert half.clipped_share == 0.25
    with pytest.raises(ValueError, match=r"area has shape \(3,\) for 2 quadrats"):
        QuadratCounts(np.array([1, 2]), np.ones(3), np.array([True, True]))
    grid = laid(DISH, 20.0)
    from dataclasses import replace

    with pytest.raises(ValueError, match=r"x has shape \(2,\) for"):
        replace(grid, x=np.zeros(2))


def test_a_quadrat_of_just_a_quarter_is_joined_in_no_unit() -> None:
    """Rounding made some units join what keeps exactly the least share, and others not."""
    whole, notch = shapely.box(0, 0, 8, 8), shapely.box(4, 4, 8, 8) - shapely.box(4, 4, 6, 6)
    for factor in (1.0, 0.1, 0.3, 0.7, 1.1, 1000 / 3):
        area = shapely.transform(whole - notch, lambda xy, factor=factor: xy * factor)
        grid = lay_grid(area, 9, GridOptions(shape=(2, 2)))
        assert (len(grid), grid.joined) == (4, 0)
