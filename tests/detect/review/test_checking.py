"""Spot checks over the server: what is drawn, told and refused."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from analyse.checking import CheckerOf
from analyse.grid_options import GridOptions
from analyse.quadrat_draw import SpotCheckOptions
from tests.reviewing import Page, edit, write_sheet_of

WAY = "api/sheets/{}/spot_check"


def review(folder: Path, *, quadrats: int = 6, shape: tuple[int, int] = (3, 4)) -> Page:
    options = SpotCheckOptions(quadrats=quadrats, seed=2)
    return Page(
        folder, [write_sheet_of(folder)], checker=CheckerOf(GridOptions(shape=shape), options)
    )


@pytest.fixture
def page(tmp_path: Path) -> Page:
    return review(tmp_path)


def asked(page: Page, **values: Any) -> Any:
    return page.post(WAY.format(page.sheet), {"who": "Ann"} | values)


def marks(draw: dict[str, Any], k: int, name: str = "m") -> dict[str, Any]:
    values = {"of": draw["id"], "quadrat": draw["quadrats"][k]["quadrat"], "count": 0, "marks": []}
    return edit(f"{name}{k}", "spot_check_marked", **values)


def test_nothing_is_drawn_before_it_is_asked_for(page: Page) -> None:
    assert page.get("api/session").json()["spot_check"] is True
    assert page.get(WAY.format(page.sheet)).json() == {"draw": None, "result": None}
    assert not page.log.exists()


def test_a_draw_stands_until_it_is_done_and_tells_nothing_of_the_detector(page: Page) -> None:
    told = asked(page).json()
    assert told["result"] is None
    assert (told["draw"]["all"], len(told["draw"]["quadrats"])) == (12, 6)
    assert set(told["draw"]["quadrats"][0]) == {"quadrat", "outline", "count", "marks"}
    assert asked(page).json() == told
    assert asked(page, again=True).json() == told, "one under way is not thrown away"
    assert page.amend(*(marks(told["draw"], k) for k in range(5))).json()["refused"] == []
    assert page.get(WAY.format(page.sheet)).json()["result"] is None
    page.amend(marks(told["draw"], 5))
    done = page.get(WAY.format(page.sheet)).json()
    assert [each["count"] for each in done["draw"]["quadrats"]] == [0] * 6
    assert done["result"]["trusted"] == "not trusted"
    assert [each["marked"] for each in done["result"]["quadrats"]] == [0] * 6
    assert done["result"]["figures"][0] == ["Counted by the detector", "12"]
    assert done["result"]["missed"] == []
    assert asked(page).json() == done
    anew = asked(page, again=True).json()
    assert anew["draw"]["id"] != told["draw"]["id"]
    assert anew["result"] is None
    assert len(page.log.read_text(encoding="utf-8").splitlines()) == 8


def test_a_review_without_a_spot_check_has_none(tmp_path: Path) -> None:
    page = Page(tmp_path, [write_sheet_of(tmp_path)])
    assert page.get("api/session").json()["spot_check"] is False
    answer = page.get(WAY.format(page.sheet))
    assert (answer.status_code, answer.json()["error"]["code"]) == (404, "not_found")


@pytest.mark.parametrize(
    ("body", "code"),
    [
        (b"{", "json"),
        ({}, "request"),
        ({"who": " "}, "request"),
        ({"who": "Ann", "again": 1}, "request"),
        ({"who": "Ann", "seed": 3}, "request"),
        ([], "request"),
    ],
)
def test_requests_that_are_none_draw_nothing(page: Page, body: Any, code: str) -> None:
    answer = page.post(WAY.format(page.sheet), body)
    assert (answer.status_code, answer.json()["error"]["code"]) == (400, code)
    assert not page.log.exists()


def test_too_few_quadrats_are_told_in_a_sentence(tmp_path: Path) -> None:
    page = review(tmp_path, quadrats=20)
    answer = asked(page)
    assert (answer.status_code, answer.json()["error"]["code"]) == (409, "request")
    assert (
        "There are 12 quadrats, fewer than the 20 to be drawn" in answer.json()["error"]["message"]
    )
    assert not page.log.exists()


def test_marks_outside_their_quadrat_are_refused(page: Page) -> None:
    draw = asked(page).json()["draw"]
    wrong = marks(draw, 0) | {"count": 1, "marks": [[-0.4, -0.4]]}
    inside = draw["quadrats"][0]["outline"]["coordinates"][0]
    if min(x for x, _ in inside) < 1 and min(y for _, y in inside) < 1:
        wrong["marks"] = [[1e3, 1e3]]
    answer = page.amend(wrong).json()
    assert answer["acknowledged"] == []
    assert "which lies outside quadrat" in answer["refused"][0]["message"]
