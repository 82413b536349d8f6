"""The negative binomial law and its likelihood: scipy, plain sums, exact sums, extremes of k."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy import optimize, special, stats

from analyse.models import poisson_law, poisson_share
from analyse.negative_binomial import (
    k_words,
    likelihood_of,
    negative_binomial_law,
    negative_binomial_share,
)
from tests.analyse import published

counted = st.lists(st.integers(0, 25), min_size=2, max_size=15).filter(any)
ks = st.floats(-3, 6).map(lambda power: 10.0**power)


def plain(x: NDArray[np.int64], mean: NDArray[np.float64], k: NDArray[np.float64]) -> float:
    """Log-likelihood by scipy's own law, one quadrat at a time."""
    return float(stats.nbinom.logpmf(x, k, k / (k + mean)).sum())


@given(ks, st.floats(0.01, 200))
def test_the_law_against_scipy(k: float, mean: float) -> None:
    """scipy's nbinom takes k and k / (k + m); it loses figures for large k, hence the tolerance."""
    x = np.arange(60)
    law = negative_binomial_law(mean, k, x)
    assert law == pytest.approx(stats.nbinom.pmf(x, k, k / (k + mean)), rel=1e-6, abs=1e-300)
    for low, high in ((0, 4), (3, 3), (2, 9), (5, None), (0, None)):
        share = negative_binomial_share(mean, k, low, high)
        top = 1.0 if high is None else stats.nbinom.cdf(high, k, k / (k + mean))
        below = stats.nbinom.cdf(low - 1, k, k / (k + mean))
        assert share == pytest.approx(top - below, abs=1e-9)


@pytest.mark.parametrize("k", [1e8, 1e11, 1e14, math.inf])
def test_the_law_nears_poisson(k: float) -> None:
    x = np.arange(40)
    gap = 0.0 if math.isinf(k) else 200 / k
    assert negative_binomial_law(4.68, k, x) == pytest.approx(poisson_law(4.68, x), rel=gap + 1e-12)
    assert negative_binomial_share(4.68, k, 6, None) == pytest.approx(
        poisson_share(4.68, 6, None), rel=gap + 1e-12
    )


def test_the_law_in_whole_fractions() -> None:
    """k = 2, m = 3: (x + 1) (2/5)^2 (3/5)^x exactly."""
    exact = [float((x + 1) * Fraction(2, 5) ** 2 * Fraction(3, 5) ** x) for x in range(30)]
    assert negative_binomial_law(3.0, 2.0, np.arange(30)) == pytest.approx(exact, rel=1e-13)


@given(counted, ks)
def test_the_likelihood_against_plain_sums(counts: list[int], k: float) -> None:
    """Gain over Poisson at any k and any mean equals what scipy's laws give quadrat by quadrat."""
    x = np.array(counts)
    seen = likelihood_of(x)
    poisson = float(stats.poisson.logpmf(x, x.mean()).sum())
    for mean in (x.mean(), 1.7 * x.mean()):
        wanted = plain(x, np.full(x.size, mean), np.full(x.size, k)) - poisson
        (gain,) = seen.joint_gain(mean, np.array([k]), np.array([seen.pairs(k)]))
        assert gain == pytest.approx(wanted, abs=1e-7 * (1 + x.sum()), rel=1e-7)
    assert seen.gain(k) == pytest.approx(
        plain(x, np.full(x.size, x.mean()), np.full(x.size, k)) - poisson,
        abs=1e-7 * (1 + x.sum()),
        rel=1e-7,
    )


@given(counted, ks, st.integers(0, 2**32 - 1))
def test_the_likelihood_of_unequal_areas_against_plain_sums(
    counts: list[int], k: float, seed: int
) -> None:
    """A quadrat of area a has mean a m and k a: what the docstring says, by scipy's law."""
    x, a = np.array(counts), np.random.default_rng(seed).uniform(0.2, 1.5, len(counts))
    seen = likelihood_of(x, a)
    mean = x.sum() / a.sum()
    assert seen.mean == pytest.approx(mean)
    wanted = plain(x, a * mean, a * k) - float(stats.poisson.logpmf(x, a * mean).sum())
    assert seen.gain(k) == pytest.approx(wanted, abs=1e-7 * (1 + x.sum()), rel=1e-7)


@given(counted, st.floats(-2, 3).map(lambda power: 10.0**power))
def test_score_and_information_are_derivatives(counts: list[int], k: float) -> None:
    """Against the textbook digamma and trigamma forms."""
    x = np.array(counts)
    seen, m = likelihood_of(x), x.mean()
    slope = float((special.digamma(x + k) - special.digamma(k)).sum() - x.size * np.log1p(m / k))
    assert seen.score(k) / k**2 == pytest.approx(slope, rel=1e-6, abs=1e-9 * (1 + x.sum()) / k)
    bend = (special.polygamma(1, k) - special.polygamma(1, x + k)).sum() - x.sum() / (k * (k + m))
    assert seen.information(k) == pytest.approx(
        float(bend), rel=1e-6, abs=1e-8 * (1 + x.sum()) / k**2
    )


def test_the_score_is_that_of_bliss_and_fisher() -> None:
    """Bliss and Fisher (1953): sum A_x / (k + x) = q ln(1 + m / k), A_x quadrats hold more than x."""
    x = published.counts("bliss_fisher1953_mites")
    k = likelihood_of(x).best_k()
    beyond = [(x > value).sum() for value in range(x.max())]
    left = sum(a / (k + value) for value, a in enumerate(beyond))
    assert left == pytest.approx(x.size * math.log1p(x.mean() / k), rel=1e-12)


