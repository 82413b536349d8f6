"""k by moments and by the zero class: published values, both forms, and what cannot be solved."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from analyse.dispersion import dispersion
from analyse.indices import patchiness
from analyse.k_estimates import KEstimate, k_by_corrected_moments, k_by_moments, k_by_zero_class
from tests.analyse import published

LIMIT = "Poisson limit: no finite k"
counted = st.lists(st.integers(0, 40), min_size=2, max_size=40).filter(any)


@pytest.mark.parametrize(
    ("series", "moments", "corrected", "zero"),
    [
        ("bliss_fisher1953_mites", 1.166697, 1.153248, 0.992306),
        ("greenwood_yule1920", 0.954814, None, None),
        ("mcguire1957_cornborer", 2.102529, None, 1.602637),
    ],
)
def test_published_series(
    series: str, moments: float, corrected: float | None, zero: float | None
) -> None:
    """Bliss and Fisher 1953, Greenwood and Yule 1920, McGuire and others 1957: computed beforehand."""
    x = published.counts(series)
    assert k_by_moments(x).value == pytest.approx(moments, abs=6e-7)
    for estimate, value in ((k_by_corrected_moments, corrected), (k_by_zero_class, zero)):
        if value is not None:
            assert estimate(x).value == pytest.approx(value, abs=6e-7)
        assert estimate(x).reason == ""


@given(counted)
def test_the_two_forms_by_their_formulas(counts: list[int]) -> None:
    """m^2 / (s^2 - m) is the default, (m^2 - s^2 / q) / (s^2 - m) the other; s^2 divides by q - 1."""
    q, m, s2 = len(counts), np.mean(counts), np.var(counts, ddof=1)
    if s2 - m > 1e-9:
        assert k_by_moments(counts).value == pytest.approx(m**2 / (s2 - m), rel=1e-6)
        other = (m**2 - s2 / q) / (s2 - m)
        if sum(x > 0 for x in counts) > 1:
            assert k_by_corrected_moments(counts).value == pytest.approx(other, rel=1e-6, abs=1e-9)
    elif s2 < m - 1e-9:
        assert k_by_moments(counts) == KEstimate(math.inf, LIMIT)
        assert k_by_corrected_moments(counts) == KEstimate(math.inf, LIMIT)


def test_the_forms_differ_and_so_does_the_other_variance() -> None:
    """Confused variants: the corrected form, and a variance that divides by q."""
    x = published.counts("bliss_fisher1953_mites")
    m, q = x.mean(), x.size
    ours = k_by_moments(x).value
    assert ours != pytest.approx(k_by_corrected_moments(x).value, rel=5e-3)
    assert ours != pytest.approx(m**2 / (x.var() - m), rel=5e-3)
    assert ours == pytest.approx(m**2 / (x.var() * q / (q - 1) - m), rel=1e-12)


@given(counted)
def test_patchiness_is_one_more_than_one_over_k(counts: list[int]) -> None:
    """Lloyd (1967): m* / m = 1 + 1 / k of the moments, exactly."""
    k = k_by_moments(counts).value
    if math.isfinite(k):
        assert patchiness(counts) == pytest.approx(1 + 1 / k, rel=1e-9)
    else:
        assert patchiness(counts) <= 1 + 1e-12
        assert dispersion(counts).vmr <= 1 + 1e-12


@given(counted.filter(lambda x: 0 in x))
def test_the_zero_class_expects_the_empty_quadrats(counts: list[int]) -> None:
    """The law with this k has as many empty quadrats as were seen, by scipy; logs of any base."""
    q, empty, m = len(counts), counts.count(0), np.mean(counts)
    seen = k_by_zero_class(counts)
    if math.isfinite(seen.value):
        k = seen.value
        assert q * stats.nbinom.pmf(0, k, k / (k + m)) == pytest.approx(empty, rel=1e-6)
        assert k * math.log10(1 + m / k) == pytest.approx(math.log10(q / empty), rel=1e-6)
    else:
        assert empty / q <= math.exp(-m) + 1e-12
        assert seen == KEstimate(math.inf, LIMIT)


def test_what_cannot_be_solved_is_told() -> None:
    assert k_by_zero_class([1, 2, 3]).reason == "no quadrat is empty: no k by the zero class"
    assert math.isnan(k_by_zero_class([1, 2, 3]).value)
    for estimate in (k_by_moments, k_by_corrected_moments, k_by_zero_class):
        nothing = estimate([0, 0, 0])
        assert (math.isnan(nothing.value), nothing.reason) == (True, "no points: no k")
        assert estimate([0, 2, 1, 1]) == KEstimate(math.inf, LIMIT)
    together = k_by_corrected_moments([9, 0, 0])
    assert math.isnan(together.value)
    assert together.reason == "all points lie in one quadrat: this form of k is 0"
    assert k_by_moments([9, 0, 0]).value == pytest.approx(9 / 24)


def test_a_tie_of_variance_and_mean_is_seen_as_one() -> None:
    """Counts 0, 1, 2: mean 1 and variance 1, in whole numbers without rounding."""
    for q in (1, 7, 1000):
        counts = [0, 1, 2] * q
        judged = dispersion(counts)
        expected = math.inf if judged.variance <= judged.mean else None
        assert (k_by_moments(counts).value == math.inf) == (expected is not None)
    assert k_by_moments([0, 1, 2]) == KEstimate(math.inf, LIMIT)
