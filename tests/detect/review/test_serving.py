"""At which address a review is found again, and what is said where it cannot be served."""

from __future__ import annotations

import json
import os
import socket
import stat
import sys
from pathlib import Path

import pytest

from detect.errors import OptionWrong
from detect.review.keys import FORGOTTEN_AFTER, Key, fresh_token, remember, remembered
from detect.review.places import cache_folder, state_folder
from detect.review.serving import bind


@pytest.fixture(autouse=True)
def home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.setenv("XDG_STATE_HOME", str(tmp_path / "home"))
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    return tmp_path / "home"


def test_a_folder_is_found_again_at_the_same_address(tmp_path: Path) -> None:
    listening, key = bind(tmp_path, 0)
    assert listening.getsockname() == ("127.0.0.1", key.port)
    assert remember(tmp_path, key)
    # While it is served, a second one gets another port and another secret.
    beside, other = bind(tmp_path, 0)
    assert other.port != key.port
    assert other.token != key.token
    listening.close()
    beside.close()
    again, same = bind(tmp_path, 0)
    again.close()
    assert same == key
    given, named = bind(tmp_path, key.port)
    given.close()
    assert named == key
    elsewhere, foreign = bind(tmp_path.parent, key.port)
    elsewhere.close()
    assert foreign.token != key.token


def test_a_port_that_is_taken_is_told() -> None:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        port = taken.getsockname()[1]
        with pytest.raises(OptionWrong, match=rf"--port {port} cannot be used \(.*in use\); leave"):
            bind(Path(), port)


@pytest.mark.skipif(sys.platform == "win32", reason="modes are of POSIX")
def test_a_key_is_readable_to_the_user_alone(tmp_path: Path, home: Path) -> None:
    assert remember(tmp_path, Key(4000, fresh_token()))
    (path,) = (home / "strewn").iterdir()
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    assert stat.S_IMODE((home / "strewn").stat().st_mode) == 0o700


def test_tokens_are_long_and_never_alike() -> None:
    tokens = {fresh_token() for _ in range(100)}
    assert len(tokens) == 100
    assert min(map(len, tokens)) >= 43  # 256 bits, six to a character


def test_a_key_is_forgotten_after_a_week_without_use(tmp_path: Path) -> None:
    key = Key(4000, fresh_token())
    remember(tmp_path, key, now=lambda: 1000.0)
    assert remembered(tmp_path, now=lambda: 1000.0 + FORGOTTEN_AFTER - 1) == [key]
    assert remembered(tmp_path, now=lambda: 1000.0 + FORGOTTEN_AFTER + 1) == []


def test_the_port_used_last_comes_first(tmp_path: Path) -> None:
    keys = [Key(4000 + k, fresh_token()) for k in range(12)]
    for k, key in enumerate(keys):
        remember(tmp_path, key, now=lambda k=k: 1000.0 + 10 * k)
    assert remembered(tmp_path, now=lambda: 1200.0)[0] == keys[-1]
    assert len(remembered(tmp_path, now=lambda: 1200.0)) == 8


@pytest.mark.parametrize(
    "text", ["", "{", "[]", '{"keys": 3}', '{"keys": [{"port": 1}]}', "[" * 100_000]
)
def test_damaged_keys_are_no_keys(tmp_path: Path, home: Path, text: str) -> None:
    remember(tmp_path, Key(4000, fresh_token()))
    (path,) = (home / "strewn").iterdir()
    path.write_text(text)
    assert remembered(tmp_path) == []


@pytest.mark.parametrize(("port", "token"), [(0, "x" * 43), (99999, "x" * 43), (4000, "short")])
def test_a_weak_or_impossible_key_is_not_used(
    tmp_path: Path, home: Path, port: int, token: str
) -> None:
    remember(tmp_path, Key(4000, fresh_token()))
    (path,) = (home / "strewn").iterdir()
    values = json.loads(path.read_text())
    values["keys"][0] |= {"port": port, "token": token}
    path.write_text(json.dumps(values))
    assert remembered(tmp_path) == []


def test_keys_that_cannot_be_kept_are_told(tmp_path: Path, home: Path) -> None:
    home.write_text("a file where the folder should be")
    assert not remember(tmp_path, Key(4000, fresh_token()))
    assert remembered(tmp_path) == []


def test_the_users_folders_are_those_of_the_system(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    assert state_folder() == tmp_path / "home" / "strewn"
    assert cache_folder() == tmp_path / "cache" / "strewn"
    monkeypatch.setenv("XDG_STATE_HOME", "not/absolute")
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.setattr(sys, "platform", "linux")
    assert state_folder() == tmp_path / ".local" / "state" / "strewn"
    monkeypatch.setattr(sys, "platform", "darwin")
    assert state_folder() == tmp_path / "Library" / "Application Support" / "strewn"
    monkeypatch.setattr(sys, "platform", "win32")
    monkeypatch.setenv("LOCALAPPDATA", str(tmp_path / "local"))
    assert state_folder() == tmp_path / "local" / "strewn"
    assert os.environ["LOCALAPPDATA"]
