"""Measures of regions against closed forms."""

from __future__ import annotations

import numpy as np
import pytest

from detect.regions import Candidates, join, measure_regions

HEIGHT, WIDTH = 140, 200


def measured(
    *shapes: np.ndarray, contrast: np.ndarray | None = None, level: float | None = 0.5
) -> Candidates:
    labels = np.zeros((HEIGHT, WIDTH), np.int32)
    for k, shape in enumerate(shapes):
        labels[shape] = k + 1
    if contrast is None:
        contrast = (labels > 0).astype(np.float32)
    return measure_regions(
        labels,
        len(shapes) + 1,
        contrast.astype(np.float32),
        neck=np.zeros(len(shapes) + 1),
        level=level,
        smallest_px=4,
        largest_px=100,
    )


def ellipse(cx: float, cy: float, a: float, b: float, turn: float = 0.0) -> np.ndarray:
    y, x = np.mgrid[:HEIGHT, :WIDTH]
    u = (x - cx) * np.cos(turn) + (y - cy) * np.sin(turn)
    v = -(x - cx) * np.sin(turn) + (y - cy) * np.cos(turn)
    return np.asarray(np.hypot(u / a, v / b) <= 1)


def test_a_rectangle_has_the_moments_of_a_rectangle() -> None:
    box = np.zeros((HEIGHT, WIDTH), bool)
    box[20:50, 30:130] = True  # 100 wide, 30 high
    found = measured(box)
    assert found.x.tolist() == [79.5]
    assert found.y.tolist() == [34.5]
    assert found.area.tolist() == [3000.0]
    # Second moments of a rectangle about its centre: side^2 / 12.
    assert found.sxx[0] == pytest.approx(100**2 / 12)
    assert found.syy[0] == pytest.approx(30**2 / 12)
    assert found.sxy[0] == pytest.approx(0)
    assert found.elongation[0] == pytest.approx(100 / 30)
    assert found.fill[0] == pytest.approx(3 / np.pi)
    assert found.diameter[0] == pytest.approx(np.sqrt(4 * 3000 / np.pi))


@pytest.mark.parametrize("turn", [0.0, 0.4, 1.2, 2.7])
@pytest.mark.parametrize("axes", [(30, 30), (40, 20), (45, 15)])
def test_a_filled_ellipse_has_the_moments_of_an_ellipse(
    axes: tuple[float, float], turn: float
) -> None:
    a, b = axes
    found = measured(ellipse(99.3, 70.6, a, b, turn))
    assert found.x[0] == pytest.approx(99.3, abs=0.1)
    assert found.y[0] == pytest.approx(70.6, abs=0.1)
    assert found.area[0] == pytest.approx(np.pi * a * b, rel=0.01)
    assert found.sxx[0] + found.syy[0] == pytest.approx((a * a + b * b) / 4, rel=0.01)
    tilted = 0.5 * np.sin(2 * turn) * (a * a - b * b) / 4
    assert found.sxy[0] == pytest.approx(tilted, abs=0.01 * a * a)
    assert found.fill[0] == pytest.approx(1.0, abs=0.01)
    assert found.elongation[0] == pytest.approx(a / b, rel=0.02)
    assert found.rough[0] < 0.03


def test_edge_measures_of_a_step_on_level_ground() -> None:
    disc = ellipse(100, 70, 20, 20)
    found = measured(disc, contrast=np.where(disc, 8.0, 1.0))
    assert found.contrast[0] == pytest.approx(8.0)
    assert found.step[0] == pytest.approx(7.0)
    assert found.open[0] == pytest.approx(1.0)
    assert found.slope[0] == pytest.approx(7 / 8)
    assert found.texture[0] == pytest.approx(0.0, abs=1e-6)


def test_half_a_disc_is_open_on_one_side_only() -> None:
    disc = ellipse(100, 70, 20, 20)
    half = disc & (np.arange(WIDTH) < 100)
    found = measured(half, contrast=np.where(disc, 8.0, 0.0))
    assert 0.4 < found.open[0] < 0.8
    assert found.step[0] == pytest.approx(8.0)


def test_the_edge_of_the_map_is_no_edge_of_what_it_cuts_off() -> None:
    half = measured(ellipse(100, 0, 30, 30))
    whole = measured(ellipse(100, 70, 30, 30))
    # Half a disc of radius r: the arc is pi r, the cut 2 r; staircases count 4-neighbours.
    assert half.frame[0] == pytest.approx(61 / (61 + 4 * 30 / np.sqrt(2)), rel=0.05)
    assert half.open[0] == pytest.approx(1.0)
    assert half.slope[0] == pytest.approx(whole.slope[0], abs=0.02)
    assert whole.frame[0] == 0.0


def test_the_height_of_a_cut_is_its_level_over_the_mean_inside() -> None:
    disc = ellipse(100, 70, 20, 20)
    cut = measured(disc, contrast=np.where(disc, 8.0, 1.0), level=2.0)
    assert (cut.height[0], cut.local[0]) == (pytest.approx(0.25), 0.0)
    local = measured(disc, contrast=np.where(disc, 8.0, 1.0), level=None)
    assert (local.height[0], local.local[0]) == (0.5, 1.0)


def test_texture_is_the_relative_spread_inside() -> None:
    disc = ellipse(100, 70, 30, 30)
    values = 10 + np.random.default_rng(1).normal(0, 2, disc.shape)
    found = measured(disc, contrast=np.where(disc, values, 0))
    assert found.texture[0] == pytest.approx(values[disc].std() / values[disc].mean(), rel=1e-4)


def test_a_star_is_rougher_than_an_ellipse() -> None:
    y, x = np.mgrid[:HEIGHT, :WIDTH]
    angle, away = np.arctan2(y - 70, x - 100), np.hypot(x - 100, y - 70)
    star = away < 30 * (1 + 0.3 * np.cos(5 * angle))
    assert measured(star).rough[0] > 0.15


def test_regions_of_impossible_size_are_left_out() -> None:
    labels = np.zeros((HEIGHT, WIDTH), np.int32)
    for k, (x, r) in enumerate([(20, 1), (60, 6), (130, 40)]):
        labels[ellipse(x, 70, r, r)] = k + 1
    found = measure_regions(
        labels,
        4,
        (labels > 0).astype(np.float32),
        neck=np.array([0.0, 0.1, 0.2, 0.3]),
        level=None,
        smallest_px=8,
        largest_px=20,
    )
    assert found.x.tolist() == [60.0]
    assert found.neck.tolist() == [0.2]


def test_tables_join_and_part() -> None:
    one, two = measured(ellipse(50, 50, 9, 9)), measured(ellipse(150, 90, 20, 12))
    both = join([one, two])
    assert len(both) == 2
    assert both.where(np.array([1])).x.tolist() == two.x.tolist()
    assert len(join([])) == 0
    assert join([]).diameter.shape == (0,)
