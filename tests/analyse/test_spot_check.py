"""What a spot check says, from marks and from counts alone."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import shapely
from statsmodels.stats.proportion import proportion_confint

from analyse.density import Limits
from analyse.double_sampling import DoubleSample
from analyse.grid_options import GridOptions
from analyse.quadrat_draw import SpotCheckOptions, draw_for_sheet
from analyse.spot_check import SpotCheck, judged_by, share_limits, spot_check_of
from detect.amendment import Amendment
from detect.sheet import Sheet
from detect.spot_check import Draw, outline_of
from tests.analyse.finished import TILT, sheet_of

GRID = GridOptions(shape=(6, 8))
TIME = "2026-05-04T10:00:00+00:00"


def apart(n: int, seed: int) -> np.ndarray:
    """Objects in the plot that do not touch."""
    rng = np.random.default_rng(seed)
    kept: list[np.ndarray] = []
    while len(kept) < n:
        at = rng.uniform((26, 26), (374, 274))
        if all(np.hypot(*(at - other)) > 14 for other in kept):
            kept.append(at)
    return np.array(kept)


def drawn(sheet: Sheet, number: int = 16, seed: int = 3) -> Amendment:
    draw = draw_for_sheet(sheet, GRID, SpotCheckOptions(quadrats=number, seed=seed))
    return Amendment("d", TIME, "Ann", "spot_check_drawn", draw=draw)


def marked(draw: Draw | None, objects: np.ndarray, *, places: bool = True) -> list[Amendment]:
    """What a person who errs nowhere marks: each object in the quadrat that holds its middle."""
    assert draw is not None
    log = []
    for number, each in enumerate(draw.quadrats):
        outline = outline_of(each.outline)
        inside = objects[shapely.intersects_xy(outline, objects[:, 0], objects[:, 1])]
        values: dict[str, Any] = {"of": "d", "quadrat": each.quadrat, "count": len(inside)}
        if places:
            values["marks"] = tuple((float(x), float(y)) for x, y in inside + 0.7)
        log.append(Amendment(f"m{number}", TIME, "Ann", "spot_check_marked", **values))
    return log


def checked(
    objects: np.ndarray, found: np.ndarray, *, number: int = 16, places: bool = True, **more: Any
) -> SpotCheck:
    sheet = sheet_of(found, **more)
    first = drawn(sheet, number)
    check = spot_check_of(sheet, [first, *marked(first.draw, objects, places=places)])
    assert check is not None
    return check


def test_a_perfect_detector_is_not_corrected_and_its_limits_are_not_nothing() -> None:
    objects = apart(90, 1)
    check = checked(objects, objects, number=24)
    assert (check.counted, round(check.total.value)) == (90, 90)
    assert check.total.low < 90 < check.total.high
    assert check.recall is not None
    assert check.precision is not None
    assert (check.recall.value, check.precision.value) == (1.0, 1.0)
    assert 0.8 < check.recall.low < 1
    assert check.plain.standard_error == 0


def test_a_census_finds_the_truth_exactly() -> None:
    objects = apart(90, 2)
    found = np.concatenate([objects[12:], [[30.0, 30.0], [350.0, 250.0]]])
    check = checked(objects, found, number=48)
    assert (check.total.low, check.total.value, check.total.high) == (90, 90, 90)
    assert check.recall is not None
    assert check.precision is not None
    assert check.recall.value == pytest.approx(78 / 90, abs=0.02)
    assert check.precision.value == pytest.approx(78 / 80, abs=0.02)
    assert check.trusted == "not trusted"
    assert "The count may not be trusted on the rest" in check.sentence
    assert "are corrected to 90 (95 % limits 90 to 90)" in check.sentence


def test_of_counts_alone_no_recall_is_said_but_the_same_total() -> None:
    objects = apart(90, 3)
    by_marks = checked(objects, objects[10:])
    by_counts = checked(objects, objects[10:], places=False)
    assert by_marks.total == by_counts.total
    assert (by_counts.recall, by_counts.precision) == (None, None)
    assert "Of the objects" not in by_counts.sentence
    assert "were found" in by_marks.sentence


def test_over_many_draws_the_corrected_total_is_right_on_average() -> None:
    objects = apart(90, 4)
    sheet = sheet_of(objects[14:])
    totals, held = [], 0
    for seed in range(60):
        first = drawn(sheet, 12, seed)
        check = spot_check_of(sheet, [first, *marked(first.draw, objects, places=False)])
        assert check is not None
        totals.append(check.total.value)
        held += check.total.low <= 90 <= check.total.high
    assert np.mean(totals) == pytest.approx(90, abs=4 * np.std(totals) / np.sqrt(60))
    assert held >= 53  # 57 expected; P(fewer than 53 of 60 at 95 %) < 0.02


def test_the_density_is_the_total_over_the_area() -> None:
    objects = apart(90, 5)
    check = checked(objects, objects[9:], matrix=TILT)
    sheet = sheet_of(objects, matrix=TILT)
    assert sheet.scale is not None
    area = shapely.transform(sheet.area.polygon, sheet.scale.to_mm).area
    assert check.density is not None
    assert check.density.value == pytest.approx(100 * check.total.value / area)
    assert check.density.low < 100 * check.total.low / area
    assert checked(objects, objects[9:]).density is None


def test_later_edits_do_not_change_what_was_checked() -> None:
    objects = apart(60, 6)
    sheet = sheet_of(objects[6:])
    first = drawn(sheet)
    log = [first, *marked(first.draw, objects)]
    later = Amendment("s", TIME, "Ann", "strike", spot=sheet.spots.id[0])
    one, other = spot_check_of(sheet, log), spot_check_of(sheet, [*log, later])
    assert one is not None
    assert other is not None
    assert (one.total, one.recall, one.sentence) == (other.total, other.recall, other.sentence)


def test_no_result_before_all_quadrats_are_done_and_a_new_draw_starts_anew() -> None:
    objects = apart(60, 7)
    sheet = sheet_of(objects)
    first = drawn(sheet)
    log = [first, *marked(first.draw, objects)]
    assert spot_check_of(sheet, []) is None
    assert spot_check_of(sheet, log[:-1]) is None
    assert spot_check_of(sheet, log) is not None
    assert spot_check_of(sheet, [*log, replace(first, id="d2")]) is None
    undo = Amendment("u", TIME, "Ann", "undo", of=log[-1].id)
    assert spot_check_of(sheet, [*log, undo]) is None
    redo = Amendment("r", TIME, "Ann", "redo", of=log[-1].id)
    assert spot_check_of(sheet, [*log, undo, redo]) is not None


def test_spots_detected_again_since_give_no_recall() -> None:
    objects = apart(60, 8)
    first = drawn(sheet_of(objects[5:]))
    log = [first, *marked(first.draw, objects)]
    check = spot_check_of(sheet_of(objects), log)
    assert check is not None
    assert (check.counted, check.recall) == (55, None)


@pytest.mark.parametrize(
    ("total", "shares", "said"),
    [
        ((95, 91, 108), (0.95, 0.97), "trusted"),
        ((95, 91, 108), (0.95, 0.85), "open"),  # errors that cancel out in the total
        ((95, 89, 101), (0.95, 0.97), "open"),
        ((120, 111, 130), (None, None), "not trusted"),
        ((80, 70, 89), (None, None), "not trusted"),
        ((100, 92, 109), (None, None), "trusted"),
    ],
)
def test_the_rule_of_trust(
    total: tuple[float, float, float], shares: tuple[float | None, float | None], said: str
) -> None:
    recall, precision = (
        None if each is None else Limits(each, each - 0.1, min(1.0, each + 0.06), 0.95)
        for each in shares
    )
    assert judged_by(Limits(*total, 0.95), 100, 0.1, recall, precision) == said


def test_a_surely_low_recall_is_not_trusted_though_the_total_is_right() -> None:
    recall = Limits(0.8, 0.7, 0.88, 0.95)
    assert judged_by(Limits(100, 98, 102, 0.95), 100, 0.1, recall, None) == "not trusted"


def test_shares_that_do_not_vary_between_quadrats_have_exact_binomial_limits() -> None:
    """Against statsmodels' Clopper-Pearson limits."""
    n = 500
    hits = np.array([1.0] * 450 + [0.0] * 50)
    sample = DoubleSample(np.zeros(n, dtype=int), np.zeros(n), np.zeros(n), np.array([10**9]), 0.0)
    limits = share_limits(sample, hits, np.ones(n))
    assert limits is not None
    low, high = proportion_confint(450, n, method="beta")
    assert (limits.low, limits.high) == pytest.approx((low, high), rel=2e-3)
    everything = share_limits(sample, np.ones(n), np.ones(n))
    assert everything is not None
    assert (everything.low, everything.high) == pytest.approx(
        proportion_confint(n, n, method="beta")
    )
    assert share_limits(sample, np.zeros(n), np.zeros(n)) is None


def test_misses_in_clusters_widen_the_limits_of_recall() -> None:
    n = 20
    sample = DoubleSample(np.zeros(n, dtype=int), np.zeros(n), np.zeros(n), np.array([400]), 0.0)
    of = np.full(n, 5.0)
    spread = share_limits(sample, np.where(np.arange(n) % 2, 4.0, 5.0), of)
    heaped = share_limits(sample, np.where(np.arange(n) < 2, 0.0, 5.0), of)
    assert spread is not None
    assert heaped is not None
    assert spread.value == heaped.value == 0.9
    assert heaped.high - heaped.low > 1.5 * (spread.high - spread.low)


def test_an_open_check_says_how_many_would_settle_it() -> None:
    objects = apart(90, 9)
    check = checked(objects, objects, number=12)
    assert check.trusted == "open"
    assert "is not settled. About " in check.sentence
    assert repr(check).startswith("<SpotCheck: 12 of 48 quadrats, 90 counted,")
