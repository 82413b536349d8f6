"""What a picture says about its doubts: by hand, its limits, and which way the evidence pushes."""

from __future__ import annotations

import math

import numpy as np
import pytest

from detect.picture_doubt import CALIBRATIONS, Evidence, PictureCalibration, evidence_of


def test_evidence_by_hand() -> None:
    # The first four are likely; their median is 2.3, and they lie 0.3, 0.1, 0.1 and 0.3 off it.
    diameter = np.exp([2.0, 2.2, 2.4, 2.6, 9.0, 9.0])
    evidence = evidence_of(diameter, [0.1, 0.2, 0.3, 0.3, 0.31, 0.9])
    spread = (0.8 * math.sqrt(math.pi / 2) + 5 * 0.25) / 9
    assert evidence.spread == pytest.approx(math.log(spread / 0.25))


def test_the_spread_of_many_log_normal_sizes_is_their_deviation() -> None:
    size = np.random.default_rng(4).lognormal(2.0, 0.4, 20_000)
    assert evidence_of(size, np.full(size.size, 0.1)).spread == pytest.approx(
        math.log(0.4 / 0.25), abs=0.02
    )


def test_one_false_spot_of_another_size_says_little() -> None:
    size = np.random.default_rng(5).lognormal(2.0, 0.2, 50)
    doubt = np.full(51, 0.1)
    with_it = evidence_of(np.r_[size, 100.0], doubt).spread
    by_squares = math.log(np.log(np.r_[size, 100.0]).std() / np.log(size).std())
    assert 0 < with_it - evidence_of(size, doubt[:50]).spread < 0.6 * by_squares


def test_an_empty_picture_is_a_usual_one() -> None:
    assert evidence_of([], []) == Evidence(0.0)


def test_one_object_has_no_spread_of_its_own() -> None:
    evidence = evidence_of([10.0], [0.1])
    assert evidence.spread == pytest.approx(math.log(5 / 6))


def test_the_unit_of_the_sizes_has_no_say() -> None:
    rng = np.random.default_rng(3)
    diameter, doubt = rng.uniform(5, 20, 40), rng.random(40)
    first, second = evidence_of(diameter, doubt), evidence_of(0.07 * diameter, doubt)
    assert first.spread == pytest.approx(second.spread)


def test_evidence_moves_the_intercept_and_nothing_else() -> None:
    moved = PictureCalibration(0.5, 1.4, spread=2.0).of(Evidence(0.25))
    assert moved.intercept == pytest.approx(0.5 + 0.5)
    assert moved.slope == 1.4
    assert PictureCalibration().of(Evidence(3.0)).applied([0.2, 0.7]) == pytest.approx([0.2, 0.7])


@pytest.mark.parametrize("kind", CALIBRATIONS)
def test_uneven_sizes_never_make_a_spot_less_doubtful(kind: str) -> None:
    constants = CALIBRATIONS[kind]
    plain = constants.of(Evidence()).applied([0.3])[0]
    assert constants.of(Evidence(spread=0.7)).applied([0.3])[0] >= plain


def test_evidence_is_finite() -> None:
    with pytest.raises(ValueError, match="evidence is not finite"):
        Evidence(math.nan)
