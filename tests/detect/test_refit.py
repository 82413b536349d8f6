"""Weights follow what was reviewed, as far as there is much of it; checks from outside."""

from __future__ import annotations

from dataclasses import fields, replace

import numpy as np
import pytest
import statsmodels.api as sm
from numpy.typing import NDArray

from detect.doubt import FEATURES, GENERAL
from detect.lesson import Decided, Lesson, decided, together
from detect.refit import (
    RefitOptions,
    Refitted,
    _mode,
    best_cut,
    f1_at,
    recalibrated,
    refit,
)
from detect.regions import Candidates, Column

OPTIONS = RefitOptions()


def spots(doubt: list[float], hit: list[bool], real: int) -> Decided:
    return Decided(np.arange(len(doubt)), np.array(doubt), np.array(hit, dtype=bool), real)


def lesson(n: int, *, seed: int, rough_false: float = 0.0, red_false: float = 0.0) -> Lesson:
    """Free-standing candidates, every second one real; false ones differ as told."""
    rng = np.random.default_rng(seed)
    real = np.arange(n) % 2 == 0
    x, y = 50.0 * np.arange(n), np.full(n, 40.0)
    one: Column = np.ones(n)
    known = {"x": x, "y": y, "area": 80 * one, "sxx": 6.4 * one, "syy": 6.4 * one, "sxy": 0 * one}
    candidates = Candidates(**{each.name: known.get(each.name, one) for each in fields(Candidates)})
    measured = rng.normal([0.3, 1, 0, 1.3, 0.05, 0.1, 0.1, 2.5, 0], 0.02, (n, 9))
    measured[~real, FEATURES.index("rough")] += rough_false
    colours = rng.normal([50.0, 10.0, 5.0], 2.0, (n, 3))
    colours[~real, 1] += red_false
    xy = np.column_stack([x, y])
    discs = np.column_stack([xy, np.full(n, 5.0)])[real]
    return Lesson(candidates, xy, measured, colours, np.ones(n, dtype=bool), discs)


def test_without_a_pull_the_weights_are_the_regression_of_statsmodels() -> None:
    rng = np.random.default_rng(1)
    design = np.column_stack([np.ones(400), rng.normal(size=(400, 3))])
    p = 1 / (1 + np.exp(-design @ [0.4, 1.2, -0.8, 0.0]))
    real = (rng.uniform(size=400) < p).astype(float)
    ours = _mode(design, real, 1.0, np.zeros(4), np.full(4, 1e-9))
    theirs = sm.Logit(real, design).fit(disp=0).params
    assert ours == pytest.approx(theirs, abs=1e-5)


def test_the_pull_leads_from_the_data_to_the_centre() -> None:
    rng = np.random.default_rng(2)
    design = np.column_stack([np.ones(200), rng.normal(size=200)])
    real = (design[:, 1] > 0).astype(float)
    centre = np.array([0.0, -1.0])
    weights = [_mode(design, real, 1.0, centre, np.full(2, pull))[1] for pull in (1e4, 30, 0.1)]
    assert weights[0] == pytest.approx(-1.0, abs=0.05)
    assert weights[0] < weights[1] < weights[2]
    # At the mode the slope of the penalised likelihood is zero (its own equation).
    at = _mode(design, real, 0.3, centre, np.full(2, 30.0))
    p = 1 / (1 + np.exp(-design @ at))
    assert 0.3 * design.T @ (p - real) + 30.0 * (at - centre) == pytest.approx([0, 0], abs=1e-6)


def test_separable_spots_do_not_run_away() -> None:
    design = np.column_stack([np.ones(40), np.r_[np.zeros(20), np.full(20, 500.0)]])
    real = np.r_[np.zeros(20), np.ones(20)]
    at = _mode(design, real, 1.0, np.zeros(2), np.full(2, 1.0))
    assert np.isfinite(at).all()
    assert np.abs(at).max() < 10


def parted(refitted: Refitted, seen: Lesson) -> float:
    """Mean doubt of what is false less that of what is real."""
    doubt, real = refitted.doubt(seen), np.arange(len(seen.xy)) % 2 == 0
    return float(doubt[~real].mean() - doubt[real].mean())


