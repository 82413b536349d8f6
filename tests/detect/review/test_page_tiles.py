"""A photograph too large to be sent whole is put together from tiles, each where it belongs."""

from __future__ import annotations

import hashlib
from dataclasses import replace
from pathlib import Path

import cv2
import numpy as np
import pytest
from playwright.sync_api import Browser

from detect.area import frame_area
from detect.sheet import PhotographIdentity, read_sheet, write_sheet
from detect.spots import Spots
from tests.detect.review.browsing import Desk, Server, reviewing
from tests.detect.review.drawn import Laid, lay

WIDTH, HEIGHT = 8200, 5000
DISCS = {(700, 600): (40, 40, 220), (4100, 2500): (40, 200, 40), (7900, 4700): (220, 60, 40)}


@pytest.fixture
def laid(tmp_path: Path) -> Laid:
    """Three discs of different colours, far from each other, in 41 megapixels."""
    small = lay(tmp_path / "small")
    image = np.full((HEIGHT, WIDTH, 3), 120, dtype=np.uint8)
    for place, colour in DISCS.items():
        cv2.circle(image, place, 150, colour, -1)
    data = cv2.imencode(".jpg", image)[1].tobytes()
    folder = tmp_path / "large"
    folder.mkdir()
    (folder / "field.jpg").write_bytes(data)
    sheet = read_sheet(small.sheet)
    identity = PhotographIdentity(
        "field.jpg", hashlib.sha256(data).hexdigest(), WIDTH, HEIGHT, None
    )
    places = np.array(list(DISCS), dtype=np.float64)
    spots = Spots.found_at(
        places[:, 0],
        places[:, 1],
        np.full(3, 150.0),
        contrast=np.full(3, 9.0),
        fill=np.ones(3),
        doubt=np.full(3, 0.1),
    )
    settings = sheet.settings | {"photograph_at": "field.jpg"}
    large = replace(
        sheet, photograph=identity, area=frame_area(WIDTH, HEIGHT), settings=settings, spots=spots
    )
    return Laid(folder, write_sheet(large, folder), (), 3)


COLOUR = """([x, y]) => {
  const canvas = document.getElementById("layer-photograph");
  const copy = new OffscreenCanvas(1, 1);
  const context = copy.getContext("2d", { willReadFrequently: true });
  context.drawImage(canvas, -Math.round(x), -Math.round(y));
  return [...context.getImageData(0, 0, 1, 1).data];
}"""


def colour_at(desk: Desk, x: float, y: float) -> list[int]:
    """Return red, green, blue of the stage where a place of the photograph is shown."""
    bounds = desk.page.locator("#stage").bounding_box()
    assert bounds is not None
    sx, sy = desk.at(x, y)
    return list(desk.page.evaluate(COLOUR, [sx - bounds["x"], sy - bounds["y"]]))[:3]


def is_shown(desk: Desk, place: tuple[int, int], colour: tuple[int, int, int]) -> bool:
    seen = colour_at(desk, *place)
    return max(abs(a - b) for a, b in zip(seen, colour[::-1], strict=True)) < 25


def test_tiles_lie_where_they_belong_from_afar_and_near(
    browser: Browser, server: Server, laid: Laid
) -> None:
    with reviewing(browser, server) as desk:
        tiles_are_there = "document.getElementById('stage').dataset.tiles === 'all'"
        desk.wait(tiles_are_there)
        for place, colour in DISCS.items():
            assert is_shown(desk, place, colour), f"{place} from afar"
        for place, colour in DISCS.items():
            side = 1 if place[0] < WIDTH / 2 else -1  # that which stays on the stage
            desk.key("0")
            desk.page.mouse.move(*desk.at(*place))
            for scale in (0.4, 1.5):
                while float(desk.stage("scale")) < scale:
                    before = desk.stage("scale")
                    desk.page.mouse.wheel(0, -300)
                    desk.wait(f"document.getElementById('stage').dataset.scale !== '{before}'")
                desk.wait(tiles_are_there)
                assert is_shown(desk, (place[0] + 138 * side, place[1]), colour), (
                    f"{place} at {scale}"
                )
                assert not is_shown(desk, (place[0] + 162 * side, place[1]), colour), (
                    f"{place} at {scale}"
                )
