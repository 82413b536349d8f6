"""Limits of a Poisson count, and densities with the uncertainty of the scale."""

from __future__ import annotations

import math

import numpy as np
import pytest

from analyse.density import density_per_cm2, garwood_limits
from tests.analyse import published


@pytest.mark.parametrize(
    ("count", "level", "low", "high"),
    [
        (0, 0.95, 0.0, 3.689),
        (10, 0.95, 4.80, 18.39),
        (25, 0.95, 16.18, 36.90),
        (25, 0.90, 17.38, 34.92),
        (25, 0.99, 14.00, 41.00),
    ],
)
def test_garwood_1936(count: int, level: float, low: float, high: float) -> None:
    """Garwood (1936), Biometrika 28, 437-442: values as later works quote them."""
    limits = garwood_limits(count, level=level)
    assert (limits.low, limits.high) == pytest.approx((low, high), abs=5e-3)


def test_garwood_table() -> None:
    """The law of Garwood (1936) at three levels, computed beforehand to four decimals."""
    table = published.garwood()
    assert len(table) == 40
    for count, *limits in table:
        for level, low, high in zip((0.90, 0.95, 0.99), limits[::2], limits[1::2], strict=True):
            seen = garwood_limits(int(count), level=level)
            assert (seen.low, seen.high) == pytest.approx((low, high), abs=6e-5)


def test_no_count_is_not_the_one_sided_limit() -> None:
    """At a count of 0 some programs give 2.996, the one-sided limit; the two-sided is 3.689."""
    assert garwood_limits(0).high == pytest.approx(-math.log(0.025))


def test_limits_cover_the_mean() -> None:
    rng = np.random.default_rng(3)
    limits = {k: garwood_limits(k) for k in range(40)}
    draws = rng.poisson(6.5, 20_000)
    covered = np.mean([limits[int(k)].low <= 6.5 <= limits[int(k)].high for k in draws])
    assert 0.95 <= covered <= 0.99


def test_density_without_scale_uncertainty_is_garwood_over_area() -> None:
    d = density_per_cm2(10, 200.0, 0.0)
    assert (d.value, d.low, d.high, d.level) == pytest.approx((5.0, 2.3977, 9.1952, 0.95), abs=5e-5)


def test_scale_uncertainty_widens_in_quadrature_on_the_log_scale() -> None:
    """Many points leave only the area's uncertainty, twice that of a length, times 1.96."""
    d = density_per_cm2(10**10, 1e10, 0.02)
    assert math.log(d.high / d.value) == pytest.approx(1.959964 * 0.04, rel=1e-4)
    assert math.log(d.value / d.low) == pytest.approx(1.959964 * 0.04, rel=1e-4)
    narrow, wide = density_per_cm2(30, 100.0, 0.0), density_per_cm2(30, 100.0, 0.05)
    side = math.log(wide.high / wide.value) ** 2 - math.log(narrow.high / narrow.value) ** 2
    assert math.sqrt(side) == pytest.approx(1.959964 * 0.1, rel=1e-6)


def test_density_of_no_points() -> None:
    assert density_per_cm2(0, 100.0, 0.0).high == pytest.approx(3.6889, abs=5e-5)
    d = density_per_cm2(0, 100.0, 0.1)
    assert (d.value, d.low) == (0.0, 0.0)
    assert d.high == pytest.approx(3.6889 * math.exp(1.959964 * 0.2), rel=1e-4)


def test_density_changes_with_the_square_of_the_unit() -> None:
    one, other = density_per_cm2(7, 500.0, 0.01), density_per_cm2(7, 5.0, 0.01)
    assert (other.value, other.low, other.high) == pytest.approx(
        (100 * one.value, 100 * one.low, 100 * one.high)
    )


@pytest.mark.parametrize("count", [-1, 2.5])
def test_an_impossible_count_is_refused(count: float) -> None:
    with pytest.raises(ValueError, match=f"a whole number of 0 or more, not {count}"):
        garwood_limits(count)  # type: ignore[arg-type]


@pytest.mark.parametrize("level", [0.0, 1.0, 95.0])
def test_an_impossible_level_is_refused(level: float) -> None:
    with pytest.raises(ValueError, match=f"lies between 0 and 1, not at {level}"):
        garwood_limits(3, level=level)
