"""What a photograph looks like with copies in it."""

from __future__ import annotations

import numpy as np
import pytest

from detect.area import frame_area
from detect.pasting import paste
from detect.photograph import Photograph
from detect.planting import Copies, nearest_separation
from detect.spots import Spots
from detect.stamps import SmoothGround, Stamp, clear_spots, lift, smooth_ground
from tests.scenes import SpotScene, photograph_of, scattered

DISCS = scattered(25, radius=(6, 9), size=(600, 450))
SPOTS = Spots.found_at(*DISCS.T, contrast=np.linspace(8, 14, 25))
SCENE = SpotScene(discs=DISCS, width=600, height=450, light=0.3, texture=0.0, noise=0.0)
AREA = frame_area(600, 450)
FLAT = photograph_of(np.full((120, 160, 3), 0.5))
FLAT_GROUND = SmoothGround(np.full((6, 8, 3), 0.5, np.float32), 0.05, 0.05)


def prepared() -> tuple[Photograph, SmoothGround, list[Stamp]]:
    photograph = SCENE.draw()
    ground = smooth_ground(photograph, AREA, SPOTS)
    stamps = [lift(photograph, ground, SPOTS, int(row)) for row in clear_spots(SPOTS, AREA)]
    return photograph, ground, [stamp for stamp in stamps if stamp is not None]


PHOTOGRAPH, GROUND, STAMPS = prepared()


def pair(separation: float) -> Copies:
    """Two copies beside each other in the first photograph."""
    one, other = STAMPS[:2]
    x = np.array([200.0, 200.0 + separation * (one.radius + other.radius)])
    radius = np.array([one.radius, other.radius])
    columns = (x, np.full(2, 200.0), radius, np.full(2, 9.0), np.zeros(2, int))
    return Copies(*columns, np.full(2, separation), (one, other))


def disc(radius: float, departs: float, halo: float = 0.0) -> Stamp:
    """A disc that departs so far from its ground in all colours, with a halo around it."""
    half = int(2.5 * radius) + 1
    down, across = np.mgrid[-half : half + 1, -half : half + 1]
    reach = np.hypot(across, down) / radius
    cover = (reach < 1).astype(np.float32)
    lifted = np.where(reach < 1, departs, np.where(reach < 2, halo, 0.0)).astype(np.float32)
    return Stamp(np.dstack([lifted] * 3), cover, half, half, radius, 9.0, 0.5)


def two(first: Stamp, second: Stamp, apart: float, *, stacked: bool) -> np.ndarray:
    """Brightness along the line through both centres, from the first on, less the ground's."""
    radius = np.array([first.radius, second.radius])
    x = np.array([60.0, 60.0 + apart])
    columns = (x, np.full(2, 60.0), radius, np.full(2, 9.0), np.zeros(2, int), np.full(2, 0.5))
    picture = paste(FLAT, FLAT_GROUND, Copies(*columns, (first, second)), stacked=stacked)
    return picture.pixels()[60, 60:, 0] - FLAT.pixels()[60, 60:, 0]


def test_two_that_grow_into_each_other_meet_between_their_centres() -> None:
    """The later of a pair once lay whole upon the earlier, with its rim drawn across it."""
    line = two(disc(10, 0.2), disc(10, -0.2), 14, stacked=False)
    assert line[:6] == pytest.approx(0.2, abs=0.01)
    assert line[9:20] == pytest.approx(-0.2, abs=0.01)
    # Of two unlike sizes they meet where both are reached at the same share of their radii.
    line = two(disc(16, 0.2), disc(8, -0.2), 18, stacked=False)
    assert line[:11] == pytest.approx(0.2, abs=0.01)
    assert line[14:24] == pytest.approx(-0.2, abs=0.01)


def test_of_two_plants_the_larger_hides_the_smaller_whichever_was_set_first() -> None:
    """Chance once laid small plants upon large ones, where they were found too easily."""
    line = two(disc(16, 0.2), disc(8, -0.2), 14, stacked=True)
    assert line[:16] == pytest.approx(0.2, abs=0.01)
    assert line[17:21] == pytest.approx(-0.2, abs=0.01)
    line = two(disc(8, -0.2), disc(16, 0.2), 14, stacked=True)
    assert line[:29] == pytest.approx(0.2, abs=0.01)


def test_two_halos_are_no_stronger_than_their_stronger_one() -> None:
    line = two(disc(8, -0.3, halo=0.1), disc(8, -0.3, halo=0.1), 24, stacked=False)
    assert line[9:15] == pytest.approx(0.1, abs=0.01)
    faint = two(disc(8, -0.3, halo=0.1), disc(8, -0.3, halo=0.05), 24, stacked=False)
    assert faint[9:15] == pytest.approx(0.1, abs=0.01)


def test_one_alone_of_a_pair_far_apart_is_as_if_alone() -> None:
    stamps = disc(8, -0.3, halo=0.1), disc(8, 0.3, halo=0.05)
    line = two(*stamps, 50, stacked=False)
    assert line[:7] == pytest.approx(-0.3, abs=0.01)
    assert line[44:56] == pytest.approx(0.3, abs=0.01)


def test_a_copy_on_the_ground_looks_as_its_spot_did() -> None:
    stamp = STAMPS[0]
    x, y = 300.0, 20.0
    while nearest_separation(np.array([[x, y, stamp.radius]]), SPOTS)[0] < 2.5:
        y += 1.0
    x, y = round(x - stamp.x) + stamp.x, round(y - stamp.y) + stamp.y
    one = Copies(*(np.array([v]) for v in (x, y, stamp.radius, 9.0, 0, np.nan)), (stamp,))
    after = paste(PHOTOGRAPH, GROUND, one, stacked=False).pixels()
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
    assert ys.size == 0 or np.hypot(xs - x, ys - y).max() < 2.6 * stamp.radius + 3


def test_a_copy_hides_what_lies_below_and_adds_nothing_to_it() -> None:
    """On an object of the same colour a copy is not twice as dark."""
    stamp = STAMPS[0]
    row = int(clear_spots(SPOTS, AREA)[3])
    x, y = round(SPOTS.x[row] - stamp.x) + stamp.x, round(SPOTS.y[row] - stamp.y) + stamp.y
    one = Copies(*(np.array([v]) for v in (x, y, stamp.radius, 9.0, 0, np.nan)), (stamp,))
    after = paste(PHOTOGRAPH, GROUND, one, stacked=False).pixels()[int(y), int(x)]
    assert after == pytest.approx(PHOTOGRAPH.pixels()[int(y), int(x)], abs=0.05)


def test_sixteen_bits_stay_sixteen_bits() -> None:
    deep = Photograph(PHOTOGRAPH.path, "0" * 64, (PHOTOGRAPH.stored.astype(np.uint16)) * 257)
    copies = pair(1.2)
    after = paste(deep, GROUND, copies, stacked=False)
    assert after.stored.dtype == np.uint16
    shallow = paste(PHOTOGRAPH, GROUND, copies, stacked=False)
    assert np.abs(after.pixels() - shallow.pixels()).max() < 1 / 255


def test_a_copy_across_the_edge_of_the_picture_is_cut_there() -> None:
    stamp = STAMPS[0]
    one = Copies(
        *(np.array([v]) for v in (stamp.x - 12, 200 + stamp.y % 1, stamp.radius, 9.0, 0, np.nan)),
        (stamp,),
    )
    assert paste(PHOTOGRAPH, GROUND, one, stacked=False).stored.shape == PHOTOGRAPH.stored.shape