@given(counted)
def test_the_best_k_is_the_best(counts: list[int]) -> None:
    """No k of a wide grid is likelier; the limits lie where the likelihood has fallen by 1.92."""
    seen = likelihood_of(counts)
    best = seen.best_k()
    top = seen.gain(best)
    assert top >= max(seen.gain(k) for k in np.logspace(-6, 12, 100)) - 1e-9
    low, high = seen.k_limits()
    drop = stats.chi2.ppf(0.95, 1) / 2
    assert top - seen.gain(low) == pytest.approx(drop, abs=1e-6)
    assert (top - seen.gain(high) if math.isfinite(high) else drop) == pytest.approx(drop, abs=1e-6)
    assert math.isfinite(high) == (top > drop)


@pytest.mark.parametrize(
    ("k", "mean", "q", "near"),
    [
        (1e-3, 2.0, 40_000, 0.15),
        (1e-2, 5.0, 20_000, 0.1),
        (1.0, 5.0, 5_000, 0.1),
        (100.0, 300.0, 5_000, 0.1),
        (1e4, 5_000.0, 5_000, 0.15),
    ],
)
def test_k_is_found_again_over_seven_powers_of_ten(
    k: float, mean: float, q: int, near: float
) -> None:
    x = np.minimum(np.random.default_rng(2).negative_binomial(k, k / (k + mean), q), 10_000)
    seen = likelihood_of(x)
    best = seen.best_k()
    assert best == pytest.approx(k, rel=near)
    assert 1 / math.sqrt(seen.information(best)) < near * k
    low, high = seen.k_limits()
    assert low < best < high


@pytest.mark.parametrize(("mean", "q"), [(5, 10**3), (20, 10**5), (100, 10**5)])
def test_k_near_the_poisson_limit_is_a_root_to_the_last_figure(mean: int, q: int) -> None:
    """Counts whose variance exceeds the mean by a hair: k from ten thousand to half a milliard.

    The frequencies are those of a Poisson law, with pairs of quadrats moved from the mean to
    either side (or back) until the excess is just positive: each pair adds 1 to it.
    """
    frequencies = np.rint(q * poisson_law(mean, np.arange(4 * mean))).astype(int)
    values = np.arange(frequencies.size)
    pairs = math.floor(-likelihood_of(np.repeat(values, frequencies)).excess) + 1
    frequencies[mean - 1 : mean + 2] += np.array([1, -2, 1]) * pairs
    assert frequencies.min() >= 0
    seen = likelihood_of(np.repeat(values, frequencies))
    assert 0 < seen.excess <= 1.01
    k = seen.best_k()
    assert k > 0.4 * q * mean**2
    assert seen.score(k * (1 - 1e-8)) > 0 > seen.score(k * (1 + 1e-8))
    # for large k: excess = sum r^2 / (k + r) - A k^2 w(m / k), with w(u) = u^3 / 3 - u^4 / 4 + ...
    u = seen.mean / k
    series = seen.exposure * k * k * (u**3 / 3 - u**4 / 4 + u**5 / 5)
    tail = (seen.weights * seen.ratios**2 / (k + seen.ratios)).sum()
    assert tail - series == pytest.approx(seen.excess, rel=1e-6)
    low, high = seen.k_limits()
    assert (0 < low < k, high) == (True, math.inf)


def test_the_fit_against_a_plain_optimiser() -> None:
    """k by minimising scipy's own likelihood, for clipped quadrats too."""
    rng = np.random.default_rng(4)
    a = rng.uniform(0.3, 1.0, 80)
    x = rng.negative_binomial(1.3 * a, 1.3 / (1.3 + 4.0))
    seen = likelihood_of(x, a)

    def loss(log_k: float) -> float:
        return -plain(x, a * seen.mean, a * math.exp(log_k))

    found = optimize.minimize_scalar(loss, bounds=(-4, 6), method="bounded")
    assert seen.best_k() == pytest.approx(math.exp(found.x), rel=1e-4)


def test_two_quadrats_as_one_follow_the_law() -> None:
    """Mean and k in proportion to area: halves added are a whole, by exact convolution."""
    half = negative_binomial_law(1.5, 0.7, np.arange(60))
    together = np.convolve(half, half)[:60]
    assert together == pytest.approx(negative_binomial_law(3.0, 1.4, np.arange(60)), rel=1e-9)


@given(counted, st.floats(0.05, 50))
def test_k_goes_with_the_unit_of_area(counts: list[int], unit: float) -> None:
    """Areas in another unit: mean and k per unit of area change alike, the gain does not."""
    x = np.array(counts)
    one = likelihood_of(x, np.full(x.size, 1.0))
    other = likelihood_of(x, np.full(x.size, unit))
    assume(abs(one.excess) > 1e-6)
    assert other.mean * unit == pytest.approx(one.mean)
    if math.isfinite(one.best_k()):
        assert other.best_k() * unit == pytest.approx(one.best_k(), rel=1e-6)
        assert other.gain(other.best_k()) == pytest.approx(one.gain(one.best_k()), abs=1e-7)


def test_what_has_no_likelihood_is_refused() -> None:
    with pytest.raises(ValueError, match="without points there is no likelihood of k"):
        likelihood_of([0, 0, 0])
    with pytest.raises(ValueError, match="2 areas for 3 counts"):
        likelihood_of([1, 2, 3], [1.0, 2.0])
    with pytest.raises(ValueError, match="areas must be positive and finite"):
        likelihood_of([1, 2], [1.0, 0.0])


def test_k_in_words() -> None:
    assert k_words(0.0312345) == "0.0312"
    assert k_words(math.inf) == "Poisson limit: no finite k"
    assert repr(likelihood_of([1, 1])) == "<Likelihood of 2 points: k Poisson limit: no finite k>"
