"""Resampled quadrats: exact enumeration, scipy's own bootstrap, and what stays the same."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from scipy import stats

from analyse.bootstrap import _resampled, bootstrap_limits

COUNTS = np.array([0, 3, 1, 0, 7, 2, 0, 5, 1, 1, 0, 9])


def test_against_an_independent_bootstrap_of_equal_quadrats() -> None:
    """scipy.stats.bootstrap by the same method (BCa), both with many resamples."""
    ours = bootstrap_limits(COUNTS, rng=np.random.default_rng(1), resamples=60_000)
    theirs = stats.bootstrap(
        (COUNTS,), np.mean, n_resamples=60_000, rng=np.random.default_rng(2), method="BCa"
    ).confidence_interval
    assert (ours.low, ours.high) == pytest.approx((theirs.low, theirs.high), abs=0.09)
    assert ours.value == pytest.approx(COUNTS.mean())


def test_against_an_independent_bootstrap_of_clipped_quadrats() -> None:
    """The ratio of points to area, pairs resampled together (Davison and Hinkley 1997)."""
    areas = np.linspace(0.3, 1.0, COUNTS.size)
    ours = bootstrap_limits(COUNTS, areas, rng=np.random.default_rng(1), resamples=60_000)
    theirs = stats.bootstrap(
        (COUNTS, areas),
        lambda x, a, axis: x.sum(axis=axis) / a.sum(axis=axis),
        n_resamples=60_000,
        rng=np.random.default_rng(2),
        method="BCa",
        paired=True,
        vectorized=True,
    ).confidence_interval
    assert (ours.low, ours.high) == pytest.approx((theirs.low, theirs.high), rel=0.04)
    assert ours.value == pytest.approx(COUNTS.sum() / areas.sum())


def test_resamples_against_all_that_are_possible() -> None:
    """Four quadrats, all 256 resamples: their ratios come with the right frequencies."""
    kinds = np.array([[0.0, 0.5], [2.0, 1.0], [5.0, 1.0]])
    many = np.array([1, 2, 1])
    quadrats = np.repeat(kinds, many, axis=0)
    exact: dict[float, float] = {}
    for chosen in itertools.product(range(4), repeat=4):
        points, area = quadrats[list(chosen)].sum(axis=0)
        exact[round(points / area, 9)] = exact.get(round(points / area, 9), 0) + 1 / 256
    drawn = _resampled(kinds, many, 60_000, np.random.default_rng(3))
    values, seen = np.unique(drawn.round(9), return_counts=True)
    assert set(values.tolist()) == set(exact)
    expected = 60_000 * np.array([exact[value] for value in values.tolist()])
    assert stats.chisquare(seen, expected).pvalue > 0.001


def test_order_does_not_matter_and_the_seed_does() -> None:
    one = bootstrap_limits(COUNTS, rng=np.random.default_rng(1))
    assert one == bootstrap_limits(COUNTS[::-1], rng=np.random.default_rng(1))
    assert one != bootstrap_limits(COUNTS, rng=np.random.default_rng(2))


def test_blocks_of_resamples_do_not_change_how_many_there_are() -> None:
    """Many kinds of quadrats are drawn in several blocks."""
    rng = np.random.default_rng(1)
    kinds = np.column_stack((rng.poisson(3, 1500), rng.uniform(0.5, 1, 1500)))
    drawn = _resampled(kinds, np.ones(1500, dtype=np.int64), 1999, rng)
    assert drawn.shape == (1999,)
    assert drawn.std() == pytest.approx(np.sqrt(3 / 1500) / 0.75, rel=0.2)


def test_nothing_to_resample_is_refused() -> None:
    with pytest.raises(ValueError, match="all quadrats are equally dense"):
        bootstrap_limits([2, 4], [1.0, 2.0], rng=np.random.default_rng(1))
