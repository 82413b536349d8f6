"""Simulated curves: the same bytes whoever draws them, and little memory."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest
from numpy.typing import NDArray

from analyse.nulls import CompleteRandomness
from analyse.scales import Sides
from analyse.simulated_curves import _shares, simulate_curves, stream_of
from detect.errors import OptionWrong
from tests.analyse.areas import RAGGED

NULL = CompleteRandomness(RAGGED)


def nearest(points: NDArray[np.float64]) -> NDArray[np.float64]:
    """Any values of a pattern."""
    return np.append(points.mean(axis=0), points[0])


def test_any_number_of_workers_gives_the_same_bytes(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("analyse.simulated_curves._WORTH_SHARING", 0.0)
    curves = Sides.of(RAGGED, 80).vmr
    one, two, three = (
        simulate_curves(curves, NULL, n=80, simulations=101, seed=7, workers=k) for k in (1, 2, 3)
    )
    assert one.tobytes() == two.tobytes() == three.tobytes()
    assert one[0].tobytes() == curves(NULL.draw(80, stream_of(7, 0))).tobytes()
    assert one.shape == (101, len(Sides.of(RAGGED, 80)))


def test_a_simulation_depends_on_the_seed_and_its_number_alone() -> None:
    long = simulate_curves(nearest, NULL, n=30, simulations=20, seed=3)
    short = simulate_curves(nearest, NULL, n=30, simulations=5, seed=3)
    assert long[:5].tolist() == short.tolist()
    again = nearest(NULL.draw(30, stream_of(3, 17)))
    assert long[17].tolist() == again.tolist()
    other = simulate_curves(nearest, NULL, n=30, simulations=20, seed=4)
    assert not np.isin(other, long).any()
    assert len(np.unique(long)) == long.size


def test_progress_is_told_to_the_end() -> None:
    told: list[tuple[int, int]] = []
    simulate_curves(
        nearest, NULL, n=5, simulations=99, seed=1, progress=lambda *done: told.append(done)
    )
    assert told[-1] == (99, 99)
    assert told == sorted(set(told))


def test_one_simulation_alone() -> None:
    assert simulate_curves(nearest, NULL, n=5, simulations=1, seed=1).shape == (1, 4)
    for workers in (1, 3):
        shares = _shares(100, workers)
        assert [i for rows in shares for i in rows] == list(range(1, 100))


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

    starts = iter(range(40))
    with pytest.raises(
        ValueError, match="the curves of some patterns have 98 values, of others 99"
    ):
        simulate_curves(
            lambda xy: xy[int(next(starts) > 0) :, 0], NULL, n=99, simulations=8, seed=1
        )
