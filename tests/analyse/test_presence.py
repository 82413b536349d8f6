"""The mean from presence and absence: published values, its law, its limits."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from statsmodels.stats.proportion import proportion_confint

from analyse.presence import mean_from_presence
from tests.analyse import published


@pytest.mark.parametrize(
    ("series", "value"),
    [
        ("clarke1946_5plus_as_7", 0.922386),
        ("student1907_A", 0.630172),
        ("bliss_fisher1953_mites", 0.762140),
    ],
)
def test_published_series(series: str, value: float) -> None:
    """Clarke 1946 (true mean .932), "Student" 1907 (.6825), Bliss and Fisher 1953 (1.147)."""
    x = published.counts(series)
    occupied = int((x > 0).sum())
    seen = mean_from_presence(occupied, x.size)
    assert seen.value == pytest.approx(value, abs=6e-7)
    p = occupied / x.size
    assert seen.standard_error == pytest.approx(math.sqrt(p / (x.size * (1 - p))), rel=1e-12)
    assert seen.low < seen.value < seen.high


def test_clumped_mites_need_the_clumped_form() -> None:
    """Bliss and Fisher (1953): 80 of 150 leaves; with k = 1.024592 the mean is nearly right."""
    assert mean_from_presence(80, 150, k=1.024592).value == pytest.approx(1.131165, abs=6e-7)
    assert mean_from_presence(80, 150).high < 1.146667 < mean_from_presence(80, 150, k=1.0246).high


def test_not_the_variants_it_is_confused_with() -> None:
    """Not p itself, nor its standard error without the slope 1 / (1 - p)."""
    seen = mean_from_presence(80, 150)
    p = 80 / 150
    assert seen.value != pytest.approx(p, rel=0.1)
    assert seen.standard_error != pytest.approx(math.sqrt(p * (1 - p) / 150), rel=0.1)


@given(st.integers(1, 300), st.data(), st.floats(0.05, 50))
def test_the_law_turned_round(quadrats: int, data: st.DataObject, k: float) -> None:
    """A law of this mean and k leaves as many quadrats empty as were; limits by statsmodels."""
    occupied = data.draw(st.integers(0, quadrats - 1))
    seen = mean_from_presence(occupied, quadrats, k=k)
    if seen.value < 1e6:
        empty = stats.nbinom.pmf(0, k, k / (k + seen.value))
        assert empty == pytest.approx(1 - occupied / quadrats, rel=1e-6)
    limits = proportion_confint(occupied, quadrats, method="beta")
    random = mean_from_presence(occupied, quadrats)
    wanted = [-math.log1p(-float(limit)) for limit in limits]
    assert [random.low, random.high] == pytest.approx(wanted, rel=1e-6, abs=1e-12)
    assert random.value <= seen.value * (1 + 1e-12)


def test_the_clumped_form_nears_the_random_one() -> None:
    one, other = mean_from_presence(30, 50, k=1e9), mean_from_presence(30, 50)
    for name in ("value", "standard_error", "low", "high"):
        assert getattr(one, name) == pytest.approx(getattr(other, name), rel=1e-6)


def test_limits_cover_the_mean_exactly() -> None:
    """Exact enumeration over all numbers of empty quadrats, 30 quadrats of mean 0.3, 1 and 2.5."""
    for mean in (0.3, 1.0, 2.5):
        covered = 0.0
        for occupied in range(31):
            seen = mean_from_presence(occupied, 30)
            if seen.low <= mean <= seen.high:
                covered += stats.binom.pmf(occupied, 30, 1 - math.exp(-mean))
        assert 0.95 <= covered <= 0.995


def test_the_standard_error_is_the_spread() -> None:
    """2,000 draws of 1,000 quadrats of mean 1 and k 0.8: spread of the estimate, within 5 %."""
    rng = np.random.default_rng(5)
    empty = stats.nbinom.pmf(0, 0.8, 0.8 / 1.8)
    drawn = rng.binomial(1000, 1 - empty, 2000)
    values = [mean_from_presence(int(occupied), 1000, k=0.8).value for occupied in drawn]
    error = mean_from_presence(round(1000 * (1 - empty)), 1000, k=0.8).standard_error
    assert np.std(values) == pytest.approx(error, rel=0.05)


def test_all_or_none_occupied() -> None:
    every = mean_from_presence(12, 12)
    assert math.isnan(every.value)
    assert math.isnan(every.standard_error)
    assert every.low == pytest.approx(-math.log(1 - 0.025 ** (1 / 12)))
    assert every.high == math.inf
    assert every.reason == "no quadrat is empty: the mean cannot be told from presence"
    none = mean_from_presence(0, 12)
    assert (none.value, none.low) == (0, 0)
    assert none.high == pytest.approx(-math.log(0.025) / 12)
    assert math.isnan(none.standard_error)


def test_strong_clumping_gives_no_overflow() -> None:
    seen = mean_from_presence(9, 10, k=0.001)
    assert (seen.value, seen.standard_error) == (math.inf, math.inf)


@pytest.mark.parametrize(
    ("occupied", "quadrats", "options", "message"),
    [
        (4, 3, {}, "4 occupied quadrats of 3 is impossible"),
        (-1, 3, {}, "-1 occupied quadrats of 3 is impossible"),
        (0, 0, {}, "0 occupied quadrats of 0 is impossible"),
        (1, 3, {"k": 0.0}, "k must be positive, not 0.0"),
        (1, 3, {"k": math.nan}, "k must be positive, not nan"),
        (1, 3, {"level": 95}, "a confidence level lies between 0 and 1, not at 95"),
    ],
)
def test_impossible_requests_are_refused(
    occupied: int, quadrats: int, options: dict[str, float], message: str
) -> None:
    with pytest.raises(ValueError, match=message):
        mean_from_presence(occupied, quadrats, **options)
