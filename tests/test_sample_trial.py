"""The sample trial from photographs to verdicts, by its recipe alone, against its exact truth.

The truth is that of the script that drew the photographs (sample_images/draw.py); nothing of it is
given to the tool but what a person would measure: a dish's diameter, a plot's corners, a bar's ends.
"""

from __future__ import annotations

import csv
import itertools
import math
from functools import cache
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from detect.accuracy import Accuracy, match_spots, pooled, read_truth
from detect.scale import Scale
from detect.sheet import Sheet, read_sheet, sheet_path
from tests.conftest import SAMPLE, Surveyed

TRUTH = SAMPLE / "truth"
VERDICTS = {
    "random": "no departure from random found",
    "clumped": "clumped",
    "even": "evenly spaced",
    "few": "too few to tell",
    "none": "too few to tell",
}
LEAST_F1 = {"colonies": 0.95, "seedlings": 0.90, "lesions": 0.90}
PLOT_MM = np.array([[0, 0], [1000, 0], [1000, 750], [0, 750]], dtype=np.float64)


def table(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


TRIAL = {row["photograph"]: row for row in table(TRUTH / "trial.csv")}
NAMES = list(TRIAL)
DISHES, PLOTS, LEAVES = (
    [name for name in NAMES if TRIAL[name]["kind"] == kind] for kind in LEAST_F1
)


def numbers(name: str, *columns: str) -> list[float]:
    return [float(TRIAL[name][column]) for column in columns]


@cache
def accuracy(out: Path, name: str) -> Accuracy:
    """Compare the counted spots of NAME.points.csv with all true objects of the photograph."""
    stem = Path(name).stem
    rows = [row for row in table(out / f"{stem}.points.csv") if row["standing"] == "counted"]
    found = [(float(row["x_px"]), float(row["y_px"])) for row in rows]
    truth = read_truth(TRUTH / f"{stem}.csv")
    match = match_spots(found, truth.xy, truth.radius)
    squares = float((match.distance**2).sum())
    return Accuracy(name, len(truth.xy), len(found), len(match), squares)


def sheet_of(survey: Surveyed, name: str) -> Sheet:
    return read_sheet(sheet_path(survey.out, Path(name).stem))


def scale_of(survey: Surveyed, name: str) -> Scale:
    scale = sheet_of(survey, name).scale
    assert scale is not None
    return scale


def apart(points: NDArray[np.float64]) -> list[float]:
    """Distances of all pairs of points."""
    return [float(np.hypot(*(p - q))) for p, q in itertools.combinations(points, 2)]


class Pages(HTMLParser):
    """The words of a page; complains about a tag that closes nothing or is never closed."""

    void = frozenset({"br", "col", "hr", "img", "input", "link", "meta"})

    def __init__(self, html: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.words = ""
        self.feed(html)
        self.close()
        assert self.open == [], f"never closed: {self.open}"

    def handle_starttag(self, tag: str, attrs: object) -> None:
        if tag not in self.void:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: object) -> None:
        pass

    def handle_endtag(self, tag: str) -> None:
        assert self.open, f"</{tag}> closes nothing"
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        if self.open and self.open[-1] not in ("style", "script"):
            self.words += data


def test_every_photograph_is_done(sample_survey: Surveyed) -> None:
    assert sample_survey.exit_code == 0, sample_survey.stderr
    rows = table(sample_survey.out / "summary.csv")
    assert sorted(row["photograph"] for row in rows) == sorted(NAMES)
    assert len(NAMES) == 13
    for row in rows:
        assert int(row["count"]) == accuracy(sample_survey.out, row["photograph"]).found
        assert row["photograph"] in sample_survey.stdout


@pytest.mark.parametrize("kind", LEAST_F1)
def test_objects_are_found_and_little_else(sample_survey: Surveyed, kind: str) -> None:
    scores = [accuracy(sample_survey.out, name) for name in NAMES if TRIAL[name]["kind"] == kind]
    assert pooled(scores).truth == sum(int(TRIAL[score.name]["objects"]) for score in scores)
    assert pooled(scores).f1 >= LEAST_F1[kind], [(s.name, round(s.f1, 3)) for s in scores]


@pytest.mark.parametrize("name", [n for n in NAMES if int(TRIAL[n]["objects"]) > 20])
def test_counts_are_within_a_twentieth(sample_survey: Surveyed, name: str) -> None:
    score = accuracy(sample_survey.out, name)
    assert abs(score.count_error) <= 0.05 * score.truth


def test_next_to_nothing_is_found_where_nothing_grew(sample_survey: Surveyed) -> None:
    (empty,) = (name for name in NAMES if TRIAL[name]["pattern"] == "none")
    assert accuracy(sample_survey.out, empty).found <= 1


@pytest.mark.parametrize("name", DISHES)
def test_every_diameter_of_the_dish_is_within_a_hundredth(
    sample_survey: Surveyed, name: str
) -> None:
    cx, cy, a, b, angle = numbers(name, "cx", "cy", "semi_a", "semi_b", "angle_deg")
    around, turn = np.linspace(0, np.pi, 24, endpoint=False), math.radians(angle)
    u, v = a * np.cos(around), b * np.sin(around)
    centre, half = (
        np.array([cx, cy]),
        np.column_stack(
            [u * math.cos(turn) - v * math.sin(turn), u * math.sin(turn) + v * math.cos(turn)]
        ),
    )
    scale = scale_of(sample_survey, name)
    ends = scale.to_mm(centre + half), scale.to_mm(centre - half)
    assert np.abs(np.hypot(*(ends[0] - ends[1]).T) / 86 - 1).max() < 0.01
    (row,) = (r for r in table(sample_survey.out / "summary.csv") if r["photograph"] == name)
    # The recipe leaves out the outermost millimetre.
    assert 2 * math.sqrt(float(row["area_mm2"]) / math.pi) + 2 == pytest.approx(86, rel=0.01)


@pytest.mark.parametrize("name", PLOTS)
def test_sides_and_diagonals_of_the_plot_are_within_a_hundredth(
    sample_survey: Surveyed, name: str
) -> None:
    corners = np.array([numbers(name, f"x{k}", f"y{k}") for k in range(1, 5)])
    seen = scale_of(sample_survey, name).to_mm(corners)
    assert apart(seen) == pytest.approx(apart(PLOT_MM), rel=0.01)
    assert (
        sheet_of(sample_survey, name).area.contains(corners * 0.99 + corners.mean(0) * 0.01).all()
    )


@pytest.mark.parametrize("name", LEAVES)
def test_the_bar_beside_the_leaf_is_within_a_hundredth(sample_survey: Surveyed, name: str) -> None:
    ends = np.array(numbers(name, "bar_x1", "bar_y1", "bar_x2", "bar_y2")).reshape(2, 2)
    assert apart(scale_of(sample_survey, name).to_mm(ends)) == pytest.approx([50], rel=0.01)


def middle(name: str) -> tuple[float, ...]:
    """Middle of the dish or bar; of a tilted plot, where its diagonals cross."""
    row = TRIAL[name]
    if row["kind"] == "colonies":
        return tuple(numbers(name, "cx", "cy"))
    if row["kind"] == "lesions":
        x1, y1, x2, y2 = numbers(name, "bar_x1", "bar_y1", "bar_x2", "bar_y2")
        return (x1 + x2) / 2, (y1 + y2) / 2
    p, q, r, s = (np.array(numbers(name, f"x{k}", f"y{k}")) for k in range(1, 5))
    along, _ = np.linalg.solve(np.column_stack([r - p, q - s]), q - p)
    return tuple((p + along * (r - p)).tolist())


@pytest.mark.parametrize("name", NAMES)
def test_a_pixel_is_as_large_as_it_was_drawn(sample_survey: Surveyed, name: str) -> None:
    seen = scale_of(sample_survey, name).mm_per_px([middle(name)])
    assert seen == pytest.approx(numbers(name, "mm_per_px"), rel=0.01)


@pytest.mark.parametrize("name", NAMES)
def test_the_verdict_is_the_pattern_that_was_drawn(sample_survey: Surveyed, name: str) -> None:
    (row,) = (r for r in table(sample_survey.out / "summary.csv") if r["photograph"] == name)
    assert row["verdict"] == VERDICTS[TRIAL[name]["pattern"]]


def test_one_report_opens_and_names_every_photograph(sample_survey: Surveyed) -> None:
    reports = list(sample_survey.out.glob("*.html"))
    assert [path.name for path in reports] == ["report.html"]
    page = Pages(reports[0].read_text(encoding="utf-8"))
    for name in NAMES:
        assert name in page.words
        assert VERDICTS[TRIAL[name]["pattern"]] in page.words.lower()


@pytest.mark.parametrize("broken", ["<p>one", "one</p>", "<p><b>one</p></b>"])
def test_a_page_that_does_not_open_is_noticed(broken: str) -> None:
    with pytest.raises(AssertionError):
        Pages(broken)


def test_counts_of_quadrats_add_up(sample_survey: Surveyed) -> None:
    counts = dict.fromkeys(NAMES, 0)
    for row in table(sample_survey.out / "quadrats.csv"):
        counts[row["photograph"]] += int(row["count"])
    assert counts == {name: accuracy(sample_survey.out, name).found for name in NAMES}
