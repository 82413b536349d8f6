"""Limits that allow for clumping: by other routes, by coverage, and where there are none."""

from __future__ import annotations

import math

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy import optimize, stats

from analyse.clumped_density import clumped_limits, profile_limits
from analyse.clumped_quadrats import clumped_in_quadrats
from analyse.density import Limits, garwood_limits
from analyse.findings import analyse_points
from analyse.grid_options import GridOptions
from analyse.quadrats import QuadratCounts
from tests.analyse import published

counted = st.lists(st.integers(0, 12), min_size=8, max_size=30).filter(lambda x: sum(x) > 4)


def slow_profile(x: NDArray[np.int64], a: NDArray[np.float64], mean: float) -> float:
    """Greatest log-likelihood over k at a fixed mean, by scipy's law and a plain search."""

    def loss(log_k: float) -> float:
        k = a * math.exp(log_k)
        return -float(stats.nbinom.logpmf(x, k, k / (k + a * mean)).sum())

    starts = np.linspace(-7, 12, 40)
    i = int(np.argmin([loss(start) for start in starts]))
    bounds = (starts[max(0, i - 1)], starts[min(39, i + 1)])
    found = optimize.minimize_scalar(loss, bounds=bounds, method="bounded")
    poisson = float(stats.poisson.logpmf(x, a * mean).sum())
    return max(-float(found.fun), poisson)


def test_the_profile_falls_by_half_a_chi_square_at_both_limits() -> None:
    """Mites of Bliss and Fisher (1953), and clipped quadrats: by scipy's law, not by ours."""
    rng = np.random.default_rng(6)
    a = np.where(rng.uniform(size=60) < 0.6, 1.0, rng.uniform(0.25, 1, 60))
    mites = published.counts("bliss_fisher1953_mites")
    for x, areas in (
        (mites, np.ones(mites.size)),
        (rng.negative_binomial(0.9 * a, 0.9 / (0.9 + 3.0)), a),
    ):
        limits = profile_limits(x, areas)
        assert limits.value == pytest.approx(x.sum() / areas.sum())
        top = slow_profile(x, areas, limits.value)
        for mean in (limits.low, limits.high):
            drop = top - slow_profile(x, areas, mean)
            assert drop == pytest.approx(stats.chi2.ppf(0.95, 1) / 2, abs=2e-4)


@given(counted)
@settings(max_examples=25)
def test_limits_enclose_the_ratio_and_go_with_the_unit(counts: list[int]) -> None:
    one = profile_limits(counts)
    other = profile_limits(counts, np.full(len(counts), 4.0))
    assert one.low < one.value < one.high
    assert other.value * 4 == pytest.approx(one.value)
    if math.isfinite(one.high) and one.high < 1e4 * one.value:
        assert [other.low * 4, other.high * 4] == pytest.approx([one.low, one.high], rel=1e-4)


@given(counted, st.randoms(use_true_random=False))
@settings(max_examples=25)
def test_order_does_not_matter_nor_how_a_total_is_clumped_wider(
    counts: list[int], random: object
) -> None:
    mixed = list(counts)
    random.shuffle(mixed)  # type: ignore[attr-defined]
    one, other = (clumped_limits(x, rng=np.random.default_rng(1)) for x in (counts, mixed))
    assert one.profile == other.profile
    assert one.bootstrap == other.bootstrap


def test_clumping_widens_and_randomness_does_not() -> None:
    """Of 40 quadrats and 120 points: nearly Garwood's limits at random, far wider when clumped."""
    rng = np.random.default_rng(2)
    garwood = garwood_limits(120)
    plain = (garwood.high - garwood.low) / 40
    random = profile_limits(rng.multinomial(120, np.full(40, 1 / 40)))
    clumped = profile_limits([12] * 10 + [0] * 30)
    assert random.high - random.low == pytest.approx(plain, rel=0.25)
    assert clumped.high - clumped.low > 2 * plain


def test_both_kinds_cover_the_mean() -> None:
    """Mean 3, k 1, 36 quadrats, 150 draws: Poisson limits cover some 60 %, these about 95 %."""
    rng = np.random.default_rng(3)
    hits = np.zeros(3)
    for _ in range(150):
        x = rng.negative_binomial(1.0, 0.25, 36)
        limits = clumped_limits(x, rng=rng)
        poisson = garwood_limits(int(x.sum()))
        ranges = [(limits.profile.low, limits.profile.high), (limits.bootstrap.low, limits.bootstrap.high), (poisson.low / 36, poisson.high / 36)]  # type: ignore[union-attr]  # fmt: skip
        hits += [low <= 3 <= high for low, high in ranges]
    profile, bootstrap, poisson_share = hits / 150
    assert 0.90 <= profile <= 0.99
    assert 0.87 <= bootstrap <= 0.99
    assert poisson_share < 0.8


def test_clipped_quadrats_cover_the_density_too() -> None:
    """Counts of areas 0.3 to 1, VMR 4 everywhere, density 4 a unit: 120 draws."""
    rng = np.random.default_rng(4)
    a = rng.uniform(0.3, 1.0, 50)
    covered = 0
    for _ in range(120):
        limits = profile_limits(rng.negative_binomial(a * 4 / 3, 0.25), a)
        covered += limits.low <= 4 <= limits.high
    assert 0.90 <= covered / 120 <= 0.99


