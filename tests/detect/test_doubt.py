"""The doubt model: its formula by hand, its features by hand, and which way they push."""

from __future__ import annotations

import math
from dataclasses import fields

import numpy as np
import pytest

from detect.doubt import (
    FEATURES,
    GENERAL,
    MODELS,
    DoubtModel,
    doubt_of,
    features,
    shows_itself,
    usual_step,
)
from detect.regions import Candidates


def table(n: int, **columns: object) -> Candidates:
    """`n` round, free-standing regions of diameter 20, with other columns put in."""
    usual: dict[str, object] = {
        "x": np.arange(n) * 100.0,
        "y": 0.0,
        "area": 100 * np.pi,
        "sxx": 25.0,
        "syy": 25.0,
        "sxy": 0.0,
        "contrast": 12.0,
        "step": 10.0,
        "open": 1.0,
        "slope": 1.0,
        "rough": 0.03,
        "texture": 0.1,
        "neck": 0.0,
        "height": 0.5,
        "frame": 0.0,
        "local": 0.0,
    }
    given = usual | columns
    return Candidates(
        *(np.broadcast_to(np.asarray(given[f.name], float), n) for f in fields(Candidates))
    )


def test_doubt_is_the_logistic_of_a_weighted_sum() -> None:
    model = DoubtModel(0.5, *np.arange(1.0, 8.0))
    row = np.array([[0.1, -0.2, 0.3, -0.4, 0.5, -0.6, 0.7]])
    logit = 0.5 + sum((k + 1) * v for k, v in enumerate(row[0]))
    assert doubt_of(row, model)[0] == pytest.approx(1 / (1 + math.exp(logit)))


def test_features_left_out_count_as_nothing() -> None:
    row = np.full((1, 14), 0.2)
    padded = np.column_stack([row, np.zeros((1, 2))])
    assert doubt_of(row, GENERAL) == pytest.approx(doubt_of(padded, GENERAL))


def test_even_absurd_features_give_a_probability() -> None:
    doubt = doubt_of(np.array([[1e6] * 14, [-1e6] * 14]), GENERAL)
    assert ((doubt >= 0) & (doubt <= 1)).all()


def test_features_by_hand() -> None:
    given = table(
        6,
        area=np.r_[[100 * np.pi] * 5, 400 * np.pi],
        step=np.r_[[10.0] * 5, 5.0],
        sxx=np.r_[[25.0] * 5, 400.0],
        syy=np.r_[[25.0] * 5, 25.0],
    )
    got = features(given, noise=2.0, smallest_px=10, largest_px=40)
    assert got.shape == (6, 14)
    half = math.log(2) + 0.2
    # Diameter 20 is the middle of 10..40; diameter 40 is one half range away.
    assert got[0] == pytest.approx([0, 1, 0, 1, 0.03, 0.1, 0, math.log(5), *[0] * 6])
    large = [math.log(2) / half, 1, math.log(2) ** 2, 1, 0.03, 0.1, math.log(4), math.log(2.5)]
    assert got[5] == pytest.approx([*large, 0, 0, 0, 0, 0.03 * large[0], 0])
    assert list(FEATURES[:14]) == [
        *("size", "open", "faint", "slope", "rough", "texture", "long", "clear", "neck"),
        *("cut", "frame", "local", "misfit", "freed"),
    ]


def test_what_the_frame_cuts_off_is_excused_for_half_its_smallness() -> None:
    area = np.pi / 4 * np.r_[10.0, 10.0, 40.0] ** 2
    given = table(3, area=area, frame=[0.0, 0.3, 0.3], height=[0.5, 0.2, 0.9], local=[1, 0, 0])
    got = features(given, noise=1.0, smallest_px=10, largest_px=40)
    far = math.log(2) / (math.log(2) + 0.2)
    assert got[:, 0] == pytest.approx([far, far / 2, far])
    assert got[:, 9:12] == pytest.approx(np.array([[0, 0, 1], [0.3, 0.3, 0], [0.4, 0.3, 0]]))
    assert got[:, 12] == pytest.approx(0.03 * got[:, 0])
    assert got[:, 13] == pytest.approx([1, 0, 0])


def test_what_the_frame_cuts_off_must_show_an_outline() -> None:
    given = table(4, frame=[0.0, 0.3, 0.3, 0.04], open=[0.0, 0.39, 0.41, 0.0])
    assert shows_itself(given).tolist() == [True, False, True, True]


def test_the_usual_step_is_that_of_well_shaped_regions() -> None:
    step = np.r_[[10.0] * 6, [1.0] * 20]
    opened = np.r_[[1.0] * 6, [0.2] * 20]
    assert usual_step(table(26, step=step, open=opened)) == 10.0
    assert usual_step(table(4, step=[-1.0, 2.0, 4.0, 6.0])) == 4.0
    assert usual_step(table(2, step=-1.0)) == 1.0
    assert usual_step(table(0)) == 1.0


@pytest.mark.parametrize("kind", MODELS)
@pytest.mark.parametrize(
    ("column", "better", "worse"),
    [("rough", 0.02, 0.15), ("neck", 0.0, 0.9), ("area", 100 * np.pi, 6.0 * np.pi)],
)
def test_ragged_joined_and_oddly_sized_regions_are_more_doubtful(
    kind: str, column: str, better: float, worse: float
) -> None:
    given = table(7, **{column: np.r_[[better] * 6, worse]})
    measured = features(given, noise=1.0, smallest_px=12, largest_px=32)
    doubt = doubt_of(measured, MODELS[kind])
    assert doubt[6] > doubt[0]


def test_weights_come_in_the_order_of_the_features() -> None:
    weights = {name: float(k) for k, name in enumerate(FEATURES)}
    assert DoubtModel(intercept=9.0, **weights).weights.tolist() == list(map(float, range(19)))
