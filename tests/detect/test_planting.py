"""Where copies are set."""

from __future__ import annotations

import numpy as np
import pytest
import shapely

from detect.area import StudyArea, frame_area
from detect.planting import (
    ALONE,
    Copies,
    Wish,
    copies_per_round,
    nearest_separation,
    place,
    wish_pair,
    wish_single,
)
from detect.spots import Spots
from detect.stamps import Stamp, clear_spots, lift, smooth_ground
from tests.scenes import SpotScene, scattered

DISCS = scattered(25, radius=(6, 9), size=(600, 450))
SPOTS = Spots.found_at(*DISCS.T, contrast=np.linspace(8, 14, 25))
SCENE = SpotScene(discs=DISCS, width=600, height=450, light=0.3, texture=0.0, noise=0.0)
AREA = frame_area(600, 450)


def prepared() -> list[Stamp]:
    photograph = SCENE.draw()
    ground = smooth_ground(photograph, AREA, SPOTS)
    stamps = [lift(photograph, ground, SPOTS, int(row)) for row in clear_spots(SPOTS, AREA)]
    return [stamp for stamp in stamps if stamp is not None]


STAMPS = prepared()


def put(wishes: list[Wish], area: StudyArea = AREA, seed: int = 1) -> Copies:
    return place(wishes, SPOTS, area, (600, 450), np.random.default_rng(seed))


def wishes(n: int, *, seed: int = 1, **how: bool) -> list[Wish]:
    rng = np.random.default_rng(seed)
    how = {"faint": False, "crowded": False} | how
    return [wish_single(STAMPS, SPOTS, rng=rng, **how) for _ in range(n)]


def pairs(*separations: float) -> list[Wish]:
    rng = np.random.default_rng(2)
    return [wish_pair(STAMPS, SPOTS, s, rng) for s in separations]


def test_a_round_is_small() -> None:
    by_area = int(0.02 * 600 * 450 / (np.pi * (SPOTS.radius**2).mean()))
    assert 10 < by_area < 60
    assert copies_per_round(SPOTS, AREA) == min(20, by_area)
    assert copies_per_round(SPOTS, frame_area(200, 150)) < 5
    many = Spots.found_at(*(np.arange(500.0) * 9,) * 2, np.full(500, 2.0))
    assert copies_per_round(many, frame_area(9000, 9000)) == 50


def test_copies_lie_in_the_area_and_far_from_each_other() -> None:
    ring = shapely.Point(300, 225).buffer(200).difference(shapely.Point(300, 225).buffer(60))
    area = StudyArea(ring, "polygon", "ring")
    copies = put([*wishes(6), *pairs(0.5, 1.0, 1.4)], area)
    assert len(copies) >= 6
    assert area.contains(copies.centres).all()
    apart = np.hypot(*(copies.centres[:, None] - copies.centres[None]).transpose(2, 0, 1))
    others = copies.unit[:, None] != copies.unit[None]
    free = apart - copies.radius[:, None] - copies.radius[None]
    assert free[others].min() >= 4 * np.quantile(SPOTS.radius, 0.9)


@pytest.mark.parametrize("separation", [0.3, 0.8, 1.6])
def test_pairs_stand_as_far_apart_as_they_say_and_clear_of_spots(separation: float) -> None:
    copies = put(pairs(separation))
    assert len(copies) == 2
    apart = np.hypot(*np.diff(copies.centres, axis=0)[0]) / copies.radius.sum()
    # Stamps are set on whole pixels.
    assert apart == pytest.approx(separation, abs=1.5 / copies.radius.sum())
    rows = np.column_stack([copies.x, copies.y, copies.radius])
    assert nearest_separation(rows, SPOTS).min() >= ALONE


def test_a_copy_for_a_crowded_spot_stands_as_near_to_a_neighbour() -> None:
    wish = Wish(wishes(1)[0].stamps, 0.9)
    for seed in range(5):
        copies = put([wish], seed=seed)
        rows = np.column_stack([copies.x, copies.y, copies.radius])
        assert nearest_separation(rows, SPOTS)[0] == pytest.approx(0.9, abs=0.08)


def test_copies_set_anywhere_may_fall_on_spots() -> None:
    nearest = []
    for seed in range(40):
        copies = put(wishes(8, seed=seed), seed=seed)
        rows = np.column_stack([copies.x, copies.y, copies.radius])
        nearest += nearest_separation(rows, SPOTS).tolist()
    assert min(nearest) < 0.5
    assert max(nearest) > 2


def test_faint_copies_are_smaller_and_fainter() -> None:
    plain, faint = wishes(60), wishes(60, faint=True)
    for name in ("radius", "contrast"):
        usual = np.mean([getattr(wish.stamps[0], name) for wish in plain])
        assert np.mean([getattr(wish.stamps[0], name) for wish in faint]) < 0.92 * usual


def test_one_giant_spot_leaves_room_for_copies() -> None:
    """A glare taken for a spot once kept all copies of a round four of its radii apart."""
    giant = Spots.found_at(
        np.append(SPOTS.x, 300.0),
        np.append(SPOTS.y, 225.0),
        np.append(SPOTS.radius, 120.0),
        contrast=np.append(SPOTS.contrast, 9.0),
    )
    copies = place(wishes(8), giant, AREA, (600, 450), np.random.default_rng(1))
    assert len(copies) >= 6


def test_where_there_is_no_room_copies_are_left_out() -> None:
    small = StudyArea(shapely.box(100, 100, 130, 130), "polygon", "small")
    assert len(put(wishes(10), small)) <= 1
