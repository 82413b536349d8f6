"""How crowded objects lie, against the plain definition."""

from __future__ import annotations

import numpy as np
import pytest

from detect.crowding import distances_apart


def plainly(xy: np.ndarray, radius: np.ndarray) -> list[float]:
    return [
        min(np.hypot(*(xy[i] - xy[j])) / (radius[i] + radius[j]) for j in range(len(xy)) if j != i)
        for i in range(len(xy))
    ]


@pytest.mark.parametrize("n", [2, 3, 60])
def test_the_fast_way_is_the_plain_way(n: int) -> None:
    rng = np.random.default_rng(n)
    xy, radius = rng.uniform(0, 100, (n, 2)), np.exp(rng.normal(1.0, 1.2, n))
    assert distances_apart(xy, radius) == pytest.approx(plainly(xy, radius))


def test_a_large_object_farther_away_may_be_the_nearer_one() -> None:
    xy = np.array([[0.0, 0.0], [5.0, 0.0], [0.0, 20.0]])
    assert distances_apart(xy, np.array([1.0, 1.0, 19.0]))[0] == 1.0


def test_coinciding_objects_have_no_distance() -> None:
    assert distances_apart(np.zeros((3, 2)), np.ones(3)).tolist() == [0.0, 0.0, 0.0]


def test_a_single_object_is_infinitely_free() -> None:
    assert distances_apart(np.zeros((1, 2)), np.ones(1)).tolist() == [np.inf]
    assert distances_apart(np.zeros((0, 2)), np.ones(0)).shape == (0,)
