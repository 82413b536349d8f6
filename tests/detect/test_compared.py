"""A sheet beside its truth: who is a hit, who a miss, what of doubt, by hand."""

from __future__ import annotations

import csv
import math
from dataclasses import replace

import numpy as np
import pytest
from shapely.geometry import box

from detect.accuracy import SCORE_COLUMNS
from detect.area import StudyArea
from detect.compared import DOUBT_COLUMNS, compare_sheet, joined, score_csv, usual_radius_of
from detect.errors import RequestWrong
from detect.scale import Scale
from detect.sheet import PhotographIdentity, Sheet
from detect.spots import Spots
from detect.truth import Truth


def a_sheet(found: list[list[float]], *, scale: Scale | None = None) -> Sheet:
    xy = np.array(found, dtype=float).reshape(-1, 2)
    doubt = np.linspace(0.1, 0.4, len(xy))
    spots = Spots.found_at(xy[:, 0], xy[:, 1], np.full(len(xy), 4.0), doubt=doubt)
    identity = PhotographIdentity("a.jpg", "0", 100, 100)
    area = StudyArea(box(10, 10, 90, 90), "plot", "")
    return Sheet(1, "0", identity, scale, area, {}, spots)


def a_truth(xy: list[list[float]], radius: float = 4.0) -> Truth:
    return Truth(np.array(xy, dtype=float).reshape(-1, 2), np.full(len(xy), radius))


def test_a_sheet_is_scored_in_its_study_area_alone() -> None:
    # Pairs: (20,20) and (50,50); a spot near an object outside the area is neither right nor
    # wrong; (70,70) is invented; (30,80) is missed; (95,95) is outside and may be missed.
    sheet = a_sheet([[20, 21], [50, 52], [11, 40], [70, 70]], scale=Scale.from_mm_per_pixel(0.5))
    truth = a_truth([[20, 20], [50, 50], [9, 40], [30, 80], [95, 95]])
    score = compare_sheet(sheet, truth).accuracy
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
    score = compare_sheet(struck, a_truth([[20, 20]])).accuracy
    assert (score.precision, score.recall, score.count_error) == (1.0, 1.0, 0)
    assert math.isnan(score.rmse_mm)


def test_nothing_found_and_nothing_there() -> None:
    score = compare_sheet(a_sheet([]), a_truth([])).accuracy
    assert math.isnan(score.precision)
    assert math.isnan(score.recall)
    assert math.isnan(score.f1)
    assert compare_sheet(a_sheet([]), a_truth([[50, 50]])).accuracy.recall == 0.0


def test_hits_misses_and_inventions_are_named() -> None:
    sheet = a_sheet([[20, 21], [70, 70]], scale=Scale.from_mm_per_pixel(0.5))
    compared = compare_sheet(sheet, a_truth([[30, 80], [20, 20], [95, 95]]))
    assert compared.objects.xy.tolist() == [[30, 80], [20, 20]]
    assert compared.objects.hit.tolist() == [False, True]
    assert compared.objects.off_px.tolist() == pytest.approx([math.nan, 1.0], nan_ok=True)
    assert compared.objects.off_mm.tolist() == pytest.approx([math.nan, 0.5], nan_ok=True)
    assert compared.objects.radius_mm.tolist() == [2.0, 2.0]
    assert compared.claims.xy.tolist() == [[20, 21], [70, 70]]
    assert compared.claims.real.tolist() == [True, False]


def test_crowding_counts_neighbours_beyond_the_area() -> None:
    # The neighbour at (7, 50) lies outside, but touches all the same.
    compared = compare_sheet(a_sheet([]), a_truth([[15, 50], [7, 50]]))
    assert compared.objects.apart.tolist() == [1.0]


def test_only_found_spots_that_count_have_a_doubt() -> None:
    sheet = a_sheet([[20, 20], [40, 40], [60, 60], [80, 80]])
    spots = replace(
        sheet.spots,
        found=np.array([True, True, False, True]),
        counted=np.array([True, False, True, True]),
    )
    doubt, false = compare_sheet(replace(sheet, spots=spots), a_truth([[20, 20]])).doubts
    assert doubt.tolist() == pytest.approx([0.1, 0.4])
    assert false.tolist() == [False, True]


