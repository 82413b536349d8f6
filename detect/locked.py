"""How one process at a time works on a file."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from io import FileIO

_FAR = 1 << 40


@contextmanager
def locked(file: FileIO) -> Iterator[None]:
    """Hold a file alone, against every process that asks in the same way; waits for its turn.

    Parameters
    ----------
    file : FileIO
        Open for writing, without a buffer. The lock ends with the block, and with the process however it ends.
    """
    if sys.platform == "win32":
        import msvcrt

        # A byte far beyond the end is locked, so that reading goes on.
        file.seek(_FAR)
        while True:
            try:
                msvcrt.locking(file.fileno(), msvcrt.LK_LOCK, 1)
                break
            except OSError:
                continue
        try:
            yield
        finally:
            file.seek(_FAR)
            msvcrt.locking(file.fileno(), msvcrt.LK_UNLCK, 1)
    else:
        import fcntl

        fcntl.flock(file.fileno(), fcntl.LOCK_EX)
        try:
            yield
        finally:
            fcntl.flock(file.fileno(), fcntl.LOCK_UN)
