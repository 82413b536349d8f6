"""Tag directories, the table of contents of a TIFF file and of a camera's notes (Exif).

Nothing is believed: every position and length is held against the bytes at hand.

References
----------
TIFF, revision 6.0 (Aldus, 1992), section 2; BigTIFF adds 8-byte positions.
Exif 2.32 (CIPA DC-008, 2019), section 4.6.
"""

from __future__ import annotations

import re
import struct
from dataclasses import dataclass

from detect.errors import PhotographUnreadable

ORIENTATION, EXIF_DIRECTORY, COLOUR_PROFILE = 274, 34665, 34675
TAKEN, TAKEN_OFFSET = 36867, 36881
MOST_ENTRIES = 4096
_SIZES = {1: 1, 2: 1, 3: 2, 4: 4, 5: 8, 6: 1, 7: 1, 8: 2, 9: 4, 10: 8, 11: 4, 12: 8}
_SIZES |= {13: 4, 16: 8, 17: 8, 18: 8}
_WHOLE = {1: "B", 3: "H", 4: "I", 13: "I", 16: "Q", 18: "Q"}


class DirectoryDamaged(PhotographUnreadable):
    """A tag directory runs past the end of its file or contradicts itself."""


@dataclass(frozen=True, slots=True)
class Field:
    """One tag's value: its bytes and, for whole numbers, the numbers."""

    at: int
    raw: bytes
    numbers: tuple[int, ...]
    item_size: int


@dataclass(frozen=True, slots=True)
class Directory:
    """One tag directory, in the byte order of its file."""

    fields: dict[int, Field]
    next_at: int
    order: str

    def numbers(self, tag: int, default: tuple[int, ...] = ()) -> tuple[int, ...]:
        """Return a tag's whole numbers, `default` where it is absent."""
        field = self.fields.get(tag)
        return field.numbers if field is not None and field.numbers else default

    def number(self, tag: int, default: int) -> int:
        """Return a tag's first whole number, `default` where it is absent."""
        return self.numbers(tag, (default,))[0]

    def text(self, tag: int) -> str:
        """Return a tag's text, empty where it is absent."""
        field = self.fields.get(tag)
        return "" if field is None else field.raw.split(b"\0")[0].decode("ascii", "replace").strip()


def first_directory(data: bytes) -> tuple[Directory, bool]:
    """Read the first directory of a TIFF file or Exif block, and say whether it is a BigTIFF."""
    if len(data) < 8 or data[:2] not in (b"II", b"MM"):
        raise DirectoryDamaged("the TIFF header is missing or cut short")
    order = "<" if data[:2] == b"II" else ">"
    version = struct.unpack_from(order + "H", data, 2)[0]
    if version == 42:
        return read_directory(data, struct.unpack_from(order + "I", data, 4)[0], order), False
    if version == 43 and len(data) >= 16:
        start = struct.unpack_from(order + "Q", data, 8)[0]
        return read_directory(data, start, order, wide=True), True
    raise DirectoryDamaged(f"the TIFF header holds an unknown version ({version})")


def read_directory(data: bytes, start: int, order: str, *, wide: bool = False) -> Directory:
    """Read the directory at `start`.

    Parameters
    ----------
    data : bytes
        The file, or the Exif block from its own header on.
    start : int
        Position of the directory in bytes.
    order : {"<", ">"}
        Byte order.
    wide : bool
        True for BigTIFF, whose positions have 8 bytes.

    Returns
    -------
    Directory

    Raises
    ------
    DirectoryDamaged
        If the directory or a value lies past the end of the bytes.
    """
    head, entry, slot = ("Q", "HHQ", 8) if wide else ("H", "HHI", 4)
    head_size, entry_size = struct.calcsize("=" + head), struct.calcsize("=" + entry) + slot
    try:
        count = struct.unpack_from(order + head, data, start)[0]
        if count > MOST_ENTRIES:
            raise DirectoryDamaged(f"a tag directory claims {count} entries")
        fields = {}
        for i in range(count):
            at = start + head_size + i * entry_size
            tag, kind, n = struct.unpack_from(order + entry, data, at)
            fields[tag] = _field(data, at + entry_size - slot, kind, n, order, slot)
        end = start + head_size + count * entry_size
        return Directory(fields, struct.unpack_from(order + "IQ"[wide], data, end)[0], order)
    except struct.error as error:
        raise DirectoryDamaged("a tag directory lies past the end of the file") from error


def _field(data: bytes, at: int, kind: int, n: int, order: str, slot: int) -> Field:
    """One value, kept in its entry when it fits there, else where the entry points."""
    size = _SIZES.get(kind, 1)
    if size * n > slot:
        at = struct.unpack_from(order + "I" if slot == 4 else order + "Q", data, at)[0]
    if at + size * n > len(data):
        raise DirectoryDamaged("a tag's value lies past the end of the file")
    raw = data[at : at + size * n]
    numbers = struct.unpack(f"{order}{n}{_WHOLE[kind]}", raw) if kind in _WHOLE else ()
    return Field(at, raw, numbers, size)


def read_camera_notes(block: bytes) -> tuple[int, str | None]:
    """Read the turn (1..8) and the time taken from an Exif block.

    Parameters
    ----------
    block : bytes
        The block from its TIFF header on (without the word "Exif").

    Returns
    -------
    turn : int
        1 where none or an unknown one is given.
    taken : str or None
        As ISO 8601.

    Raises
    ------
    DirectoryDamaged
        If the block runs past its end.
    """
    directory, _ = first_directory(block)
    return turn_of(directory), taken_of(block, directory)


def turn_of(directory: Directory) -> int:
    """Return the turn (1..8) that stands the picture upright; unknown ones count as 1."""
    turn = directory.number(ORIENTATION, 1)
    return turn if 1 <= turn <= 8 else 1


def taken_of(block: bytes, directory: Directory) -> str | None:
    """Return when the picture was taken, from the Exif directory that `directory` points to."""
    start = directory.number(EXIF_DIRECTORY, 0)
    if start == 0:
        return None
    exif = read_directory(block, start, directory.order)
    match = re.fullmatch(r"(\d{4}):(\d\d):(\d\d) (\d\d:\d\d:\d\d)", exif.text(TAKEN))
    if match is None or match[1] == "0000":
        return None
    offset = exif.text(TAKEN_OFFSET)
    known = offset if re.fullmatch(r"[+-]\d\d:\d\d", offset) else ""
    return f"{match[1]}-{match[2]}-{match[3]}T{match[4]}{known}"
