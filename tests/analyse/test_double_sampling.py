"""Totals of quadrats counted twice: textbook example, exact enumeration, other programs, coverage."""

from __future__ import annotations

import math
from itertools import combinations, product

import numpy as np
import pytest
from scipy import stats
from statsmodels.regression.linear_model import WLS

from analyse.density import garwood_limits
from analyse.double_sampling import (
    DoubleSample,
    difference_limits,
    difference_total,
    ratio_limits,
    ratio_total,
)
from tests.benchmarks.spot_check import checked, measure, simulate


def simple(quick: object, careful: object, size: int, total: float) -> DoubleSample:
    """A sample without strata."""
    x, y = np.asarray(quick, dtype=float), np.asarray(careful, dtype=float)
    return DoubleSample(np.zeros(x.size, dtype=int), x, y, np.array([size]), total)


def test_the_peaches_of_the_textbook() -> None:
    """Cochran (1977), exercise 7.1: weights judged by eye on 200 trees, 10 of them weighed.

    The data are quoted from memory; their totals 543 and 569, and the difference estimate of
    200 (58 + 54.3 - 56.9) = 11,080 lb, are as printed there.
    """
    weighed = [61, 42, 50, 58, 67, 45, 39, 57, 71, 53]
    by_eye = [59, 47, 52, 60, 67, 48, 44, 58, 76, 58]
    assert (sum(weighed), sum(by_eye)) == (543, 569)
    sample = simple(by_eye, weighed, 200, 11_600)
    estimate = difference_total(sample)
    assert estimate.value == pytest.approx(11_080)
    spread = np.var(np.subtract(weighed, by_eye), ddof=1)
    assert estimate.standard_error == pytest.approx(200 * math.sqrt((1 - 10 / 200) * spread / 10))
    assert estimate.df == 9


def test_the_cities_of_the_textbook() -> None:
    """Cochran (1977), section 6.2: 49 of 196 cities, sums 6262 and 5054, all 22,919 in 1920.

    From memory; the printed ratio estimate of the total in 1930 is 28,397.
    """
    quick, careful = np.full(49, 5054 / 49), np.full(49, 6262 / 49)
    ratio = ratio_total(simple(quick, careful, 196, 22_919))
    assert ratio is not None
    assert round(ratio.value) == 28_397


def test_the_ratio_is_the_slope_that_another_program_fits() -> None:
    rng = np.random.default_rng(4)
    quick = rng.integers(1, 30, 12).astype(float)
    careful = rng.poisson(1.1 * quick).astype(float)
    sample = simple(quick, careful, 60, 800.0)
    slope = WLS(careful, quick, weights=1 / quick).fit().params[0]
    ratio = ratio_total(sample)
    assert ratio is not None
    assert ratio.value == pytest.approx(800 * slope, rel=1e-12)


def every_sample() -> tuple[list[DoubleSample], float]:
    """All stratified samples of a small population of 5 + 6 quadrats, 2 and 3 drawn."""
    quick = np.array([0, 1, 1, 0, 2, 6, 4, 5, 9, 7, 5], dtype=float)
    careful = np.array([0, 1, 2, 0, 1, 8, 4, 5, 9, 9, 6], dtype=float)
    drawn = product(combinations(range(5), 2), combinations(range(5, 11), 3))
    stratum = np.array([0, 0, 1, 1, 1])
    samples = [
        DoubleSample(stratum, quick[list(a + b)], careful[list(a + b)], np.array([5, 6]), 40.0)
        for a, b in drawn
    ]
    return samples, float(careful.sum())


def test_over_all_samples_the_difference_and_its_variance_are_unbiased() -> None:
    samples, truth = every_sample()
    estimates = [difference_total(sample) for sample in samples]
    values = np.array([each.value for each in estimates])
    assert len(values) == 200
    assert values.mean() == pytest.approx(truth, rel=1e-12)
    variances = [each.standard_error**2 for each in estimates]
    assert np.mean(variances) == pytest.approx(values.var(), rel=1e-12)


def test_over_all_samples_the_ratio_is_nearly_unbiased() -> None:
    samples, truth = every_sample()
    ratios = [ratio_total(sample) for sample in samples]
    values = np.array([each.value for each in ratios if each is not None])
    assert values.mean() == pytest.approx(truth, rel=0.02)
    errors = [each.standard_error for each in ratios if each is not None]
    assert np.sqrt(np.mean(np.square(errors))) == pytest.approx(values.std(), rel=0.15)


