"""The share of objects found, from copies and what became of them."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm

from detect.missed import Trials, by_separation, recall_of, shares, thirds, wilson
from detect.planted import Share
from detect.spots import Spots


def chance(radius: np.ndarray, contrast: np.ndarray, near: np.ndarray) -> np.ndarray:
    """An invented detector: the small, the faint and the crowded are missed."""
    odds = 2.5 + 3.0 * np.log(radius / 8) + 2.0 * np.log(contrast / 10) - 4.0 * near
    return 1 / (1 + np.exp(-odds))


def objects(rng: np.random.Generator, n: int) -> tuple[np.ndarray, ...]:
    """Places far apart, radii and contrasts."""
    x, y = 60.0 * (np.arange(n) % 20), 60.0 * (np.arange(n) // 20)
    return x, y, rng.uniform(5, 12, n), rng.uniform(6, 16, n)


def trials_of(rng: np.random.Generator, m: int) -> Trials:
    radius, contrast = rng.uniform(4, 12, m), rng.uniform(4, 16, m)
    separation = np.where(rng.random(m) < 0.3, rng.uniform(0.5, 1.5, m), 3.0)
    found = rng.random(m) < chance(radius, contrast, np.clip(1.5 - separation, 0, None))
    return Trials(np.arange(m) % 10, radius, contrast, separation, found)


def one_picture(seed: int) -> tuple[float, float, float, float]:
    rng = np.random.default_rng(seed)
    x, y, radius, contrast = objects(rng, 200)
    seen = rng.random(200) < chance(radius, contrast, np.zeros(200))
    spots = Spots.found_at(x[seen], y[seen], radius[seen], contrast=contrast[seen])
    recall = recall_of(trials_of(rng, 150), spots)
    return float(seen.mean()), recall.value, recall.low, recall.high


def test_the_missed_are_told_from_the_found_alone() -> None:
    rows = np.array([one_picture(seed) for seed in range(40)])
    true, told, low, high = rows.T
    assert told.mean() == pytest.approx(true.mean(), abs=0.015)
    assert ((low <= true) & (true <= high)).mean() >= 0.90
    # It is no foregone conclusion: the raw share of copies found is another number.
    raw = np.mean([trials_of(np.random.default_rng(s), 150).found.mean() for s in range(40)])
    assert abs(raw - true.mean()) > 0.05


def test_doubtful_spots_have_less_say() -> None:
    rng = np.random.default_rng(1)
    trials = trials_of(rng, 200)
    x, y, radius, contrast = objects(rng, 40)
    small = np.arange(40) < 20
    radius = np.where(small, 4.5, 11.0)
    alike = Spots.found_at(x, y, radius, contrast=contrast, doubt=np.full(40, 0.1))
    unsure = Spots.found_at(x, y, radius, contrast=contrast, doubt=np.where(small, 0.95, 0.1))
    assert recall_of(trials, unsure).value > recall_of(trials, alike).value + 0.03


def test_where_all_copies_are_found_the_limits_come_from_their_number() -> None:
    rng = np.random.default_rng(4)
    few, many = trials_of(rng, 20), trials_of(rng, 400)
    x, y, radius, contrast = objects(rng, 200)
    spots = Spots.found_at(x, y, radius, contrast=contrast)
    lows = [
        recall_of(
            Trials(t.round, t.radius, t.contrast, t.separation, np.ones(len(t), bool)), spots
        ).low
        for t in (few, many)
    ]
    assert 0.7 < lows[0] < lows[1] < 1


def test_nothing_to_go_by_is_refused() -> None:
    trials = trials_of(np.random.default_rng(1), 30)
    with pytest.raises(ValueError, match="0 spots and 10 rounds"):
        recall_of(trials, Spots.none())
    with pytest.raises(ValueError, match="1 spots and 1 rounds"):
        recall_of(trials.where(trials.round == 0), Spots.found_at([1], [1], [1], contrast=[5]))


def test_columns_of_different_length_are_refused() -> None:
    t = trials_of(np.random.default_rng(1), 30)
    with pytest.raises(ValueError, match=r"contrast has shape \(29,\), not \(30,\)"):
        Trials(t.round, t.radius, t.contrast[1:], t.separation, t.found)


@pytest.mark.parametrize(("found", "n"), [(0, 10), (7, 10), (10, 10), (33, 40)])
def test_wilson_limits_solve_the_score_equation(found: int, n: int) -> None:
    """Each limit p has |share - p| = z sqrt(p (1 - p) / n), the definition in Wilson (1927)."""
    z = norm.ppf(0.975)
    for p in wilson(found / n, n):
        assert abs(found / n - p) == pytest.approx(z * np.sqrt(p * (1 - p) / n), abs=1e-9)


def test_classes_hold_every_copy_once() -> None:
    rng = np.random.default_rng(3)
    trials = trials_of(rng, 90)
    for table in (
        thirds(trials.radius, trials.found),
        thirds(trials.contrast, trials.found),
        by_separation(trials),
    ):
        assert sum(share.copies for share in table) == 90
        assert sum(share.found for share in table) == trials.found.sum()
    assert len(thirds(trials.radius, trials.found)) == 3


def test_the_last_bound_belongs_to_its_class() -> None:
    table = shares([1.0, 2.0, 2.0, 3.0], [True, False, True, True], [1.0, 2.0, 3.0])
    assert table == (Share(1.0, 2.0, 1, 1), Share(2.0, 3.0, 3, 2))
