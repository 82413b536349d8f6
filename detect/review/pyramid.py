"""The tiles of a photograph too large to be sent whole: made once, kept in the user's cache."""

from __future__ import annotations

import math
import os
import re
import shutil
import threading
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import cv2
import numpy as np

from detect.photograph import Photograph
from detect.review.places import cache_folder
from detect.strokes import in_8_bits, jpeg_bytes

TILE = 512
_VERSION = 1  # of how tiles are made; others are not used
_MOST_PICTURES = 20  # whose tiles are kept
_SHA256 = re.compile(r"[0-9a-f]{1,64}")


@dataclass(frozen=True, slots=True)
class Level:
    """One size of the picture.

    Parameters
    ----------
    level : int
        0 for full size; each further one is half of it, rounded up.
    width, height : int
        In its own pixels.
    """

    level: int
    width: int
    height: int

    @property
    def columns(self) -> int:
        """Tiles side by side."""
        return math.ceil(self.width / TILE)

    @property
    def rows(self) -> int:
        """Tiles one below the other."""
        return math.ceil(self.height / TILE)

    def as_dict(self) -> dict[str, Any]:
        """Return plain values for the page."""
        return {
            "level": self.level,
            "width": self.width,
            "height": self.height,
            "columns": self.columns,
            "rows": self.rows,
            "shrink": 0.5**self.level,
        }


class TilesNotReady(Exception):
    """The wanted tile waits for those of larger size."""


class NoSuchTile(Exception):
    """The picture has no tile there."""


def levels(width: int, height: int) -> tuple[Level, ...]:
    """Return the sizes of a picture, down to one that fits into one tile.

    Examples
    --------
    >>> [(each.width, each.columns) for each in levels(1500, 600)]
    [(1500, 3), (750, 2), (375, 1)]
    """
    found = [Level(0, width, height)]
    while max(found[-1].width, found[-1].height) > TILE:
        last = found[-1]
        found.append(Level(last.level + 1, math.ceil(last.width / 2), math.ceil(last.height / 2)))
    return tuple(found)


