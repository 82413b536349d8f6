"""Cells of a lattice, sectors of a circle, and which neighbour a small cell joins."""

from __future__ import annotations

import math

import numpy as np
import pytest
import shapely
from shapely.geometry.base import BaseGeometry

from analyse.cells import Lattice, Sectors, joined

TWO_BY_TWO = Lattice(0.0, 0.0, 10.0, 10.0, 2, 2)


def homes(area: BaseGeometry, lattice: Lattice = TWO_BY_TWO, share: float = 0.25) -> list[int]:
    """Return the cell each cell belongs to after joining."""
    full = lattice.width * lattice.height
    sizes = shapely.area(shapely.intersection(lattice.shapes(area), area))
    return joined(lattice, area, sizes, sizes >= full, share * full).tolist()


def test_of_two_clipped_neighbours_the_longer_edge_wins() -> None:
    """The small cell 1 shares 6 with the clipped cell 0 and 2 with the clipped cell 3."""
    parts = [(0, 1, 10, 10), (10, 4, 12, 10), (10, 10, 20, 19), (0, 10, 10, 20)]
    assert homes(shapely.union_all([shapely.box(*part) for part in parts])) == [0, 0, 2, 3]


def test_a_clipped_neighbour_comes_before_a_whole_one() -> None:
    parts = [(0, 0, 10, 10), (10, 4, 12, 10), (10, 10, 20, 19), (0, 10, 10, 20)]
    assert homes(shapely.union_all([shapely.box(*part) for part in parts])) == [0, 3, 2, 3]


def test_on_a_tie_the_first_wins() -> None:
    parts = [(0, 1, 10, 10), (10, 8, 12, 10), (10, 10, 20, 19), (0, 10, 10, 20)]
    assert homes(shapely.union_all([shapely.box(*part) for part in parts])) == [0, 0, 2, 3]


def test_small_cells_gather_until_they_are_large_enough() -> None:
    strip = Lattice(0.0, 0.0, 10.0, 10.0, 1, 5)
    low = shapely.union_all([shapely.box(0, 0, 20, 10), shapely.box(20, 0, 50, 1)])
    assert homes(low, strip, 0.05) == [0, 1, 2, 3, 4]
    assert homes(low, strip, 0.25) == [0, 1, 2, 2, 2]  # a whole cell comes last
    assert homes(shapely.box(0, 0, 50, 1), strip, 0.2) == [0, 0, 2, 2, 2]


def test_cells_outside_the_area_are_no_quadrats() -> None:
    assert homes(shapely.box(0, 0, 10, 20)) == [0, -1, 2, -1]


def test_everything_may_end_in_one() -> None:
    assert homes(shapely.box(9, 9, 11, 11)) == [0, 0, 0, 0]


def test_neighbours_and_their_edges() -> None:
    lattice = Lattice(5.0, 7.0, 2.0, 3.0, 3, 3)
    around = dict(lattice.sides(4))
    assert sorted(around) == [1, 3, 5, 7]
    assert {k: edge.length for k, edge in around.items()} == {1: 2.0, 3: 3.0, 5: 3.0, 7: 2.0}
    assert around[1].equals(shapely.LineString([(7, 10), (9, 10)]))
    assert around[5].equals(shapely.LineString([(9, 10), (9, 13)]))
    assert [k for k, _ in lattice.sides(0)] == [1, 3]


def test_a_point_on_a_line_belongs_to_the_right_or_lower_cell() -> None:
    points = np.array([[10.0, 5.0], [5.0, 10.0], [20.0, 20.0], [0.0, 0.0], [9.999, 9.999]])
    assert TWO_BY_TWO.cell(points).tolist() == [1, 2, 3, 0, 0]


def test_decimal_fifths_lie_on_their_lines() -> None:
    """0.6 / 0.2 is just below 3 in binary, but 0.6 of 1 is 3 of 5."""
    fifths = Lattice(0.0, 0.0, 0.2, 1.0, 1, 5)
    points = np.array([[k / 5, 0.5] for k in range(5)])
    assert fifths.cell(points).tolist() == [0, 1, 2, 3, 4]


def test_sectors_tile_the_plane_around_the_circle() -> None:
    area = shapely.Point(3, 4).buffer(10, quad_segs=90)
    shapes = Sectors(3.0, 4.0, 10.0, 3, 5).shapes(area)
    assert shapely.is_valid(shapes).all()
    assert area.difference(shapely.union_all(shapes)).area == pytest.approx(0.0, abs=1e-9)
    overlap = shapely.area(shapes).sum() - shapely.union_all(shapes).area
    assert overlap == pytest.approx(0.0, abs=1e-6)


def test_rings_without_sectors_have_holes() -> None:
    area = shapely.Point(0, 0).buffer(10, quad_segs=90)
    disc, ring = Sectors(0.0, 0.0, 10.0, 2, 1).shapes(area)
    assert disc.area == pytest.approx(math.pi * 50, rel=1e-4)
    assert len(ring.interiors) == 1
    assert Sectors(0.0, 0.0, 10.0, 2, 1).centres()[0].tolist() == [0.0, 0.0]


def test_centres_lie_in_their_cells() -> None:
    for cells in (TWO_BY_TWO, Sectors(1.0, 2.0, 5.0, 3, 7)):
        assert cells.cell(cells.centres()).tolist() == list(range(cells.rows * cells.columns))
