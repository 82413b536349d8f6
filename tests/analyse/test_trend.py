"""Trends of the density: independent references, invariances, honest error rates, and the null."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import numpy as np
import pytest
import shapely
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy import integrate, special, stats
from shapely.geometry.base import BaseGeometry
from typer.testing import CliRunner

from analyse.cli import app
from analyse.count_chance import simulated_p
from analyse.count_trend import fit_count_trend
from analyse.errors import TrendNotFound
from analyse.findings import analyse_counts, analyse_points
from analyse.nulls import random_points
from analyse.pattern import CountTable, Pattern
from analyse.quadrats import GridOptions, QuadratCounts, count_in_quadrats, lay_grid
from analyse.quadrature import quadrature
from analyse.trend import Trend, TrendModel, TrendRandomness, fit_trend
from analyse.trends import pattern_trends
from tests import patterns
from tests.analyse.areas import AREAS, RAGGED

SQUARE = shapely.box(0, 0, 100, 100)


def sloping(
    area: BaseGeometry, n: int, slope: tuple[float, float], seed: int
) -> NDArray[np.float64]:
    """Return n points of that slope of log density."""
    return patterns.sloping(area, n, slope, np.random.default_rng(seed))


# Integrals.


@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
def test_integrals_over_any_area(area: BaseGeometry) -> None:
    """Area and centroid as shapely has them; exp of a slope over its parts as over the whole."""
    rule = quadrature([area])
    assert rule.weights.sum() == pytest.approx(area.area, rel=1e-12)
    first = [float(rule.integrals(rule.nodes[:, k])[0]) / area.area for k in (0, 1)]
    assert first == pytest.approx([area.centroid.x, area.centroid.y], rel=1e-10)
    parts = quadrature(lay_grid(area, 60).polygons)
    for slope in ([0.03, -0.02], [-0.2, 0.1]):
        whole = float(rule.integrals(np.exp(rule.nodes @ slope))[0])
        assert parts.integrals(np.exp(parts.nodes @ slope)).sum() == pytest.approx(whole, rel=1e-9)


def test_an_integral_against_scipy() -> None:
    triangle = shapely.Polygon([(0, 0), (3, 0), (0, 2)])
    rule = quadrature([triangle])
    got = float(rule.integrals(np.exp(1.3 * rule.nodes[:, 0] - 2 * rule.nodes[:, 1] ** 2))[0])
    exact, _ = integrate.dblquad(
        lambda y, x: math.exp(1.3 * x - 2 * y * y), 0, 3, 0, lambda x: 2 - 2 * x / 3
    )
    assert got == pytest.approx(exact, rel=1e-8)


# The fit.


def test_one_slope_in_a_square_has_a_closed_form() -> None:
    """Along each side b solves coth(b/2)/2 - 1/b = mean of x - 1/2, and x and y do not mix."""
    x = np.random.default_rng(4).random((80, 2)) ** [0.6, 1.2]
    trend = fit_trend(x, shapely.box(0, 0, 1, 1))
    for b, mean in zip(trend.coefficients, x.mean(axis=0) - 0.5, strict=True):
        assert 0.5 / math.tanh(b / 2) - 1 / b == pytest.approx(mean, abs=1e-9)
    b = trend.coefficients
    lr = 2 * 80 * float((b * (x.mean(axis=0) - 0.5) - np.log(2 * np.sinh(b / 2) / b)).sum())
    assert trend.lr == pytest.approx(lr, rel=1e-9)
    assert trend.ratio == pytest.approx(math.exp(np.abs(b).sum()), rel=1e-9)
    assert trend.p_poisson == pytest.approx(stats.chi2.sf(lr, 2), rel=1e-9)
    assert trend.p == pytest.approx(
        stats.f.sf(lr / 2 / trend.dispersion, 2, trend.dispersion_df), rel=1e-9
    )


def test_radial_slope_on_a_disc_has_a_closed_form() -> None:
    """With u the squared distance over the squared radius, b solves 1/(1 - exp(-b)) - 1/b = mean u."""
    disc = shapely.Point(5, 5).buffer(2, quad_segs=2000)
    x = random_points(disc, 400, np.random.default_rng(8))
    x = x[np.random.default_rng(9).random(400) < ((x - 5) ** 2).sum(axis=1) / 4]
    trend = fit_trend(x, disc, kind="radial")
    b = 4 * float(trend.coefficients[0])
    assert 1 / (1 - math.exp(-b)) - 1 / b == pytest.approx(
        ((x - 5) ** 2).sum(axis=1).mean() / 4, rel=1e-5
    )
    assert trend.direction == "the edge"
    assert trend.ratio == pytest.approx(math.exp(b), rel=1e-4)
    assert trend.sentence.startswith("A gradient: denser towards the edge, ")
    assert " times as dense as the middle (" in trend.sentence
    assert trend.sentence.endswith("; p < 0.001, allowing for clumping.")


def test_counts_in_quadrats_against_statsmodels() -> None:
    """The Poisson log-linear model of statsmodels: slopes, errors, likelihood ratio."""
    counts = np.random.default_rng(2).poisson(
        np.exp(1.2 + 0.15 * np.arange(9) - 0.1 * np.arange(6)[:, None])
    )
    trend = fit_count_trend(counts, side=2.5)
    row, column = (index.ravel() for index in np.indices(counts.shape))
    design = sm.add_constant((np.column_stack([column, row]) + 0.5) * 2.5)
    fit = sm.GLM(counts.ravel(), design, family=sm.families.Poisson()).fit(tol=1e-12)
    flat = sm.GLM(counts.ravel(), np.ones(54), family=sm.families.Poisson()).fit()
    assert trend.coefficients == pytest.approx(fit.params[1:], rel=1e-6)
    assert trend.standard_errors / math.sqrt(trend.dispersion) == pytest.approx(
        fit.bse[1:], rel=1e-6
    )
    assert trend.lr == pytest.approx(2 * (fit.llf - flat.llf), rel=1e-6)


def test_points_against_statsmodels_on_fine_counts() -> None:
    """Binned to 4,900 cells of the square, the points' exact fit is nearly that of the counts."""
    x = sloping(SQUARE, 400, (0.012, -0.02), 3)
    trend = fit_trend(x, SQUARE)
    counts, _, _ = np.histogram2d(x[:, 1], x[:, 0], bins=70, range=[[0, 100]] * 2)
    row, column = (index.ravel() for index in np.indices(counts.shape))
    design = sm.add_constant(np.column_stack([column, row]) / 70 * 100)
    fit = sm.GLM(counts.ravel(), design, family=sm.families.Poisson()).fit()
    assert trend.coefficients == pytest.approx(fit.params[1:], abs=0.05 * float(fit.bse[1]))
    assert trend.standard_errors / math.sqrt(trend.dispersion) == pytest.approx(
        fit.bse[1:], rel=0.01
    )
    assert trend.direction == "the upper right"


