"""Real servers in real processes: killed in a burst, started again, ended, two at once."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import httpx
import pytest

from tests.reviewing import edit, place, write_sheet_of

ROOT = Path(__file__).resolve().parents[3]
LONGEST_WAIT = 60.0


class Running:
    """A server in a process of its own."""

    def __init__(self, folder: Path, home: Path, *more: str) -> None:
        self.process = subprocess.Popen(
            [sys.executable, "-m", "analyse", "review", str(folder), "--no-open", *more],
            cwd=ROOT,
            env=os.environ | {"XDG_STATE_HOME": str(home), "XDG_CACHE_HOME": str(home / "cache")},
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        assert self.process.stdout is not None
        first = self.process.stdout.readline()
        assert first.startswith("Review: http://127.0.0.1:"), first
        self.url = first.split()[1]
        self.origin = self.url[: self.url.index("/", 8)]
        self.port = int(self.origin.rsplit(":", 1)[1])
        self.client = httpx.Client(base_url=self.url, timeout=LONGEST_WAIT)
        self.sheet = self.client.get("api/queue").json()["sheets"][0]["id"]

    def amend(self, *edits: dict[str, Any]) -> dict[str, Any]:
        path = f"api/sheets/{self.sheet}/amendments"
        answer = self.client.post(path, json={"amendments": edits}, headers={"origin": self.origin})
        told: dict[str, Any] = answer.json()
        return told

    def state(self) -> dict[str, Any]:
        told: dict[str, Any] = self.client.get(f"api/sheets/{self.sheet}").json()
        return told

    def kill(self) -> None:
        self.process.kill()
        self.process.communicate(timeout=LONGEST_WAIT)
        self.client.close()

    def interrupt(self) -> tuple[str, str, int]:
        """End it as Ctrl-C does."""
        self.process.send_signal(signal.SIGINT)
        out, err = self.process.communicate(timeout=LONGEST_WAIT)
        self.client.close()
        return out, err, self.process.returncode


@pytest.fixture
def started(tmp_path: Path) -> Iterator[Any]:
    """Start servers on one folder; whatever still runs in the end is killed."""
    folder = tmp_path / "dish"
    folder.mkdir()
    write_sheet_of(folder)
    running: list[Running] = []

    def start(*more: str) -> Running:
        running.append(Running(folder, tmp_path / "home", *more))
        return running[-1]

    start.folder = folder  # type: ignore[attr-defined]
    yield start
    for each in running:
        if each.process.poll() is None:
            each.kill()


def lines(folder: Path) -> list[str]:
    text = (folder / "a.amendments.jsonl").read_text(encoding="utf-8")
    return text.split("\n")[:-1]


def ends_cleanly_while_a_page_listens(server: Running) -> None:
    """Ctrl-C, while an event stream is open."""
    ended: list[str] = []

    def listen() -> None:
        path = f"api/sheets/{server.sheet}/events?after=0"
        with (
            httpx.Client(base_url=server.url, timeout=LONGEST_WAIT) as client,
            client.stream("GET", path) as stream,
        ):
            ended.extend(stream.iter_lines())

    listener = threading.Thread(target=listen)
    listener.start()
    time.sleep(0.5)
    out, err, code = server.interrupt()
    listener.join(LONGEST_WAIT)
    assert (err, code) == ("", 0)
    assert out.splitlines()[-1] == "Ended. Every edit shown as saved is on the disk."
    assert "event: bye" in ended


def refuses_what_is_no_request(server: Running) -> None:
    """Bytes sent by hand, for what no client library sends."""
    path = server.url[server.url.index("/", 8) :]

    def answer(text: str) -> bytes:
        with socket.create_connection(("127.0.0.1", server.port), timeout=10) as wire:
            wire.sendall(text.encode("latin-1"))
            wire.shutdown(socket.SHUT_WR)
            got = b""
            while piece := wire.recv(65536):
                got += piece
        return got

    host = f"Host: 127.0.0.1:{server.port}\r\n"
    good = answer(f"GET {path} HTTP/1.1\r\n{host}Connection: close\r\n\r\n")
    assert good.startswith(b"HTTP/1.1 200")
    head = good.split(b"\r\n\r\n")[0].lower()
    assert b"\r\nserver:" not in head
    assert b"content-security-policy" in head
    for wrong in (
        f"GET {path} HTTP/1.1\r\n\r\n",
        f"GET {path} HTTP/1.1\r\n{host}{host}\r\n",
        f"GET {path} HTTP/1.0\r\n\r\n",
        f"GET {path}../../etc/passwd HTTP/1.1\r\n{host}Connection: close\r\n\r\n",
        f"GET {path}page/../../server.py HTTP/1.1\r\n{host}Connection: close\r\n\r\n",
        f"GET http://evil.example{path} HTTP/1.1\r\nHost: evil.example\r\nConnection: close\r\n\r\n",
        f"GET {path} HTTP/1.1\r\n{host}X: {'y' * 100_000}\r\n\r\n",
        "nonsense\r\n\r\n",
    ):
        assert answer(wrong).split(b" ")[1][:1] == b"4", wrong[:90]


def test_every_acknowledged_edit_survives_a_kill_and_the_rest_arrives_once(started: Any) -> None:
    first = started()
    acknowledged: list[str] = []
    edits = [place(f"e{k}", f"n{k}", 5.0 + k, 60.0) for k in range(200)]

    def burst() -> None:
        for each in edits:
            try:
                acknowledged.extend(first.amend(each)["acknowledged"])
            except httpx.HTTPError:
                return

    sender = threading.Thread(target=burst)
    sender.start()
    while len(acknowledged) < 60 and sender.is_alive():
        time.sleep(0.002)
    first.process.kill()
    sender.join(LONGEST_WAIT)
    first.kill()
    assert 60 <= len(acknowledged) < 200
    text = "\n".join(lines(started.folder))
    assert [name for name in acknowledged if f'"id": "{name}"' not in text] == []
    # The same address after a restart; what is sent again counts once.
    second = started()
    assert second.url == first.url
    assert second.amend(*edits)["acknowledged"] == [each["id"] for each in edits]
    assert len(lines(started.folder)) == 200
    assert second.state()["review"]["placed"] == 200
    refuses_what_is_no_request(second)
    assert second.state()["revision"] == 200
    ends_cleanly_while_a_page_listens(second)


def test_two_processes_add_to_one_log_and_see_each_other(started: Any) -> None:
    one, other = started(), started()
    assert one.port != other.port
    assert one.url.split("/")[3] != other.url.split("/")[3]

    def burst(server: Running, name: str) -> None:
        for k in range(40):
            told = server.amend(place(f"{name}{k}", f"{name}{k}", 10.0 + k, 50.0))
            assert told["acknowledged"] == [f"{name}{k}"]

    senders = [
        threading.Thread(target=burst, args=(server, name))
        for server, name in ((one, "a"), (other, "b"))
    ]
    for sender in senders:
        sender.start()
    for sender in senders:
        sender.join(LONGEST_WAIT)
    assert len(lines(started.folder)) == 80
    assert one.state()["spots"] == other.state()["spots"]
    assert one.state()["review"]["placed"] == 80
    # An event stream of one tells what comes in by the other.
    path = f"api/sheets/{one.sheet}/events?after=80"
    with one.client.stream("GET", path) as stream:
        other.amend(edit("late", "strike", spot="1"))
        told = []
        for line in stream.iter_lines():
            told.append(line)
            if line.startswith("data: ") and '"late"' in line:
                break
    assert "event: change" in told
    assert "id: 81" in told


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser may write anywhere")
def test_a_read_only_folder_can_be_looked_at_and_says_why_nothing_is_saved(started: Any) -> None:
    started.folder.chmod(0o555)
    try:
        server = started()
        told = server.amend(place("e1", "n1"))
        assert told["error"]["code"] == "not_writable"
        assert server.state()["revision"] == 0
    finally:
        started.folder.chmod(0o755)
