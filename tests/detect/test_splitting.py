"""Where touching discs part, against the radical line and a plain definition."""

from __future__ import annotations

import cv2
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detect.splitting import _middles, _near_pairs, nearest_by_power, split_regions


def split(discs: list[tuple[float, float, float]]) -> tuple[np.ndarray, np.ndarray | None]:
    """The labels of overlapping discs (x, y, r), and those of their pieces."""
    y, x = np.mgrid[:120, :180]
    mask = np.any([np.hypot(x - a, y - b) <= r for a, b, r in discs], axis=0).astype(np.uint8)
    count, labels = cv2.connectedComponents(mask, connectivity=4)
    distance = cv2.GaussianBlur(cv2.distanceTransform(mask, cv2.DIST_L2, 5), (0, 0), 1.5)
    found = split_regions(
        labels, count, distance=distance, relief=distance, smallest_px=20, largest_px=70
    )
    if found is None:
        return labels, None
    pieces, pieces_count, neck = found
    assert pieces.max() == pieces_count - 1
    assert neck.shape == (pieces_count,)
    assert ((pieces > 0) == (labels > 0)).all()
    return labels, pieces


@pytest.mark.parametrize(("small", "apart"), [(25.0, 38.0), (20.0, 36.0), (15.0, 32.0)])
def test_two_discs_part_along_their_radical_line(small: float, apart: float) -> None:
    x0, big = 60.0, 25.0
    _, pieces = split([(x0, 60, big), (x0 + apart, 60, small)])
    assert pieces is not None
    assert pieces.max() == 2
    row = pieces[60]
    border = np.flatnonzero((row[:-1] != row[1:]) & (row[:-1] > 0) & (row[1:] > 0)) + 0.5
    # The two circles have equal power where they cross.
    radical = x0 + (apart**2 + big**2 - small**2) / (2 * apart)
    assert border.size == 1
    assert border[0] == pytest.approx(radical, abs=2.0)


def test_one_disc_does_not_fall_apart() -> None:
    assert split([(70, 60, 25)])[1] is None


def test_two_discs_that_nearly_coincide_do_not_fall_apart() -> None:
    assert split([(70, 60, 25), (77, 60, 25)])[1] is None


def test_three_discs_in_a_ring_of_touch_are_three() -> None:
    _, pieces = split([(60, 45, 20), (95, 45, 20), (77, 76, 20)])
    assert pieces is not None
    assert pieces.max() == 3
    assert len({pieces[45, 60], pieces[45, 95], pieces[76, 77]} - {0}) == 3


def test_free_regions_stay_out_of_the_pieces_of_others() -> None:
    y, x = np.mgrid[:120, :180]
    mask = np.hypot(x - 40, y - 60) <= 20
    mask |= np.hypot(x - 74, y - 60) <= 20
    mask |= np.hypot(x - 140, y - 60) <= 20
    count, labels = cv2.connectedComponents(mask.astype(np.uint8), connectivity=4)
    distance = cv2.distanceTransform(mask.astype(np.uint8), cv2.DIST_L2, 5)
    found = split_regions(
        labels, count, distance=distance, relief=distance, smallest_px=20, largest_px=60
    )
    assert found is not None
    assert (found[0][:, 120:] == 0).all()


@settings(deadline=None, max_examples=60, derandomize=True)
@given(st.integers(1, 30), st.integers(0, 2**32 - 1))
def test_the_tree_gives_what_the_plain_definition_gives(n: int, seed: int) -> None:
    rng = np.random.default_rng(seed)
    points = rng.uniform(0, 100, (80, 2))
    seeds, radius = rng.uniform(0, 100, (n, 2)), rng.uniform(1, 20, n)
    power = ((points[:, None] - seeds[None]) ** 2).sum(axis=2) - radius**2
    chosen = nearest_by_power(points, seeds, radius)
    best = power.min(axis=1)
    assert power[np.arange(80), chosen] == pytest.approx(best, abs=1e-6)


def test_kin_are_sought_among_the_nearest_only_so_that_noise_stays_cheap() -> None:
    rng = np.random.default_rng(3)
    points = rng.uniform(0, 60, (400, 2))
    i, j = _near_pairs(points, 80.0)
    assert len(i) <= 400 * 16
    assert (i < j).all()
    assert len({*zip(i.tolist(), j.tolist(), strict=True)}) == len(i)
    few = rng.uniform(0, 60, (12, 2))
    i, j = _near_pairs(few, 25.0)
    plain = {
        (a, b) for a in range(12) for b in range(a + 1, 12) if np.hypot(*(few[a] - few[b])) <= 25.0
    }
    assert {*zip(i.tolist(), j.tolist(), strict=True)} == plain


@given(
    st.integers(0, 2**32 - 1),
    st.tuples(st.integers(1, 30), st.integers(2, 30)),
    st.sampled_from([0.0, 0.02, 0.1, 0.3]),
)
@settings(max_examples=100, deadline=None)
def test_middles_of_groups_are_those_of_connected_components(
    seed: int, shape: tuple[int, int], share: float
) -> None:
    marked = np.random.default_rng(seed).random(shape) < share
    count, _, _, centres = cv2.connectedComponentsWithStats(marked.astype(np.uint8), connectivity=8)
    x, y = _middles(marked)
    expected = np.rint(centres[1:count]).astype(int)
    assert sorted(zip(x.tolist(), y.tolist(), strict=True)) == sorted(map(tuple, expected.tolist()))
