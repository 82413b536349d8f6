"""Who is let in, and what every answer says to the browser."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from detect.review.guard import HEADERS, MOST_BYTES
from tests.reviewing import ORIGIN, PORT, TOKEN, Page, place, review_of

JSON = {"origin": ORIGIN, "content-type": "application/json"}


@pytest.fixture
def page(tmp_path: Path) -> Page:
    return review_of(tmp_path, "a.png", "b.png")


def code(answer: Any) -> tuple[int, str]:
    """Status and code of an error, which must have the one shape."""
    told = answer.json()
    assert set(told) == {"error"}
    assert told["error"]["message"].endswith((".", "at most."))
    return answer.status_code, told["error"]["code"]


@pytest.mark.parametrize("path", ["", "api/session", "api/queue", "page/icon.svg"])
def test_the_page_itself_gets_in(page: Page, path: str) -> None:
    answer = page.get(path)
    assert answer.status_code == 200
    for name, value in HEADERS.items():
        assert answer.headers[name] == value
    assert "set-cookie" not in answer.headers
    assert "default-src 'none'" in answer.headers["content-security-policy"]
    assert "unsafe" not in answer.headers["content-security-policy"]


@pytest.mark.parametrize(
    "token", ["", "x", TOKEN[:-1], TOKEN + "x", TOKEN.upper(), "api", "%00", "..", "\u00e9"]
)
@pytest.mark.parametrize("path", ["", "api/queue"])
def test_a_wrong_or_missing_token_is_turned_away(page: Page, token: str, path: str) -> None:
    assert code(page.get(path, token=token)) == (403, "token")


def test_the_token_alone_without_its_slash_is_no_address(page: Page) -> None:
    answer = page.ask("GET", "", token=TOKEN).status_code
    assert answer == 200
    import asyncio

    import httpx

    async def bare() -> httpx.Response:
        transport = httpx.ASGITransport(app=page.guard)
        async with httpx.AsyncClient(transport=transport, base_url=ORIGIN) as client:
            return await client.get(f"/{TOKEN}")

    assert code(asyncio.run(bare())) == (403, "token")


@pytest.mark.parametrize(
    "host", ["evil.example", f"localhost:{PORT}", "127.0.0.1", f"127.0.0.1:{PORT + 1}", ""]
)
@pytest.mark.parametrize("method", ["GET", "POST"])
def test_a_foreign_host_is_turned_away(page: Page, host: str, method: str) -> None:
    answer = page.ask(method, "api/queue", headers={"host": host} | JSON)
    assert code(answer) == (421, "host")


@pytest.mark.parametrize("site", ["cross-site", "same-site", "anything"])
def test_what_another_site_fetches_is_turned_away(page: Page, site: str) -> None:
    for method in ("GET", "POST"):
        answer = page.ask(method, "api/queue", headers={"sec-fetch-site": site} | JSON)
        assert code(answer) == (403, "cross_site")


@pytest.mark.parametrize("site", ["same-origin", "none"])
def test_the_page_and_a_typed_address_are_let_in(page: Page, site: str) -> None:
    assert page.get("api/queue", headers={"sec-fetch-site": site}).status_code == 200


@pytest.mark.parametrize(
    "origin",
    [None, "null", "http://evil.example", f"http://localhost:{PORT}", f"https://127.0.0.1:{PORT}"],
)
def test_a_change_from_elsewhere_changes_nothing(page: Page, origin: str | None) -> None:
    headers = {"content-type": "application/json"} | ({} if origin is None else {"origin": origin})
    answer = page.ask(
        "POST",
        f"api/sheets/{page.sheet}/amendments",
        headers=headers,
        json={"amendments": [place("e1", "n1")]},
    )
    assert code(answer) == (403, "origin")
    assert page.lines() == []


@pytest.mark.parametrize(
    "kind",
    [
        *("text/plain", "application/x-www-form-urlencoded", "multipart/form-data", ""),
        *("application/json, text/plain", "application/json; charset=latin-1"),
    ],
)
def test_a_change_of_another_type_changes_nothing(page: Page, kind: str) -> None:
    answer = page.post(
        f"api/sheets/{page.sheet}/amendments",
        {"amendments": [place("e1", "n1")]},
        headers={"content-type": kind},
    )
    assert code(answer) == (415, "content_type")
    assert page.lines() == []


def test_a_body_in_chunks_or_of_no_length_changes_nothing(page: Page) -> None:
    async def chunks() -> Any:
        yield b'{"amendments": []}'

    path = f"api/sheets/{page.sheet}/amendments"
    answer = page.ask("POST", path, headers=JSON, content=chunks())
    assert code(answer) == (411, "length_missing")
    for length in ("-1", "1e3", "12 ", "\u0661"):
        headers = [(k.encode(), v.encode()) for k, v in JSON.items()]
        headers += [(b"host", f"127.0.0.1:{PORT}".encode()), (b"content-length", length.encode())]
        refused = page.guard._refused(
            {
                "method": "POST",
                "path": f"/{TOKEN}/",
                "raw_path": f"/{TOKEN}/".encode(),
                "headers": headers,
            }
        )
        assert refused is not None
        assert refused.status_code == 411


def test_an_oversized_body_is_refused_by_what_it_claims(page: Page) -> None:
    path = f"api/sheets/{page.sheet}/amendments"
    answer = page.post(path, b"x", headers={"content-length": str(MOST_BYTES + 1)})
    assert code(answer) == (413, "too_large")
    assert code(page.post(path, b"x", headers={"content-length": "9" * 50})) == (413, "too_large")


@pytest.mark.parametrize("method", ["PUT", "DELETE", "PATCH", "OPTIONS", "TRACE"])
def test_other_methods_are_not_answered(page: Page, method: str) -> None:
    answer = page.ask(method, f"api/sheets/{page.sheet}/amendments", headers=JSON)
    assert code(answer) == (405, "method")


def test_reading_a_route_of_changes_is_not_meant(page: Page) -> None:
    assert code(page.get(f"api/sheets/{page.sheet}/amendments")) == (405, "method")
    assert code(page.post("api/queue", {"amendments": []})) == (405, "method")


TRAVERSALS = [
    *("..", "%2e%2e", "..%2f..%2fetc%2fpasswd", "%2Fetc%2Fpasswd", "..%5c..", "a.sheet.json"),
    *("a", "a.png", "%00", "con", "*", "%ff", "%F0%9F%90%9B", "x" * 500),
]


@pytest.mark.parametrize("name", TRAVERSALS)
def test_no_path_in_an_address_becomes_one_on_disk(page: Page, name: str) -> None:
    tiles = f"api/sheets/{page.sheet}/tiles"
    for path in (
        f"page/{name}",
        f"api/sheets/{name}",
        f"api/sheets/{name}/picture",
        f"api/sheets/{name}/fit?x=1&y=1",
        f"api/sheets/{name}/panel",
        f"api/sheets/{name}/events?after=0",
        f"{tiles}/{name}/0/0",
        f"{tiles}/0/{name}/0",
        f"{tiles}/0/0/{name}",
    ):
        answer = page.get(path)
        assert answer.status_code in (400, 403, 404), path
        assert set(answer.json()) == {"error"}
        assert b"root:" not in answer.content


def test_ids_of_sheets_that_are_not_reviewed_here_are_unknown(tmp_path: Path) -> None:
    page = review_of(tmp_path, "a.png", "b.png")
    other = Page(tmp_path, page.sheets[:1])
    stranger = list(page.server.lives)[1]
    assert code(other.get(f"api/sheets/{stranger}")) == (404, "not_found")
    answer = other.post(f"api/sheets/{stranger}/amendments", {"amendments": [place("e1", "n1")]})
    assert code(answer) == (404, "not_found")
    assert not (tmp_path / "b.amendments.jsonl").exists()


def test_a_bug_is_told_in_the_same_shape(page: Page, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(*_: Any) -> None:
        raise ZeroDivisionError("inner words")

    monkeypatch.setattr(page.server.shapes, "sheet", broken)
    answer = page.get(f"api/sheets/{page.sheet}")
    assert code(answer) == (500, "bug")
    assert "inner words" not in answer.text