@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
def test_slopes_are_recovered(area: BaseGeometry) -> None:
    trend = fit_trend(sloping(area, 3000, (0.02, 0.015), 5), area)
    error = trend.standard_errors / math.sqrt(trend.dispersion)
    assert (np.abs(trend.coefficients - [0.02, 0.015]) < 3.5 * error).all()
    assert trend.ratio_low < trend.ratio < trend.ratio_high
    assert trend.p < 1e-6


@settings(max_examples=10, deadline=None)
@given(st.integers(0, 10_000), st.floats(0.001, 1000), st.sampled_from([0, 1, 2, 3]))
def test_units_shifts_turns_and_order_change_nothing(seed: int, unit: float, turns: int) -> None:
    rng = np.random.default_rng(seed)
    x = random_points(SQUARE, 25, rng)
    turn = np.linalg.matrix_power(np.array([[0, -1], [1, 0]]), turns)
    shift = rng.uniform(-5, 5, 2)

    def moved(places: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.asarray((places @ turn.T + shift) * unit)

    for kind in ("plane", "radial"):
        plain = fit_trend(x, SQUARE, kind=kind)
        other = fit_trend(rng.permutation(moved(x)), shapely.transform(SQUARE, moved), kind=kind)
        assert other.lr == pytest.approx(plain.lr, rel=1e-6, abs=1e-8)
        assert other.ratio == pytest.approx(plain.ratio, rel=1e-6)
        slope = plain.coefficients if kind == "radial" else turn @ plain.coefficients
        power = 2 if kind == "radial" else 1
        scale = np.abs(slope).max() + 1e-9
        assert other.coefficients * unit**power == pytest.approx(slope, abs=1e-6 * scale)


def test_any_turn_leaves_the_likelihood_ratio() -> None:
    x, turn = random_points(RAGGED, 60, np.random.default_rng(6)), 0.7
    spin = np.array([[math.cos(turn), -math.sin(turn)], [math.sin(turn), math.cos(turn)]])
    plain = fit_trend(x, RAGGED)
    other = fit_trend(x @ spin.T, shapely.transform(RAGGED, lambda places: places @ spin.T))
    assert other.lr == pytest.approx(plain.lr, rel=1e-8)
    assert other.ratio == pytest.approx(plain.ratio, rel=1e-8)
    assert other.coefficients == pytest.approx(spin @ plain.coefficients, rel=1e-7)


@pytest.mark.parametrize(
    ("slope", "words"),
    [
        ((1, 0), "the right"), ((1, 1), "the lower right"), ((0, 1), "the bottom"),
        ((-1, 1), "the lower left"), ((-1, 0), "the left"), ((-1, -1), "the upper left"),
        ((0, -1), "the top"), ((1, -1), "the upper right"),
    ],
)  # fmt: skip
def test_directions_in_words(slope: tuple[int, int], words: str) -> None:
    """y points down on the picture."""
    x = sloping(SQUARE, 400, (slope[0] * 0.03, slope[1] * 0.03), 1)
    trend = fit_trend(x, SQUARE)
    assert trend.direction == words
    assert f"denser towards {words}" in trend.sentence


def test_limits_hold_the_true_ratio() -> None:
    """Of 150 patterns with a true ratio of 3, the 95 % limits hold it in 95 % or more."""
    model, held = TrendModel.of(SQUARE), 0
    for seed in range(150):
        trend = model.fit(sloping(SQUARE, 80, (math.log(3) / 100, 0), 100 + seed))
        held += trend.ratio_low <= 3 <= trend.ratio_high
    assert held / 150 >= 0.92


# Error rates.


def rates(drawn: list[NDArray[np.float64]], model: TrendModel) -> tuple[float, float]:
    """Return how often the plain test and the one that allows for clumping reject at 5 %."""
    p = np.array([(trend.p_poisson, trend.p) for trend in map(model.fit, drawn)])
    plain, allowing = (p <= 0.05).mean(axis=0)
    return float(plain), float(allowing)


def test_clumps_without_a_gradient_are_not_called_one() -> None:
    """300 Thomas patterns: the plain test rejects over 30 %, the other about 5 % or fewer."""
    model = TrendModel.of(SQUARE)
    drawn = [
        patterns.thomas(SQUARE, 100, 4, 4.0, np.random.default_rng([21, k])) for k in range(300)
    ]
    plain, allowing = rates(drawn, model)
    assert plain > 0.3
    assert allowing <= 0.085


def test_random_points_have_no_gradient() -> None:
    drawn = [random_points(SQUARE, 60, np.random.default_rng([22, k])) for k in range(300)]
    plain, allowing = rates(drawn, TrendModel.of(SQUARE))
    assert 0.025 <= plain <= 0.08
    assert allowing <= 0.065


def test_real_gradients_are_seen() -> None:
    """A density that rises five times across the square, in 100 independent points."""
    model = TrendModel.of(SQUARE)
    drawn = [sloping(SQUARE, 100, (math.log(5) / 100, 0), k) for k in range(60)]
    plain, allowing = rates(drawn, model)
    assert plain > 0.9
    assert allowing > 0.8


def test_a_gradient_is_not_called_clumping() -> None:
    """Around the trend the counts vary as at random; without it they would be called clumped."""
    called = seen = 0
    grid = lay_grid(SQUARE, 150)
    for seed in range(30):
        x = sloping(SQUARE, 150, (0.03, 0), 300 + seed)
        counts = QuadratCounts(count_in_quadrats(x, grid), grid.area, grid.whole, grid)
        rng = np.random.default_rng(seed)
        plain = simulated_p(counts.counts, grid.area, simulations=199, rng=rng)
        called += plain.p_two_sided <= 0.05
        found = pattern_trends(Pattern.of(x, SQUARE), counts, simulations=199, rng=rng)
        assert found is not None
        seen += found.beyond is not None and found.beyond.p_two_sided <= 0.05
    assert called > 22
    assert seen <= 5


def test_clumps_along_a_gradient_are_still_seen() -> None:
    rng = np.random.default_rng(5)
    x = np.repeat(sloping(SQUARE, 50, (0.035, 0), 4), 4, axis=0)
    x = x + rng.normal(0, 0.5, x.shape)
    x = x[shapely.contains_xy(SQUARE, *x.T)]
    found = analyse_points(x, SQUARE, simulations=199).trend
    assert found is not None
    assert found.clearest is not None
    assert found.beyond is not None
    assert "still vary more than at random" in found.sentence


# The null.


@pytest.mark.parametrize("area", AREAS.values(), ids=AREAS)
@pytest.mark.parametrize("kind", ["plane", "radial"])
def test_the_null_draws_the_fitted_density(area: BaseGeometry, kind: str) -> None:
    """Exactly n points within the area; counts in its quadrats as expected, by chi-square."""
    if kind == "plane":
        x = sloping(area, 200, (0.02, -0.01), 7)
    else:
        x = random_points(area, 400, np.random.default_rng(3))
        centre = np.array([area.centroid.x, area.centroid.y])
        x = x[np.hypot(*(x - centre).T) > 25]
    trend = fit_trend(x, area, kind=kind)  # type: ignore[arg-type]
    null = TrendRandomness(area, trend)
    drawn = null.draw(20_000, np.random.default_rng(4))
    assert drawn.shape == (20_000, 2)
    assert shapely.intersects_xy(area, *drawn.T).all()
    grid = lay_grid(area, 120)
    expected = trend.expected(np.array(grid.polygons, dtype=object))
    assert expected.sum() == pytest.approx(trend.n)
    counts = count_in_quadrats(drawn, grid)
    assert stats.chisquare(counts, expected * 20_000 / trend.n).pvalue > 0.001
    assert null.draw(0, np.random.default_rng(1)).shape == (0, 2)
    assert null.name == f"{kind} trend"
    with pytest.raises(ValueError, match="must be 0 or more, not -1"):
        null.draw(-1, np.random.default_rng(1))


def test_refitted_the_null_gives_its_trend_back() -> None:
    trend = fit_trend(sloping(RAGGED, 300, (0.03, 0.01), 2), RAGGED)
    again = fit_trend(TrendRandomness(RAGGED, trend).draw(8000, np.random.default_rng(1)), RAGGED)
    assert again.coefficients == pytest.approx(trend.coefficients, abs=0.003)


def test_a_radial_trend_about_a_place_outside_the_area() -> None:
    area = shapely.box(10, 10, 20, 20)
    x = random_points(area, 50, np.random.default_rng(2))
    trend = fit_trend(x, area, kind="radial", centre=(0, 0))
    span = abs(float(trend.coefficients[0])) * (800 - 200)
    assert trend.ratio == pytest.approx(math.exp(span))
    assert len(TrendRandomness(area, trend).draw(100, np.random.default_rng(1))) == 100


# What cannot be fitted.


def test_no_points_and_points_at_one_end_are_refused() -> None:
    with pytest.raises(TrendNotFound, match="Without points there is no slope"):
        fit_trend(np.empty((0, 2)), SQUARE)
    with pytest.raises(TrendNotFound, match="so near one end of the area that no slope"):
        fit_trend(np.full((20, 2), 0.1), SQUARE)
    with pytest.raises(TrendNotFound, match="Without points there is no slope"):
        fit_count_trend([0, 0, 0, 0])
    with pytest.raises(TrendNotFound, match="so near one end of the area that no slope"):
        fit_count_trend([20, 0, 0, 0, 0, 0, 0])
    with pytest.raises(TrendNotFound, match="too few quadrats to tell a slope"):
        fit_count_trend([5, 8, 9])
    assert analyse_points(np.full((20, 2), 0.1), SQUARE, simulations=99).trend is None
    assert analyse_points(np.full((9, 2), 5.1), SQUARE, simulations=99).trend is None
    assert analyse_counts(CountTable("t", np.array([9, 9, 3, 5]))).trend is None


def test_equal_counts_have_no_trend() -> None:
    trend = fit_count_trend(np.full((4, 5), 3))
    assert trend.lr == pytest.approx(0, abs=1e-9)
    assert trend.p == pytest.approx(1.0)


def test_a_line_of_quadrats_has_one_slope() -> None:
    trend = fit_count_trend([1, 2, 2, 4, 5, 7, 9, 12])
    assert (trend.df, trend.direction, trend.coefficients[1]) == (1, "the end", 0.0)
    assert math.isnan(trend.standard_errors[1])
    column = fit_count_trend(np.array([[9], [7], [5], [3], [2], [1]]))
    assert column.direction == "the start"


# Findings and the command line.


def test_a_dish_is_tried_both_ways() -> None:
    disc = shapely.Point(0, 0).buffer(43, quad_segs=60)
    x = random_points(disc, 900, np.random.default_rng(8))
    x = x[np.random.default_rng(9).random(900) < np.exp(-2.5 * (x**2).sum(axis=1) / 43**2)]
    dish = Pattern.of(x, disc)
    grid = lay_grid(disc, len(x))
    counts = QuadratCounts(count_in_quadrats(x, grid), grid.area, grid.whole, grid)
    found = pattern_trends(dish, counts, simulations=199, rng=np.random.default_rng(1))
    assert found is not None
    assert [fit.kind for fit in found.fits] == ["plane", "radial"]
    assert found.clearest is not None
    assert found.clearest.direction == "the middle"
    assert found.sentence.startswith("A gradient: denser towards the middle, ")
    assert found.adjusted[1] == pytest.approx(2 * found.fits[1].p)
    assert repr(found).startswith("<Trends plane p = ")
    assert repr(found.fits[1]).startswith("<Trend radial: denser towards the middle, ratio ")


def rows_of(folder: Path) -> dict[str, dict[str, str]]:
    """Return the rows of tests.csv by statistic."""
    rows = csv.DictReader((folder / "tests.csv").read_text(encoding="utf-8").splitlines())
    return {row["statistic"]: row for row in rows}


def test_trends_through_the_command_line(tmp_path: Path) -> None:
    x = sloping(SQUARE, 150, (0.03, 0), 1)
    lines = "".join(f"{a:.5f},{b:.5f}\n" for a, b in x)
    (tmp_path / "bed.csv").write_text("x,y\n" + lines, encoding="utf-8")
    asked = ["analyse", str(tmp_path / "bed.csv"), "--area", "0,0,100,100", "--simulations", "199"]
    result = CliRunner().invoke(app, [*asked, "--out", str(tmp_path / "out")])
    assert result.exit_code == 0, result.output
    rows, trend = rows_of(tmp_path / "out"), fit_trend(x, SQUARE)
    row = rows["trend_plane"]
    assert [float(row[key]) for key in ("value", "low", "high", "p")] == pytest.approx(
        [trend.ratio, trend.ratio_low, trend.ratio_high, trend.p], rel=1e-3
    )
    assert "denser towards the right" in row["notes"]
    slope = rows["trend_plane_slope_x"]
    assert float(slope["value"]) == pytest.approx(trend.coefficients[0], rel=1e-3)
    reach = special.stdtrit(trend.dispersion_df, 0.975) * trend.standard_errors[0]
    assert float(slope["high"]) - float(slope["value"]) == pytest.approx(reach, rel=1e-3)
    assert float(rows["trend_plane_independent"]["p"]) < 1e-6
    assert float(rows["chi2_around_trend_two_sided"]["p"]) > 0.01


def test_the_trend_of_a_transect_through_the_command_line(tmp_path: Path) -> None:
    text = "count\n" + "".join(f"{x}\n" for x in (1, 0, 2, 2, 3, 5, 4, 7, 8, 11, 12, 15))
    (tmp_path / "line.csv").write_text(text, encoding="utf-8")
    asked = [
        "analyse",
        "--counts",
        str(tmp_path / "line.csv"),
        "--transect",
        "--simulations",
        "199",
    ]
    result = CliRunner().invoke(app, [*asked, "--out", str(tmp_path / "out")])
    assert result.exit_code == 0, result.output
    rows = rows_of(tmp_path / "out")
    assert "denser towards the end" in rows["trend_plane"]["notes"]
    assert "per quadrat;" in rows["trend_plane_slope_x"]["notes"]
    assert "trend_plane_slope_y" not in rows


def test_where_no_slope_fits_the_table_says_so(tmp_path: Path) -> None:
    for text, options, there in (
        ("count\n30\n0\n0\n0\n0\n0\n0\n", ["--transect"], True),
        ("count\n30\n0\n0\n0\n0\n0\n0\n", [], False),
    ):
        (tmp_path / "line.csv").write_text(text, encoding="utf-8")
        asked = ["analyse", "--counts", str(tmp_path / "line.csv"), "--simulations", "99"]
        result = CliRunner().invoke(app, [*asked, *options, "--out", str(tmp_path / "out")])
        assert result.exit_code == 0, result.output
        rows = rows_of(tmp_path / "out")
        assert ("trend_plane" in rows) == there
        if there:
            assert rows["trend_plane"]["value"] == ""
            assert "no slope fitted" in rows["trend_plane"]["notes"]


def test_an_area_too_thin_for_coarse_quadrats_has_no_trend() -> None:
    thin = shapely.box(0, 0, 1e6, 1e-6)
    x = random_points(thin, 30, np.random.default_rng(1))
    grid = lay_grid(thin, 30, GridOptions(shape=(1, 10)))
    counts = QuadratCounts(count_in_quadrats(x, grid), grid.area, grid.whole, grid)
    rng = np.random.default_rng(1)
    assert pattern_trends(Pattern.of(x, thin), counts, simulations=99, rng=rng) is None


def test_records_are_read_only() -> None:
    trend: Trend = fit_trend(random_points(SQUARE, 30, np.random.default_rng(1)), SQUARE)
    with pytest.raises(ValueError, match="read-only"):
        trend.coefficients[0] = 1.0