def test_a_row_says_what_doubt_is_worth() -> None:
    compared = compare_sheet(a_sheet([[20, 20], [40, 40]]), a_truth([[20, 20], [80, 80]]))
    row = dict(zip((*SCORE_COLUMNS, *DOUBT_COLUMNS), compared.row(), strict=True))
    assert (row["with_doubt"], row["mean_doubt"], row["share_false"]) == (2, 0.25, 0.5)
    assert row["auc"] == 1.0
    assert row["ece"] == pytest.approx((0.1 + 0.6) / 2)
    assert row["ece_equal_width"] == pytest.approx((0.1 + 0.6) / 2)


def test_scores_are_a_table_with_all_together_last() -> None:
    first = compare_sheet(a_sheet([[20, 20], [40, 40]]), a_truth([[20, 20], [80, 80]]))
    second = compare_sheet(a_sheet([]), a_truth([[50, 50]]))
    rows = list(csv.DictReader(score_csv([first, second]).splitlines()))
    assert list(rows[0]) == [*SCORE_COLUMNS, *DOUBT_COLUMNS]
    assert [row["photograph"] for row in rows] == ["a.jpg", "a.jpg", "all"]
    assert [row["truth"] for row in rows] == ["2", "1", "3"]
    assert rows[1]["precision"] == rows[1]["mean_doubt"] == rows[1]["auc"] == ""
    assert rows[2]["recall"] == "0.333333"
    assert rows[2]["auc"] == "1.0"


def test_joined_photographs_keep_every_object_and_spot() -> None:
    first = compare_sheet(a_sheet([[20, 20]]), a_truth([[20, 20], [80, 80]]))
    both = joined([first, first], name="both")
    assert both.name == "both"
    assert both.accuracy.truth == 4
    assert both.claims.real.tolist() == [True, True]


def test_a_radius_that_was_not_marked_is_the_median_of_the_others() -> None:
    truth = Truth(np.array([[20.0, 20], [40, 40], [60, 60]]), np.array([2.0, 10.0, np.nan]))
    sheet = a_sheet([[20, 20], [40, 40], [62.9, 60]])
    compared = compare_sheet(sheet, truth)
    assert compared.objects.radius.tolist() == [2.0, 10.0, 6.0]
    assert compared.objects.known.tolist() == [True, True, False]
    assert compared.objects.hit.all()
    assert not compare_sheet(sheet, truth, usual_radius_px=4.0).objects.known.all()


def test_a_given_usual_radius_sets_the_reach() -> None:
    truth = a_truth([[20, 20]], radius=math.nan)
    sheet = a_sheet([[25, 20]])
    assert compare_sheet(sheet, truth, usual_radius_px=10.0).accuracy.matched == 1
    assert compare_sheet(sheet, truth, usual_radius_px=9.0).accuracy.matched == 0


def test_without_any_radius_the_diameters_looked_for_tell() -> None:
    truth = a_truth([[20, 20]], radius=math.nan)
    sheet = replace(a_sheet([[20, 20]]), settings={"detector": {"diameter_px": [4.0, 16.0]}})
    assert usual_radius_of(sheet, truth) == 4.0
    assert compare_sheet(sheet, truth).objects.radius.tolist() == [4.0]


@pytest.mark.parametrize("looked_for", [None, [5.0], "ab", [0.0, 5.0], [math.nan, 1.0]])
def test_a_radius_that_nobody_can_tell_is_asked_for(looked_for: object) -> None:
    settings = {} if looked_for is None else {"detector": {"diameter_px": looked_for}}
    sheet = replace(a_sheet([]), settings=settings)
    with pytest.raises(RequestWrong, match=r"marks no radii, and its sheet does not .* --radius"):
        compare_sheet(sheet, a_truth([[20, 20]], radius=math.nan))


def test_a_truth_of_another_picture_is_refused() -> None:
    message = (
        r"2 of the 3 objects of the truth lie outside the photograph \(100 x 100 px\); write x"
    )
    with pytest.raises(RequestWrong, match=message):
        compare_sheet(a_sheet([]), a_truth([[20, 20], [20, 120], [-5, 20]]))
    assert len(compare_sheet(a_sheet([]), a_truth([[20, 20], [20, 120]])).objects) == 1


def test_columns_of_different_lengths_are_refused() -> None:
    claims = compare_sheet(a_sheet([[20, 20]]), a_truth([])).claims
    with pytest.raises(ValueError, match="doubt has 2 values for 1 rows"):
        replace(claims, doubt=np.zeros(2))
