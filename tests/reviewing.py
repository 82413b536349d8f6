"""A small folder of sheets under review, and a page's requests to its server without a network."""

from __future__ import annotations

import asyncio
import hashlib
import json
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import httpx
import numpy as np

from detect.area import frame_area
from detect.review.guard import Guard
from detect.review.server import Server
from detect.scale import Scale
from detect.sheet import SCHEMA, PhotographIdentity, Sheet, write_sheet
from detect.spots import Spots
from tests.discs import HEIGHT, WIDTH, scattered, write_discs

PORT, TOKEN = 8765, "a-secret-of-the-tests-that-is-long-enough-to-be-one"
ORIGIN = f"http://127.0.0.1:{PORT}"
TIME = "2026-05-04T10:00:00+00:00"
PLACES = scattered(12, seed=4)


@cache
def _drawn(name: str, places: bytes) -> bytes:
    """Draw a photograph once for all tests."""
    with TemporaryDirectory() as folder:
        at = np.frombuffer(places).reshape(-1, 2)
        return write_discs(Path(folder) / name, at).read_bytes()


def write_sheet_of(
    folder: Path, name: str = "a.png", *, scale: Scale | None = None, places: Any = PLACES
) -> Path:
    """Write a photograph of discs and the sheet of what was found in it."""
    photo = folder / name
    photo.write_bytes(_drawn(name, places.tobytes()))
    n = len(places)
    spots = Spots.found_at(
        places[:, 0], places[:, 1], [8.0] * n, doubt=[0.9] + [0.1] * (n - 1) if n else []
    )
    identity = PhotographIdentity(
        name, hashlib.sha256(photo.read_bytes()).hexdigest(), WIDTH, HEIGHT
    )
    sheet = Sheet(SCHEMA, "test", identity, scale, frame_area(WIDTH, HEIGHT), {}, spots)
    return write_sheet(sheet, folder)


def edit(name: str, what: str, /, **values: Any) -> dict[str, Any]:
    """A change as a page sends it."""
    return {"id": name, "who": "Ann", "time": TIME, "what": what, **values}


def place(name: str, spot: str, x: float = 50.0, y: float = 60.0) -> dict[str, Any]:
    return edit(name, "place", spot=spot, x=x, y=y, radius=7.0)


@dataclass
class Page:
    """A page and the server behind it, in one process."""

    folder: Path
    sheets: list[Path]
    panel: Any = None
    checker: Any = None
    server: Server = field(init=False)

    def __post_init__(self) -> None:
        panel = self.panel or (lambda found, now, changes: {"now": None})
        self.server = Server(self.sheets, panel, self.checker)
        self.guard = Guard(self.server.app, TOKEN, PORT)

    def ask(
        self,
        method: str,
        path: str,
        *,
        headers: dict[str, str] | None = None,
        token: str = TOKEN,
        **more: Any,
    ) -> httpx.Response:
        """Send one request; `path` comes after the token."""

        async def answered() -> httpx.Response:
            transport = httpx.ASGITransport(app=self.guard, raise_app_exceptions=False)
            async with httpx.AsyncClient(transport=transport, base_url=ORIGIN) as client:
                return await client.request(method, f"/{token}/{path}", headers=headers, **more)

        return asyncio.run(answered())

    def get(self, path: str, **more: Any) -> httpx.Response:
        return self.ask("GET", path, **more)

    def post(self, path: str, body: Any, *, headers: dict[str, str] | None = None) -> Any:
        """Send a change as the page does."""
        sent = {"origin": ORIGIN, "content-type": "application/json"} | (headers or {})
        content = body if isinstance(body, bytes) else json.dumps(body).encode()
        return self.ask("POST", path, headers=sent, content=content)

    @property
    def sheet(self) -> str:
        """Id of the first sheet."""
        return next(iter(self.server.lives))

    @property
    def log(self) -> Path:
        return self.sheets[0].with_name("a.amendments.jsonl")

    def amend(self, *edits: dict[str, Any]) -> httpx.Response:
        """Send changes of the first sheet."""
        answer: httpx.Response = self.post(
            f"api/sheets/{self.sheet}/amendments", {"amendments": list(edits)}
        )
        return answer

    def state(self) -> dict[str, Any]:
        """Ask for the first sheet."""
        answer: dict[str, Any] = self.get(f"api/sheets/{self.sheet}").json()
        return answer

    def lines(self) -> list[dict[str, Any]]:
        """Read the log as it is on the disk."""
        text = self.log.read_text(encoding="utf-8") if self.log.exists() else ""
        return [json.loads(line) for line in text.splitlines()]


def review_of(folder: Path, *names: str, **more: Any) -> Page:
    """Return a page on a folder of small sheets."""
    return Page(folder, [write_sheet_of(folder, name) for name in names or ("a.png",)], **more)
