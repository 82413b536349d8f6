"""From points or counts to findings: published patterns, power, degenerate cases, repeatability."""

from __future__ import annotations

import math
import pickle
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import shapely

from analyse.errors import GridWrong
from analyse.findings import Findings, analyse_counts, analyse_pattern, analyse_points, stream
from analyse.nulls import random_points
from analyse.pattern import Circle, CountTable, Pattern, read_counts
from analyse.point_table import read_points
from analyse.quadrats import GridOptions
from analyse.quick import quick_test
from detect.errors import OptionWrong
from detect.lengths import Length
from tests.analyse import published

DISH = shapely.Point(43, 43).buffer(43, quad_segs=90)


def test_redwood_and_cells() -> None:
    """Strauss (1975), Ripley (1977): clustered and regular; figures computed from their points."""
    wanted = {
        "redwood": (
            published.REDWOOD_WINDOW,
            "clumped",
            2.48,
            2.28898,
            54.9355,
            0.000319,
            0.000639,
        ),
        "cells": (published.CELLS_WINDOW, "evenly spaced", 1.68, 1 / 3, 8.0, 0.999085, 0.00183),
    }
    for name, (window, verdict, mean, vmr, chi2, upper, two) in wanted.items():
        pattern = read_points(published.DATA / f"{name}.csv", area=shapely.box(*window))
        found = analyse_pattern(pattern, GridOptions(shape=(5, 5)), simulations=99)
        d = found.dispersion_whole
        assert d is not None
        assert found.verdict == verdict
        assert (d.mean, d.vmr, d.chi2) == pytest.approx((mean, vmr, chi2), abs=6e-5)
        assert d.p_clumped == pytest.approx(upper, abs=6e-7)
        assert d.p_two_sided == pytest.approx(two, abs=6e-6)
        assert d.df == found.dispersion_all.df == 24
        assert found.dispersion_all.chi2 == pytest.approx(d.chi2)
        assert found.simulated.statistic == pytest.approx(d.chi2)


def test_the_way_up_does_not_matter_to_the_ratio() -> None:
    points = published.points("redwood")
    up = analyse_points(
        points, published.REDWOOD_WINDOW, grid=GridOptions(shape=(7, 9)), simulations=99
    )
    down = analyse_points(
        points * [1, -1], (0, 0, 1, 1), grid=GridOptions(shape=(7, 9)), simulations=99
    )
    one, other = up.counts.counts.reshape(7, 9), down.counts.counts.reshape(7, 9)
    assert np.abs(one - other[::-1]).sum() <= 4  # points on lines go to the other side
    assert up.verdict == down.verdict == "clumped"


def test_student_map() -> None:
    """ "Student" (1907): random by his own conclusion, so nothing is found."""
    found = analyse_counts(read_counts(published.DATA / "student_grid.csv"))
    assert found.verdict == "no departure from random found"
    assert found.dispersion_all.chi2 == pytest.approx(380.9915, abs=5e-5)
    assert found.simulated.p_two_sided == pytest.approx(0.5329, abs=0.07)
    assert (found.flags, found.area, found.density, found.unit) == (("no_area",), None, None, None)
    assert found.counts.row is not None
    assert found.counts.row.tolist()[:21] == [0] * 20 + [1]


def test_three_lines_of_python() -> None:
    points = random_points(DISH, 120, np.random.default_rng(1))
    found = analyse_points(points, DISH, simulations=99)
    assert found.sentence.startswith("No departure from random found (X2/df ")


@pytest.mark.parametrize(("kind", "verdict"), [("clumps", "clumped"), ("net", "evenly spaced")])
def test_departures_are_found(kind: str, verdict: str) -> None:
    """100 points in clumps of 5, or one in each cell of a net: found in 19 of 20 dishes."""
    seen = []
    for seed in range(20):
        rng = np.random.default_rng(seed)
        if kind == "clumps":
            parents = random_points(DISH, 24, rng)
            points = np.repeat(parents, 5, axis=0) + rng.normal(0, 2.0, (120, 2))
        else:
            net = np.stack(np.meshgrid(np.arange(0, 90, 8), np.arange(0, 90, 8)), -1).reshape(-1, 2)
            points = net + rng.uniform(0, 4, net.shape)
        pattern = Pattern.of(points, DISH)
        seen.append(quick_test(pattern, simulations=199).verdict == verdict)
    assert sum(seen) >= 19


def test_random_patterns_are_called_random_nearly_always() -> None:
    wrong = 0
    for seed in range(200):
        points = random_points(DISH, 90, np.random.default_rng([seed, 5]))
        found = quick_test(Pattern.of(points, DISH, name=str(seed)), simulations=199)
        wrong += found.verdict != "no departure from random found"
    assert wrong <= 17  # 10 expected at 5 %


