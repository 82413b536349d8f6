"""The report: its numbers are those of the findings, it is safe, whole, and asks for nothing outside."""

from __future__ import annotations

import base64
import contextlib
import csv
import io
import pickle
import re
from dataclasses import replace
from html.parser import HTMLParser
from importlib.resources import files

import numpy as np
import pytest
import shapely

from analyse.analysis import analyse_table, write_results
from analyse.curve_charts import LOOKS
from analyse.findings import analyse_counts, analyse_points
from analyse.grid_options import GridOptions
from analyse.lines import show_findings
from analyse.pattern import CountTable, Pattern, pattern_from_sheet
from analyse.plan import Trial
from analyse.report import (
    RenderedPage,
    ReportPage,
    page_figures,
    render_page,
    report_html,
    write_report,
)
from analyse.verdict import p_text
from analyse.wording import (
    NOTHING,
    clumped_words,
    density_words,
    frequencies_alt,
    interval,
    law_words,
    method_words,
    number,
    poisson_words,
    quadrats_words,
    residuals_alt,
    several,
)
from detect.errors import FolderNotWritable, PhotographUnreadable
from tests.analyse.finished import TILT, amended, findings_of, photograph, scattered, sheet_of

_VOID = {
    "area",
    "base",
    "br",
    "col",
    "embed",
    "hr",
    "img",
    "input",
    "link",
    "meta",
    "source",
    "wbr",
}


