"""In which form a browser gets a photograph: as it is, converted, or in tiles."""

from __future__ import annotations

import hashlib
import threading
from collections import OrderedDict
from collections.abc import Callable
from contextlib import AbstractContextManager, nullcontext
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Generic, TypeVar

import numpy as np

from detect.containers import read_claim
from detect.errors import PhotographFailed, PhotographUnreadable
from detect.outcome import photograph_of
from detect.phone import is_phone_picture
from detect.raster import is_raster
from detect.strokes import in_8_bits, jpeg_bytes

if TYPE_CHECKING:
    from detect.photograph import Photograph
    from detect.sheet import Sheet

WHOLE_UP_TO = 40_000_000  # pixels; above, a picture goes in tiles
_KEPT = 2  # photographs and converted pictures held in memory
_JPEG, _PNG, _BMP = b"\xff\xd8\xff", b"\x89PNG\r\n\x1a\n", b"BM"
_DEEP, _WITH_ALPHA = 16, (4, 6)  # PNG: bits a sample; colour types with transparency
Kept = TypeVar("Kept")


@dataclass(frozen=True, slots=True)
class Sent:
    """A picture as it goes to the browser.

    Parameters
    ----------
    data : bytes
    type : str
        Media type.
    """

    data: bytes
    type: str


class PhotographMissing(PhotographFailed):
    """The photograph of a sheet is not where it was, nor beside the sheet."""


class _Few(Generic[Kept]):
    """The last few of what takes long to make, each made once."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._held: OrderedDict[str, Kept] = OrderedDict()
        self._making: dict[str, threading.Lock] = {}

    def get(self, name: str, make: Callable[[], Kept]) -> Kept:
        """Return what is held under a name, or make it."""
        with self._lock:
            turn = self._making.setdefault(name, threading.Lock())
        with turn:
            with self._lock:
                if name in self._held:
                    self._held.move_to_end(name)
                    return self._held[name]
            made = make()
            with self._lock:
                self._held[name] = made
                while len(self._held) > _KEPT:
                    self._held.popitem(last=False)
            return made


class Pictures:
    """The photographs of sheets, as pixels and as what a browser can show."""

    def __init__(self) -> None:
        self._photographs: _Few[Photograph] = _Few()
        self._sent: _Few[Sent] = _Few()
        self._reading = threading.Lock()

    def reading(self, photograph: Photograph) -> AbstractContextManager[Any]:
        """Return what is to be held while pixels are read: of a raster on disk one at a time may."""
        return nullcontext() if isinstance(photograph.stored, np.ndarray) else self._reading

    def photograph(self, sheet: Sheet, folder: Path) -> Photograph:
        """Return the photograph of a sheet, upright.

        Raises
        ------
        PhotographMissing
            If the very file that was detected is not to be found.
        """
        return self._photographs.get(_name(sheet, folder), lambda: _photograph(sheet, folder))

    def whole(self, sheet: Sheet, folder: Path) -> Sent:
        """Return the whole photograph: the file's own bytes where a browser shows them as they are read.

        Raises
        ------
        PhotographMissing
            If the very file that was detected is not to be found.
        """
        return self._sent.get(_name(sheet, folder), lambda: self._whole(sheet, folder))

    def _whole(self, sheet: Sheet, folder: Path) -> Sent:
        path, data = find_file(sheet, folder)
        kind = shown_as_it_is(data) if not is_raster(path) else None
        if kind is not None:
            return Sent(data, kind)
        photograph = self.photograph(sheet, folder)
        with self.reading(photograph):
            stored = photograph.stored[0 : photograph.height, 0 : photograph.width]
        return Sent(jpeg_bytes(in_8_bits(stored)), "image/jpeg")


def goes_whole(sheet: Sheet) -> bool:
    """Whether a photograph is small enough to be sent whole."""
    return sheet.photograph.width * sheet.photograph.height <= WHOLE_UP_TO


def shown_as_it_is(data: bytes) -> str | None:
    """Return the media type of a file that every browser shows as it was read, else None.

    Parameters
    ----------
    data : bytes
        The whole file.

    Notes
    -----
    Sent as they are: JPEG, PNG and BMP of 8 bits that need no turn and hide nothing behind
    transparency. A turn told by Exif is carried out here, so that spots cannot lie askew whatever
    a browser makes of it.
    """
    if is_phone_picture(data):
        return None
    try:
        claim = read_claim(data)
    except PhotographUnreadable:
        return None
    if claim.turn != 1 or claim.inverted:
        return None
    if data.startswith(_JPEG):
        return "image/jpeg"
    if data.startswith(_BMP):
        return "image/bmp"
    if data.startswith(_PNG) and data[24] < _DEEP and data[25] not in _WITH_ALPHA:
        return None if b"tRNS" in data[:4096] else "image/png"
    return None


def find_file(sheet: Sheet, folder: Path) -> tuple[Path, bytes]:
    """Find the very file that a sheet was made from, and read it.

    Raises
    ------
    PhotographMissing
        If it is neither where it was nor beside the sheet.
    """
    way = sheet.settings.get("photograph_at")
    places = [folder / str(way)] if way else []
    for place in (*places, folder / sheet.photograph.name):
        try:
            data = place.read_bytes()
        except (OSError, ValueError):
            continue
        if hashlib.sha256(data).hexdigest() == sheet.photograph.sha256:
            return place, data
    raise _missing(sheet)


def _photograph(sheet: Sheet, folder: Path) -> Photograph:
    """Read the photograph of a sheet."""
    photograph = photograph_of(sheet, folder)
    if photograph is None:
        raise _missing(sheet)
    return photograph


def _missing(sheet: Sheet) -> PhotographMissing:
    return PhotographMissing(
        f"The photograph {sheet.photograph.name} is neither where it was detected nor beside the"
        " sheet, or is no longer the same file; put it back there."
    )


def _name(sheet: Sheet, folder: Path) -> str:
    """Return what a picture is held under."""
    return f"{sheet.photograph.sha256} {sheet.photograph.name} {folder}"
