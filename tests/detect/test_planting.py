"""Where copies are set, and what the photograph looks like with them."""

from __future__ import annotations

import numpy as np
import pytest
import shapely

from detect.area import StudyArea, frame_area
from detect.photograph import Photograph
from detect.planting import (
    ALONE,
    Copies,
    Wish,
    copies_per_round,
    nearest_separation,
    paste,
    place,
    wish_pair,
    wish_single,
)
from detect.spots import Spots
from detect.stamps import SmoothGround, Stamp, clear_spots, lift, smooth_ground
from tests.scenes import SpotScene, scattered

DISCS = scattered(25, radius=(6, 9), size=(600, 450))
SPOTS = Spots.found_at(*DISCS.T, contrast=np.linspace(8, 14, 25))
SCENE = SpotScene(discs=DISCS, width=600, height=450, light=0.3, texture=0.0, noise=0.0)
AREA = frame_area(600, 450)


def prepared() -> tuple[Photograph, SmoothGround, list[Stamp]]:
    photograph = SCENE.draw()
    ground = smooth_ground(photograph, AREA, SPOTS)
    stamps = [lift(photograph, ground, SPOTS, int(row)) for row in clear_spots(SPOTS, AREA)]
    return photograph, ground, [stamp for stamp in stamps if stamp is not None]


PHOTOGRAPH, GROUND, STAMPS = prepared()


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


def test_a_copy_on_the_ground_looks_as_its_spot_did() -> None:
    stamp = STAMPS[0]
    x, y = 300.0, 20.0
    while nearest_separation(np.array([[x, y, stamp.radius]]), SPOTS)[0] < 2.5:
        y += 1.0
    x, y = round(x - stamp.x) + stamp.x, round(y - stamp.y) + stamp.y
    one = Copies(*(np.array([v]) for v in (x, y, stamp.radius, 9.0, 0, np.nan)), (stamp,))
    after = paste(PHOTOGRAPH, GROUND, one).pixels()
    expected = SpotScene(
        discs=np.vstack([DISCS, [x, y, stamp.radius]]),
        **{k: getattr(SCENE, k) for k in ("width", "height", "light", "texture", "noise")},
    ).draw()
    inside = np.s_[int(y) - 14 : int(y) + 15, int(x) - 14 : int(x) + 15]
    assert np.abs(after[inside] - expected.pixels()[inside]).max() < 0.12
    assert np.abs(after[inside] - expected.pixels()[inside]).mean() < 0.012
    # Nothing changes elsewhere, and the photograph itself not at all.
    untouched = PHOTOGRAPH.pixels()
    after[inside] = untouched[inside]
    changed = np.abs(after - untouched).max(axis=2) > 0
    ys, xs = np.nonzero(changed)
    assert ys.size == 0 or np.hypot(xs - x, ys - y).max() < 2 * stamp.radius + 3


def test_a_copy_hides_what_lies_below_and_adds_nothing_to_it() -> None:
    """On an object of the same colour a copy is not twice as dark."""
    stamp = STAMPS[0]
    row = int(clear_spots(SPOTS, AREA)[3])
    x, y = round(SPOTS.x[row] - stamp.x) + stamp.x, round(SPOTS.y[row] - stamp.y) + stamp.y
    one = Copies(*(np.array([v]) for v in (x, y, stamp.radius, 9.0, 0, np.nan)), (stamp,))
    after = paste(PHOTOGRAPH, GROUND, one).pixels()[int(y), int(x)]
    assert after == pytest.approx(PHOTOGRAPH.pixels()[int(y), int(x)], abs=0.05)


def test_sixteen_bits_stay_sixteen_bits() -> None:
    deep = Photograph(PHOTOGRAPH.path, "0" * 64, (PHOTOGRAPH.stored.astype(np.uint16)) * 257)
    copies = put(wishes(3))
    after = paste(deep, GROUND, copies)
    assert after.stored.dtype == np.uint16
    shallow = paste(PHOTOGRAPH, GROUND, copies)
    assert np.abs(after.pixels() - shallow.pixels()).max() < 1 / 255


def test_a_copy_across_the_edge_of_the_picture_is_cut_there() -> None:
    stamp = STAMPS[0]
    one = Copies(
        *(np.array([v]) for v in (stamp.x - 12, 200 + stamp.y % 1, stamp.radius, 9.0, 0, np.nan)),
        (stamp,),
    )
    assert paste(PHOTOGRAPH, GROUND, one).stored.shape == PHOTOGRAPH.stored.shape
