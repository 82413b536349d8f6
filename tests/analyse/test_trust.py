"""How far to trust a result, through every output: findings, tables, report, panel, command line."""

from __future__ import annotations

import csv
import io
import re
from dataclasses import replace

import numpy as np
import pytest
from matplotlib.figure import Figure

from analyse.analysis import analyse_sheet, write_results
from analyse.count_table import CountTable
from analyse.density import Limits
from analyse.draws import UnderDoubt
from analyse.findings import Findings, analyse_counts, analyse_pattern
from analyse.grid_options import GridOptions
from analyse.panel import PanelOf
from analyse.pattern import Pattern, pattern_from_sheet
from analyse.plan import Trial
from analyse.report import render_page, report_html
from analyse.tables import summary_csv
from analyse.tables import tests_csv as statistics_csv
from analyse.trust_charts import draw_trust
from analyse.trust_rows import LOOK_COLUMNS, TRUST_SUMMARY_COLUMNS, look_first_csv
from analyse.trust_words import trust_alt, trust_said
from detect.amended import current_state
from detect.changes import Changes, changes_of
from detect.sheet import Sheet
from tests.analyse.finished import TILT, scattered, sheet_of
from tests.analyse.test_reviewing import CHECKED
from tests.detect.test_planted import MEASURED


def doubtful_sheet(*, planted: bool = False, scaled: bool = True) -> Sheet:
    sheet = sheet_of(scattered(60), matrix=TILT if scaled else None)
    doubt = np.where(np.arange(60) < 6, 0.45, 0.02)
    sheet = replace(sheet, spots=replace(sheet.spots, doubt=doubt))
    return replace(sheet, planted=MEASURED) if planted else sheet


def found(**how: bool) -> Findings:
    return analyse_pattern(pattern_from_sheet(doubtful_sheet(**how)), seed=3, simulations=199)


def rows(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text)))


def test_findings_carry_it_and_nothing_without_points():
    trust = found().trust
    assert trust is not None
    assert trust.doubt is not None
    assert trust.doubt.n == trust.breaking.n == 60
    assert re.match(r"<Trust: \d+ false or \d+ missed, stands in \d+ %>", repr(trust))
    nothing = analyse_pattern(Pattern.of([], (0, 0, 10, 10)))
    assert nothing.trust is None
    assert trust_said(nothing) == []
    assert trust_alt(nothing) == ""


def test_a_table_of_counts_has_a_breaking_point_alone():
    findings = analyse_counts(CountTable("bed", np.array([9, 0, 0, 8, 1, 0, 7, 0, 0, 5])))
    assert findings.trust is not None
    assert findings.trust.doubt is None
    assert [about for about, _ in trust_said(findings)][:2] == ["Review", "Breaking point"]
    (row,) = rows(summary_csv([findings]))
    assert int(row["false_to_change"]) == findings.trust.breaking.false
    assert row["count_low"] == row["verdict_stands"] == ""


def test_the_summary_and_the_statistics_hold_the_same_numbers():
    findings = found()
    trust = findings.trust
    (row,) = rows(summary_csv([findings]))
    header = summary_csv([findings]).splitlines()[0].split(",")
    assert set(TRUST_SUMMARY_COLUMNS) <= set(header)
    assert float(row["verdict_stands"]) == pytest.approx(trust.doubt.stands)
    assert float(row["count_low"]) == trust.doubt.count.low
    assert float(row["density_under_doubt_high"]) == pytest.approx(trust.doubt.density.high)
    assert row["recall_source"] == "assumed"
    assert int(row["look_first"]) == trust.look.decisive
    told = {each["statistic"]: each for each in rows(statistics_csv([findings]))}
    for name in ("false_to_change", "missed_to_change", "errors_to_change"):
        assert told[name]["value"] == row[name]
    assert told["count_under_doubt"]["low"] == row["count_low"]
    assert float(told["verdict_stands"]["value"]) == pytest.approx(trust.doubt.stands)
    assert "recall assumed" in told["vmr_under_doubt"]["notes"]
    assert told["look_first"]["value"] == row["look_first"]


def test_an_assumed_recall_is_flagged_and_a_measured_one_is_not():
    assert "recall_assumed" in found().flags
    measured = found(planted=True)
    assert "recall_assumed" not in measured.flags
    assert measured.trust.doubt.source == "planted"
    said = dict(trust_said(measured))
    assert said["Missed objects"].startswith("Judged by copies of its own spots")
    assert said["Neighbours"].startswith("Two objects nearer than")
    without = dict(trust_said(found()))
    assert without["Missed objects"].startswith("Nobody has measured how much is missed here")
    assert "was not measured" in without["Neighbours"]