def test_a_measure_that_parts_them_gains_weight() -> None:
    taught, other = lesson(80, seed=1, rough_false=0.06), lesson(60, seed=2, rough_false=0.06)
    refitted = refit([taught], GENERAL)
    assert refitted.model.rough < GENERAL.rough
    assert parted(refitted, other) > parted(Refitted(GENERAL), other) + 0.05


def test_their_own_colour_parts_what_looks_alike() -> None:
    taught, other = lesson(80, seed=1, red_false=25.0), lesson(60, seed=2, red_false=25.0)
    assert abs(parted(Refitted(GENERAL), other)) < 0.05
    refitted = refit([taught], GENERAL)
    assert refitted.own_colour is not None
    assert refitted.own_colour.usual[1] == pytest.approx(10.0, abs=1.5)
    assert refitted.own_colour.weights[1] < -0.05
    assert parted(refitted, other) > 0.5


def test_few_spots_change_less_than_many() -> None:
    few, many = (
        refit([lesson(n, seed=3, rough_false=0.06)], GENERAL).model.rough for n in (12, 400)
    )
    assert many < few < GENERAL.rough


def test_nothing_real_changes_nothing() -> None:
    empty = replace(lesson(20, seed=1), real=np.zeros((0, 3)))
    assert refit([empty], GENERAL) == Refitted(GENERAL)


def test_pairs_are_one_to_one_and_nearest_first() -> None:
    seen = lesson(6, seed=1)
    near: NDArray[np.float64] = np.array([[1.0, 40.0, 9.0], [2.0, 40.0, 9.0], [250.0, 43.0, 5.0]])
    found = decided(replace(seen, real=near), np.array([0.5, 0.1, 0.2, 0.3, 0.99, 0.4]))
    assert found.rows.tolist() == [1, 2, 3, 5, 0]
    assert found.hit.tolist() == [False, False, False, True, True]
    assert found.real == 3
    outside = replace(seen, real=near, within=np.arange(6) > 0)
    assert 0 not in decided(outside, np.full(6, 0.1)).rows


def test_f1_at_a_cut_off_by_hand() -> None:
    both = together([spots([0.1, 0.6], [True, False], 1), spots([0.3, 0.7], [True, True], 3)])
    assert both.doubt.tolist() == [0.1, 0.3, 0.6, 0.7]
    assert f1_at(both, 0.05) == 0.0
    assert f1_at(both, 0.3) == pytest.approx(2 * 2 / (2 + 4))
    assert f1_at(both, 1.0) == pytest.approx(2 * 3 / (4 + 4))
    assert f1_at(spots([], [], 0), 0.5) == 1.0


def test_the_cut_off_moves_to_where_it_gains_and_stays_where_it_does_not() -> None:
    doubt = np.linspace(0.01, 0.95, 400)
    for border in (0.2, 0.75):
        seen = spots(doubt.tolist(), (doubt < border).tolist(), int((doubt < border).sum()))
        cut = best_cut(seen, seen, 0.43, options=OPTIONS)
        assert cut == pytest.approx(border, abs=0.08)
    # Half of everything is real at any doubt, and as much again is missed: F1 is nearly level.
    level = spots(doubt.tolist(), (np.arange(400) % 2 == 0).tolist(), 4000)
    strict = replace(OPTIONS, cut_pull=1.0)
    assert best_cut(level, level, 0.43, options=strict) == pytest.approx(0.43, abs=0.05)


def test_few_spots_move_the_cut_off_less() -> None:
    def cut(n: int) -> float:
        doubt = np.linspace(0.01, 0.95, n)
        seen = spots(doubt.tolist(), (doubt < 0.8).tolist(), int((doubt < 0.8).sum()))
        return best_cut(seen, seen, 0.2, options=replace(OPTIONS, cut_pull=0.3))

    assert 0.19 < cut(12) < cut(600) < 0.8


def test_the_kept_spots_are_calibrated() -> None:
    hit = [True] * 20 + [False] * 20 + [False] * 100
    seen = spots([0.1] * 40 + [0.9] * 100, hit, 20)
    assert 0.35 < recalibrated(seen, 0.5).applied([0.1])[0] < 0.55
    assert recalibrated(spots([], [], 0), 0.5).applied([0.1])[0] == pytest.approx(0.1)
