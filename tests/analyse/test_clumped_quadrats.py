"""Quadrats merged to blocks: by hand, nothing lost, and what merging is for."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analyse.clumped_density import profile_limits
from analyse.clumped_quadrats import FEWEST_BLOCKS, block_of, clumped_in_quadrats
from analyse.quadrats import QuadratCounts


def laid(rows: int, columns: int, counts: object = None) -> QuadratCounts:
    """A rectangle of whole quadrats with known places."""
    row, column = np.divmod(np.arange(rows * columns), columns)
    seen = np.ones(row.size, dtype=int) if counts is None else np.array(counts).reshape(-1)
    return QuadratCounts(seen, None, np.ones(row.size, dtype=bool), None, row, column)


@pytest.mark.parametrize(
    ("rows", "columns", "merged", "blocks"),
    [
        (6, 6, (1, 1), 36),
        (9, 10, (1, 1), 90),
        (10, 10, (2, 2), 25),
        (20, 20, (4, 4), 25),
        (1, 100, (1, 4), 25),
        (2, 200, (2, 8), 25),
        (21, 20, (4, 4), 30),  # a last row of clipped blocks
    ],
)
def test_blocks_by_hand(rows: int, columns: int, merged: tuple[int, int], blocks: int) -> None:
    counts = laid(rows, columns)
    found, block = block_of(counts, np.ones(len(counts)))
    assert found == merged
    assert len(np.unique(block)) == block.max() + 1 == blocks


def test_counts_without_places_stay_as_they_are() -> None:
    counts = QuadratCounts(np.arange(100), None, np.ones(100, dtype=bool))
    merged, block = block_of(counts, np.ones(100))
    assert (merged, block.tolist()) == ((1, 1), list(range(100)))


@given(st.integers(1, 40), st.integers(1, 40), st.integers(0, 2**32 - 1))
def test_nothing_is_lost_and_blocks_are_contiguous(rows: int, columns: int, seed: int) -> None:
    counts = laid(rows, columns)
    shares = np.random.default_rng(seed).uniform(0.3, 1.0, len(counts))
    merged, block = block_of(counts, shares)
    assert np.bincount(block, weights=shares).sum() == pytest.approx(shares.sum())
    assert counts.row is not None
    assert counts.column is not None
    for places, most in ((counts.row, merged[0]), (counts.column, merged[1])):
        spans = [np.ptp(places[block == each]) for each in range(block.max() + 1)]
        assert max(spans) < most
    if merged != (1, 1):
        assert shares.sum() / (merged[0] * merged[1]) >= FEWEST_BLOCKS


def test_the_mean_is_the_same_and_the_limits_are_of_the_blocks() -> None:
    rng = np.random.default_rng(2)
    seen = rng.poisson(2.0, (20, 20))
    mean, density = clumped_in_quadrats(
        laid(20, 20, seen), rng=np.random.default_rng(1), relative_uncertainty=None
    )
    assert density is None
    assert mean is not None
    assert mean.profile is not None
    blocks = seen.reshape(5, 4, 5, 4).sum(axis=(1, 3)).reshape(-1)
    plain = profile_limits(blocks)
    assert mean.profile.value == pytest.approx(seen.mean())
    assert [mean.profile.low * 16, mean.profile.high * 16] == pytest.approx(
        [plain.low, plain.high], rel=1e-5
    )


def test_clumps_wider_than_a_quadrat_are_covered_only_when_merged() -> None:
    """Clumps of about 10 over 3 x 3 of 24 x 24 quadrats, 60 of them on a torus, 60 draws.

    Taken as independent, quadrats cover the mean of 600 / 576 far too rarely.
    """
    rng = np.random.default_rng(5)
    hits = np.zeros(2)
    for _ in range(60):
        clumps = rng.poisson(60)
        home = rng.integers(0, 24, (clumps, 1, 2)) + rng.integers(0, 3, (clumps, 40, 2))
        there = np.arange(40) < rng.poisson(10, (clumps, 1))
        seen = np.zeros((24, 24), dtype=int)
        np.add.at(seen, tuple((home[there] % 24).T), 1)
        merged, _ = clumped_in_quadrats(laid(24, 24, seen), rng=rng, relative_uncertainty=None)
        assert merged is not None
        assert merged.profile is not None
        plain = profile_limits(seen.reshape(-1))
        hits += [each.low <= 600 / 576 <= each.high for each in (merged.profile, plain)]
    with_blocks, without = hits / 60
    assert with_blocks >= 0.85
    assert without <= 0.80
