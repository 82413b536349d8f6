"""How the review is served: one socket of this computer, one secret, until Ctrl-C."""

from __future__ import annotations

import asyncio
import signal
import socket
import sys
import webbrowser
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import uvicorn

from detect.errors import OptionWrong
from detect.review.checking import SpotChecker
from detect.review.guard import Guard
from detect.review.keys import Key, fresh_token, remember, remembered
from detect.review.live import Panel
from detect.review.server import Server

HOST = "127.0.0.1"
_PATIENCE_S = 3  # for requests that are being answered when the server is told to end


def serve(
    sheets: Sequence[Path],
    panel: Panel,
    *,
    port: int | None = None,
    open_page: bool = True,
    say: Callable[[str], None],
    checker: SpotChecker | None = None,
) -> None:
    """Serve the review of some sheets until Ctrl-C.

    Parameters
    ----------
    sheets : sequence of Path
        All in one order, that of the queue.
    panel : callable
        What the page shows of a sheet's statistics; see `detect.review.live.Panel`.
    port : int or None
        None (or 0) for the one used last for this folder, or else a free one.
    open_page : bool
        Whether to open the browser.
    say : callable
        Shows a line to the person.
    checker : SpotChecker or None
        What draws and judges spot checks, where the review is one.

    Raises
    ------
    OptionWrong
        If the port cannot be used.
    """
    folder = sheets[0].parent
    listening, key = bind(folder, port or 0)
    server = Server(sheets, panel, checker)
    url = f"http://{HOST}:{key.port}/{key.token}/"
    with listening:
        if not remember(folder, key):
            say("An open page will not find a restarted server again: its key cannot be kept.")
        say(f"Review: {url}")
        say("Keep this running while you review; every edit is saved at once. End with Ctrl-C.")
        if open_page:
            webbrowser.open(url)
        asyncio.run(_run(server, Guard(server.app, key.token, key.port), listening))
    say("Ended. Every edit shown as saved is on the disk.")


def bind(folder: Path, port: int) -> tuple[socket.socket, Key]:
    """Return a listening socket and the key that goes with it.

    Parameters
    ----------
    folder : Path
        Of the sheets.
    port : int
        0 for the one used last, or else a free one.

    Raises
    ------
    OptionWrong
        If the port that was asked for cannot be used.
    """
    known = remembered(folder)
    if port:
        token = next((key.token for key in known if key.port == port), fresh_token())
        try:
            return _listening(port), Key(port, token)
        except OSError as trouble:
            reason = (trouble.strerror or str(trouble)).lower()
            raise OptionWrong(
                f"--port {port} cannot be used ({reason}); leave --port out for a free one."
            ) from trouble
    for key in known[:1]:
        try:
            return _listening(key.port), key
        except OSError:
            break  # another review of this folder may be running
    listening = _listening(0)
    return listening, Key(int(listening.getsockname()[1]), fresh_token())


def _listening(port: int) -> socket.socket:
    """Bind a socket of this computer alone and listen."""
    # With its protocol named: only then are answers not held back for 40 ms (Nagle's algorithm).
    listening = socket.socket(socket.AF_INET, socket.SOCK_STREAM, socket.IPPROTO_TCP)
    try:
        if sys.platform != "win32":  # there it would let two servers share a port
            listening.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listening.bind((HOST, port))
        listening.listen(128)
        listening.setblocking(False)
    except OSError:
        listening.close()
        raise
    return listening


class _Uvicorn(uvicorn.Server):
    """A server that ends quietly when it is told to."""

    ended: Callable[[], None]

    @contextmanager
    def capture_signals(self) -> Iterator[None]:
        """Take Ctrl-C as the end, not as a trouble."""
        kinds = [signal.SIGINT, signal.SIGTERM]
        before = {kind: signal.signal(kind, self.handle_exit) for kind in kinds}
        try:
            yield
        finally:
            for kind, handler in before.items():
                signal.signal(kind, handler)

    def handle_exit(self, sig: int, frame: Any) -> None:
        """Begin to end."""
        self.ended()
        super().handle_exit(sig, frame)


async def _run(server: Server, guarded: Guard, listening: socket.socket) -> None:
    """Answer requests until told to end."""
    config = uvicorn.Config(
        guarded,
        loop="asyncio",
        http="h11",
        ws="none",
        lifespan="off",
        log_level="error",
        access_log=False,
        server_header=False,
        date_header=False,
        proxy_headers=False,
        timeout_graceful_shutdown=_PATIENCE_S,
    )
    running = _Uvicorn(config)
    running.ended = server.end
    try:
        await running.serve(sockets=[listening])
    finally:
        server.close()
