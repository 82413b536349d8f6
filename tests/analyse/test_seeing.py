"""Through whose eyes counts are judged, what is said of it, and what reaches the tables."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import shapely

from analyse import tables
from analyse.count_chance import SimulatedTest
from analyse.eyes import DEFAULTS, Eyes
from analyse.findings import analyse_pattern
from analyse.nulls import CompleteRandomness
from analyse.pattern import Pattern, pattern_from_sheet
from analyse.plain_rows import EYES_COLUMNS
from analyse.quick import quick_test
from analyse.seeing import Seeing, avoids_overlap, eyes_sentence, rests_words
from analyse.seen_randomness import SeenRandomness
from tests.analyse.finished import sheet_of
from tests.patterns import apart, thomas

DISH = shapely.Point(0, 0).buffer(43)
CHANCE: dict[str, int] = {"simulations": 99, "seed": 3}
P = {"even": SimulatedTest(1.0, 1.0, 0.01, 0.02, 99)}
WHOLE, FAIR = Eyes(0.6, 0.08, math.nan, "default"), SimulatedTest(1.0, 0.5, 0.5, 1.0, 99)


def dish(points: Any, radius: float = 1.0, **known: Any) -> Pattern:
    xy = np.asarray(points, dtype=float)
    seen = Pattern.of(xy, DISH, name="dish.jpg", radius=np.full(len(xy), radius))
    return replace(seen, **({"sought": "colonies", "reviewed": False} | known))


@pytest.fixture(scope="module")
def merged() -> Any:
    """A random dish as a detector sees it, which plain chance calls even."""
    null = SeenRandomness(DISH, [1.0], Eyes(0.8, 0.0, 1.0, "planted"))
    for k in range(20):
        points = null.draw(250, np.random.default_rng(k))
        pattern = dish(points, sought="lesions")
        found = analyse_pattern(pattern, **CHANCE)
        if found.plain is not None and found.plain.verdict == "evenly spaced":
            return found
    raise AssertionError("none of 20 dishes is called even by the plain test")


def rows_of(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text)))


def test_what_the_plain_test_calls_even_is_not_called_so(merged: Any) -> None:
    assert merged.verdict == "no departure from random found"
    assert (
        "The plain test would call this even (p = 0.02"
        in merged.sentence
    )  # fmt: skip
    assert "); a detector that sees touching spots as one makes random look so." in merged.sentence
    assert merged.rests_on.endswith(
        "given the total, against random spots of the sizes seen of which two nearer than 0.82"
        " (standard error 0.11) of their radii's sum are seen as one: the usual one, not measured in this"
        " photograph"
    )
    assert "usual_blind" in merged.flags
    assert merged.flag_sentences[merged.flags.index("usual_blind")] == (
        "How near two may lie to be seen as one was not measured in this photograph: the usual 0.82 of"
        " their radii's sum was taken; --planted measures it."
    )


def test_both_nulls_stand_in_the_tables(merged: Any) -> None:
    (row,) = rows_of(tables.summary_csv([merged]))
    assert [row[name] for name in EYES_COLUMNS[1:]] == ["evenly spaced", "0.82", "0.11", "default"]
    assert float(row["p_simulated_plain"]) <= 0.05 < float(row["p_simulated"])
    assert row["null"] == "complete spatial randomness, as the detector sees it"
    tests = {one["statistic"]: one for one in rows_of(tables.tests_csv([merged]))}
    for name in ("chi2_simulated{}_even", "l_function{}", "clark_evans_simulated{}_two_sided",
                 "nearest_neighbour{}", "l_function{}_adjusted", "hopkins_skellam_simulated{}_even"):  # fmt: skip
        assert {name.format(""), name.format("_plain")} <= set(tests)
    assert "are seen as one: the usual one" in tests["chi2_simulated_even"]["notes"]
    assert "for reading, not for the verdict" in tests["chi2_simulated_plain_even"]["notes"]
    assert "null: complete spatial randomness;" in tests["l_function_plain"]["notes"]
    assert float(tests["clark_evans_simulated_plain_even"]["p"]) < float(
        tests["clark_evans_simulated_even"]["p"]
    )


def test_the_page_of_the_reviewer_says_the_same(merged: Any) -> None:
    quick = quick_test(merged.pattern, **CHANCE)
    assert quick.verdict == merged.verdict
    assert quick.simulated == merged.simulated
    fewer = quick_test(merged.pattern, seed=3, simulations=999, points_at_most=1000)
    assert fewer.simulated.simulations == 99


def test_the_eyes_of_a_sheet_are_those_of_what_was_looked_for() -> None:
    """The kind stands among the detector's settings; read elsewhere, no sheet had eyes."""
    sheet = sheet_of(CompleteRandomness(DISH).draw(60, np.random.default_rng(2)) * 3 + 160)
    for settings, sought in (({"detector": {"kind": "lesions"}}, "lesions"), ({}, "spots")):
        pattern = pattern_from_sheet(replace(sheet, settings=settings))
        assert pattern.sought == sought
        eyes = Eyes.of(pattern)
        assert eyes is not None
        assert (eyes.blind, eyes.source) == (DEFAULTS[sought][0], "default")