def test_even_counts_are_no_surer_than_poisson_by_the_profile() -> None:
    """The negative binomial law knows no even spacing: limits of the Poisson kind, not narrower."""
    limits = clumped_limits([4] * 30, rng=np.random.default_rng(1))
    assert limits.bootstrap is None
    assert limits.bootstrap_reason.startswith("all quadrats are equally dense")
    assert limits.profile is not None
    poisson_half = 1.96 * math.sqrt(4 / 30)
    assert limits.profile.high - 4 == pytest.approx(poisson_half, rel=0.1)


def test_one_crowded_quadrat_leaves_the_upper_limit_open() -> None:
    limits = clumped_limits([40, 0, 0, 0, 0, 0], rng=np.random.default_rng(1)).profile
    assert limits is not None
    assert limits.high == math.inf
    both = clumped_limits([40, 0, 0, 0, 0, 0], rng=np.random.default_rng(1))
    assert "without upper limit" in repr(both)
    assert 0 < limits.low < limits.value


@pytest.mark.parametrize(
    ("counts", "profile", "bootstrap"),
    [
        ([0] * 9, "no points: clumping cannot be judged", "no points: clumping cannot be judged"),
        ([3], "one quadrat: clumping cannot", "fewer than 6 quadrats: too few to resample"),
        ([3, 0, 1], "", "fewer than 6 quadrats: too few to resample"),
        ([0, 3, 1, 2, 0, 10_001], "a count is above 10000", ""),
    ],
)
def test_limits_that_cannot_be_had_say_why(counts: list[int], profile: str, bootstrap: str) -> None:
    seen = clumped_limits(counts, rng=np.random.default_rng(1))
    assert seen.profile_reason.startswith(profile)
    assert seen.bootstrap_reason == bootstrap
    assert (seen.profile is None) == bool(profile)
    assert (seen.bootstrap is None) == bool(bootstrap)
    assert repr(seen).startswith("<ClumpedLimits: ")


def test_a_density_is_the_mean_over_the_quadrat_widened_by_the_scale() -> None:
    """As `density_per_cm2`: half widths in quadrature on the log scale; open ends stay open."""
    mean = clumped_limits(published.counts("bliss_fisher1953_mites"), rng=np.random.default_rng(1))
    dense = mean.times(0.25, 0.03)
    for before, after in ((mean.profile, dense.profile), (mean.bootstrap, dense.bootstrap)):
        assert before is not None
        assert after is not None
        assert after.value == pytest.approx(before.value / 4)
        side = math.hypot(math.log(before.high / before.value), 1.959964 * 0.06)
        assert math.log(after.high / after.value) == pytest.approx(side, rel=1e-6)
    crowded = clumped_limits([40, 0, 0, 0, 0, 0], rng=np.random.default_rng(1)).times(2.0, 0.1)
    assert crowded.profile is not None
    assert crowded.profile.high == math.inf


def test_a_dish_has_the_density_of_its_points_over_its_area() -> None:
    """Through the whole analysis: clipped quadrats by area, the same value as the plain density."""
    rng = np.random.default_rng(7)
    parents = rng.uniform(-35, 35, (25, 2))
    points = parents[rng.integers(0, 25, 200)] + rng.normal(0, 2, (200, 2))
    dish = shapely.Point(0, 0).buffer(43, quad_segs=90)
    points = points[np.hypot(*points.T) < 42]
    found = analyse_points(points, dish, name="dish", simulations=99)
    seen, plain = found.clumped_density, found.density
    assert seen is not None
    assert seen.profile is not None
    assert seen.bootstrap is not None
    assert plain is not None
    assert seen.profile.value == pytest.approx(plain.value, rel=1e-6)
    assert seen.bootstrap.value == pytest.approx(plain.value, rel=1e-6)
    assert seen.profile.low < plain.low
    assert seen.profile.high > plain.high
    assert seen.quadrats == len(found.counts)
    again = analyse_points(points, dish, name="dish", simulations=99)
    assert repr(again.clumped_density) == repr(seen)
    other = analyse_points(
        points, dish, name="dish", grid=GridOptions(shape=(4, 4)), simulations=99
    )
    assert other.clumped_density is not None
    assert repr(other.clumped_density) != repr(seen)


def test_quadrats_in_pixels_have_a_mean_and_no_density() -> None:
    areas = np.full(8, 400.0)
    counts = QuadratCounts(np.array([0, 5, 0, 1, 0, 7, 0, 2]), areas, np.ones(8, dtype=bool))
    rng = np.random.default_rng(1)
    mean, dense = clumped_in_quadrats(counts, rng=rng, relative_uncertainty=None)
    assert mean is not None
    assert mean.profile is not None
    assert mean.profile.value == pytest.approx(15 / 8)
    assert dense is None
    mm = clumped_in_quadrats(counts, rng=np.random.default_rng(1), relative_uncertainty=0.0)
    assert mm[1] is not None
    assert mm[1].profile is not None
    assert mm[1].profile.value == pytest.approx(15 / 32)
    empty = QuadratCounts(np.zeros(8, dtype=int), areas, np.ones(8, dtype=bool))
    assert clumped_in_quadrats(empty, rng=rng, relative_uncertainty=0.0) == (None, None)


def test_another_level() -> None:
    x = published.counts("bliss_fisher1953_mites")
    narrow, wide = profile_limits(x, level=0.5), profile_limits(x, level=0.99)
    assert isinstance(narrow, Limits)
    assert wide.low < narrow.low < narrow.high < wide.high
    assert (narrow.level, wide.level) == (0.5, 0.99)
