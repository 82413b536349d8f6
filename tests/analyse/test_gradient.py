"""A gradient is named with its direction, and told from what is left beyond it."""

from __future__ import annotations

import numpy as np
import pytest
import shapely

from analyse.count_chance import SimulatedTest
from analyse.departures import Departure
from analyse.gradient import gradient_remark
from analyse.trend import fit_trend
from analyse.trends import Trends

NONE = "no departure from random found"
TREND = fit_trend(
    np.random.default_rng(3).random((300, 2)) ** [0.5, 1.0] @ [[1, -1], [1, 1]],
    shapely.Polygon([(0, 0), (1, -1), (2, 0), (1, 1)]),
)
SILENT = [Departure("l_function", None, 4.0, 0.4, 1.0)]
START = "The density rises towards the upper right (p = 0.010, allowing for clumping)"


def trends(p=0.01, *, counts_p=0.4, more=True, direction="the upper right"):
    sides = (counts_p / 2, 1.0) if more else (1.0, counts_p / 2)
    return Trends((TREND,), (p,), SimulatedTest(60.0, *sides, counts_p, 999))


def left(direction, name="l_function", adjusted=0.012):
    return [*SILENT, Departure(name, direction, 3.5, adjusted / 3, adjusted)]


@pytest.mark.parametrize(
    ("verdict", "before", "beyond", "said"),
    [
        (
            "clumped",
            left("clumped"),
            SILENT,
            ", and this gradient explains what the quadrats show.",
        ),
        (
            "clumped",
            left("clumped"),
            left("clumped"),
            "; beyond this gradient there is still clumping, most nearer than 3.5 mm (adjusted"
            " p = 0.012).",
        ),
        (
            "clumped",
            left("clumped"),
            left("even", "vmr_by_side"),
            "; beyond this gradient spots lie evenly, most in quadrats of 3.5 mm (adjusted"
            " p = 0.012).",
        ),
        (
            "evenly spaced",
            left("even"),
            SILENT,
            "; beyond this gradient no departure from random was found.",
        ),
        (
            NONE,
            left("clumped"),
            SILENT,
            ", and this gradient explains what is seen over sides and distances.",
        ),
        (NONE, SILENT, SILENT, ", a slow change that quadrats compared as a whole do not show."),
    ],
)
def test_a_gradient_is_named_and_what_is_left_beyond_it(verdict, before, beyond, said):
    assert gradient_remark(verdict, trends(), before, beyond, "mm") == START + said


def test_what_is_clearest_beyond_the_gradient_is_told():
    both = [*left("clumped", "vmr_by_side", 0.04), *left("even", "nearest_neighbour", 0.01)]
    assert "spots lie evenly" in gradient_remark("clumped", trends(), [], both, "mm")


@pytest.mark.parametrize(("more", "word"), [(True, "still vary more"), (False, "vary less")])
def test_counts_that_still_vary_beyond_the_gradient_are_told(more, word):
    said = gradient_remark("clumped", trends(counts_p=0.02, more=more), [], SILENT, "mm")
    assert said == (
        f"{START}; beyond this gradient the counts {word} than chance would give (p = 0.020)."
    )


def test_without_a_gradient_there_is_nothing_to_tell():
    with pytest.raises(ValueError, match="no gradient"):
        gradient_remark("clumped", trends(0.2), [], [], "mm")


def test_still_is_said_only_of_what_the_verdict_told():
    even = gradient_remark("evenly spaced", trends(), [], left("even"), "mm")
    assert "spots still lie evenly" in even
    new = gradient_remark(NONE, trends(), [], left("clumped"), "mm")
    assert "there is clumping, most nearer than 3.5 mm" in new
