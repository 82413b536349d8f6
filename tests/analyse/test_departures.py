"""What the tests over all sides and distances add to the verdict, in words."""

from __future__ import annotations

import itertools

import pytest

from analyse.departures import (
    FAMILY,
    Departure,
    against,
    clearest,
    departure_words,
    departures_of,
    disagreement,
    judged_together,
    length_words,
    within_a_spot,
)
from tests.analyse.curves import three

NONE = "no departure from random found"


def departure(direction, *, name="l_function", at=1.2, adjusted=0.012):
    return Departure(name, direction, at, adjusted / 3, adjusted)


def test_the_family_is_the_three_tests_and_leaves_the_others_out():
    envelopes = three()
    family = judged_together(envelopes)
    assert family.names == FAMILY == ("vmr_by_side", "l_function", "nearest_neighbour")
    assert family.p == tuple(envelopes[name].p for name in FAMILY)
    without = {name: envelopes[name] for name in ("l_function", "pair_correlation")}
    assert judged_together(without).names == ("l_function",)


@pytest.mark.parametrize(("lift", "direction"), [(1.5, "clumped"), (-1.5, "even"), (0.0, None)])
def test_departures_tell_direction_and_place_of_what_leaves_the_band(lift, direction):
    envelopes = three(lift=lift)
    found = departures_of(envelopes, judged_together(envelopes))
    assert [each.name for each in found] == list(FAMILY)
    assert {each.direction for each in found} == {direction}
    for each in found:
        assert each.p == envelopes[each.name].p
        assert each.at == envelopes[each.name].at
        assert (each.adjusted <= 0.05) == (direction is not None)


def test_a_curve_that_leaves_its_band_departs_only_if_the_adjusted_p_allows():
    """199 simulations: p = 0.005 alone is 0.015 of three; at 0.02 it is 0.06."""
    envelopes = three(lift=1.5)
    family = judged_together(envelopes)
    assert family.adjusted == pytest.approx((0.015, 0.015, 0.015))
    weak = type(family)(family.names, (0.02,) * 3, (0.06,) * 3)
    assert {each.direction for each in departures_of(envelopes, weak)} == {None}


def test_the_clearest_of_what_the_verdict_does_not_tell_is_taken():
    far = departure("clumped", name="vmr_by_side", at=30, adjusted=0.03)
    near = departure("even")
    assert against(NONE, [far, near]) is near
    assert against("evenly spaced", [far, near]) is far
    assert against("clumped", [far]) is None
    assert against("clumped", [departure(None)]) is None


def test_of_equally_clear_departures_one_over_distances_is_told():
    sides, near = departure("even", name="vmr_by_side"), departure("even", name="nearest_neighbour")
    assert clearest([sides, near, departure("even")]).name == "l_function"
    assert clearest([sides, near]) is near
    assert clearest([departure("even", name="vmr_by_side", adjusted=0.003), near]).at == sides.at


@pytest.mark.parametrize(
    ("verdict", "one", "said"),
    [
        (
            NONE,
            departure("even"),
            "Nearer than 1.2 mm there are fewer neighbours than chance would give (adjusted"
            " p = 0.012): spots keep a distance that quadrats of 8 mm cannot see.",
        ),
        (
            NONE,
            departure("clumped"),
            "Nearer than 1.2 mm there are more neighbours than chance would give (adjusted"
            " p = 0.012): quadrats of 8 mm are too wide to show it.",
        ),
        (
            NONE,
            departure("clumped", name="vmr_by_side", at=24.0),
            "In quadrats of 24 mm the counts vary more than chance would give (adjusted"
            " p = 0.012): quadrats of 8 mm are too small to show it.",
        ),
        (
            NONE,
            departure("clumped", name="vmr_by_side", at=8.4),
            "In quadrats of 8.4 mm the counts vary more than chance would give (adjusted"
            " p = 0.012): quadrats of 8 mm, nearly as wide, show it less clearly.",
        ),
        (
            "clumped",
            departure("even", name="nearest_neighbour"),
            "Fewer spots have a neighbour nearer than 1.2 mm than chance would give (adjusted"
            " p = 0.012): within the clumps spots keep a distance from each other.",
        ),
        (
            "clumped",
            departure("even", at=30.0),
            "Nearer than 30 mm there are fewer neighbours than chance would give (adjusted"
            " p = 0.012): the clumps themselves are spread out.",
        ),
        (
            "evenly spaced",
            departure("clumped", name="nearest_neighbour"),
            "More spots have a neighbour nearer than 1.2 mm than chance would give (adjusted"
            " p = 0.012): within the even spread some stand close together.",
        ),
    ],
)
def test_a_disagreement_says_where_in_which_direction_and_why(verdict, one, said):
    assert disagreement(verdict, [departure(None), one], side=8.0, unit="mm") == said


def test_too_few_neighbours_within_the_width_of_a_spot_are_told_as_touching():
    said = disagreement(NONE, [departure("even")], side=8.0, unit="mm", width=1.0)
    assert said == (
        "Nearer than 1.2 mm there are fewer neighbours than chance would give (adjusted p = 0.012),"
        " but a spot is usually 1 mm wide: touching ones are counted as one, or cannot lie nearer."
    )


@pytest.mark.parametrize(
    ("one", "width", "touching"),
    [
        (departure("even"), 0.97, True),
        (departure("even"), 0.95, False),
        (departure("even", name="nearest_neighbour"), 5.0, True),
        (departure("even", name="vmr_by_side"), 5.0, False),
        (departure("clumped"), 5.0, False),
        (departure(None), 5.0, False),
        (departure("even"), float("nan"), False),
    ],
)
def test_touching_is_a_lack_of_neighbours_up_to_a_quarter_beyond_a_width(one, width, touching):
    assert within_a_spot(one, width) is touching


def test_quadrats_that_are_no_squares_are_not_given_a_side():
    said = disagreement(NONE, [departure("even")], side=None, unit="mm")
    assert said.endswith(": these quadrats do not show it.")


def test_agreement_and_silence_need_no_sentence():
    even, none = departure("even"), departure(None)
    for verdict, found in (
        ("evenly spaced", [even, none]),
        (NONE, [none, none]),
        ("too few to tell", [even]),
        ("clumped", []),
    ):
        assert disagreement(verdict, found, side=8.0, unit="mm") == ""


def test_a_verdict_that_the_other_tests_do_not_share_says_so():
    found = [departure(None, adjusted=0.4), departure(None, adjusted=0.12)]
    for verdict in ("clumped", "evenly spaced"):
        said = disagreement(verdict, found, side=8.0, unit="mm")
        assert said.startswith("The tests over all sides and distances do not show it (smallest")
        assert "adjusted p = 0.12" in said


def test_every_sentence_is_one_and_claims_no_randomness():
    for name, direction, verdict, at in itertools.product(
        FAMILY, ("clumped", "even"), ("clumped", "evenly spaced", NONE), (1.0, 8.1, 30.0)
    ):
        said = disagreement(verdict, [departure(direction, name=name, at=at)], side=8.0, unit="px")
        assert said.count(". ") == 0
        assert "random" not in said
        assert (said == "") == (
            (verdict, direction) in {("clumped", "clumped"), ("evenly spaced", "even")}
        )


def test_a_test_that_does_not_depart_has_no_words():
    with pytest.raises(ValueError, match="no departure to be told"):
        departure_words(departure(None), "mm")


def test_lengths_have_three_figures():
    assert length_words(0.123456, "mm") == "0.123 mm"
    assert length_words(12.0, "mm") == "12 mm"