def test_no_points() -> None:
    found = analyse_points([], DISH, simulations=99)
    assert (found.n, found.verdict) == (0, "too few to tell")
    assert found.sentence == "No spots: nothing to test."
    assert found.density is not None
    assert found.density.high == pytest.approx(100 * 3.6889 / DISH.area, rel=1e-4)
    assert math.isnan(found.dispersion_all.vmr)
    assert np.isnan(found.residuals).all()
    assert found.flags == ()


def test_one_point() -> None:
    found = analyse_points([[43, 43]], DISH, simulations=99)
    assert found.verdict == "too few to tell"
    assert found.sentence.startswith("Too few to tell: 1 spot (a test needs at least 10)")
    assert found.counts.counts.sum() == 1


def test_too_few_to_tell_keep_the_flags_of_their_p_values() -> None:
    """The chi-square p of 3 points stands in the tables, so what makes it rough is said."""
    points = random_points(DISH, 3, np.random.default_rng(1))
    found = analyse_points(points, DISH, grid=GridOptions(side=Length(15, "mm")), simulations=99)
    assert found.verdict == "too few to tell"
    assert "low_expected" in found.flags
    assert found.rests_on == "the numbers of points and quadrats alone: too few for a test"


def test_an_impossible_evenness_is_not_among_what_would_have_been_seen() -> None:
    """12 points in 25 equal quadrats have a VMR of 13/24 at least; 25 points may have one of 0."""
    square = GridOptions(shape=(5, 5))
    few, enough = (
        analyse_points(
            random_points(shapely.box(0, 0, 9, 9), n, np.random.default_rng(3)),
            (0, 0, 9, 9),
            grid=square,
            simulations=99,
        )
        for n in (12, 25)
    )
    assert math.isnan(few.detectable[0])
    assert few.sentence.endswith("So few spots can hardly show even spacing.")
    assert enough.detectable == pytest.approx((0.42, 2.18), abs=0.005)


def test_all_points_in_one_quadrat() -> None:
    points = 50 + np.random.default_rng(1).uniform(-0.5, 0.5, (50, 2))
    found = analyse_points(points, DISH, simulations=99)
    assert found.verdict == "clumped"
    assert found.simulated.p_clumped == 0.01
    assert found.counts.counts.max() == 50


def test_all_counts_equal() -> None:
    found = analyse_counts(CountTable("bed", np.full(25, 4)))
    assert (found.verdict, found.dispersion_all.vmr) == ("evenly spaced", 0.0)


def test_huge_counts_have_no_table_of_frequencies() -> None:
    counts = np.random.default_rng(1).poisson(1e9, 30)
    found = analyse_counts(CountTable("bed", counts))
    assert found.poisson is None
    assert found.verdict == "no departure from random found"


def test_two_counts_are_too_few() -> None:
    found = analyse_counts(CountTable("bed", np.array([30, 2])))
    assert found.sentence == "Too few to tell: 2 quadrats (a test needs at least 6)."


def test_counts_with_a_known_side_have_area_and_density() -> None:
    table = CountTable("bed", np.array([3, 1, 0, 5, 2, 4]), 2, 3, Length(2, "cm"))
    found = analyse_counts(table)
    assert (found.area, found.unit) == (2400.0, "mm")
    assert found.density is not None
    assert found.density.value == pytest.approx(15 / 24)
    assert found.flags == ("few_quadrats", "rough_chi_square")


def test_density_widens_with_the_scale() -> None:
    pattern = Pattern.of(random_points(DISH, 90, np.random.default_rng(1)), DISH)
    sure, unsure = (
        analyse_pattern(replace(pattern, relative_uncertainty=u), simulations=99).density
        for u in (0.0, 0.05)
    )
    assert sure is not None
    assert unsure is not None
    assert unsure.value == sure.value == pytest.approx(9000 / DISH.area)
    assert unsure.low < sure.low < sure.value < sure.high < unsure.high


def test_pixels_give_no_density() -> None:
    pattern = Pattern.of(random_points(DISH, 90, np.random.default_rng(1)), DISH, unit="px")
    found = analyse_pattern(replace(pattern, flags=("uncalibrated",)), simulations=99)
    assert (found.density, found.unit) == (None, "px")
    assert found.flag_sentences[0].startswith("No scale is known")
    assert found.verdict == "no departure from random found"


def test_rings_of_a_dish() -> None:
    pattern = Pattern.of(random_points(DISH, 90, np.random.default_rng(1)), DISH)
    found = analyse_pattern(
        replace(pattern, dish=Circle(43, 43, 43)), GridOptions(rings=(3, 8)), simulations=99
    )
    assert found.dispersion_all.q == 24
    assert found.settings["quadrats"] == "sectors"
    assert found.dispersion_whole == pytest.approx(found.dispersion_whole)


def test_flags_say_what_was_left_out() -> None:
    points = [[5, 5], [5, 5], [500, 5], *random_points(DISH, 30, np.random.default_rng(1)).tolist()]
    area = shapely.box(0, 0, 100, 100)
    found = analyse_points(points, area, simulations=99)
    assert found.flags == ("outside", "duplicates")
    assert found.flag_sentences == (
        "Points outside the study area, which were left out: 1.",
        "Points at the very place of another: 1; check for double entries.",
    )


