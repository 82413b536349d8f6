"""Tests over sides and distances in the tables: what stands in the cells is what was found."""

from __future__ import annotations

import csv
import io

import numpy as np
import pytest
import shapely

from analyse import tables
from analyse.departures import FAMILY, departures_of
from analyse.envelope_rows import BESIDE_COLUMNS, CURVE_COLUMNS, curves_csv
from analyse.findings import Findings, analyse_counts, analyse_points
from analyse.pattern import CountTable

SQUARE = shapely.box(0, 0, 100, 100)
CURVES = ("vmr_by_side", "l_function", "pair_correlation", "nearest_neighbour", "empty_space")


@pytest.fixture(scope="module")
def found() -> Findings:
    """On a gradient, so that every table has both nulls."""
    points = 100 * np.random.default_rng(7).random((120, 2)) ** [0.5, 1.0]
    return analyse_points(points, SQUARE, name="bed.csv", simulations=99)


def rows_of(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text)))


def test_every_test_has_a_row_with_its_p_and_the_place_of_its_departure(found):
    rows = {row["statistic"]: row for row in rows_of(tables.tests_csv([found]))}
    for tests, ending in ((found.tests, ""), (found.beyond, "_beyond_trend")):
        assert set(tests.envelopes) == set(CURVES)
        for name, seen in tests.envelopes.items():
            row = rows[f"{name}{ending}"]
            assert float(row["p"]) == pytest.approx(seen.p)
            assert float(row["value"]) == pytest.approx(seen.at)
            assert "Myllymaki and others 2017" in row["method"]
            assert f"null: {tests.null}" in row["notes"]
            assert "99 simulations" in row["notes"]
            assert ("for reading, not for the verdict" in row["notes"]) == (name not in FAMILY)
            assert row["n"] == "120"


def test_adjusted_p_have_rows_of_their_own_that_name_the_family(found):
    rows = {row["statistic"]: row for row in rows_of(tables.tests_csv([found]))}
    for family, ending in ((found.holm, ""), (found.beyond_holm, "_beyond_trend")):
        for name, _, adjusted in family:
            row = rows[f"{name}{ending}_adjusted"]
            assert float(row["p"]) == pytest.approx(adjusted)
            assert row["method"] == (
                "Holm (1979) over the tests over all sides, over all distances and of nearest"
                " neighbours"
            )
    assert sum(name.endswith("_adjusted") for name in rows) == 6


def test_indices_of_neighbours_are_judged_by_the_same_simulations(found):
    rows = {row["statistic"]: row for row in rows_of(tables.tests_csv([found]))}
    for tests, ending in ((found.tests, ""), (found.beyond, "_beyond_trend")):
        for name in ("clark_evans", "hopkins_skellam"):
            seen = getattr(tests, name)
            for side in ("clumped", "even", "two_sided"):
                row = rows[f"{name}_simulated{ending}_{side}"]
                assert float(row["value"]) == pytest.approx(seen.value)
                assert float(row["p"]) == pytest.approx(getattr(seen, f"p_{side}"))
    plain = rows["clark_evans"]
    assert float(plain["value"]) == pytest.approx(found.tests.clark_evans.value, rel=1e-6)


def test_curves_can_be_drawn_again_from_their_file(found):
    rows = rows_of(curves_csv([found]))
    assert list(rows[0]) == CURVE_COLUMNS
    for tests in (found.tests, found.beyond):
        for name, seen in tests.envelopes.items():
            mine = [row for row in rows if (row["curve"], row["null"]) == (name, tests.null)]
            for column in ("x", "observed", "central", "low", "high"):
                values = [float(row[column]) for row in mine]
                np.testing.assert_allclose(values, getattr(seen, column), rtol=1e-8, atol=1e-12)
    assert {row["unit"] for row in rows} == {"mm"}
    assert {row["photograph"] for row in rows} == {"bed.csv"}


def test_the_summary_tells_what_was_judged_beside_the_quadrats(found):
    text = tables.summary_csv([found], factors={"bed.csv": {"treatment": "A"}})
    (row,) = rows_of(text)
    first = list(row).index(BESIDE_COLUMNS[0])
    assert list(row)[first : first + len(BESIDE_COLUMNS)] == BESIDE_COLUMNS
    assert list(row)[-1] == "treatment"
    one, two, three = departures_of(found.tests.envelopes, found.holm)
    for each, name, place in (
        (one, "sides", "side_of_departure"),
        (two, "distances", "distance_of_departure"),
        (three, "neighbours", "neighbour_distance_of_departure"),
    ):
        assert float(row[f"p_{name}_adjusted"]) == pytest.approx(each.adjusted)
        assert row[f"{name}_depart"] == (each.direction or "no")
        assert float(row[place]) == pytest.approx(each.at)
    assert float(row["p_gradient"]) == pytest.approx(min(found.trend.adjusted))
    assert row["denser_towards"] == found.trend.clearest.direction
    assert row["null"] == found.tests.null
    assert float(row["cluster_seen"]) == pytest.approx(found.shown.cluster)
    assert float(row["spacing_seen"]) == pytest.approx(found.shown.length)
    assert row["length_unit"] == "mm"


def test_counts_alone_leave_these_cells_empty_and_have_no_curves():
    counts = analyse_counts(CountTable("bed", np.array([3, 1, 4, 1, 5, 9])), simulations=99)
    (row,) = rows_of(tables.summary_csv([counts]))
    known = {name: row[name] for name in BESIDE_COLUMNS if row[name]}
    assert set(known) <= {"cluster_seen"}
    assert rows_of(curves_csv([counts])) == []
    names = {line["statistic"] for line in rows_of(tables.tests_csv([counts]))}
    assert not names & set(CURVES)


def test_points_that_all_coincide_leave_no_infinite_cell():
    """Hopkins and Skellam's index once stood there as inf."""
    places = np.random.default_rng(3).uniform(0, 100, (20, 2))
    twice = analyse_points(np.repeat(places, 2, axis=0), SQUARE, name="bed.csv", simulations=99)
    text = tables.tests_csv([twice])
    row = next(
        each for each in rows_of(text) if each["statistic"] == "hopkins_skellam_simulated_clumped"
    )
    assert (row["value"], float(row["p"])) == ("", 0.01)
    assert "infinite: every point coincides with another" in row["notes"]
    for each in (text, tables.summary_csv([twice]), curves_csv([twice])):
        cells = {cell.lower() for row in csv.reader(io.StringIO(each)) for cell in row}
        assert not cells & {"inf", "-inf", "nan"}
