"""The reliability diagram draws the bins it is given, and gives the same bytes every time."""

from __future__ import annotations

import math

import cv2
import numpy as np
import pytest

from detect.reliability import reliability
from detect.reliability_chart import figure_png, reliability_figure

RNG = np.random.default_rng(8)
DOUBT = RNG.beta(1, 4, 300)
FALSE = RNG.random(300) < DOUBT
EQUAL = reliability(DOUBT, FALSE)
WIDE = reliability(DOUBT, FALSE, binning="width")


def test_dots_and_diamonds_are_the_bins() -> None:
    upper = reliability_figure(EQUAL, WIDE, DOUBT, FALSE, 0.8).axes[0]
    _, diamonds, dots, *_ = upper.lines
    assert diamonds.get_xydata().tolist() == np.column_stack([WIDE.doubt, WIDE.false]).tolist()
    assert dots.get_xydata().tolist() == np.column_stack([EQUAL.doubt, EQUAL.false]).tolist()
    (bars,) = (c for c in upper.collections if len(c.get_segments()) == len(EQUAL))
    low, high = EQUAL.interval
    ends = np.array(bars.get_segments())[:, :, 1]
    assert ends == pytest.approx(np.column_stack([low, high]))
    assert upper.get_xlim() == upper.get_ylim()
    assert upper.get_ylim()[1] >= high.max()


def test_the_lower_part_counts_every_spot() -> None:
    lower = reliability_figure(EQUAL, WIDE, DOUBT, FALSE, 0.8).axes[1]
    assert sum(bar.get_height() for bar in lower.patches[:30]) == (~FALSE).sum()


def test_words_say_the_numbers() -> None:
    title = reliability_figure(EQUAL, WIDE, DOUBT, FALSE, 0.8).axes[0].get_title(loc="left")
    assert f"300 spots, {FALSE.sum()} false" in title
    assert f"error {EQUAL.error:.3f}" in title
    assert "area under the curve 0.800" in title
    without = reliability_figure(EQUAL, WIDE, DOUBT, FALSE, math.nan).axes[0].get_title(loc="left")
    assert "area" not in without


def test_a_figure_is_a_png_of_the_same_bytes_every_time() -> None:
    first, second = (
        figure_png(reliability_figure(EQUAL, WIDE, DOUBT, FALSE, 0.8)) for _ in range(2)
    )
    assert first == second
    assert b"matplotlib" not in first
    assert cv2.imdecode(np.frombuffer(first, np.uint8), cv2.IMREAD_COLOR) is not None


def test_a_single_sure_spot_can_be_drawn() -> None:
    one = np.array([0.0])
    table = reliability(one, [False])
    assert figure_png(reliability_figure(table, table, one, np.array([False]), math.nan))
