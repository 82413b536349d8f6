"""Pairs up to a distance against all pairs."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from analyse.pair_distances import near_pairs

coordinates = st.tuples(st.integers(-20, 20), st.integers(-3, 3))


@settings(max_examples=150, deadline=None)
@given(st.lists(coordinates, max_size=30), st.floats(0, 60), st.integers(1, 40))
def test_every_near_pair_is_found_once(
    places: list[tuple[int, int]], reach: float, at_once: int
) -> None:
    points = np.array(places, dtype=float).reshape(-1, 2)
    apart = np.hypot(*(points[:, None] - points).transpose(2, 0, 1))
    wanted = {(i, j) for i, j in zip(*np.nonzero(apart <= reach), strict=True) if i < j}
    found = [
        (min(i, j), max(i, j))
        for one, other in near_pairs(points, reach, at_once=at_once)
        for i, j in zip(one, other, strict=True)
    ]
    assert len(found) == len(set(found))
    assert set(found) == wanted


def test_pieces_stay_small() -> None:
    points = np.random.default_rng(1).uniform(0, 1, (2_000, 2))
    pieces = [len(i) for i, _ in near_pairs(points, 0.3, at_once=10_000)]
    assert max(pieces) <= 10_000
    assert len(pieces) > 10


def test_a_reach_tiny_beside_the_extent_is_no_trouble() -> None:
    points = np.array([[0.0, 0.0], [1e-9, 0.0], [1e6, 1e6], [1e6, 1e6]])
    found = [(i.tolist(), j.tolist()) for i, j in near_pairs(points, 1e-8)]
    assert found == [([0, 2], [1, 3])]