def test_workers_do_not_change_it(merged: Any) -> None:
    again = analyse_pattern(merged.pattern, workers=2, **CHANCE)
    assert tables.tests_csv([again]) == tables.tests_csv([merged])


def test_even_and_clumped_dishes_are_still_told() -> None:
    even = dish(apart(DISH, 150, 4.5, np.random.default_rng(1)))
    assert analyse_pattern(even, **CHANCE).verdict == "evenly spaced"
    clumped = dish(thomas(DISH, 150, 6.0, 3.0, np.random.default_rng(1)))
    assert analyse_pattern(clumped, **CHANCE).verdict == "clumped"


def test_spots_that_cannot_overlap_are_spaced_by_contact() -> None:
    null = SeenRandomness(DISH, [2.0], Eyes(1.0, 0.0, math.nan, "contact"))
    points = null.draw(160, np.random.default_rng(2))
    table = Pattern.of(points, DISH, name="seeds.csv", radius=np.full(160, 2.0))
    assert avoids_overlap(table, 0.0)
    found = analyse_pattern(table, **CHANCE)
    assert found.plain is not None
    assert (found.verdict, found.plain.verdict) == (
        "no departure from random found",
        "evenly spaced",
    )
    assert "this is a minimum spacing by contact, not even spacing" in found.sentence
    assert "cannot lie nearer than 0.90 of their radii's sum" in found.rests_on
    assert "contact" in found.flags
    (row,) = rows_of(tables.summary_csv([found]))
    assert row["blind_source"] == "contact"


def test_spots_that_do_overlap_are_not_spaced_by_contact() -> None:
    points = CompleteRandomness(DISH).draw(300, np.random.default_rng(2))
    assert not avoids_overlap(dish(points), 0.0)
    assert not avoids_overlap(Pattern.of(points, DISH), 0.0)  # no sizes
    assert not avoids_overlap(dish(points), 1.0)  # no overlap could be seen


def test_tables_without_sizes_are_judged_by_plain_chance() -> None:
    points = CompleteRandomness(DISH).draw(60, np.random.default_rng(2))
    found = analyse_pattern(Pattern.of(points, DISH, name="points.csv"), **CHANCE)
    assert (found.eyes, found.plain) == (None, None)
    assert found.rests_on.endswith("given the total")
    (row,) = rows_of(tables.summary_csv([found]))
    assert row["p_simulated_plain"] == row["p_simulated"]
    assert row["verdict_plain"] == row["verdict"]
    assert [row[name] for name in EYES_COLUMNS[2:]] == ["", "", ""]


def test_where_so_many_can_hardly_be_told_apart_the_plain_test_stands_with_a_flag() -> None:
    side = np.arange(-40, 41, 3.0)
    lattice = np.stack(np.meshgrid(side, side), axis=-1).reshape(-1, 2)
    found = analyse_pattern(
        dish(lattice[np.hypot(*lattice.T) < 42], radius=2.4, sought="seedlings"), **CHANCE
    )
    assert found.verdict == "evenly spaced"
    assert found.eyes is None
    assert "crowded_null" in found.flags
    assert "So many spots of these sizes could hardly be told apart" in found.sentence


def test_a_gradient_is_judged_with_eyes_too() -> None:
    rng = np.random.default_rng(4)
    points = CompleteRandomness(DISH).draw(900, rng)
    points = points[rng.random(900) < (points[:, 0] + 43) / 86][:250]
    found = analyse_pattern(dish(points), **CHANCE)
    assert found.beyond is not None
    assert found.beyond.null == "plane trend, as the detector sees it"


@pytest.mark.parametrize(
    ("eyes", "verdict", "plain", "said"),
    [
        (WHOLE, "clumped", "clumped", ""),
        (None, "evenly spaced", "evenly spaced", ""),
        (
            replace(WHOLE, source="person"),
            "no departure from random found",
            "evenly spaced",
            "The plain test would call this even (p = 0.020); an eye that sees touching spots as one"
            " makes random look so.",
        ),
        (
            WHOLE,
            "clumped",
            "no departure from random found",
            "The plain test would not show it (p = 0.020); seen as one where they touch, spots look less"
            " clumped than they are.",
        ),
        (
            WHOLE,
            "no departure from random found",
            "clumped",
            "The plain test would call this clumped (p = 0.020), but only just: seen as one where they"
            " touch, random spots give it as well.",
        ),
    ],
)
def test_sentences(eyes: Any, verdict: Any, plain: Any, said: str) -> None:
    assert eyes_sentence(verdict, plain, Seeing(eyes, FAIR, P["even"])) == said


def test_what_a_verdict_rests_on_in_words() -> None:
    assert rests_words(None) == ""
    assert rests_words(replace(WHOLE, source="person")).endswith(
        "0.60 (standard error 0.08) of their radii's sum are seen as one: assumed of the person who"
        " checked it"
    )
