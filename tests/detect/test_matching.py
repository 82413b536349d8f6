"""Which spot is which object: pairs against plain enumeration."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detect.matching import MatchOptions, match_spots


def best_by_enumeration(
    found: np.ndarray, truth: np.ndarray, reach: np.ndarray
) -> tuple[int, float]:
    """Most pairs, then least total distance, by trying every assignment."""
    best = (0, 0.0)
    slots = [*range(len(truth)), *([None] * len(found))]
    for choice in set(itertools.permutations(slots, len(found))):
        pairs = [
            math.dist(found[i], truth[j])
            for i, j in enumerate(choice)
            if j is not None and math.dist(found[i], truth[j]) <= reach[j]
        ]
        best = min(best, (-len(pairs), sum(pairs)))
    return -best[0], best[1]


points = st.lists(st.tuples(st.integers(0, 12), st.integers(0, 12)), max_size=4)


@settings(max_examples=60, deadline=None)
@given(points, points, st.integers(1, 14))
def test_pairs_are_the_best_that_enumeration_finds(
    found: list[tuple[int, int]], truth: list[tuple[int, int]], radius: int
) -> None:
    found_xy, truth_xy = (np.array(p, dtype=float).reshape(-1, 2) for p in (found, truth))
    radii = np.full(len(truth_xy), float(radius))
    match = match_spots(found_xy, truth_xy, radii)
    number, total = best_by_enumeration(found_xy, truth_xy, np.maximum(0.5 * radii, 3.0))
    assert len(match) == number
    assert match.distance.sum() == pytest.approx(total)
    assert len(set(match.found.tolist())) == len(set(match.truth.tolist())) == number


def test_more_pairs_come_before_nearer_ones() -> None:
    # The middle spot is nearest to the left object, but only the far pairing serves both.
    match = match_spots([[2, 0], [-2, 0]], [[1, 0], [4.5, 0]], [4, 4])
    assert match.truth.tolist() == [0, 1]
    assert match.found.tolist() == [1, 0]


def test_reach_is_half_a_radius_but_three_pixels_at_least() -> None:
    assert len(match_spots([[3, 0]], [[0, 0]], [1])) == 1
    assert len(match_spots([[3.01, 0]], [[0, 0]], [1])) == 0
    assert len(match_spots([[10, 0]], [[0, 0]], [20])) == 1
    assert len(match_spots([[10.01, 0]], [[0, 0]], [20])) == 0
    assert len(match_spots([[10.01, 0]], [[0, 0]], [20], options=MatchOptions(radii=1.0))) == 1


def test_many_spots_are_paired_in_a_moment() -> None:
    rng = np.random.default_rng(5)
    truth = rng.uniform(0, 4000, (8000, 2))
    order = rng.permutation(len(truth))
    match = match_spots(truth[order], truth, np.full(len(truth), 5.0))
    assert len(match) == len(truth)
    assert np.array_equal(order[match.found], match.truth)
