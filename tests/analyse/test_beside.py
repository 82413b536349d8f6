"""What is judged beside the quadrats, from points to the sentence that goes with the verdict."""

from __future__ import annotations

import pickle
from dataclasses import replace

import numpy as np
import pytest
import shapely

from analyse.beside import Beside, judge_beside, remark
from analyse.departures import FAMILY
from analyse.findings import analyse_counts, analyse_pattern, analyse_points
from analyse.grid_options import GridOptions
from analyse.nulls import random_points
from analyse.pattern import CountTable, Pattern
from analyse.trend import fit_trend
from detect.lengths import Length

SQUARE = shapely.box(0, 0, 100, 100)


def keeping_apart(distance: float, n: int, *, seed: int) -> np.ndarray:
    """Random points that keep a distance from one another (Matern 1960, set one after another)."""
    rng = np.random.default_rng(seed)
    points = np.empty((0, 2))
    while len(points) < n:
        one = rng.uniform(0, 100, 2)
        if not len(points) or np.hypot(*(points - one).T).min() >= distance:
            points = np.vstack([points, one])
    return points


@pytest.fixture(scope="module")
def apart():
    """Far too near for quadrats of 20 mm, which hold 8 points each."""
    wide = GridOptions(side=Length(20, "mm"))
    return analyse_points(keeping_apart(3.0, 200, seed=2), SQUARE, grid=wide, simulations=199)


@pytest.fixture(scope="module")
def sloping():
    """Independent points, denser to the right: clumped in quadrats, and a gradient explains it."""
    points = 100 * np.random.default_rng(7).random((200, 2)) ** [0.5, 1.0]
    return analyse_points(points, SQUARE, simulations=199)


def test_a_distance_kept_that_quadrats_cannot_see_is_told(apart):
    assert apart.verdict == "no departure from random found"
    said = apart.sentence.split(". ")[-1]
    assert "neighbour" in said
    assert "fewer" in said.lower()
    assert said.endswith(": spots keep a distance that quadrats of 20 mm cannot see.")
    at = apart.tests.envelopes["nearest_neighbour"].at
    assert 2.0 < at < 4.5
    assert apart.flags == ()


def test_within_the_width_of_a_spot_touching_is_named_instead(apart):
    wide = GridOptions(side=Length(20, "mm"))
    found = analyse_pattern(replace(apart.pattern, width=3.5), wide, simulations=199)
    assert found.sentence.endswith(
        ", but a spot is usually 3.5 mm wide: touching ones are counted as one, or cannot lie nearer."
    )
    assert found.flags == ("touching",)
    assert "and a spot is usually 3.5 mm wide" in found.flag_sentences[0]


def test_a_gradient_is_named_and_explains_the_quadrats(sloping):
    assert sloping.verdict == "clumped"
    assert sloping.trend.clearest is not None
    assert sloping.beyond is not None
    assert sloping.beyond.null != sloping.tests.null
    assert sloping.sentence.endswith(
        ", allowing for clumping), and this gradient explains what the quadrats show."
    )
    assert "The density rises towards the right" in sloping.sentence


def test_clumps_on_a_gradient_are_still_found_beyond_it():
    rng = np.random.default_rng(3)
    parents = 100 * rng.random((40, 2)) ** [0.4, 1.0]
    points = np.repeat(parents, 8, axis=0) + rng.normal(0, 1.5, (320, 2))
    pattern = Pattern.of(points, SQUARE)
    gradient = fit_trend(pattern.points, SQUARE)
    beside = judge_beside(pattern, gradient, seed=1, simulations=199)
    assert beside.beyond_holm is not None
    assert max(beside.beyond_holm.adjusted) <= 0.05
    assert beside.beyond.envelopes["l_function"].side == "above"


def test_points_placed_at_random_need_no_sentence():
    found = analyse_points(
        random_points(SQUARE, 100, np.random.default_rng(12)), SQUARE, simulations=199
    )
    assert found.verdict == "no departure from random found"
    assert found.sentence.count(". ") == 1
    assert "is random" not in found.sentence
    assert found.holm.names == FAMILY
    assert found.beyond is None
    assert found.beyond_holm is None


def test_results_depend_on_seed_and_name_alone(apart):
    pattern = apart.pattern
    one, same, other, named = (
        judge_beside(replace(pattern, name=name), None, seed=seed, simulations=99)
        for name, seed in (("a", 1), ("a", 1), ("a", 2), ("b", 1))
    )
    low = one.tests.envelopes["l_function"].low
    np.testing.assert_array_equal(low, same.tests.envelopes["l_function"].low)
    for changed in (other, named):
        assert (low != changed.tests.envelopes["l_function"].low).any()


def test_findings_travel_between_processes_with_their_curves(sloping):
    back = pickle.loads(pickle.dumps(sloping))
    for name, seen in sloping.tests.envelopes.items():
        np.testing.assert_array_equal(back.tests.envelopes[name].low, seen.low)
    assert back.beyond.null == sloping.beyond.null


@pytest.mark.parametrize("n", [0, 1, 9])
def test_few_points_have_no_tests_over_distances(n):
    found = analyse_points(random_points(SQUARE, n, np.random.default_rng(1)), SQUARE)
    assert found.tests is None
    assert found.holm is None
    assert found.shown is None


def test_a_table_of_counts_has_no_tests_over_distances_and_needs_no_word_about_it():
    found = analyse_counts(CountTable("grid", np.arange(30), 5, 6), simulations=99)
    assert found.tests is None
    assert "distance" not in found.sentence
    assert remark("clumped", None, Beside(), side=None, unit=None, width=float("nan")) == ""


def test_too_few_to_tell_says_nothing_more(apart):
    beside = Beside(apart.tests, apart.holm)
    said = remark("too few to tell", None, beside, side=20.0, unit="mm", width=float("nan"))
    assert said == ""
