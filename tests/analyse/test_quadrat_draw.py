"""Which quadrats a spot check draws: at random, by strata of count, the same for the same seed."""

from __future__ import annotations

import numpy as np
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st

from analyse.errors import TooFewQuadrats
from analyse.grid_options import GridOptions
from analyse.pattern import pattern_from_sheet
from analyse.quadrat_draw import (
    SpotCheckOptions,
    draw_for_sheet,
    draw_quadrats,
    strata_by_count,
)
from analyse.quadrats import count_in_quadrats, lay_grid
from detect.errors import OptionWrong
from detect.spot_check import outline_of
from tests.analyse.finished import TILT, scattered, sheet_of


@given(
    st.lists(st.integers(0, 40), min_size=5, max_size=120), st.integers(5, 30), st.integers(0, 99)
)
def test_every_stratum_is_drawn_and_no_quadrat_twice(
    counts: list[int], number: int, seed: int
) -> None:
    number = min(number, len(counts))
    drawn, stratum = draw_quadrats(counts, SpotCheckOptions(quadrats=number, seed=seed))
    assert len(set(drawn.tolist())) == len(drawn) == number
    sizes, mine = np.bincount(stratum), np.bincount(stratum[drawn], minlength=stratum.max() + 1)
    assert ((mine >= np.minimum(2, sizes)) & (mine <= sizes)).all()
    assert sizes.min() >= 1
    order = np.argsort(counts, kind="stable")
    assert (np.diff(stratum[order]) >= 0).all()


def test_each_quadrat_of_a_stratum_is_drawn_as_often() -> None:
    counts = np.array([0] * 12 + [1] * 6 + [5] * 6)
    often = np.zeros(24)
    for seed in range(800):
        drawn, stratum = draw_quadrats(counts, SpotCheckOptions(quadrats=8, seed=seed))
        often[drawn] += 1
    for each in range(stratum.max() + 1):
        mine = often[stratum == each]
        expected = 800 * 4 / mine.size
        spread = np.sqrt(expected * (1 - 4 / mine.size))
        assert (np.abs(mine - expected) < 4 * spread).all()


def test_the_order_tells_nothing_of_the_counts() -> None:
    counts = np.arange(40)
    firsts = [
        counts[draw_quadrats(counts, SpotCheckOptions(quadrats=8, seed=seed))[0][0]]
        for seed in range(300)
    ]
    lasts = [
        counts[draw_quadrats(counts, SpotCheckOptions(quadrats=8, seed=seed))[0][-1]]
        for seed in range(300)
    ]
    assert abs(np.mean(firsts) - np.mean(lasts)) < 4 * 12 * np.sqrt(2 / 300)


def test_the_same_seed_draws_the_same() -> None:
    counts = np.arange(30)
    one, again, other = (
        draw_quadrats(counts, SpotCheckOptions(seed=seed))[0].tolist() for seed in (3, 3, 4)
    )
    assert one == again != other


def test_strata_hold_about_equal_sums_of_roots() -> None:
    counts = np.random.default_rng(2).poisson(3, 200)
    stratum = strata_by_count(counts, 16)
    shares = np.bincount(stratum, weights=np.sqrt(counts + 0.5))
    assert stratum.max() == 3
    assert shares.max() / shares.min() < 1.05


@pytest.mark.parametrize("matrix", [None, TILT])
def test_outlines_lie_where_the_quadrats_are(matrix: list[list[float]] | None) -> None:
    sheet = sheet_of(scattered(80), matrix=matrix)
    draw = draw_for_sheet(sheet, GridOptions(shape=(5, 6)), SpotCheckOptions(quadrats=12, seed=2))
    assert (len(draw.quadrats), sum(draw.sizes), draw.total) == (12, 30, 80)
    pattern = pattern_from_sheet(sheet)
    grid = lay_grid(pattern.area, 80, GridOptions(shape=(5, 6)), pattern.unit)
    counts = count_in_quadrats(pattern.points, grid)
    for each in draw.quadrats:
        assert each.counted == counts[each.quadrat - 1]
        outline = outline_of(each.outline)
        inside = shapely.intersects_xy(outline, sheet.spots.x, sheet.spots.y).sum()
        assert abs(int(inside) - each.counted) <= 1  # a tenth of a pixel at the line
        if sheet.scale is not None:
            middle = shapely.transform(outline, sheet.scale.to_mm).centroid
            assert grid.polygons[each.quadrat - 1].contains(middle)


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"quadrats": 4}, "A spot check takes 5 to 200 quadrats, not 4."),
        ({"quadrats": 201}, "A spot check takes 5 to 200 quadrats, not 201."),
        ({"within": 0.0}, "within must lie between 0 and 1, not at 0.0."),
        ({"seed": -1}, "-1"),
    ],
)
def test_impossible_options_are_refused(values: dict[str, float], message: str) -> None:
    with pytest.raises(OptionWrong, match=message):
        SpotCheckOptions(**values)  # type: ignore[arg-type]


def test_too_few_quadrats_are_told() -> None:
    with pytest.raises(TooFewQuadrats, match="There are 6 quadrats, fewer than the 10 to be drawn"):
        draw_quadrats([1] * 6, SpotCheckOptions())
