"""Scores by hand."""

from __future__ import annotations

import math

import pytest

from detect.accuracy import Accuracy, pooled


def test_scores_by_hand() -> None:
    score = Accuracy("a", 10, 8, 6, 24.0, 1.5)
    assert score.precision == 0.75
    assert score.recall == 0.6
    assert score.f1 == pytest.approx(2 * 0.75 * 0.6 / 1.35)
    assert score.count_error == -2
    assert (score.rmse_px, score.rmse_mm) == (2.0, 0.5)


def test_nothing_has_no_scores() -> None:
    score = Accuracy("a", 0, 0, 0)
    for value in (score.precision, score.recall, score.f1, score.rmse_px, score.rmse_mm):
        assert math.isnan(value)


def test_pooled_scores_weigh_objects_alike() -> None:
    both = pooled([Accuracy("a", 10, 8, 8, 8.0, 2.0), Accuracy("b", 2, 6, 2, 2.0)])
    assert (both.truth, both.found, both.matched) == (12, 14, 10)
    assert both.rmse_px == pytest.approx(1.0)
    assert math.isnan(both.rmse_mm)
    assert both.count_error == 2


def test_more_pairs_than_objects_is_a_bug() -> None:
    with pytest.raises(ValueError, match="3 pairs of 4 spots and 2 true objects"):
        Accuracy("a", 2, 4, 3)
