"""Leaves given to plants: one centre for each rosette, whatever touches, and none for crumbs."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from detect import gathering
from detect.gathering import _fewest, _imagined, _savings, gather
from detect.leaves import Blades


def blades(rows: list[tuple[float, float, float, float, float, float]]) -> Blades:
    """Leaves x, y, half length, half width, angle, a*."""
    x, y, long, short, angle, a = np.array(rows, float).reshape(-1, 6).T
    labels = np.zeros((1, 1), np.int32)
    hue = np.column_stack([a, 20 + 0 * a])
    area = np.pi * long * short
    return Blades(labels, x, y, area, long, short, np.cos(angle), np.sin(angle), hue)


def star(
    x: float, y: float, n: int, *, ring: float = 14.0, turn: float = 0.3, a: float = -25.0
) -> list[tuple[float, float, float, float, float, float]]:
    angles = turn + 2 * np.pi * np.arange(n) / n
    return [
        (x + ring * np.cos(t), y + ring * np.sin(t), 9.0, 5.0 if n > 2 else 3.0, t, a)
        for t in angles
    ]


@pytest.mark.parametrize("n", [2, 3, 4, 5, 6, 7, 8])
def test_leaves_about_a_centre_are_one_plant(n: int) -> None:
    plants = gather(blades(star(60, 50, n)), 16, 48)
    assert len(plants) == 1
    assert (plants.x[0], plants.y[0]) == pytest.approx((60, 50), abs=0.5)
    assert plants.owner.tolist() == [0] * n
    assert 1.45 < plants.explained[0] <= n
    area = n * np.pi * 9 * (5 if n > 2 else 3)
    assert plants.radius[0] == pytest.approx(np.sqrt(area / np.pi))


@pytest.mark.parametrize("apart", [32.0, 38.0, 60.0])
@pytest.mark.parametrize("turn", [0.0, 0.5])
def test_two_plants_keep_their_own_leaves(apart: float, turn: float) -> None:
    rows = star(60, 50, 5, turn=turn) + star(60 + apart, 54, 5, turn=turn + 0.4, a=-35)
    plants = gather(blades(rows), 16, 48)
    assert len(plants) == 2
    left, right = sorted(range(2), key=lambda k: plants.x[k])
    assert plants.owner.tolist() == [left] * 5 + [right] * 5


def test_crumbs_and_lone_leaves_are_no_plant() -> None:
    rng = np.random.default_rng(4)
    crumbs = [(*rng.uniform(0, 300, 2), 1.5, 1.0, 0.0, -10.0) for _ in range(60)]
    plants = gather(blades([*crumbs, (150, 150, 9, 5, 0, -25)]), 16, 48)
    assert len(plants) == 0
    assert (plants.owner == -1).all()


def test_a_compact_plant_is_one_of_one_leaf() -> None:
    plants = gather(blades([(40, 40, 12, 11, 0, -25)]), 16, 48)
    assert (plants.x.tolist(), plants.y.tolist()) == ([40.0], [40.0])


def test_no_leaves_are_no_plants() -> None:
    plants = gather(blades([]), 16, 48)
    assert len(plants) == 0
    assert plants.owner.shape == (0,)


def test_the_fewest_plants_are_nearly_the_best_of_all_sets() -> None:
    """Against trying every set of plants: the same worth in nearly every case, never more."""
    rng = np.random.default_rng(8)
    as_good = 0
    for _ in range(40):
        offer = rng.random((7, 9)) * (rng.random((7, 9)) < 0.5)
        plant, leaf = np.nonzero(offer > 0)
        own, best = _fewest(plant, leaf, offer[plant, leaf])
        n = int(plant.max()) + 1
        worth = best.sum() - 1.45 * np.unique(own[own >= 0]).size
        every = [
            offer[list(chosen)].max(axis=0).sum() - 1.45 * size if size else 0.0
            for size in range(n + 1)
            for chosen in itertools.combinations(range(n), size)
        ]
        assert worth <= max(every) + 1e-9
        as_good += worth > max(every) - 1e-9
    assert as_good >= 36


def test_the_same_leaves_in_another_order_are_the_same_plants() -> None:
    rows = star(60, 50, 5) + star(95, 60, 4, turn=0.1) + star(150, 40, 2)
    shuffle = np.random.default_rng(2).permutation(len(rows))
    one = gather(blades(rows), 16, 48)
    other = gather(blades([rows[k] for k in shuffle]), 16, 48)
    assert sorted(np.round(one.x, 6)) == sorted(np.round(other.x, 6))


def test_ground_broken_into_leaves_costs_little_and_spoils_no_plant_beside_it(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """On a wrong colour 9,000 leaves of one clump took three times the rest of the detection."""
    looked_at: list[tuple[int, int]] = []

    def counted(*of: object) -> object:
        found = _savings(*of)  # type: ignore[arg-type]
        looked_at.append((len(of[1]), found[0].size))  # type: ignore[arg-type]
        return found

    monkeypatch.setattr(gathering, "_savings", counted)
    rng = np.random.default_rng(6)
    at = rng.uniform(0, 900, (3000, 2))
    field = [
        (x, y, 7.0, 4.0, t, -25.0) for (x, y), t in zip(at, rng.uniform(0, 3, 3000), strict=True)
    ]
    alone = gather(blades(star(1100, 50, 5)), 16, 48)
    plants = gather(blades([*field, *star(1100, 50, 5)]), 16, 48)
    assert len(_imagined(blades(field), 16, 48)) > 100_000  # what the field would suggest
    assert looked_at[0] == looked_at[1]
    assert plants.x.tolist() == alone.x.tolist()
    assert (plants.owner[:3000] == -1).all()


def test_many_clumps_cost_as_much_as_each_alone(monkeypatch: pytest.MonkeyPatch) -> None:
    sizes: list[int] = []

    def counted(*of: object) -> object:
        sizes.append(of[2].size)  # type: ignore[attr-defined]
        return _fewest(*of)  # type: ignore[arg-type]

    monkeypatch.setattr(gathering, "_fewest", counted)
    rows = [leaf for k in range(600) for leaf in star(200.0 * (k % 25), 200.0 * (k // 25), 5)]
    plants = gather(blades(rows), 16, 48)
    assert len(plants) == 600
    assert max(sizes) < 2_000
