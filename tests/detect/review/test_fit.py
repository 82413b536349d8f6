"""The circle that fits the picture at a click."""

from __future__ import annotations

from pathlib import Path

import cv2
import numpy as np
import pytest

from detect.photograph import Photograph
from detect.review.fit import fit_circle, usual_radius
from detect.spots import Spots
from tests.reviewing import Page, review_of


def a_picture(x: float, y: float, r: float, *, light: bool, seed: int = 1) -> Photograph:
    """One disc on a noisy, slightly uneven ground."""
    rows, columns = np.mgrid[:160, :200].astype(np.float64)
    cover = np.clip(r + 0.5 - np.hypot(columns - x, rows - y), 0, 1)
    ground = 110 + 0.1 * columns + np.random.default_rng(seed).normal(0, 3, rows.shape)
    value = ground + cover * (60 if light else -60)
    stored = np.clip(np.dstack([value, 0.9 * value, 0.8 * value]), 0, 255).astype(np.uint8)
    return Photograph(Path("a.png"), "ab", stored)


@pytest.mark.parametrize("light", [True, False])
@pytest.mark.parametrize("r", [4.0, 7.0, 12.0, 20.0])
@pytest.mark.parametrize(("dx", "dy"), [(0, 0), (1.2, -0.8), (-1.5, 1.0)])
def test_radius_and_centre_of_a_disc_are_found(light: bool, r: float, dx: float, dy: float) -> None:
    x, y = 100.3, 80.6
    found = fit_circle(a_picture(x, y, r, light=light), x + dx, y + dy, 9.0)
    assert found.fitted
    assert found.radius == pytest.approx(r, rel=0.12, abs=0.3)
    assert np.hypot(found.x - x, found.y - y) < 2.3


def test_on_empty_ground_the_usual_radius_is_given() -> None:
    picture = a_picture(30, 30, 8, light=True)
    rng = np.random.default_rng(2)
    found = [fit_circle(picture, *rng.uniform([80, 70], [180, 140]), 8.0) for _ in range(60)]
    assert sum(each.fitted for each in found) <= 3
    assert {each.radius for each in found if not each.fitted} == {8.0}


def test_a_neighbour_does_not_make_the_circle_larger() -> None:
    one, other = a_picture(100, 80, 8, light=True), a_picture(122, 80, 8, light=True)
    both = Photograph(Path("a.png"), "ab", np.maximum(one.stored[:], other.stored[:]))
    assert fit_circle(both, 100, 80, 8.0).radius == pytest.approx(8, rel=0.12)


def test_plain_colour_and_corners_do_no_harm() -> None:
    plain = Photograph(Path("a.png"), "ab", np.full((60, 60, 3), 7, np.uint8))
    for x, y in ((0, 0), (59, 59), (-0.5, 59.5), (30, 30)):
        for usual in (0.5, 5.0, 500.0):
            assert fit_circle(plain, x, y, usual).fitted is False


def test_a_large_object_is_looked_at_in_a_small_picture() -> None:
    picture = a_picture(100, 80, 20, light=True)
    grown = cv2.resize(picture.stored[:], None, fx=8, fy=8, interpolation=cv2.INTER_LINEAR)
    found = fit_circle(Photograph(Path("a.png"), "ab", grown), 803, 640, 150.0)
    assert found.fitted
    assert found.radius == pytest.approx(160, rel=0.08)


def test_the_usual_radius_is_that_of_counted_spots_or_of_what_was_looked_for() -> None:
    assert usual_radius(Spots.found_at([1, 2, 3], [1, 2, 3], [4, 5, 9])) == 5
    assert usual_radius(Spots.none(), (8.0, 32.0)) == 8.0
    assert usual_radius(Spots.none()) > 0


def test_a_page_asks_for_a_circle(tmp_path: Path) -> None:
    page = review_of(tmp_path)
    state = page.state()
    x, y = state["spots"]["x"][3], state["spots"]["y"][3]
    path = f"api/sheets/{page.sheet}/fit"
    told = page.get(f"{path}?x={x + 1}&y={y}").json()
    assert told["fitted"]
    assert told["radius"] == pytest.approx(8, rel=0.12)
    for wrong in ("", "?x=1", "?x=nan&y=1", "?x=inf&y=1", "?x=1&y=-1", "?x=420&y=1", "?x=1&y=a"):
        answer = page.get(path + wrong)
        assert (answer.status_code, answer.json()["error"]["code"]) == (400, "request")
    assert page.get(f"{path}?x=1&y=1&radius=0").status_code == 400
    (tmp_path / "a.png").unlink()
    other = Page(tmp_path, page.sheets)
    answer = other.get(f"{path}?x=1&y=1")
    assert (answer.status_code, answer.json()["error"]["code"]) == (404, "photograph_missing")
