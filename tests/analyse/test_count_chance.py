"""Random counts: exact enumeration, and p values that are uniform at random."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from shapely.geometry.base import BaseGeometry

from analyse.count_chance import (
    least_chi2,
    multinomial_counts,
    simulated_chi2,
    simulated_p,
)
from analyse.dispersion import clipped_dispersion
from analyse.errors import TooFewQuadrats
from analyse.nulls import random_points
from analyse.quadrats import GridOptions, count_in_quadrats, lay_grid
from detect.errors import OptionWrong
from tests.analyse import published
from tests.analyse.areas import AREAS, RAGGED


@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
def test_simulated_p_is_uniform_at_random(area: BaseGeometry) -> None:
    """500 random patterns: the p of each side, and both, follow the uniform distribution."""
    n, p = 240, []
    grid = lay_grid(area, n)
    for seed in range(500):
        rng = np.random.default_rng([seed, 77])
        counts = count_in_quadrats(random_points(area, n, rng), grid)
        test = simulated_p(counts, grid.area, simulations=199, rng=rng)
        p.append((test.p_clumped, test.p_even, test.p_two_sided))
    for side in np.array(p).T:
        assert stats.kstest(side, "uniform").pvalue > 0.01
    assert np.mean(np.array(p)[:, 2] <= 0.05) <= 0.075


def test_published_patterns() -> None:
    """Ripley (1977): redwood seedlings are clumped, biological cells evenly spaced."""
    for name, window, side in (
        ("redwood", published.REDWOOD_WINDOW, "p_clumped"),
        ("cells", published.CELLS_WINDOW, "p_even"),
    ):
        points = published.points(name)
        grid = lay_grid(shapely.box(*window), len(points), GridOptions(shape=(5, 5)))
        counts = count_in_quadrats(points, grid)
        test = simulated_p(counts, grid.area, simulations=1999, rng=np.random.default_rng(1))
        assert getattr(test, side) < 0.005


def exact_p(counts: list[int], areas: list[float]) -> tuple[float, float]:
    """Return the exact upper and lower p of X2, over every way n points can fall."""
    n, shares = sum(counts), np.array(areas) / sum(areas)
    seen = clipped_dispersion(counts, areas).chi2
    upper = lower = 0.0
    for fall in itertools.product(range(n + 1), repeat=len(counts)):
        if sum(fall) == n:
            chance = float(stats.multinomial.pmf(fall, n, shares))
            chi2 = clipped_dispersion(fall, areas).chi2
            upper += chance * (chi2 >= seen - 1e-9)
            lower += chance * (chi2 <= seen + 1e-9)
    return min(1.0, upper), min(1.0, lower)


@pytest.mark.parametrize("counts", [[3, 0, 1, 1], [0, 1, 2, 2], [5, 0, 0, 0], [1, 1, 1, 2]])
@pytest.mark.parametrize("areas", [[1, 2, 3, 4], [1, 1, 1, 1]])
def test_simulation_against_exact_enumeration(counts: list[int], areas: list[float]) -> None:
    simulations = 20_000
    upper, lower = exact_p(counts, areas)
    rng = np.random.default_rng(42)
    test = simulated_p(counts, areas, simulations=simulations, rng=rng)
    for seen, exact in ((test.p_clumped, upper), (test.p_even, lower)):
        error = math.sqrt(exact * (1 - exact) / simulations)
        assert seen == pytest.approx(exact, abs=4 * error + 2 / simulations)
    assert test.p_two_sided == min(1.0, 2 * min(test.p_clumped, test.p_even))


def test_multinomial_counts_are_those_of_random_points() -> None:
    """Mean, variance and the law of one cell, drawn either way."""
    grid, n, times = lay_grid(RAGGED, 40), 40, 3000
    rng = np.random.default_rng(12)
    placed = np.array(
        [count_in_quadrats(random_points(RAGGED, n, rng), grid) for _ in range(times)]
    )
    drawn = multinomial_counts(n, grid.area, times, rng)
    assert (drawn.sum(axis=1) == n).all()
    spread = np.sqrt(2 * drawn.var(axis=0) / times)
    assert np.abs(placed.mean(axis=0) - drawn.mean(axis=0)).max() < 5 * spread.max()
    assert placed.var(axis=0) == pytest.approx(drawn.var(axis=0), rel=0.2)
    k = int(np.argmax(grid.area))
    table = np.array([np.bincount(np.minimum(x[:, k], 6), minlength=7) for x in (placed, drawn)])
    assert stats.chi2_contingency(table[:, table.sum(axis=0) > 9]).pvalue > 0.001


@given(
    st.integers(1, 60),
    st.lists(st.floats(0.1, 10), min_size=2, max_size=8),
    st.integers(0, 2**32),
)
@settings(max_examples=50, deadline=None)
def test_fast_statistics_equal_the_plain_definition(n: int, areas: list[float], seed: int) -> None:
    fast = np.concatenate([*simulated_chi2(n, areas, 20, np.random.default_rng(seed))])
    draws = multinomial_counts(n, areas, 20, np.random.default_rng(seed))
    plain = [clipped_dispersion(x, areas).chi2 for x in draws]
    assert fast == pytest.approx(plain, rel=1e-9, abs=1e-9)


def test_batches_do_not_change_the_values(monkeypatch: pytest.MonkeyPatch) -> None:
    whole = np.concatenate([*simulated_chi2(30, [1, 2, 3], 250, np.random.default_rng(4))])
    monkeypatch.setattr("analyse.count_chance._CELLS_AT_ONCE", 21)
    pieces = [*simulated_chi2(30, [1, 2, 3], 250, np.random.default_rng(4))]
    assert [len(piece) for piece in pieces[:2]] == [7, 7]
    assert np.concatenate(pieces).tolist() == whole.tolist()


def test_p_is_never_zero_and_ties_count_as_extreme() -> None:
    """Phipson and Smyth (2010): p of (b + 1) / (m + 1); every draw of one point ties."""
    test = simulated_p([200, 0, 0, 0], [1, 1, 1, 1], rng=np.random.default_rng(1))
    assert test.p_clumped == 1 / 1000
    assert test.p_two_sided == 2 / 1000
    assert test.p_even == 1.0
    tied = simulated_p([1, 0, 0], [1, 1, 1], rng=np.random.default_rng(1))
    assert (tied.p_clumped, tied.p_even, tied.p_two_sided) == (1.0, 1.0, 1.0)
    uneven = simulated_p([1, 0, 0], [0.1, 0.1 * 3, 0.3], rng=np.random.default_rng(1))
    assert uneven.p_clumped == pytest.approx(1 / 7, abs=0.05)


def test_rounding_breaks_no_tie() -> None:
    """Two ways to the same X2 in quadrats of nearly equal floating areas stay tied."""
    areas = [0.1 + 0.2, 0.3, 0.3]
    test = simulated_p([1, 0, 0], areas, rng=np.random.default_rng(1))
    assert test.p_clumped == test.p_even == 1.0


def test_nothing_is_tested_without_points() -> None:
    test = simulated_p([0, 0, 0], [1, 1, 1], rng=np.random.default_rng(1))
    assert all(map(math.isnan, (test.statistic, test.p_clumped, test.p_even, test.p_two_sided)))
    assert test.simulations == 999


def test_huge_counts() -> None:
    rng = np.random.default_rng(6)
    counts = rng.multinomial(10**12, [0.25] * 4)
    assert simulated_p(counts, [1] * 4, rng=rng).p_two_sided > 0.01
    assert simulated_p([10**11, 10**11 + 10**7], [1, 1], rng=rng).p_clumped == 0.001


def test_the_same_seed_gives_the_same_p() -> None:
    one, two = (
        simulated_p([4, 1, 0, 7], [1, 2, 2, 3], rng=np.random.default_rng(3)) for _ in range(2)
    )
    assert one == two


@pytest.mark.parametrize("simulations", [0, 98, 1_000_001])
def test_an_unusable_number_of_simulations_is_refused(simulations: int) -> None:
    message = f"between 99 and 1,000,000, not at {simulations}; 999 serves most purposes"
    with pytest.raises(OptionWrong, match=message):
        simulated_p([1, 2], [1, 1], simulations=simulations, rng=np.random.default_rng(1))


def test_one_quadrat_is_refused() -> None:
    with pytest.raises(TooFewQuadrats, match="at least 2 quadrats, not 1"):
        simulated_p([3], [1], rng=np.random.default_rng(1))


@pytest.mark.parametrize("areas", [[1, 1, 1, 1], [1, 2, 3, 4], [0.25, 1, 1, 0.3], [9, 1, 1, 1]])
@pytest.mark.parametrize("n", [1, 2, 3, 5, 8])
def test_least_chi2_against_every_way_the_points_can_fall(areas: list[float], n: int) -> None:
    falls = (f for f in itertools.product(range(n + 1), repeat=len(areas)) if sum(f) == n)
    least = min(clipped_dispersion(fall, areas).chi2 for fall in falls)
    assert least_chi2(n, areas) == pytest.approx(least, abs=1e-9)


def test_least_chi2_is_left_aside_where_it_cannot_matter() -> None:
    assert least_chi2(0, [1, 1]) == least_chi2(10**12, [1, 2]) == 0.0
