"""Negative binomial fits: published series, an independent library, and what no law can tell."""

from __future__ import annotations

import math
import warnings
from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from analyse.errors import TooFewQuadrats
from analyse.fits import clumped_law, negative_binomial_fit
from analyse.models import poisson_frequencies
from analyse.pooling import CountClass
from tests.analyse import published

# Sources in data/frequencies.csv. k of the mites and of the accidents, "about 1.02" and "about
# .865", are from memory; all figures were computed once, apart from this program.
KS = {
    "bliss_fisher1953_mites": (1.024592, 0.2759),
    "greenwood_yule1920": (0.865116, None),
    "student1907_A": (3.586087, 1.7496),
    "mcguire1957_cornborer": (1.848650, None),
}
NO_FINITE_K = ["student1907_B", "student1907_D", "sokal_rohlf_azuki", "bortkiewicz1898"]
counted = st.lists(st.integers(0, 40), min_size=3, max_size=40).filter(any)


@pytest.mark.parametrize("series", KS)
def test_published_k(series: str) -> None:
    """Bliss and Fisher (1953), Greenwood and Yule (1920), "Student" (1907), McGuire (1957)."""
    k, error = KS[series]
    fit = negative_binomial_fit(published.counts(series))
    assert fit.k == pytest.approx(k, abs=6e-7)
    assert fit.k_low < fit.k < fit.k_high
    if error is not None:
        assert fit.k_se == pytest.approx(error, abs=6e-5)


@pytest.mark.parametrize("series", KS)
def test_k_and_likelihood_against_an_independent_library(series: str) -> None:
    """statsmodels' NegativeBinomial, whose alpha is 1 / k; its optimiser stops near the root."""
    x = published.counts(series)
    fit = negative_binomial_fit(x)
    model = sm.NegativeBinomial(x, np.ones(x.size))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        start = [math.log(x.mean()), 0.5]
        done = model.fit(disp=0, method="bfgs", maxiter=500, start_params=start, gtol=1e-7)
    alpha, error = float(done.params[1]), float(done.bse[1])
    assert 1 / alpha == pytest.approx(fit.k, rel=1e-3)
    assert done.llf == pytest.approx(fit.log_likelihood, abs=1e-5)
    assert done.llf <= fit.log_likelihood + 1e-9
    assert error == pytest.approx(fit.k_se / fit.k**2, rel=1e-3)  # the delta method, alpha = 1 / k
    assert done.aic == pytest.approx(fit.aic, abs=1e-4)
    poisson = sm.Poisson(x, np.ones(x.size)).fit(disp=0)
    assert poisson.llf == pytest.approx(fit.poisson_log_likelihood, abs=1e-8)
    assert poisson.aic == pytest.approx(fit.poisson_aic, abs=1e-8)


def test_likelihoods_of_the_mites() -> None:
    """Bliss and Fisher (1953): both likelihoods as statsmodels gave them beforehand."""
    fit = negative_binomial_fit(published.counts("bliss_fisher1953_mites"))
    assert fit.log_likelihood == pytest.approx(-222.43715, abs=6e-6)
    assert fit.poisson_log_likelihood == pytest.approx(-242.80994, abs=6e-6)
    assert 1 - fit.weight == pytest.approx(math.exp(-(fit.poisson_aic - fit.aic) / 2), rel=1e-6)


def test_expected_mites_and_both_tests_of_fit() -> None:
    """Bliss and Fisher (1953): expected leaves, and chi-square on two sets of classes."""
    mites = published.counts("bliss_fisher1953_mites")
    fit = negative_binomial_fit(mites)
    wanted = [69.49, 37.60, 20.10, 10.70, 5.69, 3.02, 1.60, 1.80]
    assert fit.labels[-1] == "7 or more"
    assert fit.expected == pytest.approx(wanted, abs=6e-3)
    assert (fit.chi2, fit.df) == (pytest.approx(2.9202, abs=1e-4), 5)
    assert fit.p == pytest.approx(stats.chi2.sf(fit.chi2, 5), rel=1e-12)
    classes: list[CountClass] = [*((i, i) for i in range(5)), (5, None)]
    short = negative_binomial_fit(mites, pool_classes=classes)
    assert (short.chi2, short.df) == (pytest.approx(2.4904, abs=1e-4), 3)


def test_two_degrees_are_lost_for_the_parameters() -> None:
    """Classes - 1 - 2 for the negative binomial, - 1 for Poisson; not classes - 1 for both."""
    mites = published.counts("bliss_fisher1953_mites")
    fit, poisson = negative_binomial_fit(mites), poisson_frequencies(mites)
    assert fit.df == len(fit.classes) - 3
    assert poisson.df == len(poisson.classes) - 2
    assert fit.p != pytest.approx(stats.chi2.sf(fit.chi2, len(fit.classes) - 1), rel=0.05)


@pytest.mark.parametrize("series", NO_FINITE_K)
def test_the_poisson_limit_is_told(series: str) -> None:
    """Series whose variance (divisor q) does not exceed the mean have no finite k.

    Bortkiewicz' variance exceeds the mean with divisor q - 1 only: moments give a k, likelihood
    none.
    """
    fit = negative_binomial_fit(published.counts(series))
    assert fit.poisson_limit
    assert (fit.k, fit.k_high) == (math.inf, math.inf)
    assert 0 < fit.k_low < math.inf
    assert math.isnan(fit.k_se)
    assert math.isnan(fit.p)
    assert fit.log_likelihood == fit.poisson_log_likelihood
    assert fit.aic == fit.poisson_aic + 2
    assert fit.weight == pytest.approx(math.exp(-1) / (1 + math.exp(-1)))
    assert fit.k_text.startswith("Poisson limit: no finite k (")
    assert "inf" not in repr(fit).replace("finite", "")
    poisson = poisson_frequencies(published.counts(series))
    assert fit.law == pytest.approx(poisson.poisson, rel=1e-12)
    assert (fit.k_moments < math.inf) == (series == "bortkiewicz1898")


