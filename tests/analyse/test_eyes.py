"""Whose eyes saw a pattern, what a plain test makes of merged pairs, and what the null with eyes does."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import shapely

from analyse.dispersion import clipped_dispersion
from analyse.eyes import DEFAULTS, PERSON, Eyes, expected_pairs, near_pairs, usual_sums
from analyse.nulls import CompleteRandomness
from analyse.pattern import Pattern
from analyse.quadrats import GridOptions, count_in_quadrats, lay_grid
from analyse.seen_counts import seen_p
from analyse.seen_randomness import SeenRandomness, linked, merged_middles
from detect.lengths import Length
from detect.planted import BlindDistance, Planted, Recall

DISH = shapely.Point(0, 0).buffer(42.5)


def pattern(points: Any, radius: float = 0.85, **known: Any) -> Pattern:
    """Points on a dish as a detector leaves them."""
    xy = np.asarray(points, dtype=float)
    seen = Pattern.of(xy, DISH, name="dish.jpg", radius=np.full(len(xy), radius))
    return replace(seen, **({"sought": "colonies", "reviewed": False} | known))


def scattered(n: int, seed: int = 1) -> np.ndarray:
    return CompleteRandomness(DISH).draw(n, np.random.default_rng(seed))


PLANTED = Planted(
    8, 1, 40, 38, Recall(0.95, 0.9, 0.99, 0.02), pairs=40, pairs_as_two=20, blind=BlindDistance(0.7, 0.05)
)  # fmt: skip


def test_planted_objects_come_first_then_the_usual_distance_of_what_was_looked_for() -> None:
    assert Eyes.of(pattern(scattered(50), planted=PLANTED)) == Eyes(0.7, 0.05, 0.95, "planted")
    for sought, usual in DEFAULTS.items():
        eyes = Eyes.of(pattern(scattered(50), sought=sought))
        assert eyes is not None
        assert (eyes.blind, eyes.blind_se, eyes.source) == (*usual, "default")
        assert math.isnan(eyes.recall)
    without = replace(PLANTED, blind=None)
    eyes = Eyes.of(pattern(scattered(50), planted=without))
    assert eyes == Eyes(*DEFAULTS["colonies"], 0.95, "default")


def test_tables_have_no_eyes() -> None:
    assert Eyes.of(Pattern.of(scattered(50), DISH)) is None
    assert Eyes.of(Pattern.of(scattered(50), DISH, radius=np.ones(50))) is None
    assert Eyes.of(pattern(np.empty((0, 2)))) is None


def test_a_person_is_believed_only_where_near_ones_were_told_apart() -> None:
    points = scattered(400)
    checked = {"reviewed": True}
    split = Eyes.of(pattern(points, **checked))
    assert split is not None
    assert (split.blind, split.source) == (PERSON[0], "person")
    seen = SeenRandomness(DISH, [0.85], Eyes(0.6, 0, 1, "planted")).draw(
        400, np.random.default_rng(1)
    )
    merged = Eyes.of(pattern(seen, **checked))
    assert merged is not None
    assert merged.source == "default"


def test_pairs_expected_at_random_against_pairs_drawn() -> None:
    drawn = [near_pairs(scattered(200, k), np.full(200, 0.85), 0.9) for k in range(100)]
    expected = expected_pairs(pattern(scattered(200)), 0.9)
    assert np.mean(drawn) == pytest.approx(expected, rel=0.12)
    assert near_pairs(np.zeros((2, 2)), np.array([1.0, np.nan]), 0.9) == 0


def test_usual_sums_by_plain_definition() -> None:
    radii = np.array([0.5, 1.0, 3.0, 1.0])
    both, smaller = usual_sums(radii)
    assert both == pytest.approx(np.add.outer(radii, radii).mean())
    assert smaller == pytest.approx(np.minimum.outer(radii, radii).mean())


@pytest.mark.parametrize(
    ("values", "said"),
    [
        ((-0.1, 0.1, 1.0, "planted"), "blind must be 0 or more, not -0.1"),
        ((0.5, math.nan, 1.0, "planted"), "blind_se must be 0 or more, not nan"),
        ((0.5, 0.1, 1.5, "planted"), "a recall of 1.5"),
        ((0.5, 0.1, 1.0, "guessed"), "source must be one of"),
    ],
)
def test_impossible_eyes_are_refused(values: Any, said: str) -> None:
    with pytest.raises(ValueError, match=said):
        Eyes(*values)


def merged(n: int, apart: float, rng: np.random.Generator) -> np.ndarray:
    """n random colonies on a dish of 85 mm, those nearer than some millimetres seen as one."""
    xy, radii = CompleteRandomness(DISH).draw(n, rng), np.full(n, apart / 2)
    return merged_middles(xy, radii, linked(xy, radii, 1.0, (apart, apart / 2)))[0]


@pytest.mark.parametrize(
    ("n", "apart", "share"), [(200, 2.0, 48.0), (400, 1.5, 91.0), (100, 2.0, 7.5)]
)
def test_a_plain_test_calls_merged_random_dishes_even(n: int, apart: float, share: float) -> None:
    """Shares of random dishes below the lower 2.5 % of the chi-square, quadrats of mean 2.

    The three figures were simulated outside of this program, with a program of its own.
    """
    rng, called = np.random.default_rng(5), []
    for _ in range(120):
        points = merged(n, apart, rng)
        side = Length(math.sqrt(2 * DISH.area / len(points)), "mm")
        grid = lay_grid(DISH, len(points), GridOptions(side=side))
        counts = count_in_quadrats(points, grid)
        called.append(clipped_dispersion(counts, grid.area).p_even <= 0.025)
    error = 100 * math.sqrt(share / 100 * (1 - share / 100) / 120)
    assert 100 * np.mean(called) == pytest.approx(share, abs=3 * error + 3)


def test_the_null_with_eyes_keeps_its_level_where_the_plain_one_does_not() -> None:
    """40 dishes of 150 colonies of which pairs nearer than 2 mm are seen as one, 119 simulations."""
    even = {"plain": 0, "eyes": 0}
    for k in range(40):
        rng = np.random.default_rng([8, k])
        points = merged(230, 2.0, rng)[:150]
        grid = lay_grid(DISH, 150)
        counts = count_in_quadrats(points, grid)
        nulls = {
            "plain": CompleteRandomness(DISH),
            "eyes": SeenRandomness(DISH, [1.0], Eyes(1.0, 0.0, 1.0, "planted")),
        }
        for name, null in nulls.items():
            even[name] += seen_p(counts, grid, null, simulations=119, seed=k).p_even <= 0.05
    assert even["plain"] >= 12
    assert even["eyes"] <= 6  # 2 expected; 6 or fewer in 99 % of all cases
