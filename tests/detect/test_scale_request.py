"""What is known about lengths, and the scale and uncertainty that follow in a picture."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import cv2
import numpy as np
import pytest

from detect.errors import ScaleNotFound
from detect.photograph import read_photograph
from detect.requests import detect_photograph, parse_request
from tests.discs import scattered, write_discs


@pytest.mark.parametrize(
    ("values", "stated"),
    [
        ({"mm_per_pixel": 0.2}, 0.0),
        ({"mm_per_pixel": 0.2, "scale_uncertainty": "1%"}, 0.01),
        ({"line": "10,10,210,10", "line_length": "5cm"}, 2**0.5 / 200),
        (
            {"line": "10,10,210,10", "line_length": "5cm", "scale_uncertainty": "2 %"},
            (2 / 200**2 + 0.02**2) ** 0.5,
        ),
        ({"height": "3m", "focal_length": "9mm", "sensor_width": "13mm"}, 0.05),
        (
            {
                "height": "3m",
                "focal_length": "9mm",
                "sensor_width": "13mm",
                "scale_uncertainty": "1.5%",
            },
            0.015,
        ),
    ],
)
def test_every_scale_states_its_uncertainty(
    values: dict[str, Any], stated: float, tmp_path: Path
) -> None:
    photograph = read_photograph(write_discs(tmp_path / "a.png", scattered(3, seed=1)))
    scale = parse_request(values).scale.resolve(photograph, None)
    assert scale is not None
    assert scale.relative_uncertainty == pytest.approx(stated)


def test_plates_found_give_the_scale_and_the_area(tmp_path: Path) -> None:
    path = tmp_path / "plot.png"
    page = np.full((500, 640, 3), (60, 90, 120), np.uint8)
    for x, y in ((60, 50), (560, 50), (560, 425), (60, 425)):
        page[y - 30 : y + 31, x - 30 : x + 31] = 235
        page[y - 18 : y + 19, x - 18 : x + 19] = 15
    cv2.imwrite(str(path), page)
    values = {"corners": "plates", "plot": "1000x750mm", "diameter": "12-36px"}
    _, sheet = detect_photograph(path, parse_request(values))
    assert sheet.scale is not None
    assert sheet.scale.source == "plates"
    assert sheet.scale.mm_per_px([[300, 200]])[0] == pytest.approx(2.0, rel=1e-4)
    assert sheet.area.kind == "plot"
    assert sheet.area.polygon.bounds == pytest.approx((60, 50, 560, 425), abs=0.02)
    assert sheet.settings["request"]["corners"] == "plates"
    cv2.imwrite(str(path), page[:400])
    with pytest.raises(
        ScaleNotFound, match="Four corner plates are needed and 2 can be seen in plot"
    ):
        detect_photograph(path, parse_request(values))
    cv2.imwrite(str(path), np.full_like(page, 120))
    with pytest.raises(
        ScaleNotFound, match=r"needed and none can be seen in plot[.]\w+; photograph"
    ):
        detect_photograph(path, parse_request(values))
