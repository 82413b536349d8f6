"""Contrast with the local ground: drawn truth, closed forms, and another library's threshold."""

from __future__ import annotations

from typing import Any, get_args

import cv2
import numpy as np
import pytest
from skimage.filters import threshold_otsu

from detect.contrast import Colour, Contrast, Sought, contrast_map, contrast_maps, to_lab
from detect.ground import local_mean
from detect.judge import _least_contrast
from detect.threshold import grain_of, noise_and_threshold, otsu
from tests.scenes import SpotScene, scattered

DISCS = scattered(30, radius=(6, 10))


def mapped(scene: SpotScene, colour: Colour = "auto", **choices: object) -> Contrast:
    lab = to_lab(scene.draw().pixels())
    inside = np.ones(lab.shape[:2], dtype=bool)
    return contrast_map(lab, inside, smallest_px=10, largest_px=22, colour=colour, **choices)


def within(scene: SpotScene, factor: float) -> np.ndarray:
    y, x = np.mgrid[: scene.height, : scene.width]
    away = np.hypot(x[..., None] - DISCS[:, 0], y[..., None] - DISCS[:, 1]) / DISCS[:, 2]
    return np.asarray(away.min(axis=2) < factor)


@pytest.mark.parametrize("colour", [(0.33, 0.28, 0.2), (0.9, 0.87, 0.8), (0.62, 0.3, 0.3)])
@pytest.mark.parametrize("light", [0.0, 0.4])
def test_objects_stand_out_and_the_ground_is_level(
    colour: tuple[float, float, float], light: float
) -> None:
    scene = SpotScene(discs=DISCS, colour=colour, light=light, texture=0.0)
    contrast = mapped(scene)
    ground = contrast.map[~within(scene, 1.4)]
    left, right = ground[: ground.size // 2], ground[ground.size // 2 :]
    assert contrast.map[within(scene, 0.7)].min() > contrast.threshold
    assert np.percentile(ground, 99.5) < contrast.threshold
    assert abs(np.median(ground)) < 0.35 * contrast.noise
    assert abs(np.median(left) - np.median(right)) < 0.3 * contrast.noise
    assert contrast.noise == pytest.approx(ground.std(), rel=0.25)


def test_a_map_cannot_be_changed() -> None:
    contrast = mapped(SpotScene(discs=DISCS))
    with pytest.raises(ValueError, match="read-only"):
        contrast.map[0, 0] = 1
    with pytest.raises(ValueError, match="read-only"):
        contrast.direction[0] = 1


def test_outside_the_area_there_is_no_contrast_and_no_say() -> None:
    scene = SpotScene(discs=DISCS)
    lab = to_lab(scene.draw().pixels())
    inside = np.zeros(lab.shape[:2], dtype=bool)
    inside[40:280, 50:370] = True
    first = contrast_map(lab, inside, smallest_px=10, largest_px=22)
    lab[~inside] = (100.0, 60.0, -60.0)
    second = contrast_map(lab, inside, smallest_px=10, largest_px=22)
    assert (first.map[~inside] == 0).all()
    deep = cv2.erode(inside.astype(np.uint8), np.ones((25, 25), np.uint8)) > 0
    assert np.abs(first.map - second.map)[deep].max() < 0.2 * first.noise


@pytest.mark.parametrize("polarity", ["dark", "bright"])
def test_a_given_polarity_is_the_sign_of_lightness(polarity: str) -> None:
    contrast = mapped(SpotScene(discs=DISCS), polarity=polarity)
    assert (contrast.direction[0] > 0) == (polarity == "bright")
    assert np.isinf(contrast.sureness)


def test_flipped_is_the_other_side() -> None:
    scene = SpotScene(discs=DISCS)
    here, there = mapped(scene), mapped(scene, flipped=True)
    assert np.allclose(here.direction, -there.direction)
    assert here.sureness == pytest.approx(there.sureness)


def test_grey_uses_lightness_alone() -> None:
    contrast = mapped(SpotScene(discs=DISCS), "grey")
    assert contrast.direction.tolist() == [-1.0, 0.0, 0.0]


@pytest.mark.parametrize("colour", [c for c in get_args(Colour) if c not in ("auto", "grey")])
def test_a_named_colour_stands_out_from_grey_and_grey_does_not(colour: Colour) -> None:
    blank = np.zeros((120, 160, 3), np.float32)
    blank[..., 0] = 60.0
    axis = mapped(SpotScene(discs=DISCS), colour).direction
    blank[30:50, 40:60] += (25 * axis).astype(np.float32)
    blank[70:90, 100:120, 0] = 40.0
    inside = np.ones(blank.shape[:2], dtype=bool)
    contrast = contrast_map(blank, inside, smallest_px=12, largest_px=24, colour=colour)
    assert contrast.map[40, 50] == pytest.approx(25, rel=0.1)
    # Of a dark grey patch, no more is seen than its lightness has a share in the direction.
    assert contrast.map[80, 110] <= max(0.0, -20 * axis[0]) + 0.1
    assert np.linalg.norm(axis) == pytest.approx(1.0)


def test_colonies_of_another_colour_are_raised() -> None:
    lab = np.zeros((200, 300, 3), np.float32)
    lab[:] = (50.0, 5.0, 15.0)
    lab += np.random.default_rng(1).normal(0, 0.5, lab.shape).astype(np.float32)
    for k in range(6):
        cv2.circle(lab, (30 + 45 * k, 60), 9, (75.0, 5.0, 15.0), -1)
    cv2.circle(lab, (150, 140), 9, (52.0, 35.0, 40.0), -1)
    inside = np.ones(lab.shape[:2], dtype=bool)
    plain = contrast_map(lab, inside, smallest_px=12, largest_px=24)
    raised = contrast_map(lab, inside, smallest_px=12, largest_px=24, many_colours=True)
    assert plain.map[140, 150] < 0.5 * plain.map[60, 30]
    assert raised.map[140, 150] > 0.8 * raised.map[60, 30]


def two_colours() -> tuple[np.ndarray, np.ndarray]:
    """A grey ground with six red and six blue patches of its own lightness."""
    lab = np.zeros((200, 300, 3), np.float32)
    lab[:] = (55.0, 0.0, 0.0)
    for k in range(6):
        cv2.circle(lab, (30 + 45 * k, 60), 9, (55.0, 30.0, 15.0), -1)
        cv2.circle(lab, (30 + 45 * k, 140), 9, (55.0, 5.0, -30.0), -1)
    lab += np.random.default_rng(1).normal(0, 0.5, lab.shape).astype(np.float32)
    return lab, np.ones(lab.shape[:2], dtype=bool)


@pytest.mark.parametrize("many_colours", [False, True])
def test_a_known_direction_is_followed_to_its_own_side(many_colours: bool) -> None:
    lab, inside = two_colours()
    known = np.array([0.0, 2.0, 1.0])
    contrast = contrast_map(
        lab, inside, smallest_px=12, largest_px=24, direction=known, many_colours=many_colours
    )
    assert contrast.direction == pytest.approx(known / np.sqrt(5))
    assert contrast.map[60, 30] == pytest.approx((2 * 30 + 15) / np.sqrt(5), abs=2.0)
    assert contrast.map[140, 30] == pytest.approx((2 * 5 - 30) / np.sqrt(5), abs=2.0)
    assert np.isinf(contrast.sureness)
    assert known.tolist() == [0.0, 2.0, 1.0]


def test_the_local_mean_of_a_constant_is_that_constant() -> None:
    rng = np.random.default_rng(1)
    lab = np.broadcast_to(np.array([40.0, -3.0, 12.0], np.float32), (90, 130, 3)).copy()
    weight = (rng.uniform(size=lab.shape[:2]) > 0.4).astype(np.float32)
    mean = local_mean(lab, weight, 8.0, 30.0, lab)
    assert np.abs(mean - lab).max() < 1e-3


@pytest.mark.parametrize("seed", range(4))
def test_the_threshold_is_that_of_another_library(seed: int) -> None:
    # skimage.filters.threshold_otsu is an implementation of its own of Otsu (1979).
    rng = np.random.default_rng(seed)
    values = np.r_[rng.normal(0, 1, 9000), rng.normal(rng.uniform(5, 12), 1.5, 2000)]
    low, high = np.percentile(values, [0.1, 99.9])
    theirs = threshold_otsu(np.clip(values, low, high), nbins=256)
    assert otsu(values.astype(np.float32)) == pytest.approx(theirs, abs=(high - low) / 128)


def test_otsu_of_a_constant_is_that_constant() -> None:
    assert otsu(np.full(100, 7.0, np.float32)) == 7.0


def test_noise_comes_from_the_side_on_which_no_object_lies() -> None:
    rng = np.random.default_rng(1)
    values = np.r_[rng.normal(0, 2.0, 50_000), rng.normal(30, 4, 8_000)].astype(np.float32)
    noise, threshold = noise_and_threshold(values)
    assert noise == pytest.approx(2.0, rel=0.03)
    assert 4 < threshold < 20


def test_a_flat_map_has_next_to_no_noise() -> None:
    assert noise_and_threshold(np.zeros(50, np.float32)) == (1e-3, 1e-3)


def test_grain_is_the_noise_of_pixels_and_sees_no_slope() -> None:
    y, x = np.mgrid[:200, :300].astype(np.float32)
    white = np.random.default_rng(1).normal(0, 1.5, x.shape).astype(np.float32)
    inside = np.ones(x.shape, dtype=bool)
    assert grain_of([white], [inside]) == pytest.approx(1.5, rel=0.03)
    assert grain_of([white + 0.4 * x - 0.2 * y], [inside]) == pytest.approx(1.5, rel=0.03)
    smooth = cv2.GaussianBlur(white, (0, 0), 3)
    assert grain_of([smooth], [inside]) < 0.05 * smooth.std()
    assert grain_of([0.3 * x + y], [inside]) < 1e-4


def test_noise_is_the_grounds_spread_unless_a_colour_is_named() -> None:
    contrast = mapped(SpotScene(discs=DISCS, texture=0.05))
    assert contrast.grain < 0.8 * contrast.noise
    for colour in ("auto", "grey"):
        assert _least_contrast(contrast, colour) == 3.5 * contrast.noise
    assert _least_contrast(contrast, "green") == 3.5 * contrast.grain


@pytest.mark.parametrize("choices", [{}, {"many_colours": True}, {"colour": "green"}])
def test_known_constants_give_the_same_map_again(choices: dict[str, Any]) -> None:
    lab = to_lab(SpotScene(discs=DISCS, light=0.3).draw().pixels())
    inside = np.ones(lab.shape[:2], dtype=bool)
    sought = Sought(10, 22, **choices)
    (first,), constants = contrast_maps([lab], [inside], sought)
    (again,), same = contrast_maps([lab], [inside], sought, constants)
    assert same is constants
    assert np.array_equal(first.map, again.map)
    assert (again.noise, again.threshold, again.grain) == (
        first.noise,
        first.threshold,
        first.grain,
    )


def test_a_part_with_known_constants_has_the_contrast_it_has_in_the_whole() -> None:
    lab = to_lab(SpotScene(discs=DISCS, light=0.3).draw().pixels())
    inside = np.ones(lab.shape[:2], dtype=bool)
    sought = Sought(8, 10)
    (whole,), constants = contrast_maps([lab], [inside], sought)
    part = (slice(40, 240), slice(64, 320))
    (alone,), _ = contrast_maps([lab[part]], [inside[part]], sought, constants)
    away = np.abs(alone.map - whole.map[part])[60:-60, 60:-60]
    assert away.max() < 0.3 * whole.noise


def test_windows_of_a_picture_teach_what_the_whole_does() -> None:
    lab = to_lab(SpotScene(discs=DISCS).draw().pixels())
    inside = np.ones(lab.shape[:2], dtype=bool)
    sought = Sought(10, 22)
    _, whole = contrast_maps([lab], [inside], sought)
    windows = [(slice(y, y + 150), slice(x, x + 190)) for y in (5, 165) for x in (5, 205)]
    maps, learned = contrast_maps([lab[w] for w in windows], [inside[w] for w in windows], sought)
    assert len(maps) == 4
    assert learned.direction @ whole.direction > 0.995
    assert learned.noise == pytest.approx(whole.noise, rel=0.05)
    assert learned.threshold == pytest.approx(whole.threshold, rel=0.1)
    assert np.abs(learned.commonest - whole.commonest).max() < 1.0
