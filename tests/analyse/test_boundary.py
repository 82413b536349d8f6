"""Distances to the edge, exact and from tables, and the area that lies deep inside."""

from __future__ import annotations

import math

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st

from analyse.boundary import Boundary, boundary_distance, eroded_area
from analyse.nulls import random_points
from tests.analyse.shapes import AREAS, DISH, LEAF, OBLONG, ragged


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 100_000))
def test_the_distance_is_that_to_the_whole_edge_and_holes_have_edges(seed: int) -> None:
    area = ragged(seed)
    points = random_points(area, 30, np.random.default_rng(seed))
    wanted = shapely.distance(area.boundary, shapely.points(points))
    assert boundary_distance(points, area) == pytest.approx(wanted, rel=1e-9, abs=1e-12)


def test_a_hole_is_near() -> None:
    ring = shapely.Point(0, 0).buffer(10, quad_segs=90) - shapely.box(-1, -1, 1, 1)
    assert boundary_distance([[3.0, 0.0]], ring)[0] == pytest.approx(2.0)
    assert Boundary.of(ring).distance(np.array([[3.0, 0.0]]))[0] == pytest.approx(2.0, abs=1e-3)


def test_no_points_have_no_distances() -> None:
    assert boundary_distance([], LEAF).shape == (0,)


@pytest.mark.parametrize("name", AREAS)
def test_the_prepared_edge_is_the_edge(name: str) -> None:
    """Exact on rectangles and to 0.01 % on dishes; elsewhere 0.3 % of sqrt(A), 0.01 % on average."""
    area = AREAS[name]
    points = random_points(area, 3_000, np.random.default_rng(1))
    edge = Boundary.of(area)
    off = np.abs(edge.distance(points) - boundary_distance(points, area)) / math.sqrt(area.area)
    most = {"square": 1e-12, "oblong": 1e-12, "dish": 1e-4}.get(name, 4e-3)
    assert off.max() < most
    assert off.mean() < max(most / 20, 1e-12)


@pytest.mark.parametrize("name", AREAS)
def test_the_area_beyond_a_depth(name: str) -> None:
    """Against the share of many random points that lie so deep."""
    area = AREAS[name]
    edge = Boundary.of(area)
    depth = edge.depths[-1] * np.array([0.0, 0.1, 0.3, 0.6])
    deep = boundary_distance(random_points(area, 20_000, np.random.default_rng(2)), area)
    share = [(deep >= each).mean() for each in depth]
    assert edge.area_beyond(depth) / area.area == pytest.approx(share, abs=0.015)
    assert edge.area_beyond(np.array([0.0]))[0] == pytest.approx(area.area, rel=1e-3)


def test_closed_forms_of_the_eroded_area() -> None:
    assert eroded_area(OBLONG, 1.0) == 20.0
    assert eroded_area(OBLONG, 2.5) == 0.0
    assert eroded_area(DISH, 13.0) == pytest.approx(math.pi * 30**2, rel=1e-3)
    assert Boundary.of(DISH).area_beyond(np.array([13.0]))[0] == pytest.approx(
        math.pi * 30**2, rel=1e-3
    )


def test_each_shape_says_how_it_is_held() -> None:
    assert "rectangle" in repr(Boundary.of(OBLONG))
    assert "disc" in repr(Boundary.of(DISH))
    assert "table" in repr(Boundary.of(LEAF))