class _Page(HTMLParser):
    """Collects what a reader sees and complains about tags that do not close in order."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.ids: list[str] = []
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[str] = []
        self.headings: list[int] = []
        self.feed(html)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        self.ids += [value for name, value in attrs if name == "id"]
        if re.fullmatch("h[1-6]", tag):
            self.headings.append(int(tag[1]))
        if tag not in _VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        assert self.open, f"</{tag}> closes nothing"
        assert self.open.pop() == tag
        if tag in ("dt", "dd", "th", "td", "p", "li"):
            self.words.append(" ")

    def handle_data(self, data):
        if self.open and self.open[-1] not in ("style", "script"):
            self.words.append(data)

    @property
    def text(self) -> str:
        return re.sub(r"\s+", " ", "".join(self.words))

    def all(self, tag: str) -> list[dict[str, str | None]]:
        return [attrs for name, attrs in self.tags if name == tag]


@pytest.fixture(scope="module")
def rendered() -> RenderedPage:
    sheet = amended(sheet_of(scattered(61), matrix=TILT))
    return render_page(findings_of(sheet), sheet, photograph(), factors={"batch": "A"})


def _html(*pages: RenderedPage, **choices) -> str:
    return report_html(pages, seed=7, **choices)


def _clumped():
    points = np.vstack([scattered(30), np.random.default_rng(1).normal(120, 8, (60, 2))])
    sheet = sheet_of(points, matrix=TILT, name="clumped.png")
    return findings_of(sheet), sheet


def test_the_overview_has_the_numbers_of_the_findings():
    findings, sheet = _clumped()
    page = _Page(_html(render_page(findings, sheet, photograph("clumped.png"))))
    density, whole = findings.density, findings.dispersion_whole
    assert density is not None
    assert whole is not None
    p = p_text(findings.simulated.p_two_sided).removeprefix("p = ")
    expected = (
        f"clumped.png clumped {findings.n} {number(density.value)} {number(density.low)} to"
        f" {number(density.high)} {number(whole.vmr)} {number(findings.dispersion_all.vmr)} {p}"
    )
    assert expected in page.text


def test_the_verdict_comes_first_and_then_the_flags_as_sentences():
    findings, sheet = _clumped()
    text = _Page(_html(render_page(findings, sheet, photograph()))).text
    places = [text.index(findings.sentence.replace("X2/df", "X\u00b2/df"))]
    places += [text.index(sentence) for sentence in findings.flag_sentences]
    places += [text.index("Spots and quadrats."), text.index("Measure"), text.index("Method The")]
    places += [text.index("Settings"), text.index("References"), text.index("Cautions")]
    assert places == sorted(places)
    assert "No person has checked these spots" in text
    assert "Nobody has checked the spots of this photograph." in text


def test_both_dispersions_are_shown_and_which_one_the_verdict_rests_on(rendered):
    sheet = amended(sheet_of(scattered(60), matrix=TILT))
    findings = findings_of(sheet)
    whole, everything = findings.dispersion_whole, findings.dispersion_all
    assert whole is not None
    assert whole.q < everything.q
    text = _Page(_html(render_page(findings, sheet))).text
    assert f"Whole quadrats only All {everything.q} quadrats, by area" in text
    assert f"Quadrats {whole.q} {everything.q}" in text
    assert f"Variance {number(whole.variance)} {number(everything.variance)}" in text
    assert f"X² {number(whole.chi2, 4)} {number(everything.chi2, 4)}" in text
    p = p_text(findings.simulated.p_two_sided).removeprefix("p = ")
    assert f"p, simulated, two-sided (the verdict rests on this) \u2013 {p}" in text


def test_the_settings_lead_back_to_the_photograph(rendered):
    text = _Page(_html(rendered)).text
    for said in (
        "ab" * 32,
        "bed.png, 400 \u00d7 300 pixels, taken 2026-05-04T10:11:12",
        "from the four corners of a rectangle (rectangle 100 x 75 mm)",
        "standard uncertainty of a length 0.4 %",
        "plot: four corner marks",
        "Seed; simulations 7; 199",
        "Detected with version 0.1.0",
        "kind spots; diameter 4px, 20px",
        "59 found and kept, 1 placed by hand; 1 struck",
        "58 counted",
        "1 counted, but more likely false than real",
        "1 placed by a person",
        "1 struck by a person, not counted",
        "batch A",
    ):
        assert said in text


def test_the_report_does_not_tell_where_files_lie():
    sheet = sheet_of(scattered(30))
    sheet = replace(sheet, settings=sheet.settings | {"photograph_at": "../secret/bed.png"})
    assert "secret" not in _html(render_page(findings_of(sheet), sheet, photograph()))


def test_names_factors_titles_and_reasons_are_escaped():
    nasty = "<script>alert('&amp;')</script>\"><img src=x onerror=y>.png"
    sheet = sheet_of(scattered(30), name=nasty)
    sheet = replace(sheet, settings={"request": {nasty: nasty}}, tool_version=nasty)
    page = render_page(findings_of(sheet), sheet, photograph(), factors={nasty: nasty})
    html = _html(page, title=nasty, failures=[(nasty, nasty)])
    read = _Page(html)
    assert not read.all("script")
    assert all((image["src"] or "").startswith("data:image/") for image in read.all("img"))
    assert read.text.count(nasty) >= 8
    assert any(nasty in (image["alt"] or "") for image in read.all("img"))


@pytest.mark.parametrize("photographed", [True, False])
def test_nothing_outside_is_asked_for(rendered, photographed):
    sheet = sheet_of(scattered(40))
    other = render_page(findings_of(sheet), sheet, photograph() if photographed else None)
    html = _html(rendered, other, failures=[("a.jpg", "It is damaged.")])
    page = _Page(html)
    for tag, attrs in page.tags:
        assert tag not in ("script", "link", "iframe", "object", "embed", "base", "video", "audio")
        assert not set(attrs) & {"srcset", "poster", "background", "action", "data", "style"}
        for name, value in attrs.items():
            assert not name.startswith("on")
            if name in ("src", "href"):
                assert (value or "").startswith(("data:image/", "#"))
    assert "http://" not in html
    assert "https://" not in html
    assert "url(" not in html
    assert "@import" not in html
    targets = {(link["href"] or "")[1:] for link in page.all("a")}
    assert targets <= set(page.ids)
    for data in re.findall(r"data:image/svg\+xml;base64,([A-Za-z0-9+/=]+)", html):
        picture = base64.b64decode(data).decode("utf-8")
        links = re.findall(r'(?:href|src)="([^"]*)"', picture)
        assert all(link.startswith(("#", "data:image/png;")) for link in links)
        assert set(re.findall(r"https?://[^\"]*", picture)) <= {
            "http://www.w3.org/2000/svg",
            "http://www.w3.org/1999/xlink",
        }


def test_it_can_be_read_by_everyone(rendered):
    html = _html(rendered, rendered, failures=[("a.jpg", "It is damaged.")])
    page = _Page(html)
    assert page.all("html")[0]["lang"] == "en-GB"
    assert len(page.ids) == len(set(page.ids))
    assert page.headings[0] == 1
    assert page.headings.count(1) == 1
    assert all(b - a <= 1 for a, b in zip(page.headings, page.headings[1:], strict=False))
    assert all("scope" in head for head in page.all("th"))
    for image in page.all("img"):
        assert image["alt"] or image.get("class") == "over"
    boxes = {box["id"] for box in page.all("input")}
    assert boxes == {label["for"] for label in page.all("label")}
    labelled = {attrs["aria-labelledby"] for _, attrs in page.tags if "aria-labelledby" in attrs}
    assert labelled <= set(page.ids)


def test_text_stands_out_from_its_ground():
    """WCAG 2.2, success criterion 1.4.3: at least 4.5 to 1."""
    style = files("analyse").joinpath("templates", "report.css").read_text("utf-8")
    colours = dict(re.findall(r"--(\w+): (#[0-9a-f]{6})", style))
    grounds = {"#ffffff", "#e9f2f1", "#fdf6e6"}
    assert {"#e9f2f1", "#fdf6e6"} <= set(re.findall(r"#[0-9a-f]{6}", style))
    for name in ("ink", "soft", "link", "clumped", "even", "none", "few"):
        for ground in grounds if name == "ink" else {"#ffffff"}:
            assert _contrast(colours[name], ground) >= 4.5


def _contrast(one: str, other: str) -> float:
    light = sorted(_luminance(colour) for colour in (one, other))
    return (light[1] + 0.05) / (light[0] + 0.05)


def _luminance(colour: str) -> float:
    parts = np.array([int(colour[k : k + 2], 16) for k in (1, 3, 5)]) / 255
    linear = np.where(parts <= 0.04045, parts / 12.92, ((parts + 0.055) / 1.055) ** 2.4)
    return float(linear @ [0.2126, 0.7152, 0.0722])


@pytest.mark.parametrize("n", [0, 1, 9])
@pytest.mark.parametrize("matrix", [None, TILT])
def test_few_or_no_spots_make_a_page_without_nan(n, matrix):
    sheet = sheet_of(scattered(n), matrix=matrix)
    findings = findings_of(sheet)
    page = _Page(_html(render_page(findings, sheet, photograph())))
    assert findings.sentence.replace("X2/df", "X\u00b2/df") in page.text
    assert "too few to tell" in page.text
    assert "the verdict rests on this" not in page.text
    assert ("No verdict rests on the p values" in page.text) == (n > 0)
    for wrong in ("nan", "None", "inf "):
        assert wrong not in page.text
    assert f"Count {several(n, 'spot')}" in page.text
    pictures = len([image for image in page.all("img") if image["alt"]])
    assert pictures == 1 + 2 * (n > 0) + (n > 0 and findings.poisson is not None)


def test_a_page_in_pixels_says_so():
    sheet = sheet_of(scattered(50))
    text = _Page(_html(render_page(findings_of(sheet), sheet, photograph()))).text
    assert "No scale is known: lengths are in pixels, and no density is given." in text
    assert "Density not given: no scale is known" in text
    assert "93,600 square pixels" in text
    assert "Scale not known; everything is in pixels" in text
    assert " px, a side that follows" in text


CLAIMS = ("is random", "are random", "be random", "randomly distributed", "random pattern")
CLAIMS += ("pointwise",)


@pytest.fixture(scope="module")
def outputs(tmp_path_factory):
    """Everything that is written and shown of patterns of every kind, in lower case, by name."""
    rng = np.random.default_rng(11)
    folder = tmp_path_factory.mktemp("out")
    patterns = {
        "scattered": rng.uniform(0, 100, (90, 2)),
        "clumped": np.repeat(rng.uniform(5, 95, (15, 2)), 6, axis=0) + rng.normal(0, 1, (90, 2)),
        "even": np.stack(np.meshgrid(np.arange(5, 100, 10), np.arange(5, 100, 10)), -1).reshape(
            -1, 2
        ),
        "sloping": 100 * rng.random((120, 2)) ** [0.4, 1.0],
        "few": rng.uniform(0, 100, (4, 2)),
        "none": np.empty((0, 2)),
    }
    square, trial, grid = shapely.box(0, 0, 100, 100), Trial(simulations=99), GridOptions()
    tables = [Pattern.of(points, square, name=name) for name, points in patterns.items()]
    counts = [CountTable("grid", rng.poisson(3, 40), 5, 8), CountTable("list", np.arange(9))]
    results = [analyse_table(table, grid=grid, trial=trial) for table in (*tables, *counts)]
    write_results(results, [], folder, trial)
    texts = {path.name: path.read_text(encoding="utf-8") for path in folder.iterdir()}
    shown = io.StringIO()
    with contextlib.redirect_stdout(shown), contextlib.redirect_stderr(shown):
        show_findings([result.findings for result in results])
    page = _Page(texts.pop("report.html"))
    words = page.text[: page.text.index("References")]  # the titles of others say what they say
    alts = " ".join(image["alt"] or "" for image in page.all("img"))
    found = {result.findings.verdict for result in results}
    assert len(found) == 4
    return {"terminal": shown.getvalue(), "report": words + alts} | texts


@pytest.mark.parametrize(
    "name",
    ["terminal", "report", "summary.csv", "tests.csv", "quadrats.csv", "curves.csv"],
)
def test_randomness_is_never_claimed_nor_a_pointwise_band_drawn(outputs, name):
    text = re.sub(r"\s+", " ", outputs[name]).lower()
    assert [claim for claim in CLAIMS if claim in text] == []
    if name in ("terminal", "report", "summary.csv"):
        assert "no departure from random found" in text
    if name == "report":
        assert "is no proof of randomness" in text
        assert "global band" in text


def test_the_search_for_claims_can_fail():
    assert any(claim in "the pattern is random" for claim in CLAIMS)


def test_a_verdict_is_told_in_three_sentences_at_most(outputs):
    rows = list(csv.DictReader(io.StringIO(outputs["summary.csv"])))
    assert len(rows) == 8
    for row in rows:
        assert 1 <= len(re.findall(r"\.(?= [A-Z]|$)", row["sentence"])) <= 3, row["sentence"]


def test_what_is_said_beside_the_verdict_is_in_the_report():
    points = 100 * np.random.default_rng(11).random((120, 2)) ** [0.4, 1.0]
    findings = analyse_points(points, (0, 0, 100, 100), name="sloping", simulations=99)
    text = _Page(_html(render_page(findings))).text
    assert findings.trend.clearest.sentence in text
    assert "The density rises towards the right" in text
    assert "At which distance?" in text
    assert "p beyond the gradient" in text
    assert "Density, allowing for clumping 95 % interval" in text.replace("\u00a0", " ")
    grid = CountTable("grid", np.random.default_rng(1).poisson(3, 40), 5, 8)
    counts = analyse_counts(grid, simulations=99)
    text = _Page(_html(render_page(counts))).text
    assert counts.blocks.sentence in text
    assert counts.shown.sentence in text
    assert "Mean count, allowing for clumping" in text
    for word in ("At which distance?", "neighbour", "Ripley"):
        assert word not in text


def test_words_for_both_laws():
    rng = np.random.default_rng(1)
    clumped = analyse_counts(CountTable("bed", rng.negative_binomial(1.0, 0.3, 80)), simulations=99)
    said = law_words(clumped).replace("\u00a0", " ")
    fit = clumped.negative_binomial
    assert said.startswith(f"Negative binomial law: k {fit.k_text}, the smaller the more clumped;")
    assert "it has over 99 %, the Poisson law under 1 %." in said
    assert "seen and expected at random and by a negative binomial law" in frequencies_alt(clumped)
    even = analyse_counts(CountTable("bed", np.tile([3, 4, 4, 5], 10)), simulations=99)
    assert "no better than the Poisson law (no finite k;" in law_words(even)
    nothing = analyse_counts(CountTable("bed", np.zeros(9, dtype=int)), simulations=99)
    assert law_words(nothing) == ""
    assert clumped_words(nothing) is None


def test_failures_are_listed_with_their_reasons(rendered):
    reason = "The file is cut short after 12 of 40 kB; copy it again."
    text = _Page(_html(rendered, failures=[("dish_07.jpg", reason)])).text
    assert "1 analysed, 1 could not be done." in text
    assert f"dish_07.jpg {reason}" in text


def test_a_report_of_failures_alone_is_whole():
    page = _Page(_html(failures=[("a.jpg", "It is damaged."), ("b.jpg", "It is empty.")]))
    assert "0 analysed, 2 could not be done." in page.text
    assert len(page.all("table")) == 1


def test_methods_and_cautions_are_there(rendered):
    text = _Page(_html(rendered)).text
    for said in (
        "“Student” (1907)", "Fisher, R. A. (1925)", "Mackenzie, W. A. (1922)",
        "Garwood, F. (1936)", "Cochran, W. G. (1954)", "Phipson, B. and Smyth, G. K. (2010)",
        "Davison, A. C. and Hinkley, D. V. (1997)",
        "Grown plates are biohazards: they stay closed",
        "no basis for a clinical, food-release or water-safety decision without an accredited"
        " method and a competent person",
        "Spraying or destroying a crop follows the product label, local rules and an adviser",
        "Drones follow local aviation rules.",
        "Local codes and licensed practice come first.",
    ):  # fmt: skip
        assert said in text


def test_tables_of_points_and_counts_have_pages():
    points = np.random.default_rng(3).uniform(0, 80, (40, 2))
    by_points = analyse_points(points, (0, 0, 80, 80), name="points.csv", simulations=99)
    grid = CountTable("grid.csv", np.arange(12), 3, 4)
    listed = CountTable("list.csv", np.array([3, 1, 4, 1, 5, 9]))
    pages = [render_page(by_points)]
    pages += [render_page(analyse_counts(table, simulations=99)) for table in (grid, listed)]
    assert [set(page.figures) for page in pages] == [
        {"points", "residuals", "frequencies", *LOOKS},
        {"residuals", "frequencies"},
        {"frequencies"},
    ]
    page = _Page(_html(*pages))
    text = page.text
    assert (page.all("img")[0]["alt"] or "").startswith("40 points in the study area and")
    assert "The counts are of 12 squares." in text
    assert "The counts are of 6 quadrats as counted in the table." in text
    assert "A table of counts tells no study area" in text
    assert "All 12 quadrats, every one whole" in text


def test_pages_pass_between_processes_and_give_the_same_bytes(rendered, tmp_path):
    sheet = amended(sheet_of(scattered(61), matrix=TILT))
    again = render_page(findings_of(sheet), sheet, photograph(), factors={"batch": "A"})
    passed = pickle.loads(pickle.dumps(rendered))
    assert again == passed == rendered
    first = write_report([rendered], tmp_path / "one.html", seed=7, title="Beds")
    second = write_report([again], tmp_path / "two.html", seed=7, title="Beds")
    assert first.read_bytes() == second.read_bytes()
    assert sorted(path.name for path in tmp_path.iterdir()) == ["one.html", "two.html"]


def test_a_report_that_cannot_be_written_leaves_nothing(rendered, tmp_path):
    with pytest.raises(FolderNotWritable, match=r"report\.html cannot be written to"):
        write_report([rendered], tmp_path / "missing" / "report.html", seed=7)
    assert list(tmp_path.iterdir()) == []


def test_a_photograph_may_be_given_by_its_path(tmp_path):
    sheet = sheet_of(scattered(20))
    path = tmp_path / "bed.png"
    path.write_text("no picture")
    with pytest.raises(PhotographUnreadable, match=r"bed\.png"):
        page_figures(ReportPage(findings_of(sheet), sheet, path))


def test_a_reviewed_page_says_nothing_of_unchecked_spots(rendered):
    sheet = sheet_of(scattered(60), matrix=TILT)
    pattern = pattern_from_sheet(sheet, ())
    findings = findings_of(sheet)
    flags = tuple(flag for flag in findings.flags if flag != "unreviewed")
    checked = replace(findings, flags=flags, pattern=replace(pattern, reviewed=True))
    text = _Page(_html(render_page(checked, sheet))).text
    assert "Nobody has checked" not in text
    assert "No person has checked" not in text
    mixed = _Page(_html(render_page(checked, sheet), rendered)).text
    assert "Nobody has checked the spots of 1 of these photographs." in mixed


def test_alternative_texts_state_the_result():
    findings, sheet = _clumped()
    page = _Page(_html(render_page(findings, sheet, photograph())))
    alts = [image["alt"] or "" for image in page.all("img") if image["alt"]]
    counts = findings.counts.counts
    assert f"{findings.n} counted spots" in alts[0]
    assert f"holding {counts.min()} to {counts.max()} spots each. Verdict: clumped." in alts[0]
    beyond = int((np.abs(findings.residuals) >= 2).sum())
    assert f"{beyond} of them 2 or more away from 0" in alts[1]
    fit = findings.poisson
    assert fit is not None
    assert f"{fit.labels[0]}: {fit.observed[0]} and {number(float(fit.expected[0]))}" in alts[2]


def test_words_for_what_is_missing():
    counts = analyse_counts(CountTable("list.csv", np.array([0, 0, 0])), simulations=99)
    assert residuals_alt(counts) == "Map of the quadrats; without spots there are no residuals."
    assert interval(None) == NOTHING
    assert density_words(counts) == "not given"
    assert frequencies_alt(replace(counts, poisson=None)) == ""
    assert poisson_words(counts) == "Too few classes to test the fit of the Poisson law."
    assert method_words(counts) == ["The counts are of 3 quadrats as counted in the table."]
    many = analyse_counts(
        CountTable("many.csv", np.random.default_rng(1).poisson(60, 400)), simulations=99
    )
    assert re.fullmatch(
        r"Frequencies of counts in \d+ classes, seen and expected at random\.",
        frequencies_alt(many),
    )
    fit = many.poisson
    assert fit is not None
    assert poisson_words(many).startswith(
        f"Fit of the Poisson law on {len(fit.classes)} classes: chi-square {number(fit.chi2)}, "
    )


def test_sparse_spots_are_given_per_square_metre_too():
    points = np.random.default_rng(3).uniform(0, 1000, (40, 2))
    findings = analyse_points(points, (0, 0, 1000, 1000), simulations=99)
    assert (
        density_words(findings)
        .replace("\u00a0", " ")
        .startswith(
            "0.00400 per cm², or 40.0 per m² (95 % interval 0.00286 to 0.00545 per cm², 28.6 to"
        )
    )  # Garwood 1936: 28.577 and 54.469 for a count of 40
    side = findings.settings["side"]
    assert f"squares of {side:g} mm, a side that follows" in quadrats_words(findings)


def test_the_method_tells_of_clipped_and_joined_quadrats():
    findings = findings_of(sheet_of(scattered(61), matrix=TILT))
    clipped, joined = int((~findings.counts.whole).sum()), findings.settings["joined"]
    assert clipped > 1
    assert joined > 0
    said = " ".join(method_words(findings)).replace("\u00a0", " ")
    assert f"{clipped} quadrats are not whole; cells joined to a neighbour" in said
    assert f"less than 25 % of them lies inside: {joined}. Expected counts go by area." in said
