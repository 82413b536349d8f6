"""What the report says about the curves, and where it says nothing."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import shapely

from analyse.curve_words import curve_alt, curves_said
from analyse.findings import analyse_counts, analyse_points
from analyse.pattern import CountTable
from analyse.wording import p_words
from tests.analyse.curves import envelope


@pytest.fixture(scope="module")
def found():
    points = 100 * np.random.default_rng(7).random((120, 2)) ** [0.5, 1.0]
    return analyse_points(points, shapely.box(0, 0, 100, 100), simulations=99)


def test_the_alternative_text_says_where_the_curve_leaves_its_band():
    seen = envelope("l_function", lift=1.5)
    said = curve_alt(seen, "mm").replace("\u00a0", " ")
    beyond = seen.x[seen.outside]
    assert said.startswith(
        "Neighbours within a distance, from 0.5 mm to 20 mm, with the global band at 95 %. The"
        f" curve leaves the band between {beyond[0]:.3g} mm and {beyond[-1]:.3g} mm, most at 4 mm,"
        " where it is 2.50 and the band runs from "
    )
    assert said.endswith(": clumped; p = 0.005.")
    low = curve_alt(envelope("nearest_neighbour", lift=-1.5), "px")
    assert low.endswith(": even; p = 0.005.")
    assert "most at 4 px" in low


def test_a_curve_within_its_band_says_so():
    said = curve_alt(envelope("vmr_by_side"), "mm")
    assert "The curve stays within the band; p = " in said


def test_much_empty_space_means_clumps():
    """Few places near a spot: the curve of empty space lies low where spots are clumped."""
    assert curve_alt(envelope("empty_space", lift=-1.5), "mm").endswith(": clumped; p = 0.005.")
    assert curve_alt(envelope("empty_space", lift=1.5), "mm").endswith(": even; p = 0.005.")


def test_the_table_lists_all_tests_and_what_is_left_beyond_a_gradient(found):
    said = curves_said(found)
    assert said["beyond"]
    rows = {name: cells for name, _, cells in said["rows"]}
    assert len(rows) == 5
    cells = rows["Neighbours within a distance"]
    assert cells == [
        p_words(found.tests.envelopes["l_function"].p),
        p_words(found.holm["l_function"]),
        p_words(found.beyond.envelopes["l_function"].p),
        p_words(found.beyond_holm["l_function"]),
    ]
    assert rows["Empty space"][1] == rows["Empty space"][3] == "\u2013"
    alone = curves_said(replace(found, beyond=None, beyond_holm=None))
    assert not alone["beyond"]
    assert {len(cells) for _, _, cells in alone["rows"]} == {2}


def test_each_chart_has_a_title_a_caption_and_its_p(found):
    drawn = curves_said(found)["drawn"]
    assert [each["name"] for each in drawn] == [
        "vmr_by_side", "l_function", "pair_correlation", "nearest_neighbour",
    ]  # fmt: skip
    for each in drawn:
        assert each["said"].endswith(".")
        assert "p\u00a0" in each["said"]
        assert each["alt"].startswith(each["title"])


def test_counts_alone_and_few_points_have_no_such_part():
    counts = analyse_counts(CountTable("bed", np.arange(12), 3, 4), simulations=99)
    few = analyse_points([[1, 1], [2, 2]], (0, 0, 9, 9), simulations=99)
    assert curves_said(counts) is None
    assert curves_said(few) is None
