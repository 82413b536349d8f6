"""Every statistic of tests.csv stands in the README's table of names, and every name there is real."""

from __future__ import annotations

import csv
import io
import re
from fnmatch import fnmatchcase
from pathlib import Path

import numpy as np
import pytest
import shapely

from analyse import tables
from analyse.findings import CountTable, Findings, analyse_counts, analyse_points

README = (Path(__file__).parents[2] / "README.md").read_text(encoding="utf-8")
(SECTION,) = re.findall(r"### Every statistic by name\n(.*?)\n### ", README, flags=re.DOTALL)
NAMES = re.findall(r"`([a-z0-9_*]+)`", " ".join(re.findall(r"\|([^|]+)\|$", SECTION, re.MULTILINE)))


def found() -> list[Findings]:
    """Points on a gradient in a square and clumped in a dish, a grid of counts and a transect."""
    rng = np.random.default_rng(7)
    square = analyse_points(
        100 * rng.random((150, 2)) ** [0.5, 1.0], (0, 0, 100, 100), name="a", simulations=99
    )
    radius, turn = 40 * rng.random(120) ** 0.3, 2 * np.pi * rng.random(120)
    dish = analyse_points(
        np.column_stack([radius * np.cos(turn), radius * np.sin(turn)]),
        shapely.Point(0, 0).buffer(43),
        name="b",
        simulations=99,
    )
    counts = rng.negative_binomial(1, 0.2, 256)
    return [
        square,
        dish,
        analyse_counts(CountTable("c", counts, 16, 16), simulations=99),
        analyse_counts(CountTable("d", counts[:32], 1, 32), simulations=99),
    ]


@pytest.fixture(scope="module")
def written() -> set[str]:
    """The statistics that all of them bring."""
    return {row["statistic"] for row in csv.DictReader(io.StringIO(tables.tests_csv(found())))}


def test_the_table_of_names_is_found() -> None:
    assert len(NAMES) > 50


def test_every_statistic_stands_in_the_table(written: set[str]) -> None:
    assert [
        one for one in sorted(written) if not any(fnmatchcase(one, name) for name in NAMES)
    ] == []


def test_every_name_of_the_table_is_written(written: set[str]) -> None:
    assert [name for name in NAMES if not any(fnmatchcase(one, name) for one in written)] == []
