"""Simulated curves: the same bytes whoever draws them, and little memory."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest
from numpy.typing import NDArray

from analyse.nulls import CompleteRandomness
from analyse.scales import Sides
from analyse.simulated_curves import simulate_curves, stream_of
from detect.errors import OptionWrong
from tests.analyse.areas import RAGGED

NULL = CompleteRandomness(RAGGED)


def nearest(points: NDArray[np.float64]) -> NDArray[np.float64]:
    """Any values of a pattern."""
    return np.append(points.mean(axis=0), points[0])


def test_any_number_of_workers_gives_the_same_bytes() -> None:
    curves = Sides.of(RAGGED, 80).vmr
    one, two, three = (
        simulate_curves(curves, NULL, n=80, simulations=101, seed=7, workers=k) for k in (1, 2, 3)
    )
    assert one.tobytes() == two.tobytes() == three.tobytes()
    assert one.shape == (101, len(Sides.of(RAGGED, 80)))


def test_a_simulation_depends_on_the_seed_and_its_number_alone() -> None:
    long = simulate_curves(nearest, NULL, n=30, simulations=20, seed=3)
    short = simulate_curves(nearest, NULL, n=30, simulations=5, seed=3, workers=2)
    assert long[:5].tolist() == short.tolist()
    again = nearest(NULL.draw(30, stream_of(3, 17)))
    assert long[17].tolist() == again.tolist()
    other = simulate_curves(nearest, NULL, n=30, simulations=20, seed=4)
    assert not np.isin(other, long).any()
    assert len(np.unique(long)) == long.size


def test_more_workers_than_simulations() -> None:
    assert simulate_curves(nearest, NULL, n=5, simulations=2, seed=1, workers=8).shape == (2, 4)


def test_no_pattern_is_kept() -> None:
    """300 patterns of 20,000 points would hold 96 MB; their curves hold next to nothing."""
    tracemalloc.start()
    simulate_curves(nearest, NULL, n=20_000, simulations=300, seed=1)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 8e6


def test_what_cannot_be_simulated_is_refused() -> None:
    with pytest.raises(OptionWrong, match="--seed must be a whole number of 0 or more, not -1"):
        simulate_curves(nearest, NULL, n=5, simulations=9, seed=-1)
    with pytest.raises(ValueError, match="1 or more simulations and workers, not 0 and 1"):
        simulate_curves(nearest, NULL, n=5, simulations=0, seed=1)
    with pytest.raises(ValueError, match="not 9 and 0"):
        simulate_curves(nearest, NULL, n=5, simulations=9, seed=1, workers=0)

    def uneven(points: NDArray[np.float64]) -> NDArray[np.float64]:
        return points[: int(points[0, 0]) + 20, 0]

    for workers in (1, 2):
        with pytest.raises(ValueError, match=r"curves of shape \(\d+,\) after some of"):
            simulate_curves(uneven, NULL, n=99, simulations=50, seed=1, workers=workers)
