"""What errors of detection leave of count, density and verdict: against exact laws where there are any."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import shapely
from scipy import signal, stats

from analyse.breaking_point import Judge
from analyse.density import density_per_cm2
from analyse.draws import UnderDoubt, under_doubt
from analyse.pattern import Pattern
from analyse.quick import quick_test
from analyse.recalls import DrawOptions
from detect.changes import Changes
from detect.planted import Planted, Recall
from tests.patterns import thomas

AREA = shapely.box(0, 0, 100, 100)
MANY = DrawOptions(draws=4000)
ALONE = replace(MANY, shared_doubt=0.0, shared_recall=0.0, assumed_spread=0.0, unlike=0.0)


def pattern(
    n: int = 80,
    doubt: float | np.ndarray = 0.0,
    *,
    found: bool = False,
    places: np.ndarray | None = None,
) -> Pattern:
    xy = np.random.default_rng(4).random((n, 2)) * 100 if places is None else places
    given = Pattern.of(xy, AREA, name="dish", doubt=np.broadcast_to(doubt, len(xy)))
    return replace(given, changes=Changes()) if found else given


def drawn(given: Pattern, options: DrawOptions | None = None, seed: int = 1) -> UnderDoubt:
    test = quick_test(given)
    judge = Judge.of(test.counts.counts, test.counts.area, test.simulated)
    rng = np.random.default_rng(seed)
    return under_doubt(given, test.counts, judge, verdict=test.verdict, rng=rng, options=options)


def test_a_table_without_doubts_is_taken_as_it_stands():
    result = drawn(pattern())
    assert (result.count.low, result.count.value, result.count.high) == (80, 80, 80)
    assert (result.stands, result.false, result.missed, result.source) == (1.0, 0.0, 0.0, "table")
    assert result.recall is None


def test_a_checked_photograph_has_no_errors_of_detection():
    given = replace(pattern(doubt=0.4), changes=Changes(state="checked", checked_by="Ada"))
    result = drawn(given)
    assert (result.source, result.count.low, result.count.high) == ("checked", 80, 80)


def test_independent_doubts_give_the_exact_law_of_a_sum_of_unlike_chances():
    doubt = np.linspace(0.02, 0.6, 80)
    law = np.array([1.0])
    for d in doubt:
        law = signal.convolve(law, [d, 1 - d])
    low, middle, high = (int(np.searchsorted(np.cumsum(law), p)) for p in (0.025, 0.5, 0.975))
    result = drawn(pattern(doubt=doubt), ALONE)
    assert result.false == pytest.approx(doubt.sum(), abs=0.3)
    assert result.count.low == pytest.approx(low, abs=1)
    assert result.count.value == pytest.approx(middle, abs=1)
    assert result.count.high == pytest.approx(high, abs=1)


def test_doubts_that_err_together_widen_the_count():
    alone, together = drawn(pattern(doubt=0.2), ALONE), drawn(pattern(doubt=0.2), MANY)
    assert together.count.high - together.count.low > 2 * (alone.count.high - alone.count.low)


def test_missed_objects_have_the_negative_binomial_law_of_the_recall():
    result = drawn(pattern(found=True), replace(ALONE, assumed_recall=0.9))
    law = stats.nbinom(80, 0.9)
    assert result.source == "assumed"
    assert result.missed == pytest.approx(law.mean(), abs=0.3)
    assert result.count.low == pytest.approx(80 + law.ppf(0.025), abs=1)
    assert result.count.high == pytest.approx(80 + law.ppf(0.975), abs=1)


def test_planted_objects_say_how_much_is_missed():
    def planted(value: float, copies: int) -> Pattern:
        recall = Recall(value, value - 0.05, value + 0.05, 0.0)
        seen = Planted(8, 1, copies, round(copies * value), recall)
        return replace(pattern(found=True), planted=seen)

    few, many = drawn(planted(0.7, 20), MANY), drawn(planted(0.7, 400), MANY)
    assert few.source == many.source == "planted"
    assert few.recall.low < 0.7 < few.recall.high
    assert few.recall.high - few.recall.low > many.recall.high - many.recall.low
    alone = drawn(planted(0.7, 4000), replace(ALONE, unlike=1.0))
    assert alone.recall.value == pytest.approx(0.7, abs=0.02)


def test_a_few_copies_move_the_recall_less_than_what_drawn_scenes_showed():
    """Ten of ten copies found do not prove that nothing is missed."""
    seen = Planted(8, 1, 10, 10, Recall(1.0, 0.7, 1.0, 0.0))
    result = drawn(replace(pattern(found=True), planted=seen), MANY)
    assert result.recall.value < 0.995
    assert result.count.high > 80


def test_the_density_without_errors_of_detection_has_the_limits_of_a_count():
    given = pattern(400)
    result, exact = drawn(given, MANY), density_per_cm2(400, 1e4, 0.0)
    assert result.density.value == exact.value
    assert result.density.low == pytest.approx(exact.low, rel=0.02)
    assert result.density.high == pytest.approx(exact.high, rel=0.02)
    unsure = drawn(replace(given, relative_uncertainty=0.05), MANY)
    wide = density_per_cm2(400, 1e4, 0.05)
    assert unsure.density.low == pytest.approx(wide.low, rel=0.03)
    assert unsure.density.high == pytest.approx(wide.high, rel=0.03)
    assert drawn(replace(given, unit="px")).density is None


def test_clumping_widens_the_density_and_keeps_the_missed_in_the_clumps():
    clumps = pattern(places=thomas(AREA, 180, 8.0, 4.0, np.random.default_rng(2)), found=True)
    result = drawn(clumps, replace(ALONE, assumed_recall=0.5))
    plain = density_per_cm2(round(result.count.value), 1e4, 0.0)
    assert result.density.high - result.density.low > 2 * (plain.high - plain.low)
    seen = quick_test(clumps)
    assert seen.verdict == "clumped"
    assert result.stands == 1.0
    assert result.vmr.value > 1.5 * seen.everything.vmr  # a half seen shows half of the excess


def test_missed_objects_of_a_random_pattern_do_not_make_it_clumped():
    result = drawn(pattern(200, found=True), replace(ALONE, assumed_recall=0.6))
    excess = quick_test(pattern(200)).everything.vmr - 1
    assert result.vmr.value == pytest.approx(1 + 0.6 * excess, abs=0.05)  # diluted, as chance would
    assert result.stands > 0.8  # although chance had put it near the limit


def test_the_verdict_falls_with_the_doubtful_heap_it_rests_on():
    rng = np.random.default_rng(1)
    heap = np.array([50.0, 50.0]) + rng.normal(0, 2, (14, 2))
    places = np.concatenate([rng.random((60, 2)) * 100, heap])
    sure = pattern(places=places, doubt=np.where(np.arange(74) < 60, 0.0, 0.02))
    unsure = pattern(places=places, doubt=np.where(np.arange(74) < 60, 0.0, 0.9))
    assert quick_test(sure).verdict == "clumped"
    assert drawn(sure, ALONE).stands > 0.95
    result = drawn(unsure, ALONE)
    assert quick_test(pattern(places=places[:60])).verdict == "no departure from random found"
    assert result.stands < 0.3
    assert result.verdicts[0][0] == "no departure from random found"
    assert sum(share for _, share in result.verdicts) == pytest.approx(1.0)


def test_draws_that_leave_too_few_are_a_verdict_of_their_own():
    result = drawn(pattern(12, doubt=0.5), ALONE)
    assert dict(result.verdicts)["too few to tell"] > 0.9
    assert drawn(pattern(5, found=True)).verdicts[0][0] == "too few to tell"


def test_all_spots_may_be_false():
    result = drawn(pattern(20, doubt=1.0, found=True), ALONE)
    assert result.count.high == 0
    assert np.isnan(result.vmr.value)


def test_the_same_seed_gives_the_same_numbers_and_large_patterns_fewer_draws():
    given = pattern(doubt=0.1, found=True)
    assert repr(drawn(given)) == repr(drawn(given))
    assert drawn(given).vmr == drawn(given).vmr
    assert drawn(pattern(12_000, doubt=0.1)).draws < 999


@pytest.mark.parametrize(
    ("wrong", "said"),
    [
        ({"draws": 5}, "5 draws are too few; 999 are usual"),
        ({"shared_doubt": -1.0}, "a spread is negative"),
        ({"level": 1.0}, "a recall or a level does not lie between 0 and 1"),
    ],
)
def test_impossible_options_are_refused(wrong, said):
    with pytest.raises(ValueError, match=said):
        DrawOptions(**wrong)