def test_every_reason_is_one_sentence():
    for findings in (found(), found(planted=True), found(scaled=False)):
        said = trust_said(findings)
        assert [about for about, _ in said][:4] == [
            "Review", "False spots", "Missed objects", "Neighbours",
        ]  # fmt: skip
        assert {"Count", "Breaking point", "Verdict", "Where to look", "Power"} <= set(dict(said))
        for about, sentence in said:
            assert sentence.endswith("."), about
            assert len(re.findall(r"\.(?= [A-Z])", sentence)) == 0, sentence


def test_checked_spots_are_taken_as_they_are():
    sheet = doubtful_sheet()
    findings = analyse_pattern(pattern_from_sheet(sheet, [CHECKED]), simulations=199)
    assert findings.trust.look is None
    said = dict(trust_said(findings))
    assert said["False spots"] == ("A person has checked the spots, so none is taken to be false.")
    assert said["Missed objects"] == (
        "A person has checked the photograph, so nothing is taken to be missed."
    )
    assert said["Count"] == "The count of 60 is taken as exact."
    assert "Verdict" not in said
    assert "recall_assumed" not in findings.flags
    assert look_first_csv([findings]) == ",".join(LOOK_COLUMNS) + "\n"


def test_a_table_with_doubts_is_drawn_without_misses():
    doubt = np.where(np.arange(60) < 6, 0.45, 0.0)
    pattern = Pattern.of(scattered(60) / 4, (0, 0, 100, 75), doubt=doubt)
    findings = analyse_pattern(pattern, simulations=199)
    said = dict(trust_said(findings))
    assert said["Missed objects"] == "No detector was at work, so nothing is taken to be missed."
    assert findings.trust.doubt.count.high <= 60
    first = rows(look_first_csv([findings]))[0]
    assert first["spot"] == ""
    assert float(first["doubt"]) == 0.45


def test_the_list_of_spots_names_them_as_the_points_do():
    findings = found()
    listed = rows(look_first_csv([findings]))
    assert len(listed) == max(10, findings.trust.look.decisive)
    doubtful = doubtful_sheet().spots.id[:6]
    assert {row["spot"] for row in listed[:6]} == set(doubtful)
    assert [row["order"] for row in listed[:3]] == ["1", "2", "3"]
    assert sum(row["decides"] == "true" for row in listed) == findings.trust.look.decisive


def test_the_report_has_the_section_with_its_figure():
    findings, sheet = found(), doubtful_sheet()
    page = render_page(findings, sheet)
    html = report_html([page], seed=3)
    assert "How far to trust this" in html
    assert findings.trust.breaking.sentence in html
    assert findings.trust.look.sentence.replace("'", "&#39;") in html
    assert trust_alt(findings) in html
    assert b"share of 999 draws with each verdict" in page.figures["trust"]
    counts = analyse_counts(CountTable("bed", np.array([9, 0, 0, 8, 1, 0, 7, 0, 0, 5])))
    assert "trust" not in render_page(counts).figures


def test_the_figure_shows_the_numbers():
    limits = Limits(100.0, 92.0, 115.0, 0.95)
    shares = (("clumped", 0.7), ("no departure from random found", 0.2), ("too few to tell", 0.1))
    dense = Limits(2.0, 1.5, 2.6, 0.95)
    doubt = UnderDoubt(97, 999, 0.7, shares, 2.0, 5.0, None, "table", limits, dense, limits)
    drawn = draw_trust(Figure(), doubt, Limits(1.9, 1.5, 2.3, 0.95))
    assert drawn.intervals["count, with detection error"] == (100.0, 92.0, 115.0)
    assert drawn.intervals["density, as counted"] == (1.9, 1.5, 2.3)
    assert [share for _, _, share in drawn.shares] == [0.7, 0.2, 0.1]
    assert [begun for _, begun, _ in drawn.shares] == pytest.approx([0.0, 0.7, 0.9])
    assert len(draw_trust(Figure(), replace(doubt, density=None), None).intervals) == 2


def test_the_panel_says_where_to_look_first():
    sheet = doubtful_sheet()
    told = PanelOf()(sheet, sheet, Changes())["look_first"]
    assert set(told["order"][:6]) == set(sheet.spots.id[:6])
    assert len(told["order"]) == 60
    assert told["settled"] == (told["decisive"] == 0)
    assert told["said"].endswith(".")
    checked = PanelOf()(sheet, current_state(sheet, [CHECKED]), changes_of(sheet, [CHECKED]))
    assert checked["look_first"] is None
    sure = replace(sheet, spots=replace(sheet.spots, doubt=np.zeros(60)))
    assert PanelOf()(sure, sure, Changes())["look_first"] is None


def test_all_files_are_written_with_it(tmp_path):
    trial = Trial(seed=3, simulations=199)
    result = analyse_sheet(doubtful_sheet(), (), None, grid=GridOptions(), trial=trial)
    write_results([result], [], tmp_path, trial)
    assert (tmp_path / "look_first.csv").read_text(encoding="utf-8").count("\n") >= 11
    assert "How far to trust this" in (tmp_path / "report.html").read_text(encoding="utf-8")
