"""What a picture says about its doubts: by hand, its limits, and which way the evidence pushes."""

from __future__ import annotations

import math

import numpy as np
import pytest

from detect.picture_doubt import CALIBRATIONS, Evidence, PictureCalibration, evidence_of


def test_evidence_by_hand() -> None:
    # Likely: 0.1, 0.2, 0.3. In between: 0.4 and 0.6. Sizes: of the first four, as 0.45 bounds them.
    diameter = np.exp([2.0, 2.2, 2.4, 2.6, 9.0, 9.0])
    evidence = evidence_of(diameter, [0.1, 0.2, 0.3, 0.4, 0.6, 0.61])
    variance = (0.09 + 0.01 + 0.01 + 0.09 + 5 * 0.25**2) / 9
    assert evidence.spread == pytest.approx(math.log(math.sqrt(variance) / 0.25))
    assert evidence.wavering == pytest.approx(math.log(3 / 4))


def test_an_empty_picture_is_a_usual_one() -> None:
    assert evidence_of([], []) == Evidence(0.0, 0.0)


def test_one_object_has_no_spread_of_its_own() -> None:
    evidence = evidence_of([10.0], [0.1])
    assert evidence.spread == pytest.approx(0.5 * math.log(5 / 6))


def test_the_unit_of_the_sizes_has_no_say() -> None:
    rng = np.random.default_rng(3)
    diameter, doubt = rng.uniform(5, 20, 40), rng.random(40)
    first, second = evidence_of(diameter, doubt), evidence_of(0.07 * diameter, doubt)
    assert (first.spread, first.wavering) == pytest.approx((second.spread, second.wavering))


def test_evidence_moves_the_intercept_and_nothing_else() -> None:
    moved = PictureCalibration(0.5, 1.4, spread=2.0, wavering=0.3).of(Evidence(0.25, -1.0))
    assert moved.intercept == pytest.approx(0.5 + 0.5 - 0.3)
    assert moved.slope == 1.4
    assert PictureCalibration().of(Evidence(3.0, 3.0)).applied([0.2, 0.7]) == pytest.approx(
        [0.2, 0.7]
    )


@pytest.mark.parametrize("kind", CALIBRATIONS)
def test_uneven_sizes_and_wavering_never_make_a_spot_less_doubtful(kind: str) -> None:
    constants = CALIBRATIONS[kind]
    plain = constants.of(Evidence()).applied([0.3])[0]
    assert constants.of(Evidence(spread=0.7)).applied([0.3])[0] >= plain
    assert constants.of(Evidence(wavering=1.0)).applied([0.3])[0] >= plain


def test_evidence_is_finite() -> None:
    with pytest.raises(ValueError, match="evidence is not finite"):
        Evidence(math.nan, 0.0)
