"""Classes pooled for a test of fit: by hand, and as properties."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from analyse.models import poisson_share
from analyse.pooling import class_labels, compare_classes, pooled


def halves(low: int, high: int | None) -> float:
    """Shares 1/2, 1/4, 1/8, ..."""
    return 0.5**low - (0.0 if high is None else 0.5 ** (high + 1))


def test_pooling_by_hand() -> None:
    """16 quadrats expect 8, 4, 2, 1, 1 (4 or more): all kept at 1, the last three pooled at 4."""
    assert pooled(halves, 0, 16, 1.0, 9) == ((0, 0), (1, 1), (2, 2), (3, 3), (4, None))
    assert pooled(halves, 0, 16, 4.0, 9) == ((0, 0), (1, 1), (2, None))
    assert pooled(halves, 0, 16, 20.0, 9) == ((0, None),)


@given(st.floats(0.05, 60), st.integers(2, 500), st.floats(0.5, 8), st.integers(0, 90))
def test_each_class_expects_enough(mean: float, q: int, smallest: float, top: int) -> None:
    def share(low: int, high: int | None) -> float:
        return poisson_share(mean, low, high)

    classes = pooled(share, int(mean), q, smallest, top)
    assert classes[0][0] == 0
    assert classes[-1][1] is None
    expected = [q * share(low, high) for low, high in classes]
    assert sum(expected) == pytest.approx(q)
    assert len(classes) == 1 or min(expected) >= smallest * (1 - 1e-9)


def test_a_wide_tail_is_pooled_in_a_moment() -> None:
    """10,000 values of which most expect next to nothing: one sum, not one for each value."""
    classes = pooled(halves, 0, 100, 1.0, 10_000)
    assert len(classes) == 7
    assert classes[-1] == (6, None)


def test_the_chi_square_against_scipy() -> None:
    frequencies = np.array([30, 20, 9, 5])
    classes = [(0, 0), (1, 1), (2, None)]
    test = compare_classes(frequencies, classes, halves, fitted=0)  # type: ignore[arg-type]
    wanted = stats.chisquare([30, 20, 14], 64 * np.array([0.5, 0.25, 0.25]))
    assert (test.chi2, test.p, test.df) == pytest.approx((wanted.statistic, wanted.pvalue, 2))
    one_less = compare_classes(frequencies, classes, halves, fitted=1)  # type: ignore[arg-type]
    assert one_less.p == pytest.approx(stats.chi2.sf(wanted.statistic, 1))


def test_a_class_that_expects_nothing_leaves_the_test_open() -> None:
    test = compare_classes(
        np.array([3, 1]), [(0, 0), (1, 1), (2, None)], lambda low, _: float(low == 0), fitted=0
    )
    assert math.isnan(test.chi2)
    assert math.isnan(test.p)


def test_labels() -> None:
    assert class_labels([(0, 3), (4, 4), (5, None)]) == ("0-3", "4", "5 or more")
    test = compare_classes(np.array([3, 1]), [(0, 0), (1, None)], halves, fitted=0)
    assert test.labels == ("0", "1 or more")
    with pytest.raises(ValueError, match="classes, observed and expected differ in length"):
        replace(test, classes=((0, None),) * 3)
