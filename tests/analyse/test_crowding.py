"""Counts corrected for crowding: published values, simulated clumps, and what is said of them."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import shapely
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree
from statsmodels.stats.proportion import proportion_confint
from typer.testing import CliRunner

from analyse import tables
from analyse.cli import app
from analyse.crowding import (
    MOST_CROWDED,
    Crowding,
    chance_within_reach,
    corrected_for_patches,
    crowding_of_patches,
    share_of_clumps,
)
from analyse.errors import TableWrong
from analyse.flags import FLAGS
from analyse.nulls import random_points
from analyse.pattern import Pattern
from analyse.positive_holes import crowding_of_holes, positive_hole, positive_hole_limits
from analyse.report import render_page, report_html
from analyse.tables import summary_csv
from detect.errors import OptionWrong
from detect.sheet import Sheet
from tests.analyse.finished import TILT, findings_of, sheet_of
from tests.detect.test_planted import MEASURED

DATA = Path(__file__).parent / "data"
DISH = shapely.Point(0, 0).buffer(43, 128)


def published() -> list[tuple[int, float]]:
    lines = (DATA / "positive_hole_400.csv").read_text(encoding="utf-8").splitlines()
    rows = csv.DictReader(line for line in lines if not line.startswith("#"))
    return [(int(row["r"]), float(row["P_r"])) for row in rows]


def clumps(points: np.ndarray, radii: np.ndarray, blind: float) -> np.ndarray:
    """One object of each clump, when any two nearer than `blind` sums of radii are one."""
    n = len(points)
    pairs = cKDTree(points).query_pairs(2 * blind * radii.max(), output_type="ndarray")
    apart = np.hypot(*(points[pairs[:, 0]] - points[pairs[:, 1]]).T)
    pairs = pairs[apart < blind * (radii[pairs[:, 0]] + radii[pairs[:, 1]])]
    graph = coo_matrix((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n, n))
    return np.unique(connected_components(graph, directed=False)[1], return_index=True)[1]


def seen(n: int, blind: float, seed: int) -> Pattern:
    """A random dish through a hard blind distance."""
    rng = np.random.default_rng(seed)
    points = random_points(DISH, n, rng)
    radii = np.exp(rng.normal(np.log(0.8), 0.15, n))
    kept = clumps(points, radii, blind)
    return Pattern.of(points[kept], DISH, radius=radii[kept])


def test_positive_holes_are_those_of_the_table() -> None:
    rows = published()
    assert len(rows) == 400
    for filled, particles in rows:
        assert positive_hole(filled, 400) == pytest.approx(particles, abs=6e-4)


def test_positive_holes_of_the_published_table_in_whole_numbers() -> None:
    """Macher (1989), quoted from memory: 53, 115, 277, 553, 828 and 2628 of 400 holes."""
    told = {50: 53, 100: 115, 200: 277, 300: 553, 350: 828, 400: 2628}
    assert {filled: round(positive_hole(filled, 400)) for filled in told} == told
    harmonic = sum(1 / k for k in range(1, 401))
    assert positive_hole(400, 400) == pytest.approx(400 * harmonic, rel=1e-12)
    assert positive_hole(0, 400) == 0


def test_positive_holes_are_the_throws_it_takes() -> None:
    rng = np.random.default_rng(3)
    throws = []
    for _ in range(3000):
        hits = rng.integers(0, 20, 200)
        first = np.sort(np.unique(hits, return_index=True)[1])
        throws.append(first[11] + 1)  # the throw that fills the twelfth of 20 holes
    assert np.mean(throws) == pytest.approx(
        positive_hole(12, 20), abs=4 * np.std(throws) / math.sqrt(3000)
    )


@pytest.mark.parametrize("filled", [0, 3, 200, 399, 400])
def test_limits_of_holes_are_binomial_ones_on_another_scale(filled: int) -> None:
    limits = positive_hole_limits(filled, 400)
    low, high = proportion_confint(filled, 400, method="beta")
    assert limits.low == pytest.approx(-400 * math.log(1 - low) if filled else 0, rel=1e-6)
    if filled == 400:
        assert limits.high == math.inf
    else:
        assert limits.high == pytest.approx(-400 * math.log(1 - high), rel=1e-6)


@pytest.mark.parametrize("mean", [40, 300, 900])
def test_limits_of_holes_cover_the_mean_of_poisson_samples(mean: int) -> None:
    rng = np.random.default_rng(mean)
    held = 0
    for _ in range(500):
        filled = int((rng.poisson(mean / 400, 400) > 0).sum())
        limits = positive_hole_limits(filled, 400)
        held += limits.low <= mean <= limits.high
    assert held / 500 >= 0.93


@pytest.mark.parametrize(("m", "within"), [(0.1, 0.002), (0.3, 0.003), (0.5, 0.005)])
def test_random_objects_make_as_many_clumps_as_foreseen(m: float, within: float) -> None:
    """On a torus, where nothing is cut off."""
    rng = np.random.default_rng(1)
    n, shares = 2000, []
    reach = math.sqrt(m / ((n - 1) * math.pi))
    for _ in range(12):
        points = rng.random((n, 2))
        pairs = cKDTree(points, boxsize=1).query_pairs(reach, output_type="ndarray")
        graph = coo_matrix((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n, n))
        shares.append(connected_components(graph, directed=False)[0] / n)
    error = 3 * np.std(shares) / math.sqrt(12)
    assert np.mean(shares) == pytest.approx(share_of_clumps(m), abs=within + error)


def test_triangles_are_counted_with_the_published_integral() -> None:
    """The chance that three discs all overlap, by throwing; third virial coefficient of hard discs."""
    rng = np.random.default_rng(9)
    angle, distance = rng.uniform(0, 2 * np.pi, (2, 200_000)), np.sqrt(rng.random((2, 200_000)))
    x, y = distance * np.cos(angle), distance * np.sin(angle)
    share = np.mean(np.hypot(x[0] - x[1], y[0] - y[1]) < 1)
    # Each triangle has three corners; of n objects n m^2 share / 6 triangles, each worth one.
    expected = float(share_of_clumps(1.0)) - 0.5
    assert share / 6 == pytest.approx(expected, abs=3e-4)


def test_the_correction_finds_the_truth_through_a_hard_blind_distance() -> None:
    held, values, raw = 0, [], []
    for seed in range(120):
        pattern = seen(400, 0.6, seed)
        crowding = crowding_of_patches(pattern, 0.6, 0.0)
        assert crowding is not None
        assert crowding.corrected is not None
        values.append(crowding.corrected.value)
        raw.append(len(pattern))
        held += crowding.corrected.low <= 400 <= crowding.corrected.high
    assert np.mean(raw) < 370
    assert np.mean(values) == pytest.approx(400, abs=6)
    assert held >= 107  # 114 expected


def test_objects_that_keep_apart_are_not_corrected_and_clumped_ones_more() -> None:
    even = Pattern.of(
        [[x, y] for x in np.arange(-30, 31, 2.2) for y in np.arange(-30, 31, 2.2)],
        DISH,
        radius=[0.8] * 784,
    )
    kept = crowding_of_patches(even, 0.6, 0.05)
    assert kept is not None
    assert kept.corrected is not None
    assert kept.corrected.value < 1.01 * len(even)
    rng = np.random.default_rng(5)
    middles = random_points(DISH.buffer(-5), 60, rng)
    points = middles[rng.integers(60, size=300)] + rng.normal(0, 1.6, (300, 2))
    radii = np.full(300, 0.8)
    clumped = points[clumps(points, radii, 0.6)]
    crowding = crowding_of_patches(
        Pattern.of(clumped, DISH, radius=[0.8] * len(clumped)), 0.6, 0.05
    )
    assert crowding is not None
    assert crowding.corrected is not None
    at_random, _ = corrected_for_patches(
        len(clumped), chance_within_reach(Pattern.of([[0, 0]], DISH, radius=[0.8]), 0.6)
    )
    assert at_random is not None
    assert at_random.high < 300
    assert crowding.corrected.low <= 300 <= crowding.corrected.high


def test_the_chance_within_reach_knows_the_edge() -> None:
    rng = np.random.default_rng(2)
    points = random_points(DISH, 40_000, rng)
    near = np.hypot(*(points[:20_000] - points[20_000:]).T) < 8
    pattern = Pattern.of([[0, 0]], DISH, radius=[4.0])
    assert chance_within_reach(pattern, 1.0) == pytest.approx(
        near.mean(), abs=4 * math.sqrt(near.mean() / 20_000)
    )
    assert chance_within_reach(pattern, 1.0) < 64 / 43**2


def test_far_apart_nothing_is_corrected() -> None:
    limits, neighbours = corrected_for_patches(50, 1e-9)
    assert limits is not None
    assert limits.value == pytest.approx(50)
    assert neighbours < 1e-6
    assert corrected_for_patches(1, 0.5)[0] is not None
    assert corrected_for_patches(0, 0.5) == corrected_for_patches(0, 0.1)


def test_too_crowded_is_said_and_not_guessed() -> None:
    limits, neighbours = corrected_for_patches(800, 1 / 800)
    assert limits is None
    assert math.isnan(neighbours)
    crowding = crowding_of_patches(seen(1500, 0.8, 1), 0.8, 0.05)
    assert crowding is not None
    assert crowding.corrected is None
    assert crowding.flags == ("too_crowded",)
    assert crowding.sentence == FLAGS["too_crowded"]
    assert repr(crowding).endswith("counted, too crowded corrected>")


def test_an_unsure_reach_widens_the_limits() -> None:
    sure, _ = corrected_for_patches(360, 0.2 / 400)
    unsure, _ = corrected_for_patches(360, 0.2 / 400, reach_uncertainty=0.2)
    assert sure is not None
    assert unsure is not None
    assert unsure.value == sure.value
    assert unsure.high - unsure.low > 1.3 * (sure.high - sure.low)
    assert unsure.low >= 360


@pytest.mark.parametrize("n", [20, 100, 350])
def test_what_is_corrected_comes_back(n: int) -> None:
    reached = MOST_CROWDED / 400
    patches = round(n * float(share_of_clumps((n - 1) * reached)))
    limits, _ = corrected_for_patches(patches, reached)
    assert limits is not None
    assert limits.value == pytest.approx(n, abs=1.2)


def test_only_a_noticeable_correction_is_flagged() -> None:
    hardly = crowding_of_patches(seen(60, 0.5, 4), 0.5, 0.05)
    much = crowding_of_patches(seen(400, 0.7, 4), 0.7, 0.05)
    assert hardly is not None
    assert much is not None
    assert (hardly.flags, hardly.sentence) == ((), "")
    assert much.flags == ("crowded",)
    assert "by how many lie just beside each other, the" in much.sentence
    assert crowding_of_patches(Pattern.of([[1, 1]], DISH), 0.7, 0.05) is None


def crowded_sheet(n: int) -> Sheet:
    """Spots of radius 5 pixels over 360 x 260, none nearer than 0.8 sums of radii, as measured."""
    rng = np.random.default_rng(6)
    kept = clumps(points := rng.uniform((21, 21), (379, 279), (n, 2)), np.full(n, 5.0), 0.8)
    return replace(sheet_of(points[kept], matrix=TILT), planted=MEASURED)


def test_a_crowded_photograph_says_so_in_every_output_beside_its_count() -> None:
    sheet = crowded_sheet(180)
    findings = findings_of(sheet)
    assert findings.crowding is not None
    assert findings.crowding.corrected is not None
    assert findings.crowding.corrected.low <= 180 <= findings.crowding.corrected.high
    assert findings.n == len(sheet.spots) < 171
    assert "crowded" in findings.flags
    assert findings.crowding.sentence in findings.flag_sentences
    (row,) = csv.DictReader(io.StringIO(summary_csv([findings])))
    assert (row["count"], row["crowding_by"]) == (str(findings.n), "patches")
    assert float(row["count_crowding_corrected"]) == pytest.approx(
        findings.crowding.corrected.value
    )
    rows = {
        row["statistic"]: row for row in csv.DictReader(io.StringIO(tables.tests_csv([findings])))
    }
    assert "Armitage 1949" in rows["count_crowding_corrected"]["method"]
    assert (
        "others within reach of each, by the pairs just beyond"
        in (rows["count_crowding_corrected"]["notes"])
    )
    report = report_html([render_page(findings, sheet, None)], title="t", seed=1)
    assert findings.crowding.sentence in report


def test_a_photograph_too_crowded_to_be_corrected_leaves_the_cells_empty() -> None:
    findings = findings_of(crowded_sheet(900))
    assert "too_crowded" in findings.flags
    (row,) = csv.DictReader(io.StringIO(summary_csv([findings])))
    assert (row["count_crowding_corrected"], row["count_crowding_low"]) == ("", "")
    assert row["crowding_by"] == "patches"
    rows = {
        row["statistic"]: row for row in csv.DictReader(io.StringIO(tables.tests_csv([findings])))
    }
    assert rows["count_crowding_corrected"]["value"] == ""
    assert "too crowded to be corrected" in rows["count_crowding_corrected"]["notes"]


def test_without_a_measured_blind_distance_nothing_is_corrected() -> None:
    findings = findings_of(replace(crowded_sheet(180), planted=None))
    assert findings.crowding is None
    (row,) = csv.DictReader(io.StringIO(summary_csv([findings])))
    assert (row["count_crowding_corrected"], row["crowding_by"]) == ("", "")


def test_plates_are_added() -> None:
    crowding = crowding_of_holes([100, 200], 400)
    assert crowding.corrected is not None
    assert crowding.corrected.value == pytest.approx(114.91 + 276.76, abs=0.01)
    assert [filled for filled, _ in crowding.parts] == [100, 200]
    assert crowding.flags == ()
    assert crowding.sentence.startswith("Positive holes: 300 filled of 400 each on 2 plates stand")
    full = crowding_of_holes([400], 400)
    assert "upwards: every hole is filled" in full.sentence
    assert repr(full) == "<Crowding by holes: 400 counted, 2628 corrected>"
    assert isinstance(full, Crowding)


def test_impossible_plates_are_refused() -> None:
    with pytest.raises(TableWrong, match="401 are counted on a plate of 400 holes"):
        crowding_of_holes([3, 401], 400)
    with pytest.raises(OptionWrong, match="--holes must be from 1 to 100000, not 0"):
        crowding_of_holes([3], 0)


def test_holes_through_the_command_line(tmp_path: Path) -> None:
    table, out = tmp_path / "plates.csv", tmp_path / "out"
    table.write_text("count\n50\n350\n", encoding="utf-8")
    arguments = ["analyse", "--counts", str(table), "--out", str(out), "--simulations", "99"]
    done = CliRunner().invoke(app, [*arguments, "--holes", "400"])
    assert done.exit_code == 0, done.output
    assert "plates.csv: Positive holes: 400 filled of 400 each on 2 plates stand for 882" in (
        done.output
    )
    with (out / "summary.csv").open(encoding="utf-8", newline="") as file:
        (row,) = csv.DictReader(file)
    assert (row["count"], row["crowding_by"]) == ("400", "holes")
    known = dict(published())
    expected = known[50] + known[350]
    assert float(row["count_crowding_corrected"]) == pytest.approx(expected, abs=2e-3)
    with (out / "tests.csv").open(encoding="utf-8", newline="") as file:
        rows = {row["statistic"]: row for row in csv.DictReader(file)}
    assert float(rows["positive_hole_2"]["value"]) == pytest.approx(known[350], abs=1e-3)
    assert "Macher 1989" in rows["count_crowding_corrected"]["method"]
    for holes, message in (
        ("300", "350 are counted on a plate of 300 holes, and no more than 300 can be filled"),
        ("0", "--holes must be from 1 to 100000, not 0."),
        ("many", "--holes"),
    ):
        done = CliRunner().invoke(app, [*arguments, "--holes", holes])
        assert done.exit_code != 0
        assert message in done.output


def test_a_plate_of_points_is_one_plate(tmp_path: Path) -> None:
    table = tmp_path / "plate.csv"
    lines = ["x,y", *(f"{x},{y}" for x in range(5, 95, 10) for y in range(5, 95, 10))]
    table.write_text("\n".join(lines), encoding="utf-8")
    out = tmp_path / "out"
    done = CliRunner().invoke(
        app,
        ["analyse", str(table), "--area", "0,0,100,100", "--holes", "400", "--out", str(out)],
    )
    assert done.exit_code == 0, done.output
    assert "plate.csv: Positive holes: 81 filled of 400 stand for 90 particles" in done.output
