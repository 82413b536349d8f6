"""What made every answer wait for 40 ms."""

from __future__ import annotations

import asyncio
import socket
from pathlib import Path

import pytest

from detect.review.serving import bind


def test_small_answers_are_sent_at_once(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_STATE_HOME", str(tmp_path))
    listening, key = bind(tmp_path, 0)
    seen: list[int] = []

    def accepted(reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        connection = writer.get_extra_info("socket")
        seen.append(connection.getsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY))
        writer.close()

    async def connect() -> None:
        server = await asyncio.start_server(accepted, sock=listening)
        reader, writer = await asyncio.open_connection("127.0.0.1", key.port)
        await reader.read()
        writer.close()
        await writer.wait_closed()
        server.close()
        await server.wait_closed()

    asyncio.run(connect())
    assert len(seen) == 1
    assert seen[0] != 0
