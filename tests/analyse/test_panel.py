"""The statistics beside the photograph under review: the quadrat test, before and now."""

from __future__ import annotations

import json
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from analyse.findings import analyse_pattern
from analyse.grid_options import GridOptions
from analyse.panel import PanelOf
from analyse.pattern import pattern_from_sheet
from analyse.quick import quick_test
from analyse.wording import number
from detect.amended import current_state
from detect.amendment import Amendment
from detect.changes import changes_of
from detect.scale import Scale
from detect.sheet import Sheet
from detect.spots import Spots
from tests.analyse.test_reviewing import CHECKED, PLACE, STRIKE, change, lattice_and_heap


def panel(sheet: Sheet, *amendments: Amendment, of: PanelOf | None = None) -> dict[str, Any]:
    now, changes = current_state(sheet, amendments), changes_of(sheet, amendments)
    told = (of or PanelOf())(sheet, now, changes)
    json.dumps(told, allow_nan=False)
    return told


def test_it_says_when_the_verdict_has_changed_through_the_edits() -> None:
    told = panel(lattice_and_heap(), STRIKE, PLACE)
    assert (told["before"]["verdict"], told["now"]["verdict"]) == ("clumped", "evenly spaced")
    assert told["verdict_changed"]
    assert told["said"] == (
        "The verdict has changed through the edits: from clumped to evenly spaced."
    )
    assert [flag["name"] for flag in told["now"]["flags"]][:1] != []
    assert {"in_review"} <= {flag["name"] for flag in told["now"]["flags"]}
    assert "in_review" not in {
        flag["name"] for flag in panel(lattice_and_heap(), STRIKE, CHECKED)["now"]["flags"]
    }
    unchanged = panel(lattice_and_heap(), PLACE)
    assert (unchanged["verdict_changed"], unchanged["said"]) == (False, None)


def test_it_is_the_test_of_the_report() -> None:
    sheet = lattice_and_heap()
    pattern = pattern_from_sheet(sheet, [STRIKE])
    quick, full = quick_test(pattern, simulations=199), analyse_pattern(pattern, simulations=199)
    assert quick.simulated == full.simulated
    assert quick.verdict == full.verdict
    assert quick.everything.chi2 == full.dispersion_all.chi2
    told = panel(sheet, STRIKE)["now"]
    assert told["count"] == full.n == 100
    assert full.density is not None
    assert told["density"] == f"{number(full.density.value)} per cm\u00b2"
    assert told["simulations"] == 999


def test_the_grid_is_laid_again_only_when_it_must_be(monkeypatch: pytest.MonkeyPatch) -> None:
    import analyse.panel

    laid: list[int] = []
    real = analyse.panel.lay_grid

    def counted(*given: Any) -> Any:
        laid.append(1)
        return real(*given)

    monkeypatch.setattr(analyse.panel, "lay_grid", counted)
    sheet, of = lattice_and_heap(), PanelOf()
    panel(sheet, of=of)
    assert len(laid) == 1
    panel(sheet, PLACE, of=of)
    assert len(laid) == 1
    half = ((-0.5, -0.5), (99.5, -0.5), (99.5, 199.5), (-0.5, 199.5), (-0.5, -0.5))
    area = change("a", "set_area", area={"type": "Polygon", "coordinates": [half]})
    assert panel(sheet, area, of=of) == panel(sheet, area)


def test_quadrats_are_told_in_pixels_with_their_counts() -> None:
    told = panel(lattice_and_heap(), of=PanelOf(GridOptions(shape=(4, 5))))["quadrats"]
    assert len(told["outlines"]) == len(told["count"]) == 20
    assert sum(told["count"]) == 160
    corners = np.array(told["outlines"][0][0])
    assert corners.min(axis=0).tolist() == [-0.5, -0.5]
    assert np.allclose(corners.max(axis=0), [39.5, 49.5])
    assert np.allclose([told["x"][0], told["y"][0]], [19.5, 24.5])


def test_frequencies_are_of_whole_quadrats() -> None:
    told = panel(lattice_and_heap(), STRIKE, of=PanelOf(GridOptions(shape=(5, 5))))["frequencies"]
    assert sum(told["observed"]) == 25
    assert sum(told["expected"]) == pytest.approx(25, abs=0.01)
    assert len(told["labels"]) == len(told["observed"]) == len(told["expected"])


def test_no_spots_no_scale_and_a_grid_that_does_not_fit_are_told() -> None:
    sheet = lattice_and_heap()
    everything = change("e", "strike", spots=tuple(sheet.spots.id))
    assert panel(sheet, everything)["now"]["sentence"] == "No spots: nothing to test."
    assert panel(replace(sheet, scale=None))["now"]["density"] == "not given: no scale is known"
    empty = replace(sheet, spots=Spots.none())
    assert panel(empty)["now"]["count"] == 0
    tilted = replace(sheet, scale=Scale.from_mm_per_pixel(2.0))
    assert panel(tilted)["now"]["area"] == "0.160 m\u00b2"
    told = panel(sheet, of=PanelOf(GridOptions(rings=(2, 4))))
    assert told["now"] is None
    assert told["trouble"].endswith(".")
