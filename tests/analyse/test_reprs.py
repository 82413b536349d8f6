"""In a notebook every result shows itself in one short line."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest
import shapely

from analyse.findings import Findings, analyse_counts, analyse_points
from analyse.nulls import random_points
from analyse.pattern import CountTable
from analyse.report import render_page

LONGEST = 200
DISH = shapely.Point(43, 43).buffer(43, quad_segs=64)


def results_in(record: Any, path: str) -> Iterator[tuple[str, Any]]:
    """Every dataclass that can be reached from a result."""
    yield path, record
    for field in dataclasses.fields(record):
        value = getattr(record, field.name)
        parts = value.items() if isinstance(value, dict) else [("", value)]
        for name, part in parts:
            if dataclasses.is_dataclass(part):
                yield from results_in(part, f"{path}.{field.name}{name and f'[{name}]'}")


def found() -> Findings:
    return analyse_points(
        random_points(DISH, 120, np.random.default_rng(4)), DISH, name="dish_01.jpg", simulations=99
    )


@pytest.mark.parametrize("of", ["points", "counts"])
def test_every_result_shows_itself_in_one_short_line(of: str) -> None:
    findings = found() if of == "points" else analyse_counts(CountTable("a.csv", np.arange(30)))
    reached = list(results_in(findings, "findings"))
    assert len(reached) >= (8 if of == "points" else 5)
    for path, record in reached:
        shown = repr(record)
        assert len(shown) <= LONGEST, (path, shown[:300])
        assert "\n" not in shown, path
        assert "array(" not in shown, path


def test_a_rendered_page_names_its_figures_and_holds_its_bytes_back() -> None:
    assert repr(render_page(found())).startswith("<RenderedPage dish_01.jpg: figures points, resid")


def test_findings_and_their_parts_say_what_matters() -> None:
    findings = found()
    assert repr(findings) == (
        f"<Findings dish_01.jpg: {findings.verdict}, 120 in {len(findings.counts)} quadrats>"
    )
    assert repr(findings.pattern) == "<Pattern dish_01.jpg: 120 points in a polygon of 5808 mm2>"
    assert repr(findings.counts).startswith("<QuadratCounts: 120 points in ")
    assert "chi-square p = " in repr(findings.dispersion_all)
    assert repr(findings.counts.grid).startswith("<Grid ")
