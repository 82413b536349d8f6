"""Tables on disk: fixed columns first, figures that agree with each other, the same bytes again."""

from __future__ import annotations

import csv
import io
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
import shapely
from scipy import stats

from analyse import tables
from analyse.findings import Findings, analyse_counts, analyse_pattern, analyse_points
from analyse.nulls import random_points
from analyse.pattern import CountTable, Pattern, read_counts
from analyse.quadrats import GridOptions
from tests.analyse import published

DISH = shapely.Point(43, 43).buffer(43, quad_segs=90)
POINTS = random_points(DISH, 150, np.random.default_rng(1))


def rows_of(text: str) -> list[dict[str, str]]:
    """Read CSV text back."""
    return list(csv.DictReader(io.StringIO(text)))


@cache
def three() -> list[Findings]:
    """A dish, the same in pixels, and Student's map; found once for all tests."""
    return found_anew()


def found_anew() -> list[Findings]:
    """A dish, the same in pixels, and Student's map, found again."""
    pixels = replace(Pattern.of(POINTS, DISH, name="px.jpg", unit="px"), flags=("uncalibrated",))
    return [
        analyse_points(POINTS, DISH, name="dish.jpg", simulations=99),
        analyse_pattern(pixels, simulations=99),
        analyse_counts(read_counts(published.DATA / "student_grid.csv"), simulations=99),
    ]


def test_fixed_columns_come_first() -> None:
    found = three()
    quadrats, summary, tests = (
        make(found).splitlines()[0]
        for make in (tables.quadrats_csv, tables.summary_csv, tables.tests_csv)
    )
    assert quadrats.startswith(
        "photograph,quadrat,row,column,x_mm,y_mm,area_mm2,whole,count,expected,residual"
    )
    assert summary.startswith(
        "photograph,count,area_mm2,density_per_cm2,density_low,density_high,quadrat_mm,quadrats,"
        "mean,variance,vmr,chi2,df,p_clumped,p_even,p_two_sided,p_simulated,verdict"
    )
    assert tests == "photograph,statistic,value,low,high,p,method,n,notes"


def test_the_summary_follows_from_the_quadrats() -> None:
    """Count, area, X2 and p again from quadrats.csv alone, by scipy; the VMR from whole rows."""
    found = three()
    quadrats, summary = rows_of(tables.quadrats_csv(found)), rows_of(tables.summary_csv(found))
    for line in summary:
        mine = [row for row in quadrats if row["photograph"] == line["photograph"]]
        count, expected = (np.array([float(row[k]) for row in mine]) for k in ("count", "expected"))
        whole = np.array([row["whole"] == "true" for row in mine])
        assert int(line["quadrats"]) == len(mine)
        assert int(line["whole_quadrats"]) == whole.sum()
        assert int(line["count"]) == count.sum() == pytest.approx(expected.sum())
        chi2, p = stats.chisquare(count, expected * count.sum() / expected.sum())
        assert float(line["chi2"]) == pytest.approx(chi2, rel=1e-6)
        assert float(line["p_clumped"]) == pytest.approx(p, rel=1e-6)
        assert int(line["df"]) == len(mine) - 1
        assert float(line["vmr_by_area"]) == pytest.approx(chi2 / (len(mine) - 1), rel=1e-6)
        vmr = count[whole].var(ddof=1) / count[whole].mean()
        assert float(line["vmr"]) == pytest.approx(vmr, rel=1e-6)
        assert float(line["chi2_whole"]) == pytest.approx((whole.sum() - 1) * vmr, rel=1e-6)
        assert float(line["variance"]) / float(line["mean"]) == pytest.approx(vmr, rel=1e-6)


def test_millimetres_and_pixels_have_their_own_columns() -> None:
    dish, pixels, student = (rows_of(tables.quadrats_csv([each]))[0] for each in three())
    assert dish["x_mm"] == pixels["x_px"] != ""
    assert dish["area_mm2"] == pixels["area_px2"] != ""
    assert [dish[k] for k in ("x_px", "y_px", "area_px2")] == [""] * 3
    assert [pixels[k] for k in ("x_mm", "y_mm", "area_mm2")] == [""] * 3
    assert [student[k] for k in ("x_mm", "area_mm2", "x_px", "area_px2")] == [""] * 4
    assert (student["row"], student["column"], student["quadrat"]) == ("1", "1", "1")
    dish, pixels, student = (rows_of(tables.summary_csv([each]))[0] for each in three())
    assert dish["quadrat_mm"] == pixels["quadrat_px"] != ""
    assert pixels["density_per_cm2"] == student["density_per_cm2"] == pixels["area_mm2"] == ""
    assert (pixels["flags"], student["flags"]) == ("uncalibrated", "no_area")


def test_flags_go_with_every_statistic() -> None:
    """In summary.csv in a column, in tests.csv at the end of the notes of every row."""
    for each in three():
        line = rows_of(tables.summary_csv([each]))[0]
        assert line["flags"] == " ".join(each.flags)
        for row in rows_of(tables.tests_csv([each])):
            ending = f"; flags: {line['flags']}"
            assert row["notes"].endswith(ending) if each.flags else "flags" not in row["notes"]


def test_no_test_is_called_the_verdicts_where_there_is_too_little() -> None:
    for n, there in ((5, False), (150, True)):
        rows = rows_of(tables.tests_csv([analyse_points(POINTS[:n], DISH, simulations=99)]))
        assert any("the verdict's test" in row["notes"] for row in rows) == there
        assert ("vmr_seen" in {row["statistic"] for row in rows}) == there