class Pyramid:
    """The tiles of one photograph.

    Parameters
    ----------
    photograph : Photograph
        In memory, or a raster on disk.
    folder : Path or None
        Where tiles are kept; None for the user's cache.
    reading : lock or None
        Held while pixels are read, which of a raster on disk one thread at a time may do.

    Notes
    -----
    Each tile is made from the pixels below it when it is first asked for, and kept. Only of a raster
    that stays on disk and holds no reduced copies are smaller sizes made from larger tiles, row by
    row, by `make`: to read it anew for each would take for ever.
    """

    def __init__(
        self,
        photograph: Photograph,
        folder: Path | None = None,
        *,
        reading: AbstractContextManager[Any] | None = None,
    ) -> None:
        self.photograph = photograph
        self.levels = levels(photograph.width, photograph.height)
        home = cache_folder() / "tiles" if folder is None else folder
        identity = _SHA256.fullmatch(photograph.sha256)
        self._folder = home / f"{identity.group() if identity else 'unknown'}-{_VERSION}"
        self._lock, self._reading = threading.Lock(), reading or threading.Lock()
        self._held: dict[tuple[int, int, int], bytes] = {}  # where nothing can be kept on disk
        self.total = sum(each.columns * each.rows for each in self.levels)
        stored = photograph.stored
        self.direct = isinstance(stored, np.ndarray) or stored.has_copies
        _make_room(home, self._folder)

    def tile(self, level: int, column: int, row: int) -> bytes:
        """Return a tile as JPEG.

        Raises
        ------
        NoSuchTile
            If the picture has none there.
        TilesNotReady
            If `make` must come first.
        """
        if not 0 <= level < len(self.levels):
            raise NoSuchTile
        size = self.levels[level]
        if not (0 <= column < size.columns and 0 <= row < size.rows):
            raise NoSuchTile
        known = self._kept(level, column, row)
        if known is not None:
            return known
        if level > 0 and not self.direct:
            raise TilesNotReady
        return self._keep(level, column, row, self._cut(size, column, row))

    def make(self, progress: Callable[[int, int], None]) -> None:
        """Make all tiles, larger sizes first, and say how many are done of how many."""
        done = 0
        for size in self.levels:
            for row, column in _places(size):
                if self._kept(size.level, column, row) is None:
                    made = self._cut if size.level == 0 or self.direct else self._halved
                    self._keep(size.level, column, row, made(size, column, row))
                done += 1
                progress(done, self.total)

    def _cut(self, size: Level, column: int, row: int) -> bytes:
        """Make a tile from the photograph's own pixels."""
        step = 2**size.level
        left, top = column * TILE * step, row * TILE * step
        right = min(self.photograph.width, left + TILE * step)
        bottom = min(self.photograph.height, top + TILE * step)
        box = (left, top, right, bottom)
        with self._reading:
            picture = in_8_bits(self.photograph.reduced(shrink=1.0 / step, box=box, quick=True))
        wanted = (math.ceil((right - left) / step), math.ceil((bottom - top) / step))
        if picture.shape[1::-1] != wanted:
            picture = cv2.resize(picture, wanted, interpolation=cv2.INTER_AREA)
        return jpeg_bytes(picture)

    def _halved(self, size: Level, column: int, row: int) -> bytes:
        """Make a tile from the four below it."""
        below = self.levels[size.level - 1]
        rows = []
        for r in range(2 * row, min(2 * row + 2, below.rows)):
            parts = [
                _decoded(self._kept(below.level, c, r) or self._cut(below, c, r))
                for c in range(2 * column, min(2 * column + 2, below.columns))
            ]
            rows.append(np.hstack(parts))
        whole = np.vstack(rows)
        wanted = (math.ceil(whole.shape[1] / 2), math.ceil(whole.shape[0] / 2))
        return jpeg_bytes(cv2.resize(whole, wanted, interpolation=cv2.INTER_AREA))

    def _path(self, level: int, column: int, row: int) -> Path:
        return self._folder / str(level) / f"{column}-{row}.jpg"

    def _kept(self, level: int, column: int, row: int) -> bytes | None:
        """Return a tile that was made before."""
        held = self._held.get((level, column, row))
        if held is not None:
            return held
        try:
            return self._path(level, column, row).read_bytes() or None
        except OSError:
            return None

    def _keep(self, level: int, column: int, row: int, data: bytes) -> bytes:
        """Keep a tile for the next time, in memory where the disk takes none."""
        path = self._path(level, column, row)
        beside = path.with_name(f".{path.name}.{os.getpid()}.{threading.get_ident()}.part")
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            beside.write_bytes(data)
            beside.replace(path)
        except OSError:
            with suppress(OSError):
                beside.unlink(missing_ok=True)
            with self._lock:
                self._held[(level, column, row)] = data
                while len(self._held) > 1000:
                    self._held.pop(next(iter(self._held)))
        return data


def _places(size: Level) -> Iterator[tuple[int, int]]:
    """Yield rows and columns of all tiles of a size, row by row."""
    for row in range(size.rows):
        for column in range(size.columns):
            yield row, column


def _decoded(data: bytes) -> Any:
    """Return the pixels of a tile."""
    picture = cv2.imdecode(np.frombuffer(data, dtype=np.uint8), cv2.IMREAD_COLOR)
    return cv2.cvtColor(picture, cv2.COLOR_BGR2RGB)


def _make_room(home: Path, own: Path) -> None:
    """Throw away the tiles of pictures not looked at for long, where there are too many."""
    try:
        own.mkdir(parents=True, exist_ok=True)
        os.utime(own)
        folders = sorted(home.iterdir(), key=lambda each: each.stat().st_mtime)
    except OSError:
        return
    for folder in folders[:-_MOST_PICTURES]:
        shutil.rmtree(folder, ignore_errors=True)
