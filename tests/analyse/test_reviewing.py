"""What every output says of a review: who, what, whether marked, and what became of the verdict."""

from __future__ import annotations

import csv
import io
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from analyse.analysis import Analysed, analyse_sheet, write_results
from analyse.grid_options import GridOptions
from analyse.plan import Trial
from analyse.reviewing import REVIEW_SUMMARY_COLUMNS, review_sentence
from analyse.tables import SUMMARY_COLUMNS, summary_csv
from analyse.tables import tests_csv as statistics_csv
from detect.amendment import Amendment
from detect.area import frame_area
from detect.scale import Scale
from detect.sheet import SCHEMA, PhotographIdentity, Sheet
from detect.spots import Spots

TRIAL = Trial(simulations=99)


def lattice_and_heap() -> Sheet:
    """A lattice of 100 spots, evenly spaced, and 60 false ones in a heap that makes it clumped."""
    at = np.arange(10) * 20.0 + 10
    x, y = (axis.ravel() for axis in np.meshgrid(at, at))
    heap = np.random.default_rng(5).uniform(5, 25, (60, 2))
    spots = Spots.found_at(
        np.concatenate([x, heap[:, 0]]), np.concatenate([y, heap[:, 1]]), np.full(160, 3.0)
    )
    identity = PhotographIdentity("dish.jpg", "ab", 200, 200)
    area = frame_area(200, 200)
    return Sheet(SCHEMA, "t", identity, Scale.from_mm_per_pixel(0.1), area, {}, spots)


def change(name: str, what: str, who: str = "Ann", **values: Any) -> Amendment:
    return Amendment(name, "2026-05-04T10:00:00+00:00", who, what, **values)  # type: ignore[arg-type]


STRIKE = change("e1", "strike", spots=tuple(str(k) for k in range(101, 161)))
PLACE = change("e2", "place", "Bob", spot="b", x=100.0, y=100.0, radius=3.0)
CHECKED = change("c", "checked", "Cy")


def analysed(*amendments: Amendment) -> Analysed:
    return analyse_sheet(lattice_and_heap(), amendments, None, grid=GridOptions(), trial=TRIAL)


def row(result: Analysed) -> dict[str, str]:
    (found,) = csv.DictReader(io.StringIO(summary_csv([result.findings])))
    return found


def test_a_review_that_changes_the_verdict_says_so_everywhere(tmp_path: Path) -> None:
    result = analysed(STRIKE, PLACE, CHECKED)
    assert result.findings.verdict == "evenly spaced"
    cells = {name: row(result)[name] for name in REVIEW_SUMMARY_COLUMNS}
    assert cells == {
        "reviewed_by": "Cy",
        "placed": "1",
        "struck": "60",
        "moved": "0",
        "verdict_before_review": "clumped",
    }
    start = SUMMARY_COLUMNS.index("reviewed_by")
    assert SUMMARY_COLUMNS[start : start + 5] == REVIEW_SUMMARY_COLUMNS
    assert start > SUMMARY_COLUMNS.index("sentence")
    sentence = (
        "Marked as checked by Cy on 2026-05-04. 1 spot placed and 60 spots struck, by Ann, Bob and"
        " Cy. The verdict has changed through the review: before it was clumped."
    )
    assert review_sentence(result.findings) == sentence
    report = write_results([result], [], tmp_path, TRIAL).read_text(encoding="utf-8")
    assert f"<p>{sentence}</p>" in report
    assert "is not finished" not in report
    assert not {"unreviewed", "in_review"} & set(result.findings.flags)


def test_the_verdict_before_is_that_of_the_sheet_as_detected() -> None:
    assert analysed().findings.verdict == row(analysed(PLACE))["verdict_before_review"]


def test_what_is_not_marked_carries_its_flag_in_every_output(tmp_path: Path) -> None:
    for amendments, flag, said in (
        ((), "unreviewed", "Nobody has checked the spots of this photograph."),
        ((STRIKE,), "in_review", "In review: not marked as checked. 60 spots struck, by Ann."),
        (
            (CHECKED, STRIKE),
            "in_review",
            "In review: changed since Cy marked it as checked on 2026-05-04.",
        ),
        ((change("n", "note", text="glare"),), "in_review", "Nothing that counts was changed."),
    ):
        result = analysed(*amendments)
        assert row(result)["reviewed_by"] == ""
        assert flag in row(result)["flags"].split()
        notes = [
            line["notes"] for line in csv.DictReader(io.StringIO(statistics_csv([result.findings])))
        ]
        assert all(flag in note.split("flags: ")[1].split() for note in notes)
        report = write_results([result], [], tmp_path, TRIAL).read_text(encoding="utf-8")
        assert said in report
        assert ("The review of this photograph is not finished:" in report) == (flag == "in_review")


def test_a_photograph_nobody_touched_says_nothing_of_a_review() -> None:
    result = analysed()
    assert review_sentence(result.findings) == ""
    assert row(result)["verdict_before_review"] == ""
    assert (row(result)["placed"], row(result)["struck"]) == ("0", "0")


def test_a_table_has_no_review() -> None:
    from analyse.findings import analyse_points

    findings = analyse_points(
        np.random.default_rng(1).uniform(0, 50, (40, 2)), (0, 0, 50, 50), simulations=99
    )
    assert review_sentence(findings) == ""
    (found,) = csv.DictReader(io.StringIO(summary_csv([findings])))
    assert [found[name] for name in REVIEW_SUMMARY_COLUMNS] == [""] * 5


def test_a_name_that_looks_like_a_formula_is_harmless_in_the_table() -> None:
    result = analysed(change("c", "checked", "=1+1"))
    assert row(result)["reviewed_by"] == "'=1+1"


def test_another_area_and_scale_are_what_is_analysed() -> None:
    square = ((-0.5, -0.5), (99.5, -0.5), (99.5, 99.5), (-0.5, 99.5), (-0.5, -0.5))
    outline = {"type": "Polygon", "coordinates": [square]}
    result = analysed(
        change("a", "set_area", area=outline),
        change("s", "set_scale", line=(0.0, 0.0, 100.0, 0.0), mm=50.0),
    )
    assert result.findings.area == pytest.approx((100 * 0.5) ** 2)
    assert "The study area drawn anew and the scale measured anew, by Ann." in review_sentence(
        result.findings
    )
