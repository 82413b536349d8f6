"""Which spots are copied, and what is lifted of each."""

from __future__ import annotations

import numpy as np
import pytest

from detect.area import frame_area
from detect.photograph import Photograph
from detect.spots import Spots
from detect.stamps import Stamp, altered, clear_spots, lift, separations, smooth_ground
from tests.scenes import SpotScene, photograph_of

DISCS = np.array([[60.0, 60.0, 8.0], [140.0, 61.5, 10.0], [230.0, 70.0, 9.0], [300.0, 180.0, 8.0]])
GROUND = (0.62, 0.56, 0.45)
COLOUR = (0.33, 0.28, 0.2)


def spots(discs: np.ndarray = DISCS, doubt: object = None) -> Spots:
    n = len(discs)
    return Spots.found_at(
        *discs.T, contrast=np.full(n, 12.0), doubt=np.zeros(n) if doubt is None else doubt
    )


def picture(**changes: object) -> Photograph:
    plain = {"light": 0.0, "texture": 0.0, "noise": 0.0, "blur": 0.01}
    return SpotScene(discs=DISCS, **(plain | changes)).draw()


def lifted(photograph: Photograph, row: int = 0) -> Stamp:
    area = frame_area(photograph.width, photograph.height)
    stamp = lift(photograph, smooth_ground(photograph, area, spots()), spots(), row)
    assert stamp is not None
    return stamp


def test_separations_are_in_sums_of_radii() -> None:
    two = spots(np.array([[10.0, 10.0, 2.0], [20.0, 10.0, 3.0], [50.0, 10.0, 5.0]]))
    assert separations(two) == pytest.approx([2.0, 2.0, 30 / 8])
    assert separations(spots(DISCS[:1])).tolist() == [np.inf]
    assert separations(Spots.none()).size == 0


def test_clear_spots_stand_apart_are_whole_and_hardly_doubtful() -> None:
    discs = np.array(
        [
            [60.0, 60.0, 8.0],
            [80.0, 60.0, 8.0],  # near the first
            [200.0, 60.0, 8.0],  # doubtful
            [300.0, 60.0, 8.0],
            [10.0, 200.0, 8.0],  # across the edge
            [200.0, 200.0, 8.0],
        ]
    )
    seen = spots(discs, doubt=[0.01, 0.01, 0.3, 0.01, 0.01, 0.01])
    assert clear_spots(seen, frame_area(420, 320)).tolist() == [3, 5]
    assert clear_spots(Spots.none(), frame_area(420, 320)).size == 0


def test_of_doubtful_spots_the_less_doubtful_half_is_clear() -> None:
    seen = spots(DISCS, doubt=[0.05, 0.1, 0.15, 0.18])
    assert clear_spots(seen, frame_area(420, 320)).tolist() == [0, 1]


def test_the_ground_is_that_without_spots() -> None:
    photograph = picture(light=0.3)
    ground = smooth_ground(photograph, frame_area(420, 320), spots())
    below = ground.at(50, 50, 20, 20)[10, 10]
    light = 1 + 0.3 * (60 / 420 - 0.5)
    assert below == pytest.approx(np.array(GROUND) * light, abs=0.015)


def test_what_is_lifted_is_the_departure_from_the_ground() -> None:
    stamp = lifted(picture())
    middle = stamp.lifted[round(stamp.y), round(stamp.x)]
    assert middle == pytest.approx(np.array(COLOUR) - GROUND, abs=0.01)
    assert stamp.cover[round(stamp.y), round(stamp.x)] == pytest.approx(1.0)
    assert stamp.cover.sum() == pytest.approx(np.pi * 8**2, rel=0.1)
    assert np.abs(stamp.lifted[0]).max() == 0
    assert stamp.cover[:, 0].max() == 0


def test_a_halo_is_lifted_with_its_spot_and_the_grain_of_the_ground_is_not() -> None:
    """Lesions were once copied without the yellow around them, in which two run together."""
    image = np.full((320, 420, 3), 0.5) + np.random.default_rng(1).normal(0, 0.02, (320, 420, 1))
    down, across = np.mgrid[:320, :420]
    reach = np.hypot(across - 60, down - 60) / 8
    halo = np.exp(-(np.clip(reach - 1, 0, None) ** 2) / 0.3)
    image += halo[..., None] * np.array([0.15, 0.1, -0.1])
    image[reach < 1] = (0.2, 0.15, 0.1)
    stamp = lifted(photograph_of(image))
    around = np.hypot(*(np.indices(stamp.cover.shape) - [[[stamp.y]], [[stamp.x]]])) / 8
    ring = (around > 1.35) & (around < 1.55)
    expected = np.array([0.15, 0.1, -0.1]) * np.exp(-(0.45**2) / 0.3)
    assert stamp.lifted[ring].mean(axis=0) == pytest.approx(expected, abs=0.02)
    assert stamp.lifted[ring].std(axis=0).max() < 0.02
    assert stamp.cover[ring].max() == 0
    assert np.abs(stamp.lifted[around > 2.5]).max() < 0.003


def test_a_spot_across_the_edge_or_without_contrast_is_not_lifted() -> None:
    flat = photograph_of(np.full((320, 420, 3), 0.5))
    ground = smooth_ground(flat, frame_area(420, 320), spots())
    assert lift(flat, ground, spots(), 0) is None
    edge = spots(np.array([[5.0, 100.0, 8.0]]))
    assert lift(picture(), ground, edge, 0) is None


@pytest.mark.parametrize("turns", [0, 1, 2, 3])
@pytest.mark.parametrize("mirrored", [False, True])
def test_a_turned_stamp_keeps_its_centre_on_its_spot(turns: int, mirrored: bool) -> None:
    cover = np.zeros((21, 31), np.float32)
    cover[4, 22] = 1.0
    stamp = Stamp(np.dstack([cover] * 3), cover, 22.0, 4.0, 5.0, 9.0, 0.5)
    turned = altered(stamp, size=1.0, strength=0.5, turns=turns, mirrored=mirrored)
    assert turned.cover[round(turned.y), round(turned.x)] == pytest.approx(1.0)
    assert turned.lifted[round(turned.y), round(turned.x)] == pytest.approx([0.5] * 3)
    assert turned.contrast == 4.5


@pytest.mark.parametrize("size", [0.8, 1.25])
def test_a_stamp_made_larger_or_smaller_covers_as_much_more_or_less(size: float) -> None:
    stamp = lifted(picture())
    other = altered(stamp, size=size, strength=1.0, turns=0, mirrored=False)
    ratio = other.radius / stamp.radius
    assert ratio == pytest.approx(size, abs=0.03)
    assert other.cover.sum() == pytest.approx(stamp.cover.sum() * ratio**2, rel=0.03)
    rows, columns = np.indices(other.cover.shape)
    weight = other.cover / other.cover.sum()
    assert (weight * columns).sum() == pytest.approx(other.x, abs=0.2)
    assert (weight * rows).sum() == pytest.approx(other.y, abs=0.2)
