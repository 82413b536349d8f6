"""Under which secret and at which port a folder is reviewed, so that an open page heals after a restart."""

from __future__ import annotations

import hashlib
import json
import os
import secrets
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from detect.review.places import state_folder

FORGOTTEN_AFTER = 7 * 24 * 3600.0  # seconds without use
_MOST_PORTS = 8


@dataclass(frozen=True, slots=True)
class Key:
    """A port and its secret.

    Parameters
    ----------
    port : int
        0 for any free one.
    token : str
        First part of every address; 256 random bits.
    """

    port: int
    token: str


def fresh_token() -> str:
    """Return a new secret."""
    return secrets.token_urlsafe(32)


def remembered(folder: Path, *, now: Callable[[], float] = time.time) -> list[Key]:
    """Return the keys a folder was reviewed with, last used first; none if that cannot be read.

    Parameters
    ----------
    folder : Path
        Of the sheets.
    now : callable
        Seconds since 1970.
    """
    try:
        values = json.loads(_file(folder).read_text(encoding="utf-8"))
        keys = [
            (float(each["used"]), Key(int(each["port"]), str(each["token"])))
            for each in values["keys"]
        ]
    except (OSError, ValueError, KeyError, TypeError, RecursionError):
        return []
    sound = [
        (used, key)
        for used, key in keys
        if 0 < key.port < 65536 and len(key.token) >= 40 and key.token.isascii()
    ]
    sound = [(used, key) for used, key in sound if now() - used < FORGOTTEN_AFTER]
    return [key for _, key in sorted(sound, key=lambda each: -each[0])]


def remember(folder: Path, key: Key, *, now: Callable[[], float] = time.time) -> bool:
    """Keep a key for the next time, readable to the user alone.

    Parameters
    ----------
    folder : Path
        Of the sheets.
    key : Key
        As used now.
    now : callable
        Seconds since 1970.

    Returns
    -------
    bool
        False where it cannot be kept; then an open page does not heal after a restart.
    """
    known: list[dict[str, Any]] = [{"port": key.port, "token": key.token, "used": now()}]
    for place, other in enumerate(remembered(folder, now=now), start=1):
        if other.port != key.port:
            known.append({"port": other.port, "token": other.token, "used": now() - place})
    path = _file(folder)
    text = json.dumps({"folder": str(folder.resolve()), "keys": known[:_MOST_PORTS]})
    beside = path.with_name(f"{path.name}.{os.getpid()}.part")
    try:
        path.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
        beside.unlink(missing_ok=True)
        descriptor = os.open(beside, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
        with os.fdopen(descriptor, "w", encoding="utf-8", errors="backslashreplace") as file:
            file.write(text)
        beside.replace(path)
    except OSError:
        return False
    return True


def _file(folder: Path) -> Path:
    """Return where the keys of a folder are kept."""
    name = os.fsencode(folder.resolve())
    return state_folder() / f"review-{hashlib.sha256(name).hexdigest()[:16]}.json"
