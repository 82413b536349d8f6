"""What the counts would have shown: formulas against simulation, limits, words, rows."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import numpy as np
import pytest
import shapely
from numpy.typing import NDArray
from scipy import integrate, stats
from shapely.geometry.base import BaseGeometry
from typer.testing import CliRunner

from analyse.cli import app
from analyse.count_chance import simulated_chi2
from analyse.count_table import CountTable
from analyse.dispersion import clipped_dispersion
from analyse.findings import analyse_counts, analyse_points
from analyse.power import (
    cluster_vmr,
    detectable,
    smallest_cluster,
    smallest_spacing,
    spacing_vmr,
    would_show,
)
from analyse.quadrats import count_in_quadrats, lay_grid
from analyse.verdict import detectable as as_before
from tests.analyse.areas import RAGGED
from tests.patterns import SQUARE, apart, thomas


def chi2_of(points: NDArray[np.float64], across: int) -> float:
    """X2 of points of the unit square in across x across quadrats."""
    counts, _, _ = np.histogram2d(*points.T, bins=across, range=[[0, 1]] * 2)
    mean = len(points) / across**2
    return float(((counts - mean) ** 2).sum() / mean)


def share_seen(patterns: list[NDArray[np.float64]], across: int, *, clumped: bool) -> float:
    """How often the test of X2 given n calls patterns clumped (or even), two-sided at 5 %."""
    rng = np.random.default_rng(9)
    null = np.sort(
        np.concatenate([*simulated_chi2(len(patterns[0]), np.ones(across**2), 9999, rng)])
    )
    chi2 = np.array([chi2_of(points, across) for points in patterns])
    as_large = null.size - np.searchsorted(null, chi2 - 1e-9)
    as_small = np.searchsorted(null, chi2 + 1e-9, side="right")
    return float(((1 + (as_large if clumped else as_small)) / (null.size + 1) <= 0.025).mean())


@pytest.mark.parametrize(
    ("n", "across", "spread"),
    [(32, 4, 0.02), (50, 5, 0.25), (25, 5, 0.02), (98, 7, 0.5), (200, 10, 0.1)],
)
def test_the_smallest_clusters_are_seen_four_times_in_five(
    n: int, across: int, spread: float
) -> None:
    """300 Thomas patterns each: power between 70 and 90 %."""
    others = smallest_cluster(n, across**2, spread=spread)
    rng = np.random.default_rng([n, across])
    patterns = [thomas(SQUARE, n, others, spread / across, rng) for _ in range(300)]
    assert 0.70 <= share_seen(patterns, across, clumped=True) <= 0.90


@pytest.mark.parametrize(("n", "across"), [(80, 4), (50, 5), (49, 7), (98, 7)])
def test_the_smallest_spacing_is_seen_four_times_in_five(n: int, across: int) -> None:
    spacing = smallest_spacing(n, across**2) / across
    rng = np.random.default_rng([n, across, 2])
    patterns = [apart(SQUARE, n, spacing, rng) for _ in range(150)]
    assert 0.70 <= share_seen(patterns, across, clumped=False) <= 0.92


@pytest.mark.parametrize(
    "area", [shapely.Point(50, 50).buffer(50, quad_segs=40), RAGGED], ids=["dish", "ragged"]
)
def test_so_they_are_in_areas_that_clip_the_quadrats(area: BaseGeometry) -> None:
    """90 points, quadrats by rule, expected counts by area: power between 70 and 92 %."""
    grid = lay_grid(area, 90)
    side = math.sqrt(area.area / len(grid))
    rng = np.random.default_rng(6)
    null = np.sort(np.concatenate([*simulated_chi2(90, grid.area, 9999, rng)]))

    def chi2(points: NDArray[np.float64]) -> float:
        return clipped_dispersion(count_in_quadrats(points, grid), grid.area).chi2

    for spread in (0.05, 0.25):
        others = smallest_cluster(90, len(grid), spread=spread)
        seen = [chi2(thomas(area, 90, others, spread * side, rng)) for _ in range(200)]
        assert 0.68 <= np.mean(np.array(seen) >= np.quantile(null, 0.975)) <= 0.92
    spacing = smallest_spacing(90, len(grid)) * side
    seen = [chi2(apart(area, 90, spacing, rng)) for _ in range(120)]
    assert 0.68 <= np.mean(np.array(seen) <= np.quantile(null, 0.025)) <= 0.92


def test_half_of_that_is_seen_much_less_often() -> None:
    rng = np.random.default_rng(4)
    others, spacing = smallest_cluster(98, 49), smallest_spacing(98, 49)
    clumped = [thomas(SQUARE, 98, others / 2, 0.01, rng) for _ in range(300)]
    even = [apart(SQUARE, 98, spacing / 2 / 7, rng) for _ in range(100)]
    assert share_seen(clumped, 7, clumped=True) < 0.5
    assert share_seen(even, 7, clumped=False) < 0.4


@pytest.mark.parametrize("spread", [0.05, 0.25, 0.6, 2.0])
def test_vmr_of_clusters_is_the_integral_of_the_pair_correlation(spread: float) -> None:
    """Along one side the chance to fall together is the integral of (1 - |d|) times the law of d."""
    law = stats.norm(scale=math.sqrt(2) * spread)
    together, _ = integrate.quad(lambda d: 2 * (1 - d) * law.pdf(d), 0, 1, points=[spread / 2])
    assert cluster_vmr(3.0, spread) == pytest.approx(1 + 3 * together**2, rel=1e-6)


def test_vmr_of_clusters_against_simulation() -> None:
    """Counts in the middle 16 x 16 quadrats of many clusters, not conditional on the number."""
    rng = np.random.default_rng(12)
    middles = rng.uniform(-3, 67, (4000, 2))
    points = np.repeat(middles, rng.poisson(2.0, 4000), axis=0)
    points = points + rng.normal(0, 0.25, points.shape)
    counts, _, _ = np.histogram2d(*points.T, bins=64, range=[[0, 64]] * 2)
    assert counts.var() / counts.mean() == pytest.approx(cluster_vmr(2.0, 0.25), rel=0.06)


@pytest.mark.parametrize(("mean", "share"), [(2, 0.1), (2, 0.25), (1, 0.4)])
def test_vmr_of_spaced_points_against_simulation(mean: int, share: float) -> None:
    """Points set one after the other, given n, in 7 x 7 quadrats."""
    spacing = math.sqrt(4 * share / (math.pi * mean))
    rng = np.random.default_rng([mean, int(100 * share)])
    n, q = 49 * mean, 49
    chi2 = [chi2_of(apart(SQUARE, n, spacing / 7, rng), 7) for _ in range(90)]
    formula = (q * spacing_vmr(spacing, mean) - spacing_vmr(spacing / 7, n)) / (q - 1)
    assert np.mean(chi2) / (q - 1) == pytest.approx(formula, abs=0.035)


def test_small_spacings_are_an_empty_disc() -> None:
    """To first order VMR = 1 - mean times the share of pairs that lie within the spacing."""
    spacing, mean = 0.05, 1.0
    share, _ = integrate.quad(
        lambda r: 2 * math.pi * r * (1 - 4 * r / math.pi + r * r / math.pi), 0, spacing
    )
    assert 1 - spacing_vmr(spacing, mean) == pytest.approx(mean * share, rel=0.01)
    assert spacing_vmr(0.0, 3.0) == 1.0


def test_the_common_neighbourhood_of_two_points() -> None:
    """The constants of the second order: lens area of two unit discs at distances 1 to 2."""

    def lens(r: float) -> float:
        return 2 * math.acos(r / 2) - r / 2 * math.sqrt(4 - r * r)

    whole, mean, square = (
        integrate.quad(lambda r, k=k: lens(r) * 2 * math.pi * r ** (1 + k), 1, 2)[0]
        for k in range(3)
    )
    assert whole / math.pi**2 == pytest.approx(3 * math.sqrt(3) / (4 * math.pi), rel=1e-9)
    assert (mean / whole, square / whole) == pytest.approx((1.3251559, 1.8061330), rel=1e-6)


def test_more_points_and_quadrats_show_less() -> None:
    clusters = [smallest_cluster(2 * q, q) for q in (16, 36, 100, 400)]
    spacings = [smallest_spacing(2 * q, q) for q in (16, 36, 100, 400)]
    assert clusters == sorted(clusters, reverse=True)
    assert spacings == sorted(spacings, reverse=True)
    wide = [smallest_cluster(200, 100, spread=spread) for spread in (0.0, 0.1, 0.25, 0.5)]
    assert wide == sorted(wide)


def test_tight_clusters_have_about_the_vmr_that_is_seen() -> None:
    assert 1 + smallest_cluster(2000, 100) == pytest.approx(detectable(99)[1], rel=0.03)
    assert as_before is detectable


@pytest.mark.parametrize(
    ("n", "q", "cluster", "spacing"),
    [
        (12, 25, True, False),  # fewer points than quadrats cannot lie so evenly
        (18, 9, True, False),  # few quadrats: no room for points so evenly set at random
        (10, 6, False, False),  # three such clusters would take more points
        (2, 2, False, False),
    ],
)
def test_what_so_few_cannot_show_is_no_number(n: int, q: int, cluster: bool, spacing: bool) -> None:
    seen = would_show(n, q)
    assert math.isfinite(seen.cluster) == cluster
    assert math.isfinite(seen.spacing) == spacing
    if not cluster:
        assert seen.sentence == ""


def test_words() -> None:
    seen = would_show(60, 30, side=5.0, unit="mm")
    assert seen.length == pytest.approx(5 * seen.spacing)
    assert seen.sentence.startswith(
        "With about 80 % power the counts would have shown clusters in which a spot has on average"
    )
    assert seen.sentence.endswith(" mm kept by all.")
    assert "of a quadrat's side kept by all" in would_show(60, 30).sentence
    assert "spacing" not in would_show(12, 25).sentence
    assert math.isnan(would_show(60, 30).length)
    assert "is random" not in seen.sentence


def test_units_change_only_the_length() -> None:
    mm, m = would_show(60, 30, side=5.0, unit="mm"), would_show(60, 30, side=0.005, unit="m")
    assert (mm.cluster, mm.spacing) == (m.cluster, m.spacing)
    assert mm.length == pytest.approx(1000 * m.length)


def test_too_few_to_tell_show_nothing() -> None:
    few = analyse_counts(CountTable("few", np.array([1, 2, 0, 1, 0, 3, 1, 1])))
    assert few.shown is None
    points = np.random.default_rng(3).uniform(0, 100, (60, 2))
    seen = analyse_points(points, (0, 0, 100, 100), simulations=99).shown
    assert seen is not None
    assert (seen.n, seen.unit) == (60, "mm")
    assert seen.side == pytest.approx(100 / math.sqrt(seen.q))


def test_rows_through_the_command_line(tmp_path: Path) -> None:
    points = np.random.default_rng(3).uniform(0, 100, (80, 2))
    lines = "".join(f"{x:.4f},{y:.4f}\n" for x, y in points)
    (tmp_path / "bed.csv").write_text("x,y\n" + lines, encoding="utf-8")
    asked = ["analyse", str(tmp_path / "bed.csv"), "--area", "0,0,100,100", "--grid", "6x6"]
    result = CliRunner().invoke(app, [*asked, "--out", str(tmp_path / "out")])
    assert result.exit_code == 0, result.output
    text = (tmp_path / "out" / "tests.csv").read_text(encoding="utf-8")
    rows = {row["statistic"]: row for row in csv.DictReader(text.splitlines())}
    seen = would_show(80, 36, side=100 / 6, unit="mm")
    for name, value in (
        ("cluster_seen", seen.cluster),
        ("wide_cluster_seen", seen.wide_cluster),
        ("spacing_seen_sides", seen.spacing),
        ("spacing_seen_mm", seen.length),
    ):
        assert float(rows[name]["value"]) == pytest.approx(value, rel=1e-6)
        assert rows[name]["n"] == "36"
