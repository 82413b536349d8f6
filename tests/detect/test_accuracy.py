"""Spots against truth: pairs by plain enumeration, scores by hand."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry import box

from detect.accuracy import (
    Accuracy,
    MatchOptions,
    Truth,
    match_spots,
    pooled,
    score_csv,
    score_sheet,
)
from detect.area import StudyArea
from detect.scale import Scale
from detect.sheet import PhotographIdentity, Sheet
from detect.spots import Spots


def best_by_enumeration(
    found: np.ndarray, truth: np.ndarray, reach: np.ndarray
) -> tuple[int, float]:
    """Most pairs, then least total distance, by trying every assignment."""
    best = (0, 0.0)
    slots = [*range(len(truth)), *([None] * len(found))]
    for choice in set(itertools.permutations(slots, len(found))):
        pairs = [
            math.dist(found[i], truth[j])
            for i, j in enumerate(choice)
            if j is not None and math.dist(found[i], truth[j]) <= reach[j]
        ]
        best = min(best, (-len(pairs), sum(pairs)))
    return -best[0], best[1]


points = st.lists(st.tuples(st.integers(0, 12), st.integers(0, 12)), max_size=4)


@settings(max_examples=60, deadline=None)
@given(points, points, st.integers(1, 14))
def test_pairs_are_the_best_that_enumeration_finds(
    found: list[tuple[int, int]], truth: list[tuple[int, int]], radius: int
) -> None:
    found_xy, truth_xy = (np.array(p, dtype=float).reshape(-1, 2) for p in (found, truth))
    radii = np.full(len(truth_xy), float(radius))
    match = match_spots(found_xy, truth_xy, radii)
    number, total = best_by_enumeration(found_xy, truth_xy, np.maximum(0.5 * radii, 3.0))
    assert len(match) == number
    assert match.distance.sum() == pytest.approx(total)
    assert len(set(match.found.tolist())) == len(set(match.truth.tolist())) == number


def test_more_pairs_come_before_nearer_ones() -> None:
    # The middle spot is nearest to the left object, but only the far pairing serves both.
    match = match_spots([[2, 0], [-2, 0]], [[1, 0], [4.5, 0]], [4, 4])
    assert match.truth.tolist() == [0, 1]
    assert match.found.tolist() == [1, 0]


def test_reach_is_half_a_radius_but_three_pixels_at_least() -> None:
    assert len(match_spots([[3, 0]], [[0, 0]], [1])) == 1
    assert len(match_spots([[3.01, 0]], [[0, 0]], [1])) == 0
    assert len(match_spots([[10, 0]], [[0, 0]], [20])) == 1
    assert len(match_spots([[10.01, 0]], [[0, 0]], [20])) == 0
    assert len(match_spots([[10.01, 0]], [[0, 0]], [20], options=MatchOptions(radii=1.0))) == 1


def test_many_spots_are_paired_in_a_moment() -> None:
    rng = np.random.default_rng(5)
    truth = rng.uniform(0, 4000, (8000, 2))
    order = rng.permutation(len(truth))
    match = match_spots(truth[order], truth, np.full(len(truth), 5.0))
    assert len(match) == len(truth)
    assert np.array_equal(order[match.found], match.truth)


def a_sheet(found: list[list[float]], *, scale: Scale | None = None) -> Sheet:
    xy = np.array(found, dtype=float).reshape(-1, 2)
    spots = Spots.found_at(xy[:, 0], xy[:, 1], np.full(len(xy), 4.0))
    identity = PhotographIdentity("a.jpg", "0", 100, 100)
    area = StudyArea(box(10, 10, 90, 90), "plot", "")
    return Sheet(1, "0", identity, scale, area, {}, spots)


def a_truth(xy: list[list[float]]) -> Truth:
    return Truth(np.array(xy, dtype=float).reshape(-1, 2), np.full(len(xy), 4.0))


def test_a_sheet_is_scored_in_its_study_area_alone() -> None:
    # Pairs: (20,20) and (50,50); a spot near an object outside the area is neither right nor
    # wrong; (70,70) is invented; (30,80) is missed; (95,95) is outside and may be missed.
    sheet = a_sheet([[20, 21], [50, 52], [11, 40], [70, 70]], scale=Scale.from_mm_per_pixel(0.5))
    truth = a_truth([[20, 20], [50, 50], [9, 40], [30, 80], [95, 95]])
    score = score_sheet(sheet, truth)
    assert (score.truth, score.found, score.matched) == (3, 3, 2)
    assert score.precision == pytest.approx(2 / 3)
    assert score.recall == pytest.approx(2 / 3)
    assert score.f1 == pytest.approx(2 / 3)
    assert score.count_error == 0
    assert score.rmse_px == pytest.approx(math.sqrt((1 + 4) / 2))
    assert score.rmse_mm == pytest.approx(0.5 * math.sqrt((1 + 4) / 2))


def test_struck_spots_have_no_say() -> None:
    sheet = a_sheet([[20, 20], [70, 70]])
    struck = replace(sheet, spots=replace(sheet.spots, counted=np.array([True, False])))
    score = score_sheet(struck, a_truth([[20, 20]]))
    assert (score.precision, score.recall, score.count_error) == (1.0, 1.0, 0)
    assert math.isnan(score.rmse_mm)


def test_nothing_found_and_nothing_there() -> None:
    score = score_sheet(a_sheet([]), a_truth([]))
    assert math.isnan(score.precision)
    assert math.isnan(score.recall)
    assert math.isnan(score.f1)
    assert score_sheet(a_sheet([]), a_truth([[50, 50]])).recall == 0.0


def test_pooled_scores_weigh_objects_alike() -> None:
    scores = [Accuracy("a", 10, 8, 8, 8.0, 2.0), Accuracy("b", 2, 6, 2, 2.0)]
    both = pooled(scores)
    assert (both.truth, both.found, both.matched) == (12, 14, 10)
    assert both.rmse_px == pytest.approx(1.0)
    assert math.isnan(both.rmse_mm)
    assert both.count_error == 2
    assert score_csv(scores).splitlines() == [
        "photograph,truth,found,matched,precision,recall,f1,count_error,rmse_px,rmse_mm",
        "a,10,8,8,1.0,0.8,0.888889,-2,1.0,0.5",
        "b,2,6,2,0.333333,1.0,0.5,4,1.0,",
        "all,12,14,10,0.714286,0.833333,0.769231,2,1.0,",
    ]


def test_more_pairs_than_objects_is_a_bug() -> None:
    with pytest.raises(ValueError, match="3 pairs of 4 spots and 2 true objects"):
        Accuracy("a", 2, 4, 3)
