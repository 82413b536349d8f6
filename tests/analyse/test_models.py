"""Frequencies of counts against published Poisson fits."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from analyse.errors import TooFewQuadrats
from analyse.models import poisson_frequencies, poisson_law
from analyse.pooling import CountClass
from tests.analyse import published


def up_to(last: int, *, first: int = 0) -> list[CountClass]:
    """Classes first, first + 1, ... last - 1 and "last or more"; below `first` is pooled with it."""
    singles: list[CountClass] = [(k, k) for k in range(first + 1, last)]
    return [(0, first), *singles, (last, None)]


@pytest.mark.parametrize(
    ("series", "last", "chi2", "df", "p"),
    [
        ("student1907_A", 4, 10.1189, 3, 0.01758),
        ("student1907_B", 6, 3.8506, 5, 0.5711),
        ("student1907_C", 7, 8.7962, 6, 0.1854),
        ("student1907_C", 6, 7.4780, 5, 0.1875),
        ("student1907_D", 12, 8.8130, 11, 0.6391),
        ("clarke1946_5plus_as_7", 5, 1.16915, 4, 0.88315),
        ("bortkiewicz1898", 3, 0.32352, 2, 0.8506),
        ("rutherford_geiger1910", 11, 12.9613, 10, 0.2258),
    ],
)
def test_published_frequencies(series: str, last: int, chi2: float, df: int, p: float) -> None:
    """Sources in data/frequencies.csv; Clarke's own figures are 1.17 and .88 (from memory)."""
    fit = poisson_frequencies(published.counts(series), pool_classes=up_to(last))
    assert fit.df == df
    assert fit.chi2 == pytest.approx(chi2, abs=1e-4)
    assert fit.p == pytest.approx(p, abs=1e-4)


@pytest.mark.parametrize(
    ("series", "last", "first", "chi2", "p"),
    [
        ("student1907_A", 4, 202, 9.92, 0.04),
        ("student1907_B", 6, 106, 3.98, 0.68),
        ("student1907_C", 7, 66, 9.03, 0.25),
        ("student1907_D", 12, 4, 9.72, 0.64),
    ],
)
def test_student_own_figures_from_whole_expected_squares(
    series: str, last: int, first: int, chi2: float, p: float
) -> None:
    """ "Student" (1907) gave whole expected squares and lost no degree for the mean.

    His X2 and P are quoted from memory; his 106 for 106.6 in series B makes the squares 400.
    """
    fit = poisson_frequencies(published.counts(series), pool_classes=up_to(last))
    expected = np.round(fit.expected)
    assert abs(first - fit.expected[0]) < 0.6
    expected[0] = first
    statistic = ((fit.observed - expected) ** 2 / expected).sum()
    assert statistic == pytest.approx(chi2, abs=0.02)
    assert stats.chi2.sf(statistic, len(fit.classes) - 1) == pytest.approx(p, abs=6e-3)


def test_fisher_1925_pools_both_tails() -> None:
    """Fisher (1925), Statistical Methods for Research Workers, table 14: 21.08 first, 8.66 last."""
    classes = up_to(10, first=1)
    fit = poisson_frequencies(published.counts("student1907_D"), pool_classes=classes)
    wanted = [21.08, 40.65, 63.41, 74.19, 69.44, 54.16, 36.21, 21.18, 11.02, 8.66]
    assert fit.expected == pytest.approx(wanted, abs=6e-3)
    assert (fit.chi2, fit.df) == (pytest.approx(4.3887, abs=1e-4), 8)
    assert fit.p == pytest.approx(0.8205, abs=1e-4)


def test_expected_frequencies_as_published() -> None:
    """Clarke (1946), and Sokal and Rohlf's yeast and Snedecor's weed seeds (from memory)."""
    clarke = poisson_frequencies(
        published.counts("clarke1946_5plus_as_7"), pool_classes=up_to(5)
    ).expected
    assert clarke == pytest.approx([226.74, 211.39, 98.54, 30.62, 7.14, 1.57], abs=6e-3)
    yeast = poisson_frequencies(published.counts("student1907_C")).poisson
    wanted = [66.1, 119.0, 107.1, 64.3, 28.9, 10.4, 3.1, 0.8, 0.2, 0.04]
    assert yeast == pytest.approx(wanted, abs=0.06)
    seeds = poisson_frequencies(published.counts("snedecor_phleum")).poisson
    wanted = [4.78, 14.44, 21.81, 21.96, 16.58, 10.01, 5.04, 2.18, 0.82]
    assert seeds[:9] == pytest.approx(wanted, abs=6e-3)


@given(st.lists(st.integers(0, 60), min_size=2, max_size=60))
def test_classes_cover_every_quadrat_once_and_expect_enough(counts: list[int]) -> None:
    fit = poisson_frequencies(counts)
    assert fit.observed.sum() == len(counts)
    assert fit.expected.sum() == pytest.approx(len(counts))
    assert fit.frequencies.sum() == len(counts)
    assert fit.classes[0][0] == 0
    assert fit.classes[-1][1] is None
    assert len(fit.classes) == 1 or fit.expected.min() >= 1 - 1e-12
    assert fit.df == len(fit.classes) - 2


def test_tails_are_pooled_no_further_than_needed() -> None:
    """Bortkiewicz: "4 or more" expects 0.65 of 200, below 1; "3 or more" expects 4.8."""
    fit = poisson_frequencies(published.counts("bortkiewicz1898"))
    assert fit.labels == ("0", "1", "2", "3 or more")
    assert poisson_frequencies([3, 7] * 30).labels[0] == "0-1"


def test_the_law_against_scipy() -> None:
    values = np.arange(30)
    assert poisson_law(4.68, values) == pytest.approx(stats.poisson.pmf(values, 4.68), rel=1e-10)
    assert poisson_law(0.0, [0, 1]).tolist() == [1.0, 0.0]


def test_p_is_uniform_at_random() -> None:
    rng = np.random.default_rng(8)
    p = [poisson_frequencies(rng.poisson(3.0, 400)).p for _ in range(300)]
    assert stats.kstest(p, "uniform").pvalue > 0.01


@pytest.mark.parametrize("counts", [[0, 0, 0], [5, 5], [1, 0]])
def test_too_few_classes_leave_the_test_open(counts: list[int]) -> None:
    fit = poisson_frequencies(counts)
    assert fit.df < 1
    assert math.isnan(fit.p)
    assert math.isnan(fit.chi2)


def test_columns_cannot_be_changed() -> None:
    fit = poisson_frequencies([0, 1, 2])
    with pytest.raises(ValueError, match="read-only"):
        fit.expected[0] = 1


def test_one_quadrat_is_refused() -> None:
    with pytest.raises(TooFewQuadrats, match="at least 2 quadrats, not 1; count more"):
        poisson_frequencies([3])


def test_a_count_beyond_all_classes_is_refused() -> None:
    with pytest.raises(ValueError, match="a count of 10001 is above 10000: too many classes"):
        poisson_frequencies([1, 10_001])


@pytest.mark.parametrize(
    "classes", [[], [(1, None)], [(0, 2)], [(0, 1), (3, None)], [(0, 3), (3, None)]]
)
def test_classes_with_gaps_are_refused(classes: list[CountClass]) -> None:
    with pytest.raises(ValueError, match="from 0 upwards without a gap, the last without an end"):
        poisson_frequencies([1, 2, 3], pool_classes=classes)


def test_a_fit_checks_itself() -> None:
    from dataclasses import replace

    with pytest.raises(ValueError, match="classes, observed and expected differ in length"):
        replace(poisson_frequencies([0, 1, 2]), classes=((0, None),) * 9)
