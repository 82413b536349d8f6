"""One browser for each file of tests, one server process and one folder for each test.

Not one for the whole run: a browser keeps an event loop running, beside which others cannot be run.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from playwright.sync_api import Browser, sync_playwright

from tests.detect.review.browsing import QUIET, Desk, Server, browser_path, reviewing
from tests.detect.review.drawn import Laid, lay


@pytest.fixture(scope="module")
def browser() -> Iterator[Browser]:
    path = browser_path()
    with sync_playwright() as playwright:
        opened = playwright.chromium.launch(executable_path=path, args=QUIET)
        yield opened
        opened.close()


@pytest.fixture
def laid(tmp_path: Path) -> Laid:
    return lay(tmp_path / "my-dish")


@pytest.fixture
def server(browser: Browser, laid: Laid, tmp_path: Path) -> Iterator[Server]:
    running = Server(laid.folder, tmp_path / "state")
    running.start()
    yield running
    running.kill()


@pytest.fixture
def desk(browser: Browser, server: Server) -> Iterator[Desk]:
    with reviewing(browser, server) as opened:
        yield opened
