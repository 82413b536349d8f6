"""Single leaves: parted where they touch, whole where they are slim, measured as drawn."""

from __future__ import annotations

import numpy as np
import pytest

from detect.contrast import Contrast
from detect.leaves import Blades, find_blades


def ellipse(
    shape: tuple[int, int], x0: float, y0: float, long: float, short: float, angle: float
) -> np.ndarray:
    y, x = np.mgrid[: shape[0], : shape[1]]
    u = (x - x0) * np.cos(angle) + (y - y0) * np.sin(angle)
    v = (y - y0) * np.cos(angle) - (x - x0) * np.sin(angle)
    return np.hypot(u / long, v / short) <= 1


def blades_of(leaf: np.ndarray, smallest_px: float = 24.0) -> Blades:
    contrast = Contrast(30 * leaf.astype(np.float32), 1.0, 1.0, 5.0, np.array([1.0, 0, 0]), 1.0)
    lab = np.stack([50 + 0 * contrast.map, -20 * contrast.map / 30, contrast.map], axis=2)
    return find_blades(contrast, lab, np.ones(leaf.shape, bool), smallest_px)


@pytest.mark.parametrize("angle", [0.0, 0.4, 1.3, 2.5])
def test_a_leaf_has_its_place_axes_and_hue(angle: float) -> None:
    blades = blades_of(ellipse((90, 110), 54, 43, 18, 8, angle))
    assert len(blades) == 1
    assert (blades.x[0], blades.y[0]) == pytest.approx((54, 43), abs=0.3)
    assert (blades.long[0], blades.short[0]) == pytest.approx((18, 8), rel=0.06)
    assert blades.area[0] == pytest.approx(np.pi * 18 * 8, rel=0.05)
    along = blades.cosine[0] * np.cos(angle) + blades.sine[0] * np.sin(angle)
    assert abs(along) == pytest.approx(1.0, abs=0.002)
    assert blades.hue[0] == pytest.approx([-20, 30], rel=0.02)
    assert blades.slim[0] == pytest.approx(1.5, rel=0.05)


def test_two_touching_leaves_are_two() -> None:
    leaf = ellipse((90, 110), 45, 40, 12, 8, 0.0) | ellipse((90, 110), 57, 52, 12, 8, np.pi / 2)
    blades = blades_of(leaf)
    assert len(blades) == 2
    assert blades.area.sum() == pytest.approx(leaf.sum(), rel=0.05)


@pytest.mark.parametrize("angle", [0.0, 0.15, 0.5, 0.8, 1.2])
@pytest.mark.parametrize("short", [2.0, 3.0])
def test_a_slim_blade_stays_one(angle: float, short: float) -> None:
    """Once a slim blade fell into a row of pieces wherever its width stepped by a pixel."""
    assert len(blades_of(ellipse((120, 120), 60, 60, 30, short, angle))) == 1


def test_bare_ground_has_no_leaf() -> None:
    blades = blades_of(np.zeros((40, 50), bool))
    assert len(blades) == 0
    assert blades.hue.shape == (0, 2)
