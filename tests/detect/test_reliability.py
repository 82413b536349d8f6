"""Reliability of doubt: by hand, by plain definitions, and by simulation."""

from __future__ import annotations

import csv
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import mannwhitneyu
from statsmodels.stats.proportion import proportion_confint

from detect.reliability import (
    RELIABILITY_COLUMNS,
    Reliability,
    area_under_curve,
    reliability,
    reliability_csv,
)

spots = st.lists(st.tuples(st.integers(0, 20), st.booleans()), min_size=2, max_size=40)


def test_equal_counts_by_hand() -> None:
    doubt = [0.05, 0.1, 0.15, 0.2, 0.6, 0.8]
    false = [False, False, True, False, True, True]
    table = reliability(doubt, false, bins=3)
    assert table.number.tolist() == [2, 2, 2]
    assert table.doubt == pytest.approx([0.075, 0.175, 0.7])
    assert table.false.tolist() == [0.0, 0.5, 1.0]
    assert (table.low.tolist(), table.high.tolist()) == ([0.05, 0.15, 0.6], [0.1, 0.2, 0.8])
    assert table.error == pytest.approx((0.075 + 0.325 + 0.3) / 3)


def test_equal_widths_by_hand() -> None:
    table = reliability([0.0, 0.1, 0.3, 1.0], [False, True, False, True], binning="width", bins=4)
    assert table.number.tolist() == [2, 1, 1]
    assert (table.low.tolist(), table.high.tolist()) == ([0.0, 0.25, 0.75], [0.25, 0.5, 1.0])
    assert table.false.tolist() == [0.5, 0.0, 1.0]
    assert table.error == pytest.approx((2 * 0.45 + 0.3 + 0.0) / 4)


@settings(deadline=None)
@given(spots)
def test_the_area_is_the_share_of_pairs_in_order(given: list[tuple[int, bool]]) -> None:
    doubt = np.array([d for d, _ in given]) / 20
    false = np.array([f for _, f in given])
    pairs = [(a > b) + 0.5 * (a == b) for a in doubt[false] for b in doubt[~false]]
    area = area_under_curve(doubt, false)
    assert area == pytest.approx(np.mean(pairs)) if pairs else math.isnan(area)


def test_the_area_is_the_rank_test_of_scipy() -> None:
    rng = np.random.default_rng(2)
    doubt = rng.random(200).round(2)
    false = rng.random(200) < doubt
    known = mannwhitneyu(doubt[false], doubt[~false]).statistic / (false.sum() * (~false).sum())
    assert area_under_curve(doubt, false) == pytest.approx(known)


@settings(deadline=None)
@given(spots, st.integers(0, 100), st.sampled_from(["count", "width"]))
def test_the_order_of_the_spots_has_no_say(
    given: list[tuple[int, bool]], seed: int, binning: str
) -> None:
    doubt = np.array([d for d, _ in given]) / 20
    false = np.array([f for _, f in given])
    order = np.random.default_rng(seed).permutation(doubt.size)
    first = reliability(doubt, false, binning=binning)
    second = reliability(doubt[order], false[order], binning=binning)
    assert first.error == pytest.approx(second.error)
    assert first.false == pytest.approx(second.false)


@settings(deadline=None)
@given(spots, st.sampled_from(["count", "width"]), st.integers(1, 12))
def test_bins_hold_every_spot_once(given: list[tuple[int, bool]], binning: str, bins: int) -> None:
    doubt = np.array([d for d, _ in given]) / 20
    false = np.array([f for _, f in given])
    table = reliability(doubt, false, binning=binning, bins=bins)
    assert table.number.sum() == doubt.size
    assert len(table) <= bins
    assert (table.number * table.doubt).sum() == pytest.approx(doubt.sum())
    assert (table.number * table.false).sum() == pytest.approx(false.sum())
    assert ((table.low <= table.doubt + 1e-12) & (table.doubt <= table.high + 1e-12)).all()
    if binning == "count":
        assert table.number.max() - table.number.min() <= 1


def test_a_true_doubt_is_off_by_chance_alone_as_much_as_the_notes_say() -> None:
    rng = np.random.default_rng(4)
    errors = []
    for _ in range(300):
        doubt = np.full(500, 0.2)
        errors.append(reliability(doubt + rng.random(500) * 1e-6, rng.random(500) < 0.2).error)
    assert np.mean(errors) == pytest.approx(0.8 * np.sqrt(10 * 0.2 * 0.8 / 500), rel=0.1)


@pytest.mark.parametrize("binning", ["count", "width"])
def test_a_false_doubt_is_off_by_what_it_is_off(binning: str) -> None:
    rng = np.random.default_rng(6)
    true = rng.uniform(0.2, 0.6, 50_000)
    false = rng.random(true.size) < true
    assert reliability(true, false, binning=binning).error < 0.01
    too_sure = reliability(true - 0.15, false, binning=binning).error
    assert too_sure == pytest.approx(0.15, abs=0.01)


def test_wide_bins_hide_what_equal_counts_show() -> None:
    # All doubts lie below 0.1: the low ones are too low and the high ones too high.
    doubt = np.r_[np.full(500, 0.01), np.full(500, 0.09)]
    false = np.arange(1000) % 20 == 0
    assert reliability(doubt, false, binning="width").error == pytest.approx(0.0, abs=1e-9)
    assert reliability(doubt, false).error == pytest.approx(0.04, abs=1e-9)


def test_no_spots_have_no_error_and_no_area() -> None:
    assert len(reliability([], [])) == 0
    assert math.isnan(reliability([], [], binning="width").error)
    assert math.isnan(area_under_curve([], []))
    assert math.isnan(area_under_curve([0.2, 0.3], [True, True]))


@pytest.mark.parametrize(
    ("doubt", "false", "bins", "message"),
    [
        ([0.1], [True, False], 10, "1 doubts for 2 answers"),
        ([1.1], [True], 10, r"a doubt is not within 0\.\.1"),
        ([np.nan], [True], 10, r"a doubt is not within 0\.\.1"),
        ([0.1], [True], 0, "there must be 1 bin or more, not 0"),
    ],
)
def test_what_cannot_be_compared_is_refused(
    doubt: list, false: list, bins: int, message: str
) -> None:
    with pytest.raises(ValueError, match=message):
        reliability(doubt, false, bins=bins)


def test_columns_of_different_lengths_are_refused() -> None:
    with pytest.raises(ValueError, match="false has 2 values for 1 bins"):
        Reliability(*(np.zeros(1) for _ in range(2)), np.ones(1, int), np.zeros(1), np.zeros(2))


def test_the_interval_is_that_of_statsmodels() -> None:
    rng = np.random.default_rng(9)
    doubt = rng.random(300)
    table = reliability(doubt, rng.random(300) < doubt**3)
    wrong = np.round(table.false * table.number)
    known = proportion_confint(wrong, table.number, method="wilson")
    for ours, theirs in zip(table.interval, known, strict=True):
        assert ours == pytest.approx(theirs, abs=1e-12)


def test_the_table_holds_both_kinds_of_bin() -> None:
    text = reliability_csv([0.05, 0.15, 0.95], [False, False, True])
    rows = list(csv.DictReader(text.splitlines()))
    assert list(rows[0]) == list(RELIABILITY_COLUMNS)
    assert [row["binning"] for row in rows] == ["count"] * 3 + ["width"] * 3
    assert rows[5]["low"] == "0.9"
    assert rows[5]["share_false"] == "1.0"
    assert reliability_csv([], []).splitlines() == [",".join(RELIABILITY_COLUMNS)]
