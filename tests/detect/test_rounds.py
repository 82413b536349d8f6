"""The planted-object test from end to end on drawn photographs whose every object is known."""

from __future__ import annotations

import re
from dataclasses import replace
from functools import cache

import numpy as np
import pytest

from detect.area import frame_area
from detect.find import Found, find_spots
from detect.lengths import parse_pair
from detect.photograph import Photograph
from detect.planted import Planted, PlantedOptions
from detect.rounds import measure_planted
from detect.spots import Spots
from detect.stamps import clear_spots
from detect.wanted import DetectOptions
from tests.scenes import SpotScene, photograph_of, scattered

SIZE = (420, 320)
AREA = frame_area(*SIZE)
OPTIONS = DetectOptions(diameter=parse_pair("9-24px", name="--diameter", separator="-"))
DISCS = scattered(22, radius=(6, 9), size=SIZE)
PLAIN = SpotScene(discs=DISCS, width=SIZE[0], height=SIZE[1]).draw()


def measured(photograph: Photograph, *, rounds: int = 2, seed: int = 1) -> tuple[Found, Planted]:
    found = find_spots(photograph, AREA, OPTIONS)
    asked = PlantedOptions(rounds=rounds, seed=seed)
    return found, measure_planted(photograph, AREA, OPTIONS, found, planted=asked)


@cache
def plainly() -> Planted:
    return measured(PLAIN, rounds=5)[1]


def test_plain_discs_are_nearly_all_found_and_pairs_tell_a_distance() -> None:
    planted = plainly()
    assert planted.note == ""
    assert planted.copies >= 20
    assert planted.recall is not None
    assert planted.recall.value > 0.9
    assert planted.recall.low < planted.recall.value < planted.recall.high <= 1
    assert planted.blind is not None
    assert 0.3 < planted.blind.value < 1.1
    assert planted.both_radii_px == pytest.approx(15, abs=2)
    for table in (planted.by_radius_px, planted.by_contrast, planted.by_separation):
        assert sum(share.copies for share in table) == planted.copies
        assert sum(share.found for share in table) == planted.found


def test_a_detector_that_drops_most_objects_is_seen_to_miss_some() -> None:
    noisy = SpotScene(discs=DISCS, width=SIZE[0], height=SIZE[1], noise=0.03).draw()
    doubt = find_spots(noisy, AREA, OPTIONS).spots.doubt
    strict = replace(OPTIONS, highest_doubt=float(np.quantile(doubt, 0.35)))
    found = find_spots(noisy, AREA, strict)
    planted = measure_planted(noisy, AREA, strict, found, planted=PlantedOptions(rounds=4))
    plain = plainly().recall
    assert plain is not None
    assert planted.recall is not None, planted.note
    assert planted.recall.value < plain.value


def test_the_same_seed_gives_the_same_record_and_another_another() -> None:
    first, second = measured(PLAIN, rounds=2)[1], measured(PLAIN, rounds=2)[1]
    assert first == second
    assert measured(PLAIN, rounds=2, seed=2)[1] != first


def test_each_round_is_told() -> None:
    told: list[tuple[int, int]] = []
    found = find_spots(PLAIN, AREA, OPTIONS)
    measure_planted(
        PLAIN,
        AREA,
        OPTIONS,
        found,
        planted=PlantedOptions(rounds=3),
        progress=lambda done, total: told.append((done, total)),
    )
    assert told == [(1, 3), (2, 3), (3, 3)]


def test_the_photograph_stays_as_it_is() -> None:
    before = PLAIN.stored.copy()
    measured(PLAIN, rounds=2)
    assert (PLAIN.stored == before).all()


@pytest.mark.parametrize("n", [0, 3])
def test_with_too_little_to_copy_a_sentence_says_so(n: int) -> None:
    found = find_spots(PLAIN, AREA, OPTIONS)
    apart = clear_spots(found.spots, AREA)[:n]
    spots = found.spots.where(apart)
    found = replace(found, spots=replace(spots, doubt=np.zeros(n)))
    planted = measure_planted(PLAIN, AREA, OPTIONS, found)
    assert planted.recall is None
    assert planted.blind is None
    assert planted.note == (
        f"Planted objects could not be set: {n or 'no'} spots are clear enough to be copied, and 5"
        " are needed."
    )


def test_with_no_room_for_copies_a_sentence_says_so() -> None:
    """Six large discs in a small picture: a fiftieth of it holds one copy at most."""
    discs = np.array([[40.0 + 70 * i, 40.0 + 70 * j, 14] for i in range(3) for j in range(2)])
    photograph = SpotScene(discs=discs, width=220, height=150).draw()
    area = frame_area(220, 150)
    options = DetectOptions(diameter=parse_pair("20-36px", name="--diameter", separator="-"))
    found = find_spots(photograph, area, options)
    spots = Spots.found_at(*discs.T, contrast=np.full(6, 12.0))
    planted = measure_planted(photograph, area, options, replace(found, spots=spots))
    assert planted.recall is None
    assert re.fullmatch(
        r"Only \d copies found room in the study area, and 10 are needed to say what share is found\."
        r" Of 0 pairs of copies 0 were seen as two, which tells no blind distance\.",
        planted.note,
    )


def test_a_blank_photograph_is_no_failure() -> None:
    blank = photograph_of(np.full((SIZE[1], SIZE[0], 3), 0.5))
    assert "no spots are clear" in measured(blank)[1].note
