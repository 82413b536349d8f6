"""The rows of tests.csv about nearest neighbours, through the command line."""

from __future__ import annotations

import csv
import io
from pathlib import Path

import numpy as np
import pytest
import shapely
from typer.testing import CliRunner

from analyse.cli import app
from analyse.distance_rows import distance_rows
from analyse.findings import analyse_counts, analyse_points
from analyse.pattern import CountTable
from tests.analyse import published

ROW = ["statistic", "value", "low", "high", "p", "method", "n", "notes"]


def rows(points: object, area: object, **choices: object) -> dict[str, dict[str, object]]:
    """The rows of a pattern by statistic."""
    found = distance_rows(analyse_points(points, area, simulations=99, **choices))
    return {row[0]: dict(zip(ROW, row, strict=True)) for row in found}


def test_published_maps_through_the_command_line(tmp_path: Path) -> None:
    """Ripley (1977) and Strauss (1975), moved to millimetres: R, z, Donnelly's R and z, torus."""
    for name, window, wanted in (
        ("cells", published.CELLS_WINDOW, (1.671680, 8.3276, 1.560481, 6.3751, 1.595280)),
        ("redwood", published.REDWOOD_WINDOW, (0.618650, -5.7445, 0.585005, -5.7885, 0.618650)),
    ):
        table = tmp_path / f"{name}.csv"
        np.savetxt(table, published.points(name), delimiter=",", header="x,y", comments="")
        out = tmp_path / name
        area = ",".join(f"{value:g}" for value in window)
        request = [
            "analyse",
            str(table),
            f"--area={area}",
            "--out",
            str(out),
            "--simulations",
            "99",
        ]
        done = CliRunner().invoke(app, request)
        assert done.exit_code == 0, done.output
        text = (out / "tests.csv").read_text(encoding="utf-8")
        found = {row["statistic"]: row for row in csv.DictReader(io.StringIO(text))}
        names = (
            "clark_evans",
            "clark_evans_z_even",
            "donnelly",
            "donnelly_z_even",
            "clark_evans_torus",
        )
        seen = [float(found[each]["value"]) for each in names]
        assert seen == pytest.approx(wanted, abs=5.1e-5)
        clumped = float(found["donnelly_z_clumped"]["p"])
        assert (clumped < 1e-6) == (name == "redwood")
        even = float(found["hopkins_skellam"]["value"])
        assert (even < 0.5) == (name == "cells")


def test_elsewhere_than_in_rectangles_donnelly_and_the_torus_are_left_out() -> None:
    dish = shapely.Point(0, 0).buffer(43, quad_segs=90)
    points = np.random.default_rng(1).uniform(-25, 25, (40, 2))
    found = rows(points, dish)
    assert set(found) == {
        "clark_evans",
        *(f"clark_evans_z_{side}" for side in ("clumped", "even", "two_sided")),
        "hopkins_skellam",
    }
    assert "the edge is not allowed for" in str(found["clark_evans"]["notes"])


def test_the_unit_and_the_random_places_are_named() -> None:
    found = rows([[1, 1], [1, 3], [3, 1], [3, 3]], (0, 0, 4, 4), seed=7)
    assert found["clark_evans"]["value"] == 2.0
    assert "mean distance 2 mm, expected 1" in str(found["clark_evans"]["notes"])
    assert "4 random places, seed 7" in str(found["hopkins_skellam"]["notes"])
    assert found["clark_evans"]["n"] == 4
    again = rows([[1, 1], [1, 3], [3, 1], [3, 3]], (0, 0, 4, 4), seed=7)
    assert again == found


@pytest.mark.parametrize("points", [[], [[1.0, 1.0]]])
def test_too_few_points_give_one_row_with_the_reason(points: list[list[float]]) -> None:
    found = rows(points, (0, 0, 4, 4))
    assert list(found) == ["clark_evans"]
    assert found["clark_evans"]["value"] is None
    assert "at least 2 are needed" in str(found["clark_evans"]["notes"])


def test_points_that_all_coincide_have_no_hopkins_skellam() -> None:
    found = rows([[1.0, 1.0]] * 5, (0, 0, 4, 4))
    assert found["clark_evans"]["value"] == 0.0
    assert found["hopkins_skellam"]["value"] is None
    assert found["hopkins_skellam"]["notes"] == "every point coincides with another"


def test_counts_have_no_distances() -> None:
    table = CountTable("counts", np.array([1, 2, 3, 4]), 2, 2)
    assert list(distance_rows(analyse_counts(table, simulations=99))) == []
