"""Where a user's own files of this program are: keys of open pages, and tiles made once."""

from __future__ import annotations

import os
import sys
from pathlib import Path


def state_folder() -> Path:
    """Return the folder of what is remembered from one run to the next; it need not exist."""
    return _own("XDG_STATE_HOME", ".local/state", "Library/Application Support")


def cache_folder() -> Path:
    """Return the folder of what can be made again; it need not exist."""
    return _own("XDG_CACHE_HOME", ".cache", "Library/Caches")


def _own(variable: str, on_linux: str, on_mac: str) -> Path:
    """Return a folder of the user's, where the system keeps such.

    References
    ----------
    XDG Base Directory Specification, version 0.8 (2021).
    """
    given = os.environ.get(variable, "")
    if given and Path(given).is_absolute():
        return Path(given) / "strewn"
    if sys.platform == "win32":
        return Path(os.environ.get("LOCALAPPDATA", Path.home())) / "strewn"
    return Path.home() / (on_mac if sys.platform == "darwin" else on_linux) / "strewn"
