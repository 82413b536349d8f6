"""Rows and cells about counts: what is said where a statistic does not exist."""

from __future__ import annotations

import numpy as np
import pytest
import shapely

from analyse import tables
from analyse.count_rows import COUNT_SUMMARY_COLUMNS, count_rows, count_summary_cells
from analyse.findings import Findings, analyse_counts, analyse_points
from analyse.nulls import random_points
from analyse.pattern import CountTable
from detect.lengths import Length
from tests.analyse import published

DISH = shapely.Point(43, 43).buffer(43, quad_segs=90)


def of(counts: object, *, side: Length | None = None) -> Findings:
    return analyse_counts(CountTable("bed", np.array(counts), side=side), simulations=99)


def rows(found: Findings) -> dict[str, list[object]]:
    """Rows by statistic: value, low, high, p, method, n, notes."""
    return {str(row[0]): list(row[1:]) for row in count_rows(found)}


def test_columns_stand_at_the_end_of_the_summary() -> None:
    start = tables.SUMMARY_COLUMNS.index("k")
    assert (
        tables.SUMMARY_COLUMNS[start : start + len(COUNT_SUMMARY_COLUMNS)] == COUNT_SUMMARY_COLUMNS
    )
    assert start > tables.SUMMARY_COLUMNS.index("blind_distance_mm")
    assert len(count_summary_cells(of([1, 2, 3]))) == len(COUNT_SUMMARY_COLUMNS)


def test_every_row_names_its_method_and_fills_seven_cells() -> None:
    for counts in ([1, 2, 3], [0, 0, 9, 0, 1, 0, 7], [0] * 5, [4] * 9, [10**6] * 3 + [10**6 + 50]):
        for name, cells in rows(of(counts, side=Length(10, "mm"))).items():
            assert len(cells) == 7, name
            assert str(cells[4])[0] not in "=+-@", "a spreadsheet would take it for a formula"
            assert cells[5] is not None


def test_clumped_limits_as_a_density_of_known_quadrats() -> None:
    """Quadrats of 10 mm: a density per cm2 is the mean count; the Poisson limits are narrower."""
    mites = published.counts("bliss_fisher1953_mites")
    found = of(mites, side=Length(10, "mm"))
    said = rows(found)
    for way in ("clumped", "bootstrap"):
        mean, dense = said[f"mean_count_{way}"], said[f"density_per_cm2_{way}"]
        assert dense[:3] == pytest.approx(mean[:3])
    line = dict(zip(COUNT_SUMMARY_COLUMNS, count_summary_cells(found), strict=True))
    assert line["density_low_clumped"] == said["density_per_cm2_clumped"][1]
    assert line["density_high_clumped"] == said["density_per_cm2_clumped"][2]
    assert found.density is not None
    assert float(str(line["density_low_clumped"])) < found.density.low
    assert float(str(line["density_high_clumped"])) > found.density.high


def test_without_a_side_there_is_a_mean_and_no_density() -> None:
    said = rows(of([0, 3, 0, 5, 1, 0, 2]))
    assert "mean_count_clumped" in said
    assert "density_per_cm2_clumped" not in said


def test_the_poisson_limit_is_words_and_empty_cells() -> None:
    found = of([2, 1, 2, 2, 1, 2, 3, 2, 2])
    said = rows(found)["negative_binomial_k"]
    assert (said[0], said[2]) == (None, None)
    assert said[6] == "Poisson limit: no finite k; whole quadrats"
    cells = dict(zip(COUNT_SUMMARY_COLUMNS, count_summary_cells(found), strict=True))
    assert (cells["k"], cells["k_high"]) == (None, None)
    assert cells["k_note"] == "Poisson limit: no finite k"
    assert "k_standard_error" not in rows(found)
    fit = rows(found)["negative_binomial_fit"]
    assert str(fit[6]).startswith("Poisson limit: no finite k, so that the Poisson fit stands for")
    assert "presence_mean_clumped" not in rows(found)


def test_an_open_upper_limit_of_k_says_why() -> None:
    """ "Student" (1907), series C: k 20.9, but the Poisson law is nearly as likely."""
    said = rows(of(published.counts("student1907_C")))["negative_binomial_k"]
    assert (said[0], said[2]) == (pytest.approx(20.8616, abs=1e-3), None)
    assert said[6] == "no upper limit: the Poisson limit lies within; whole quadrats"


def test_one_crowded_quadrat_leaves_the_density_without_upper_limit() -> None:
    found = of([40, 0, 0, 0, 0, 0], side=Length(10, "mm"))
    said = rows(found)["density_per_cm2_clumped"]
    assert said[2] is None
    assert str(said[6]).startswith("no upper limit: few quadrats hold nearly all points;")
    assert "inf" not in tables.summary_csv([found]) + tables.tests_csv([found])


def test_reasons_stand_in_the_notes() -> None:
    even = rows(of([3] * 8))
    assert even["mean_count_bootstrap"][:3] == [None] * 3
    assert str(even["mean_count_bootstrap"][6]).startswith("all quadrats are equally dense")
    assert str(even["k_zero_class"][6]).startswith("no quadrat is empty: no k by the zero class")
    assert str(even["presence_mean"][6]).startswith("no quadrat is empty: the mean cannot be told")
    crowded = rows(of([9, 0, 0, 0]))["negative_binomial_fit"]
    assert str(crowded[6]).startswith("too few classes to test the fit: ")
    few = rows(of([1] * 20 + [0] * 80))
    assert str(few["morisita_standardised"][6]).endswith("too few points to be found evenly spaced")
    lone = rows(of([1, 0, 0]))
    assert lone["morisita_standardised"][0] != lone["morisita_standardised"][0]  # NaN: empty in CSV
    assert str(lone["morisita_standardised"][6]).startswith("fewer than 2 points;")


@pytest.mark.parametrize("counts", [[0] * 12, [1] + [0] * 11, [10**12, 0, 5], [20_000] * 9 + [0]])
def test_degenerate_tables_print_neither_inf_nor_nan(counts: list[int]) -> None:
    found = of(counts, side=Length(10, "mm"))
    text = tables.summary_csv([found]) + tables.tests_csv([found])
    assert "inf" not in text
    assert "nan" not in text


def test_a_dish_of_points_uses_whole_quadrats_for_k_and_all_for_the_density() -> None:
    points = random_points(DISH, 150, np.random.default_rng(1))
    found = analyse_points(points, DISH, name="dish.jpg", simulations=99)
    said = rows(found)
    whole = int(found.counts.whole.sum())
    assert whole < len(found.counts)
    assert said["negative_binomial_k"][5] == whole
    assert said["presence_mean"][5] == whole
    assert said["density_per_cm2_clumped"][5] == len(found.counts)
    assert found.density is not None
    assert said["density_per_cm2_clumped"][0] == pytest.approx(found.density.value, rel=1e-6)


def test_a_rim_without_whole_quadrats_still_has_a_density() -> None:
    rim = DISH.difference(shapely.Point(43, 43).buffer(36))
    points = random_points(rim, 40, np.random.default_rng(1))
    found = analyse_points(points, rim, simulations=99)
    said = rows(found)
    assert found.negative_binomial is None
    assert "negative_binomial_k" not in said
    assert "presence_mean" not in said
    assert said["density_per_cm2_clumped"][0] == pytest.approx(found.density.value, rel=1e-6)  # type: ignore[union-attr]
