"""Which copies are found again, and which only find what was there before."""

from __future__ import annotations

import numpy as np

from detect.planting import Copies
from detect.refound import refound
from detect.spots import Spots


def copies(*places: tuple[float, float], radius: float = 6.0) -> Copies:
    x, y = np.array(places, dtype=float).reshape(-1, 2).T
    k = x.size
    return Copies(
        x,
        y,
        np.full(k, radius),
        np.full(k, 9.0),
        np.arange(k),
        np.full(k, np.nan),
        (None,) * k,  # type: ignore[arg-type]  # what they look like has no say
    )


def spots(*places: tuple[float, float], radius: float = 6.0) -> Spots:
    x, y = np.array(places, dtype=float).reshape(-1, 2).T
    return Spots.found_at(x, y, np.full(x.size, radius))


BEFORE = spots((20, 20), (60, 20))


def test_a_copy_where_nothing_was_is_found() -> None:
    seen = refound(BEFORE, spots((20, 20), (60, 20), (101, 50)), copies((100, 50), (140, 50)))
    assert seen.found.tolist() == [True, False]
    assert seen.lost.tolist() == [False, False]


def test_a_copy_on_an_object_that_only_finds_that_one_again_is_not_found() -> None:
    seen = refound(BEFORE, spots((20.5, 20), (60, 20)), copies((21, 20)))
    assert seen.found.tolist() == [False]
    assert seen.lost.tolist() == [False, False]


def test_a_copy_beside_an_object_is_found_if_both_are_seen() -> None:
    seen = refound(BEFORE, spots((20, 20), (27, 20), (60, 20)), copies((27, 20)))
    assert seen.found.tolist() == [True]


def test_an_object_that_a_copy_hides_is_lost() -> None:
    seen = refound(BEFORE, spots((25, 20), (60, 20)), copies((26, 20)))
    assert seen.found.tolist() == [True]
    assert seen.lost.tolist() == [True, False]


def test_one_spot_finds_one_copy_of_a_pair() -> None:
    seen = refound(BEFORE, spots((20, 20), (60, 20), (102, 50)), copies((100, 50), (104, 50)))
    assert seen.found.sum() == 1


def test_nothing_found_at_all() -> None:
    seen = refound(BEFORE, Spots.none(), copies((100, 50)))
    assert not seen.found.any()
    assert seen.lost.all()
