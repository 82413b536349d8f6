"""Objects across the edge of a plot are measured whole, because the ground goes on beyond it."""

from __future__ import annotations

import cv2
import numpy as np
import pytest
from scipy.spatial import cKDTree

from detect.area import plot_area
from detect.find import find_spots
from detect.lengths import Length
from detect.wanted import DetectOptions
from tests.scenes import photograph_of

RADIUS, EDGE = 9.0, 60.0


def test_edge_of_a_plot_does_not_draw_centres_inwards() -> None:
    """Found on a picture of published points: a disc 2 px outside was counted, centres moved 3 px."""
    rng = np.random.default_rng(7)
    image = np.full((400, 400), 0.35, dtype=np.float32)
    offsets = np.array([-6.0, -4.0, -2.5, 2.5, 4.0, 6.0])
    across = np.column_stack([EDGE + offsets, 90 + 42 * np.arange(6)])
    within = np.column_stack([np.tile([150, 210, 270], 5), np.repeat(80 + 55 * np.arange(5), 3)])
    for x, y in np.vstack([across, within]):
        centre = (round(x * 16), round(y * 16))
        cv2.circle(image, centre, round(RADIUS * 16), 0.75, -1, cv2.LINE_AA, 4)
    image = cv2.GaussianBlur(image, (0, 0), 0.8) + rng.normal(0, 0.01, image.shape)
    corners = [[EDGE, EDGE], [340, EDGE], [340, 340], [EDGE, 340]]
    options = DetectOptions(diameter=(Length(12, "px"), Length(28, "px")))
    spots = find_spots(photograph_of(image), plot_area(corners), options).spots
    true = np.vstack([across[offsets > 0], within])
    assert len(spots) == len(true)
    distance, _ = cKDTree(spots.centres).query(true)
    assert distance.max() < 0.5
    assert spots.radius == pytest.approx(np.full(len(spots), RADIUS), rel=0.08)
