"""Options of a grid, and the rule for the side of its quadrats."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from analyse.errors import GridWrong
from analyse.grid_options import GridOptions, default_side
from detect.lengths import Length


@pytest.mark.parametrize(
    ("area", "n", "side"),
    [
        (10_000.0, 50, 20.0),
        (750_000.0, 120, 120.0),
        (5808.8, 62, 15.0),
        (1.0, 42, 0.2),
        (1e8, 3000, 250.0),
        (100.0, 0, 5.0),
        (100.0, 8, 5.0),
        (100.0, 9, 5.0),
        (1e4, 10, 40.0),  # sqrt(2000) lies as near to 40 as to 50
        (1e2, 10, 4.0),
        (1e-5, 10**6, 4e-6),
    ],
)
def test_default_side(area: float, n: int, side: float) -> None:
    """sqrt(2 A / n), common practice, to the nearest sensible figure worked out by hand."""
    assert default_side(area, n) == side


@given(st.floats(1e-6, 1e12), st.integers(0, 10**6))
def test_default_side_is_near_the_rule_and_follows_the_unit(area: float, n: int) -> None:
    side, wished = default_side(area, n), math.sqrt(2 * area / max(n, 8))
    assert abs(math.log(side / wished)) <= math.log(4 / 3) / 2 + 1e-9
    figure = float(f"{side:e}".split("e")[0])
    assert figure in (1.0, 1.2, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0)
    assert default_side(100 * area, n) == pytest.approx(10 * side)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"side": Length(5, "mm"), "shape": (2, 2)}, "Only one of --quadrat, --grid and --rings"),
        ({"shape": (2, 2), "rings": (2, 2)}, "Only one of --quadrat, --grid and --rings"),
        ({"shape": (1, 1)}, "--grid 1x1 makes no grid of at least 2 quadrats; .* such as 5x5"),
        ({"shape": (0, 5)}, "--grid 0x5 makes no grid"),
        ({"rings": (-3, -8)}, "--rings -3x-8 makes no grid .* such as 3x8"),
        ({"shape": (400, 500)}, "--grid 400x500 makes more than 100,000 quadrats; give fewer"),
        ({"join_below": 1.0}, "from 0 to below 1, not at 1"),
        ({"join_below": math.nan}, "from 0 to below 1, not at nan"),
    ],
)
def test_impossible_options_are_refused(options: dict[str, object], message: str) -> None:
    with pytest.raises(GridWrong, match=message):
        GridOptions(**options)  # type: ignore[arg-type]