def test_expected_and_residuals_go_by_area() -> None:
    found = analyse_points(random_points(DISH, 90, np.random.default_rng(1)), DISH, simulations=99)
    area = found.counts.area
    assert area is not None
    assert found.expected == pytest.approx(90 * area / DISH.area)
    variance = found.expected * (1 - area / DISH.area)
    assert found.residuals == pytest.approx(
        (found.counts.counts - found.expected) / np.sqrt(variance)
    )


def test_whole_quadrats_and_frequencies_leave_clipped_ones_out() -> None:
    found = analyse_points(random_points(DISH, 300, np.random.default_rng(1)), DISH, simulations=99)
    whole = found.counts.counts[found.counts.whole]
    assert found.dispersion_whole is not None
    assert found.poisson is not None
    assert found.dispersion_whole.vmr == pytest.approx(whole.var(ddof=1) / whole.mean())
    assert found.poisson.observed.sum() == whole.size < found.dispersion_all.q


def test_without_whole_quadrats_there_is_no_vmr_of_them() -> None:
    rim = DISH.difference(shapely.Point(43, 43).buffer(36))
    found = analyse_points(random_points(rim, 40, np.random.default_rng(1)), rim, simulations=99)
    assert found.dispersion_whole is None
    assert found.poisson is None
    assert {"few_whole", "clipped_large"} <= set(found.flags)
    assert "whole ones" not in found.sentence


def same(one: Findings, other: Findings) -> bool:
    """Tell whether two findings agree in all that chance has a part in."""
    return (one.simulated, one.sentence) == (other.simulated, other.sentence)


def test_seed_and_name_fix_the_result() -> None:
    """Whatever else is analysed before or beside it."""
    points = random_points(DISH, 90, np.random.default_rng(1))
    one = analyse_points(points, DISH, name="a", seed=3, simulations=99)
    analyse_points(points, DISH, name="b", seed=3, simulations=99)
    assert same(analyse_points(points, DISH, name="a", seed=3, simulations=99), one)
    assert not same(analyse_points(points, DISH, name="a", seed=4, simulations=99), one)
    assert not same(analyse_points(points, DISH, name="b", seed=3, simulations=99), one)
    assert same(analyse_points(points[::-1], DISH, name="a", seed=3, simulations=99), one)


def test_findings_travel_between_processes() -> None:
    found = analyse_points(random_points(DISH, 40, np.random.default_rng(1)), DISH, simulations=99)
    back = pickle.loads(pickle.dumps(found))
    assert same(back, found)
    assert back.counts.grid.polygons == found.counts.grid.polygons


def test_the_side_by_rule_is_told_from_a_chosen_one() -> None:
    points = random_points(DISH, 90, np.random.default_rng(1))
    assert analyse_points(points, DISH, simulations=99).settings["side_by_rule"]
    chosen = analyse_points(points, DISH, grid=GridOptions(side=Length(1, "cm")), simulations=99)
    assert (chosen.settings["side_by_rule"], chosen.settings["side"]) == (False, 10.0)


def test_more_than_a_hundred_thousand_points_are_counted() -> None:
    points = random_points(DISH, 120_000, np.random.default_rng(1))
    wide = GridOptions(side=Length(2, "mm"))
    found = quick_test(Pattern.of(points, DISH), wide, simulations=99)
    assert found.counts.counts.sum() == 120_000


def test_a_negative_seed_is_refused() -> None:
    with pytest.raises(OptionWrong, match="--seed must be a whole number of 0 or more, not -1"):
        stream(-1, "dish.jpg")


def test_too_few_simulations_are_refused() -> None:
    with pytest.raises(OptionWrong, match="--simulations must lie between 99"):
        analyse_points([[1, 1]], DISH, simulations=50)


def test_counts_in_pixels_are_refused() -> None:
    table = CountTable("bed", np.array([3, 1]), side=Length(9, "px"))
    with pytest.raises(GridWrong, match="--quadrat 9px is in pixels; give the side of a counted"):
        analyse_counts(table)


def test_findings_check_themselves() -> None:
    found = analyse_counts(CountTable("bed", np.array([3, 1])))
    with pytest.raises(ValueError, match=r"expected has shape \(3,\) for 2 quadrats"):
        replace(found, expected=np.ones(3))


def test_a_table_without_folder_keeps_its_name(tmp_path: Path) -> None:
    path = tmp_path / "bed 4.csv"
    path.write_text("x,y\n1,1\n")
    assert analyse_pattern(read_points(path, area=DISH), simulations=99).name == "bed 4.csv"


def test_what_may_be_frequencies_is_said() -> None:
    table = CountTable("bed.csv", np.array([0, 1, 2, 20, 9, 4]), like_frequencies=True)
    found = analyse_counts(table, simulations=99)
    assert "like_frequencies" in found.flags
    assert any("taken for one of 6 quadrats" in sentence for sentence in found.flag_sentences)
