"""The review page in a real browser, driven as a person would, against a real server process."""

from __future__ import annotations

import json
import os
import shutil
import signal
import subprocess
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import pytest
from playwright.sync_api import Browser, BrowserContext, ConsoleMessage, Page, Request

ROOT = Path(__file__).resolve().parents[3]
NAMES = ("chromium", "chromium-browser", "google-chrome", "google-chrome-stable", "chrome")
QUIET = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-dev-shm-usage",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-default-apps",
    "--disable-extensions",
    "--disable-sync",
    "--no-first-run",
    "--no-default-browser-check",
]
REFUSED = "net::ERR_CONNECTION_REFUSED"
CUT = (
    "net::ERR_INCOMPLETE_CHUNKED_ENCODING",
    "net::ERR_CONNECTION_RESET",
    "net::ERR_EMPTY_RESPONSE",
)
PATIENCE = 30_000  # milliseconds, for a busy computer; what is waited for comes in a fraction of it


def browser_path() -> str:
    """Return the system's Chromium; without one skip, or fail where a browser is required."""
    for name in NAMES:
        found = shutil.which(name)
        if found is not None:
            return found
    if os.environ.get("STREWN_BROWSER_REQUIRED"):
        pytest.fail(f"a browser is required, but none of {', '.join(NAMES)} is installed")
    pytest.skip(f"no browser: none of {', '.join(NAMES)} is installed")


class Server:
    """`strewn review` in a process of its own."""

    def __init__(self, folder: Path, state: Path, *options: str) -> None:
        self.folder, self._state, self._options = folder, state, options
        self.process: subprocess.Popen[str] | None = None
        self.url = ""

    def start(self, **more: Any) -> None:
        """Start it, on the port it had before if it ran before."""
        command = [sys.executable, "-m", "analyse", "review", str(self.folder), "--no-open"]
        command += self._options
        own = {
            "XDG_STATE_HOME": str(self._state),
            "XDG_CACHE_HOME": str(self._state),
            "OMP_NUM_THREADS": "1",
        }
        self.process = subprocess.Popen(
            command, cwd=ROOT, env=os.environ | own, stdout=subprocess.PIPE, text=True, **more
        )
        assert self.process.stdout is not None
        line = self.process.stdout.readline()
        assert line.startswith("Review: "), line
        self.url = line.split()[-1]

    def kill(self) -> None:
        """End it as a power cut would."""
        self._end(signal.SIGKILL)

    def stop(self) -> None:
        """End it as Ctrl-C does."""
        self._end(signal.SIGINT)

    def _end(self, how: signal.Signals) -> None:
        if self.process is None:
            return
        self.process.send_signal(how)
        self.process.wait(timeout=30)
        assert self.process.stdout is not None
        self.process.stdout.close()
        self.process = None

    def log(self, sheet: Path) -> list[dict[str, Any]]:
        """Return the lines of a sheet's log."""
        path = sheet.with_name(sheet.name.replace(".sheet.json", ".amendments.jsonl"))
        if not path.exists():
            return []
        return [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines()]


class Desk:
    """One tab of the page, with words for what a person does.

    Every wait is for a fact of the page itself; nothing is waited for by the clock.
    """

    def __init__(self, context: BrowserContext, server: Server) -> None:
        self.page: Page = context.new_page()
        self.page.set_default_timeout(PATIENCE)
        self.server = server
        self.wrong: list[str] = []
        self.away = False
        self.page.on("console", self._heard)
        self.page.on("pageerror", lambda error: self.wrong.append(str(error)))
        self.page.on("request", self._asked)

    def _heard(self, message: ConsoleMessage) -> None:
        if message.type not in ("error", "warning"):
            return
        # While the server is away on purpose, requests fail, and the browser says so.
        if self.away and any(each in message.text for each in (REFUSED, *CUT)):
            return
        self.wrong.append(f"{message.text} {message.location.get('url', '')}")

    def _asked(self, request: Request) -> None:
        own = urlsplit(self.server.url)
        asked = urlsplit(request.url)
        if asked.scheme not in ("blob",) and (asked.scheme, asked.netloc) != (
            own.scheme,
            own.netloc,
        ):
            self.wrong.append(f"asked for {request.url}")

    def open(self) -> None:
        """Open the page and wait until it can be worked with."""
        self.page.goto(self.server.url)
        self.ready()

    def reload(self) -> None:
        self.page.reload()
        self.ready()

    def ready(self) -> None:
        self.wait("document.body.dataset.ready === 'yes'")
        self.wait("document.getElementById('stage').dataset.photograph === 'shown'")
        self.settle()

    def wait(self, fact: str) -> None:
        """Wait for a fact of the page, a JavaScript expression."""
        self.page.wait_for_function(f"() => {fact}")

    def settle(self) -> None:
        """Wait until every edit is saved and the statistics are of the newest revision."""
        self.wait(
            "document.getElementById('saved').dataset.state === 'saved'"
            " && !Number(document.getElementById('stage').dataset.placing ?? 0)"
            " && document.getElementById('result').getAttribute('aria-busy') === 'false'"
        )

    def stage(self, name: str) -> str:
        value = self.page.get_attribute("#stage", f"data-{name}")
        assert value is not None
        return value

    @property
    def counted(self) -> int:
        return int(self.stage("counted"))

    @property
    def shown_count(self) -> int:
        """The count among the figures, without what it was before."""
        return int(self.page.inner_text("#figures dd:nth-of-type(1)").split()[0])

    def at(self, x: float, y: float) -> tuple[float, float]:
        """Return where a place of the photograph is on the screen."""
        bounds = self.page.locator("#stage").bounding_box()
        assert bounds is not None
        scale, left, top = (float(self.stage(name)) for name in ("scale", "left", "top"))
        return bounds["x"] + (x - left) * scale, bounds["y"] + (y - top) * scale

    def click(self, x: float, y: float) -> None:
        """Click on a place of the photograph."""
        sx, sy = self.at(x, y)
        self.page.mouse.move(sx - 3, sy - 2)
        self.page.mouse.move(sx, sy, steps=2)
        self.page.mouse.down()
        self.page.mouse.up()

    def drag(self, places: Sequence[tuple[float, float]]) -> None:
        """Drag along places of the photograph."""
        self.drag_on_screen([self.at(x, y) for x, y in places])

    def drag_on_screen(self, points: Sequence[tuple[float, float]]) -> None:
        self.page.mouse.move(*points[0])
        self.page.mouse.down()
        for point in points[1:]:
            self.page.mouse.move(*point, steps=6)
        self.page.mouse.up()

    def key(self, *keys: str) -> None:
        """Press keys, one after the other."""
        for each in keys:
            self.page.keyboard.press(each)

    def said(self) -> str:
        return self.page.inner_text("#said").strip()


@contextmanager
def reviewing(browser: Browser, server: Server, **context: Any) -> Iterator[Desk]:
    """Open the page in a browser context of its own; what went wrong in it fails the test."""
    values = {"viewport": {"width": 1280, "height": 800}} | context
    opened = browser.new_context(**values)
    try:
        desk = Desk(opened, server)
        desk.open()
        yield desk
        assert not desk.wrong, desk.wrong
    finally:
        opened.close()
