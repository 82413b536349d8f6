"""What is said of planted objects, in words and in tables."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import replace

import pytest

from analyse import tables
from analyse.findings import analyse_counts
from analyse.pattern import CountTable, Pattern, pattern_from_sheet
from analyse.report import render_page, report_html
from analyse.tables import SUMMARY_COLUMNS, summary_csv
from analyse.unseen import planted_cells, planted_rows, planted_sentence
from detect.planted import Planted
from detect.sheet import Sheet
from tests.analyse.finished import TILT, findings_of, scattered, sheet_of
from tests.detect.test_planted import MEASURED

SAID = (
    "Of 90 copies of its own spots set into the photograph, 81 were found again. Some were made"
    " smaller and fainter, or set nearer to others, than its spots are, so the share found of its"
    " objects is another: with each spot given the chance of copies of its own size, contrast and"
    " nearness to others, it is 90 % (95 % limits 82 to 95 %), for objects that look like those"
    " found."
    " Two closer than 0.80 of their radii's sum are mostly seen as one"
)
NAMES = ("planted_recall", "planted_recall_low", "planted_recall_high", "blind_distance")


def sheet(planted: Planted | None = MEASURED, *, scaled: bool = True) -> Sheet:
    return replace(sheet_of(scattered(40), matrix=TILT if scaled else None), planted=planted)


def pattern(planted: Planted | None = MEASURED, *, scaled: bool = True) -> Pattern:
    return pattern_from_sheet(sheet(planted, scaled=scaled))


def test_the_sentence_says_what_was_measured_and_in_which_unit() -> None:
    assert planted_sentence(pattern(scaled=False)) == f"{SAID} (16 px between usual spots)."
    millimetres = pattern()
    middle = sheet().area.polygon.centroid
    scale = sheet().scale
    assert scale is not None
    assert millimetres.blind == pytest.approx(16 * scale.mm_per_px([[middle.x, middle.y]])[0])
    said = f"{SAID} ({millimetres.blind:.3g} mm between usual spots)."
    assert planted_sentence(millimetres) == said


def test_where_something_was_not_measured_the_note_says_why() -> None:
    nothing = Planted(10, 1, note="Planted objects could not be set: reason.")
    assert planted_sentence(pattern(nothing)) == nothing.note
    half = replace(MEASURED, blind=None, note="No blind distance: reason.")
    said = planted_sentence(pattern(half))
    assert said.startswith("Of 90 copies")
    assert said.endswith(half.note)


def test_where_none_were_set_nothing_is_said() -> None:
    assert planted_sentence(pattern(None)) == ""
    assert planted_sentence(None) == ""
    assert planted_cells(pattern(None)) == [None] * 5
    assert list(planted_rows(None)) == []
    assert math.isnan(pattern(None).blind)


def summary(each: Sheet) -> dict[str, str]:
    (row,) = csv.DictReader(io.StringIO(summary_csv([findings_of(each)])))
    return row


def test_the_summary_has_its_columns_together() -> None:
    start = SUMMARY_COLUMNS.index(NAMES[0])
    assert SUMMARY_COLUMNS[start : start + 5] == [*NAMES, "blind_distance_mm"]
    row = summary(sheet())
    assert [float(row[name]) for name in NAMES] == [0.9, 0.82, 0.95, 0.8]
    assert float(row["blind_distance_mm"]) == pytest.approx(pattern().blind)
    assert summary(sheet(scaled=False))["blind_distance_mm"] == ""
    assert [summary(sheet(None))[name] for name in NAMES] == [""] * 4
    nothing = summary(sheet(Planted(10, 1, note="Too little.")))
    assert [nothing[name] for name in (*NAMES, "blind_distance_mm")] == [""] * 5


def test_the_table_of_statistics_has_a_row_for_each() -> None:
    rows = list(csv.DictReader(io.StringIO(tables.tests_csv([findings_of(sheet())]))))
    rows = [row for row in rows if row["statistic"].startswith(("planted", "blind"))]
    names = [row["statistic"] for row in rows]
    assert names == [
        "planted_recall",
        *["planted_by_radius_px"] * 2,
        "planted_by_contrast",
        *["planted_by_separation"] * 2,
        "blind_distance",
    ]
    assert [float(rows[0][name]) for name in ("value", "low", "high")] == [0.9, 0.82, 0.95]
    assert "81 of 90 copies found; 10 rounds, seed 3" in rows[0]["notes"]
    assert float(rows[1]["value"]) == pytest.approx(33 / 40)
    assert "radius_px from 4 to 6" in rows[1]["notes"]
    assert "separation from 1.5 on" in rows[5]["notes"]
    assert float(rows[6]["low"]) == pytest.approx(0.8 - 1.96 * 0.05, abs=1e-4)
    assert "30 of 50 pairs seen as two" in rows[6]["notes"]
    assert all(row["method"] and row["n"] for row in rows)


def test_the_report_says_it_once_and_names_its_sources() -> None:
    page = render_page(findings_of(sheet(scaled=False)), sheet(scaled=False))
    html = report_html([page], seed=1).replace("&#39;", "'")
    assert html.count("Of 90 copies of its own spots") == 1
    for source in ("Stetson, P. B. (1987)", "Firth, D. (1993)", "Horvitz, D. G."):
        assert source in html


def test_a_report_without_planted_objects_does_not_mention_them() -> None:
    html = report_html([render_page(findings_of(sheet(None)), sheet(None))], seed=1)
    assert "copies" not in html.split("Methods")[0]
    assert "Stetson" not in html


def test_a_table_of_counts_has_none() -> None:
    counts = analyse_counts(CountTable("bed", [3, 1, 4, 1, 5, 9, 2, 6, 5, 3]))
    (row,) = csv.DictReader(io.StringIO(summary_csv([counts])))
    assert row["planted_recall"] == ""
