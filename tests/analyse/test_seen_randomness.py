"""Random objects as they are seen: against plain definitions, published laws and known figures."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pytest
import shapely
from scipy import stats
from scipy.spatial import cKDTree

from analyse.errors import TooCrowded
from analyse.eyes import Eyes, usual_sums
from analyse.nulls import CompleteRandomness, random_points
from analyse.seen_randomness import SeenRandomness, linked, merged_middles
from tests.analyse.areas import RAGGED

DISH = shapely.Point(0, 0).buffer(43)
SIZES = np.exp(np.random.default_rng(4).normal(0, 0.4, 300))


def eyes(blind: float, se: float = 0.0, source: str = "planted") -> Eyes:
    return Eyes(blind, se, 1.0, source)  # type: ignore[arg-type]


def plainly_linked(xy, radii, blind, sums) -> set[tuple[int, int]]:
    """Which pairs are seen as one, pair by pair as the notes have it."""
    hidden = (1 - blind) * sums[0] / sums[1]
    found = set()
    for i in range(len(xy)):
        for j in range(i):
            large, small = max(radii[i], radii[j]), min(radii[i], radii[j])
            reach = large + small * (1 - hidden)
            if hidden > 1:
                reach = large * blind / (1 - sums[1] / sums[0])
            if math.dist(xy[i], xy[j]) < reach:
                found.add((j, i))
    return found


@pytest.mark.parametrize("blind", [0.0, 0.3, 0.6, 1.0, 1.2])
def test_pairs_seen_as_one_are_those_of_the_plain_definition(blind: float) -> None:
    rng = np.random.default_rng(7)
    xy, radii = rng.uniform(0, 30, (150, 2)), rng.choice(SIZES, 150)
    radii[:3] = 6.0  # a few large ones are looked up in another way
    sums = usual_sums(SIZES)
    pairs = linked(xy, radii, blind, sums)
    assert len(pairs) == len({tuple(sorted(pair)) for pair in pairs.tolist()})
    expected = plainly_linked(xy, radii, blind, sums) if blind else set()
    assert {tuple(sorted(pair)) for pair in pairs.tolist()} == expected


def test_of_one_size_the_rule_is_the_blind_distance_and_on_average_it_always_is() -> None:
    xy = np.array([[0.0, 0.0], [1.19, 0.0], [9.0, 0.0], [10.21, 0.0]])
    assert linked(xy, np.ones(4), 0.6, usual_sums([1.0])).tolist() == [[0, 1]]
    both, smaller = usual_sums(SIZES)
    large, small = np.maximum.outer(SIZES, SIZES), np.minimum.outer(SIZES, SIZES)
    assert both == pytest.approx((large + small).mean())
    assert smaller == pytest.approx(small.mean())
    hidden = (1 - 0.7) * both / smaller
    assert (large + small - hidden * small).mean() == pytest.approx(0.7 * (large + small).mean())


def test_merged_middles() -> None:
    two = np.array([[0.0, 0.0], [1.0, 0.0], [5.0, 5.0]])
    points, largest = merged_middles(two, np.ones(3), np.array([[0, 1]]))
    assert points.tolist() == [[0.5, 0.0], [5.0, 5.0]]
    assert largest.tolist() == [0, 2]
    hidden = np.array([[0.0, 0.0], [0.5, 0.0]])  # within the larger: it does not shift it
    points, _ = merged_middles(hidden, np.array([2.0, 1.0]), np.array([[0, 1]]))
    assert points.tolist() == [[0.0, 0.0]]


def test_the_middle_of_a_merged_pair_is_near_that_of_its_union() -> None:
    """Against the centroid of both discs together, by shapely."""
    for ratio in (0.5, 0.7, 1.0):
        for apart in (0.6, 0.9, 1.1):
            xy = np.array([[0.0, 0.0], [apart, 0.0]])
            discs = [shapely.Point(*at).buffer(r) for at, r in zip(xy, (1.0, ratio), strict=True)]
            middle = shapely.union_all(discs).centroid
            points, _ = merged_middles(xy, np.array([1.0, ratio]), np.array([[0, 1]]))
            assert points[0, 0] == pytest.approx(middle.x, abs=0.06)


def slowly_seen(null: SeenRandomness, n: int, rng: np.random.Generator) -> int:
    """Add objects one by one until n are seen; how many it took, group by group."""
    xy, radii = np.empty((0, 2)), np.empty(0)
    groups: list[set[int]] = []
    sums = usual_sums(null.radii)
    while len(groups) < n:
        xy = np.concatenate([xy, CompleteRandomness(null.area).draw(1, rng)])
        radii = np.append(radii, rng.choice(null.radii))
        new = len(xy) - 1
        touched = {j for pair in plainly_linked(xy, radii, null.eyes.blind, sums) for j in pair
                   if new in pair} | {new}  # fmt: skip
        joined = [group for group in groups if group & touched]
        groups = [group for group in groups if not group & touched]
        groups.append(touched.union(*joined))
    return len(xy)


def test_seen_patterns_have_exactly_n_points_in_the_area_none_nearer_than_can_be_seen() -> None:
    null = SeenRandomness(RAGGED, [1.5], eyes(0.7))
    for n in (0, 1, 2, 40):
        points = null.draw(n, np.random.default_rng(n))
        assert points.shape == (n, 2)
        assert shapely.intersects_xy(RAGGED, *points.T).all()
    again = null.draw(40, np.random.default_rng(40))
    assert np.array_equal(points, again)


def test_as_many_objects_are_drawn_as_adding_one_by_one_takes(monkeypatch) -> None:
    """The quick way counts groups by unions; the plain way keeps the groups themselves."""
    area, n = shapely.box(0, 0, 16, 16), 25
    null = SeenRandomness(area, [1.0], eyes(0.6))
    used = []
    monkeypatch.setattr(
        "analyse.seen_randomness.merged_middles",
        lambda xy, radii, pairs: used.append(len(xy)) or merged_middles(xy, radii, pairs),
    )
    for k in range(150):
        null.draw(n, np.random.default_rng(k))
    slow = [slowly_seen(null, n, np.random.default_rng(1000 + k)) for k in range(30)]
    assert stats.mannwhitneyu(used, slow).pvalue > 0.01
    assert 1.1 * n < np.mean(used) < 1.6 * n


def test_without_a_blind_distance_it_is_complete_randomness() -> None:
    null = SeenRandomness(DISH, SIZES, eyes(0.0))
    points = null.draw(20_000, np.random.default_rng(2))
    assert len(points) == 20_000
    assert stats.kstest((points**2).sum(axis=1) / 43**2, "uniform").pvalue > 0.01


def test_objects_missed_at_random_leave_the_seen_ones_as_they_are() -> None:
    """Thinning before merging, drawn plainly, gives nearest distances of the same law."""
    null = SeenRandomness(DISH, [1.0], eyes(0.6))
    rng = np.random.default_rng(11)
    direct, thinned = [], []
    for k in range(60):
        direct.append(_mean_nearest(null.draw(80, np.random.default_rng(k))))
        objects = random_points(DISH, 150, rng)
        objects = objects[rng.random(150) < 0.6]
        pairs = linked(objects, np.ones(len(objects)), 0.6, (2.0, 1.0))
        seen, _ = merged_middles(objects, np.ones(len(objects)), pairs)
        thinned.append(_mean_nearest(seen) * math.sqrt(len(seen) / 80))
    assert stats.mannwhitneyu(direct, thinned).pvalue > 0.01


def _mean_nearest(points: np.ndarray) -> float:
    return float(cKDTree(points).query(points, k=2)[0][:, 1].mean())


def test_objects_that_cannot_overlap_keep_their_distance() -> None:
    null = SeenRandomness(DISH, SIZES[SIZES < 2], eyes(1.0, source="contact"))
    points = null.draw(200, np.random.default_rng(5))
    assert points.shape == (200, 2)
    assert cKDTree(points).query(points, k=2)[0][:, 1].min() >= 2 * SIZES.min()
    one = SeenRandomness(DISH, [2.0], eyes(1.0, source="contact"))
    points = one.draw(150, np.random.default_rng(5))
    assert cKDTree(points).query(points, k=2)[0][:, 1].min() >= 4.0


def test_where_so_many_cannot_be_seen_that_is_said() -> None:
    for source in ("planted", "contact"):
        null = SeenRandomness(shapely.box(0, 0, 10, 10), [1.0], eyes(1.0, source=source))
        with pytest.raises(TooCrowded, match="60 spots of these sizes can hardly be told apart"):
            null.draw(60, np.random.default_rng(1))


def test_an_unsure_blind_distance_makes_an_unsure_null() -> None:
    """With twice its standard error the number of near pairs varies more."""
    spread = []
    for se in (0.0, 0.15):
        null = SeenRandomness(DISH, [1.0], eyes(0.6, se))
        near = [
            len(cKDTree(null.draw(200, np.random.default_rng(k))).query_pairs(1.6))
            for k in range(80)
        ]
        spread.append(np.var(near) / np.mean(near))
    assert spread[1] > 1.5 * spread[0]


def test_impossible_values_are_refused() -> None:
    with pytest.raises(ValueError, match="radii must be one or more numbers above 0"):
        SeenRandomness(DISH, [], eyes(0.5))
    with pytest.raises(ValueError, match="radii must be one or more numbers above 0"):
        SeenRandomness(DISH, [1.0, math.nan], eyes(0.5))
    with pytest.raises(ValueError, match="0 or more, not -1"):
        SeenRandomness(DISH, [1.0], eyes(0.5)).draw(-1, np.random.default_rng(1))


def test_names_and_travel() -> None:
    null = SeenRandomness(DISH, [1.0], eyes(0.5))
    assert null.name == "complete spatial randomness, as the detector sees it"
    assert SeenRandomness(DISH, [1.0], eyes(0.5, source="person")).name.endswith(
        "the person sees it"
    )
    assert SeenRandomness(DISH, [1.0], eyes(1, source="contact")).name.endswith("without overlap")
    assert repr(null) == f"<SeenRandomness: {null.name}, 0.5 of the radii's sum>"
    there = pickle.loads(pickle.dumps(null))
    assert np.array_equal(
        there.draw(30, np.random.default_rng(3)), null.draw(30, np.random.default_rng(3))
    )
