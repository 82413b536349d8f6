"""Both sides of the ground are looked at when the picture is unclear; noise is no object."""

from __future__ import annotations

import numpy as np
import pytest

from detect.area import frame_area
from detect.doubt import COLONIES, GENERAL, MODELS
from detect.judge import (
    LEAST_CONTRAST,
    Judgement,
    judge_by,
    judge_side,
    judged,
    judged_together,
)
from detect.view import View, view_of
from detect.wanted import DetectOptions, Kind
from tests.scenes import SpotScene, scattered


def seen(scene: SpotScene) -> View:
    photograph = scene.draw()
    return view_of(photograph, frame_area(photograph.width, photograph.height), shrink=1.0)


def side(view: View, *, flipped: bool, kind: Kind = "spots") -> Judgement:
    options = DetectOptions(kind=kind)
    return judge_side(view, 10.0, 24.0, options, MODELS[kind], flipped=flipped)


DARK_AND_PALE = ((0.33, 0.28, 0.2), (0.55, 0.5, 0.43))
CROWDED = scattered(75, radius=(9, 12), gap=1.5, seed=4)


@pytest.mark.parametrize("colour", [(0.33, 0.28, 0.2), (0.9, 0.87, 0.8)])
def test_the_side_of_the_objects_is_chosen_even_where_they_crowd(
    colour: tuple[float, float, float],
) -> None:
    view = seen(SpotScene(discs=CROWDED, colour=colour))
    chosen = judged(view, 16.0, 26.0, DetectOptions(), GENERAL)
    assert (chosen.contrast.direction[0] < 0) == (colour[0] < 0.6)


def test_a_clear_picture_is_looked_at_once() -> None:
    view = seen(SpotScene(discs=scattered(20, radius=(6, 10))))
    first, chosen = side(view, flipped=False), judged(view, 10, 24, DetectOptions(), GENERAL)
    assert first.contrast.sureness > 0.6
    assert first.contrast.direction == pytest.approx(chosen.contrast.direction)
    assert len(first.candidates) == len(chosen.candidates)


def test_no_candidate_is_fainter_than_noise() -> None:
    view = seen(SpotScene(discs=scattered(20, radius=(6, 10)), noise=0.03))
    for flipped in (False, True):
        judgement = side(view, flipped=flipped)
        floor = LEAST_CONTRAST * judgement.contrast.noise
        assert (judgement.candidates.contrast >= floor).all()
    assert len(side(view, flipped=False).candidates) > 50


@pytest.mark.parametrize("kind", MODELS)
def test_columns_go_together(kind: Kind) -> None:
    discs = scattered(20, radius=(6, 10))
    view = seen(SpotScene(discs=discs, ground=(0.42, 0.33, 0.25), colour=(0.3, 0.5, 0.16)))
    judgement = side(view, flipped=False, kind=kind)
    n = len(judgement.candidates)
    assert n > 20
    assert judgement.measured.shape == (n, 19 if kind == "seedlings" else 14)
    assert judgement.doubt.shape == (n,)
    assert ((judgement.doubt >= 0) & (judgement.doubt <= 1)).all()


def test_the_model_given_is_the_model_used() -> None:
    view = seen(SpotScene(discs=scattered(20, radius=(6, 10))))
    general = judged(view, 10, 24, DetectOptions(), GENERAL)
    colonies = judged(view, 10, 24, DetectOptions(), COLONIES)
    assert np.abs(general.doubt - colonies.doubt).max() > 0.05


def test_a_known_direction_has_but_one_side() -> None:
    discs = scattered(20, radius=(6, 10))
    view = seen(SpotScene(discs=discs))
    rows, columns = np.rint(discs[:, [1, 0]]).astype(int).T
    for side_of_lightness in (-1.0, 1.0):
        known = np.array([side_of_lightness, 0.0, 0.0])
        judgement = judged(view, 10, 24, DetectOptions(), GENERAL, direction=known)
        assert judgement.contrast.direction.tolist() == known.tolist()
        assert (np.sign(judgement.contrast.map[rows, columns]) == -side_of_lightness).all()
        assert ((judgement.doubt < 0.3).sum() >= 20) == (side_of_lightness < 0)


@pytest.mark.parametrize("kind", MODELS)
def test_what_was_learned_of_a_picture_judges_it_again_alike(kind: Kind) -> None:
    discs = scattered(20, radius=(6, 10))
    view = seen(SpotScene(discs=discs, ground=(0.42, 0.33, 0.25), colour=(0.3, 0.5, 0.16)))
    options, model = DetectOptions(kind=kind), MODELS[kind]
    (first,), yardstick = judged_together([view], 10, 24, options, model)
    again = judge_by(view, 10, 24, options, model, yardstick)
    assert len(first.candidates) > 20
    assert np.array_equal(first.candidates.x, again.candidates.x)
    assert np.array_equal(first.doubt, again.doubt)


def test_parts_of_a_picture_are_judged_with_one_measure() -> None:
    dark, pale = (SpotScene(discs=scattered(20, radius=(6, 10)), colour=c) for c in DARK_AND_PALE)
    views = [seen(dark), seen(pale)]
    (first, second), yardstick = judged_together(views, 10, 24, DetectOptions(), GENERAL)
    assert first.contrast.threshold == second.contrast.threshold == yardstick.constants.threshold
    alone = judged(views[1], 10, 24, DetectOptions(), GENERAL)
    assert second.contrast.threshold > 1.2 * alone.contrast.threshold
    apart = judge_by(views[1], 10, 24, DetectOptions(), GENERAL, yardstick)
    assert np.array_equal(second.doubt, apart.doubt)