def test_areas_add_up_to_the_study_area() -> None:
    found = three()[:1]
    areas = [float(row["area_mm2"]) for row in rows_of(tables.quadrats_csv(found))]
    line = rows_of(tables.summary_csv(found))[0]
    assert sum(areas) == pytest.approx(float(line["area_mm2"]), rel=1e-7)
    assert float(line["density_per_cm2"]) == pytest.approx(15000 / sum(areas), rel=1e-6)


def test_every_p_says_which_it_is() -> None:
    found = analyse_points(POINTS, DISH, name="dish.jpg", simulations=99)
    rows = {row["statistic"]: row for row in rows_of(tables.tests_csv([found]))}
    for test in ("chi2", "chi2_whole", "chi2_simulated"):
        sides = {
            "clumped": "upper tail",
            "even": "lower tail",
            "two_sided": "twice the smaller tail",
        }
        for side, words in sides.items():
            assert rows[f"{test}_{side}"]["method"].endswith(words)
            assert 0 <= float(rows[f"{test}_{side}"]["p"]) <= 1
    assert float(rows["chi2_simulated_clumped"]["p"]) == found.simulated.p_clumped
    assert float(rows["density_per_cm2"]["low"]) == pytest.approx(found.density.low, rel=1e-6)  # type: ignore[union-attr]
    assert rows["density_per_cm2"]["n"] == "150"
    assert rows["vmr"]["n"] == str(found.counts.whole.sum())


def test_statistics_of_a_published_series() -> None:
    """ "Student" (1907), series D: indices and Poisson fit as computed from his frequencies."""
    found = analyse_counts(read_counts(published.DATA / "student_grid.csv"))
    rows = {row["statistic"]: row for row in rows_of(tables.tests_csv([found]))}
    assert float(rows["mean"]["value"]) == pytest.approx(4.68)
    assert float(rows["variance"]["value"]) == pytest.approx(4.468772, abs=5e-7)
    assert float(rows["vmr"]["value"]) == pytest.approx(0.954866, abs=5e-7)
    assert float(rows["normal_deviate"]["value"]) == pytest.approx(-0.6272, abs=5e-5)
    assert float(rows["morisita_index"]["value"]) == pytest.approx(0.990375, abs=5e-7)
    assert float(rows["poisson_fit"]["value"]) == pytest.approx(8.8130, abs=1e-4)
    assert float(rows["poisson_fit"]["p"]) == pytest.approx(0.6391, abs=1e-4)
    assert rows["poisson_fit"]["notes"].startswith("df 11; classes 0, 1, 2,")


def test_the_normal_approximation_waits_for_many_quadrats() -> None:
    for q, there in ((31, False), (32, True)):
        found = [analyse_counts(CountTable("bed", np.arange(q)))]
        rows = {row["statistic"] for row in rows_of(tables.tests_csv(found))}
        assert ("normal_deviate" in rows) == there


def test_nothing_counted_leaves_cells_empty_not_wrong() -> None:
    found = [analyse_points([], DISH, name="empty.jpg", simulations=99)]
    line = rows_of(tables.summary_csv(found))[0]
    assert (line["count"], line["vmr"], line["chi2"], line["p_simulated"]) == ("0", "", "", "")
    assert line["verdict"] == "too few to tell"
    assert float(line["density_high"]) > 0
    text = "".join(
        make(found) for make in (tables.quadrats_csv, tables.summary_csv, tables.tests_csv)
    )
    assert "nan" not in text
    assert "inf" not in text


def test_without_whole_quadrats_their_cells_are_empty() -> None:
    rim = DISH.difference(shapely.Point(43, 43).buffer(36))
    found = [analyse_points(random_points(rim, 40, np.random.default_rng(1)), rim, simulations=99)]
    line = rows_of(tables.summary_csv(found))[0]
    assert [line[k] for k in ("mean", "variance", "vmr", "chi2_whole", "p_even_whole")] == [""] * 5
    assert float(line["chi2"]) > 0
    assert "vmr" not in {row["statistic"] for row in rows_of(tables.tests_csv(found))}


def test_rectangles_give_their_area_but_no_side() -> None:
    found = [analyse_points(POINTS, DISH, grid=GridOptions(shape=(4, 5)), simulations=99)]
    line = rows_of(tables.summary_csv(found))[0]
    assert line["quadrat_mm"] == ""
    assert float(line["quadrat_area_mm2"]) == pytest.approx(86 * 86 / 20)


def test_factors_become_columns_at_the_end() -> None:
    factors = {"dish.jpg": {"batch": "A"}, "px.jpg": {"batch": "B", "block": "2"}}
    rows = rows_of(tables.summary_csv(three(), factors=factors))
    assert list(rows[0])[-2:] == ["batch", "block"]
    assert [(row["batch"], row["block"]) for row in rows] == [("A", ""), ("B", "2"), ("", "")]


def test_the_same_seed_gives_the_same_bytes() -> None:
    again = found_anew()
    for make in (tables.quadrats_csv, tables.summary_csv, tables.tests_csv):
        assert make(again) == make(three())


def test_a_name_that_looks_like_a_formula_is_harmless() -> None:
    found = [analyse_counts(CountTable("=1+1.csv", np.array([1, 2, 3])))]
    for make in (tables.quadrats_csv, tables.summary_csv, tables.tests_csv):
        assert rows_of(make(found))[0]["photograph"] == "'=1+1.csv"


def test_nothing_analysed_leaves_headers() -> None:
    for make in (tables.quadrats_csv, tables.summary_csv, tables.tests_csv):
        assert make([]).count("\n") == 1