@given(counted)
def test_a_finite_k_exists_exactly_where_the_variance_exceeds_the_mean(counts: list[int]) -> None:
    """Levin and Reeds (1977); in whole numbers, so that a tie is seen as one."""
    q, n, squares = len(counts), sum(counts), sum(x * x for x in counts)
    fit = negative_binomial_fit(counts)
    assert fit.poisson_limit == (q * squares - n * n <= q * n)
    assert fit.k_low < fit.k <= fit.k_high or fit.poisson_limit


def test_a_variance_equal_to_the_mean_is_the_limit() -> None:
    """Mean 1 and variance (divisor q) 1 is a tie; 10/9 is above it, and k is finite but large."""
    tie, above = [0, 0, 2, 2], [0, 0, 1, 2, 2, 1, 3, 0, 0]
    assert (np.var(tie), np.var(above)) == pytest.approx((1, 10 / 9))
    assert negative_binomial_fit(tie).poisson_limit
    assert not negative_binomial_fit(above).poisson_limit


@given(counted, st.randoms(use_true_random=False))
def test_the_order_of_quadrats_does_not_matter(counts: list[int], random: object) -> None:
    mixed = list(counts)
    random.shuffle(mixed)  # type: ignore[attr-defined]
    one, other = negative_binomial_fit(counts), negative_binomial_fit(mixed)
    assert (one.k, one.k_low, one.k_high) == (other.k, other.k_low, other.k_high)
    assert (one.mean, one.k_zero_class) == pytest.approx(
        (other.mean, other.k_zero_class), nan_ok=True
    )


@given(counted)
def test_more_empty_quadrats_mean_more_clumping(counts: list[int]) -> None:
    """Zeros appended lower the mean and, the points being as crowded as before, k too."""
    one, other = negative_binomial_fit(counts), negative_binomial_fit([*counts, 0, 0, 0])
    assert other.mean < one.mean
    assert other.k_low < one.k_low
    assert other.k < one.k or one.poisson_limit


@given(counted)
def test_classes_cover_every_quadrat_once(counts: list[int]) -> None:
    fit = negative_binomial_fit(counts)
    assert fit.observed.sum() == fit.frequencies.sum() == len(counts) == fit.quadrats
    assert fit.expected.sum() == pytest.approx(len(counts))
    assert fit.classes[0][0] == 0
    assert fit.classes[-1][1] is None
    assert len(fit.classes) == 1 or fit.expected.min() >= 1 - 1e-9


def test_p_of_the_fit_is_uniform_under_the_law() -> None:
    """400 quadrats of mean 3 and k 2: p of 200 fits, a little small as the docstring says."""
    rng = np.random.default_rng(8)
    p = [negative_binomial_fit(rng.negative_binomial(2, 0.4, 400)).p for _ in range(200)]
    assert stats.kstest(p, "uniform").pvalue > 0.01


def test_the_interval_of_k_covers_it() -> None:
    """k = 1.5, mean 3, 60 quadrats, 400 draws: 95 % within 3 standard errors (1.1 % each)."""
    rng = np.random.default_rng(9)
    fits = [negative_binomial_fit(rng.negative_binomial(1.5, 1 / 3, 60)) for _ in range(400)]
    covered = np.mean([fit.k_low <= 1.5 <= fit.k_high for fit in fits])
    assert 0.917 <= covered <= 0.983


def test_all_in_one_quadrat_and_one_point() -> None:
    crowded = negative_binomial_fit([60, 0, 0, 0, 0])
    assert 0 < crowded.k_low < crowded.k < crowded.k_high < 1
    assert negative_binomial_fit([1, 0, 0]).poisson_limit


def test_no_law_without_points_or_beyond_all_classes() -> None:
    assert clumped_law([0, 0, 0]) is None
    assert clumped_law([3]) is None
    assert clumped_law([0, 10_001]) is None
    assert clumped_law([0, 10_000]) is not None
    with pytest.raises(ValueError, match="without points there is no likelihood of k"):
        negative_binomial_fit([0, 0])
    with pytest.raises(TooFewQuadrats, match="at least 2 quadrats, not 1"):
        negative_binomial_fit([3])
    with pytest.raises(ValueError, match="a count of 10001 is above 10000"):
        negative_binomial_fit([0, 10_001])
    with pytest.raises(ValueError, match="from 0 upwards without a gap"):
        negative_binomial_fit([0, 4, 9], pool_classes=[(1, None)])


def test_a_fit_is_short_and_cannot_be_changed() -> None:
    fit = negative_binomial_fit(published.counts("student1907_C"))
    assert (
        repr(fit)
        == "<NegativeBinomialFit: 400 quadrats, mean 1.8, k 20.9 (6.99 without upper limit)>"
    )
    with pytest.raises(ValueError, match="read-only"):
        fit.law[0] = 1
    with pytest.raises(ValueError, match="classes, observed and expected differ in length"):
        replace(fit, classes=((0, None),) * 9)