def test_a_bootstrap_of_strata_gives_the_same_standard_error() -> None:
    """Of a large area, where drawing with replacement is drawing without."""
    rng = np.random.default_rng(8)
    stratum = np.repeat([0, 1], 30)
    quick = rng.poisson(np.where(stratum == 0, 1, 8)).astype(float)
    careful = quick + rng.binomial(4, 0.2, 60) - rng.binomial(quick.astype(int), 0.1)
    sizes = np.array([600_000, 400_000])
    sample = DoubleSample(stratum, quick, careful, sizes, 4e6)
    values = []
    for _ in range(2000):
        again = np.concatenate([rng.integers(0, 30, 30), 30 + rng.integers(0, 30, 30)])
        other = DoubleSample(stratum, quick[again], careful[again], sizes, 4e6)
        values.append(difference_total(other).value)
    # A bootstrap divides by n, not by n - 1.
    expected = difference_total(sample).standard_error * math.sqrt(29 / 30)
    assert np.std(values) == pytest.approx(expected, rel=0.06)


def test_a_census_leaves_nothing_uncertain() -> None:
    sample = simple([3, 4, 5], [4, 4, 9], 3, 12.0)
    limits = difference_limits(sample)
    assert (limits.low, limits.value, limits.high) == (17.0, 17.0, 17.0)
    assert difference_total(sample).limits().high == 17.0


def test_without_a_difference_the_limits_are_those_of_half_a_step() -> None:
    """Closed form: half a step of 9 has mean 9/2 and variance 81/2, so shape 1/2 and scale 9."""
    sample = simple([2] * 10, [2] * 10, 100, 200.0)
    limits = difference_limits(sample)
    one = 9 * stats.gamma.isf(0.025, 0.5)
    assert limits.high - 200 == pytest.approx(one, rel=1e-9)
    assert 200 - limits.low == pytest.approx(one, rel=1e-9)


def test_limits_of_missed_objects_alone_lie_within_the_exact_ones_of_a_poisson_count() -> None:
    """Of very many quadrats with misses as Poisson counts, mid-p limits lie just within Garwood's."""
    rng = np.random.default_rng(11)
    missed = rng.permutation(np.repeat([0, 1], [380, 20]))
    sample = simple(np.zeros(400), missed, 10**9, 0.0)
    limits, exact = difference_limits(sample), garwood_limits(20)
    scale = 10**9 / 400
    assert exact.low < limits.low / scale + 0.5
    assert limits.low / scale == pytest.approx(exact.low, rel=0.05)
    assert limits.high / scale == pytest.approx(exact.high, rel=0.05)
    assert limits.high / scale < exact.high


def test_what_was_seen_is_certain() -> None:
    sample = simple([0, 0, 0, 0], [0, 0, 9, 0], 8, 10.0)
    limits = difference_limits(sample)
    assert limits.value == 28.0
    assert limits.low >= 10.0 + 9.0 - 11.0  # 9 more were seen, and of the 10 some may be false


def test_units_do_not_matter_to_the_order_of_quadrats() -> None:
    trial = simulate(np.random.default_rng(5))
    sample = checked(trial, 12, 1)
    back = slice(None, None, -1)
    turned = DoubleSample(
        sample.stratum[back], sample.quick[back], sample.careful[back], sample.sizes, sample.total
    )
    one, other = difference_limits(sample), difference_limits(turned)
    assert one.value == pytest.approx(other.value)
    assert (one.low, one.high) == pytest.approx((other.low, other.high))


def test_no_ratio_to_next_to_nothing() -> None:
    sample = simple([0, 1, 3, 2], [1, 1, 3, 2], 40, 60.0)
    assert ratio_total(sample) is None
    assert ratio_limits(sample) is None


def test_limits_cover_the_truth_and_those_of_the_textbook_do_not() -> None:
    """300 of the 2,000 detectors of the benchmark, which quotes 95.7 %; 2.6 s.e. are 3.1 %."""
    rows = measure(300, 1000)
    share = {
        way: np.mean([row["covered"] for row in rows if row["way"] == way])
        for way in ("difference", "difference, plain t", "ratio")
    }
    assert 0.92 <= share["difference"] <= 0.98
    assert share["difference, plain t"] < 0.9
    assert 0.90 <= share["ratio"] <= 0.98


@pytest.mark.parametrize(
    ("stratum", "sizes", "message"),
    [
        ([0, 0, 0], [2], "more quadrats were drawn of a stratum than it holds"),
        ([0, 0, 2], [5, 5], "more quadrats were drawn of a stratum than it holds"),
        ([0, 0, 0], [5, 5], "a stratum of which no quadrat was drawn cannot be estimated"),
    ],
)
def test_impossible_samples_are_refused(stratum: list[int], sizes: list[int], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        DoubleSample(np.array(stratum), np.ones(3), np.ones(3), np.array(sizes), 9.0)


def test_a_sample_tells_what_it_is() -> None:
    sample = simple([1, 2], [1, 2], 9, 20.0)
    assert repr(sample) == "<DoubleSample: 2 of 9 quadrats, 1 strata>"
    assert not sample.quick.flags.writeable
