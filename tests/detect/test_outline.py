"""Outlines settled on half height, whatever the level at which the region was cut."""

from __future__ import annotations

import numpy as np
import pytest

from detect.outline import settle_outlines
from detect.regions import Candidates


def hill(a: float, b: float, turn: float, *, width: float = 4.0) -> np.ndarray:
    """A plateau of height 10 whose flank, `width` pixels wide, is at 5 on the ellipse a, b."""
    y, x = np.mgrid[:120, :160]
    u = (x - 80) * np.cos(turn) + (y - 60) * np.sin(turn)
    v = -(x - 80) * np.sin(turn) + (y - 60) * np.cos(turn)
    away = (np.hypot(u / a, v / b) - 1) * np.sqrt(a * b)
    return (10 * np.clip(0.5 - away / width, 0, 1)).astype(np.float32)


def region(
    a: float, b: float, turn: float, *, cut: float = 1.0, height: float = 10.0
) -> Candidates:
    """The ellipse a, b, cut `cut` times too large."""
    a, b = a * cut, b * cut
    c, s = np.cos(turn), np.sin(turn)
    moments = (
        (a**2 * c**2 + b**2 * s**2) / 4,
        (a**2 * s**2 + b**2 * c**2) / 4,
        (a**2 - b**2) * c * s / 4,
    )
    columns = (80.0, 60.0, np.pi * a * b, *moments, height, *[0.0] * 9)
    return Candidates(*(np.array([v]) for v in columns))


@pytest.mark.parametrize("shape", [(20, 20, 0.0), (30, 15, 0.6), (24, 18, 2.0)])
@pytest.mark.parametrize("cut", [0.8, 0.9, 1.0, 1.1, 1.25])
def test_a_region_cut_too_small_or_large_ends_at_half_height(
    shape: tuple[float, float, float], cut: float
) -> None:
    factor = settle_outlines(region(*shape, cut=cut), hill(*shape))
    assert factor[0] * cut == pytest.approx(1.0, abs=0.035)


def test_the_correction_is_limited() -> None:
    assert settle_outlines(region(20, 20, 0, cut=0.65), hill(20, 20, 0))[0] == 1.4
    assert settle_outlines(region(20, 20, 0, cut=1.58), hill(20, 20, 0))[0] == 0.7


def test_without_an_edge_the_region_stays_as_it_is() -> None:
    level = np.full((120, 160), 10.0, np.float32)
    assert settle_outlines(region(20, 20, 0), level).tolist() == [1.0]


def test_the_pale_middle_of_a_ring_is_no_edge() -> None:
    ring = hill(20, 20, 0) - hill(12, 12, 0)
    factor = settle_outlines(region(20, 20, 0, height=6.0), ring)
    # Half of 6 is crossed 0.8 px beyond half height; rays are walked in steps of 1/30.
    assert factor[0] == pytest.approx(1 + 0.8 / 20, abs=1 / 30)


def test_a_neighbour_on_one_side_does_not_move_the_outline() -> None:
    land = hill(20, 20, 0)
    land[:, 100:] = 10.0
    assert settle_outlines(region(20, 20, 0), land)[0] == pytest.approx(1.0, abs=0.04)


def test_no_region_has_no_outline() -> None:
    none = region(20, 20, 0).where(np.zeros(1, bool))
    assert settle_outlines(none, hill(20, 20, 0)).shape == (0,)
