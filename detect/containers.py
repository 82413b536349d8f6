"""What an image file claims to hold, and whether its bytes can hold it, before anything is decoded.

A decoder trusts a header for the memory it takes, and fills a file cut short with grey; both are
found here, from the structure of the file alone.

References
----------
JPEG: ITU-T T.81 (1992), annex B. PNG: W3C Recommendation (2003), sections 5 and 11.
TIFF: revision 6.0 (Aldus, 1992).
"""

from __future__ import annotations

import re
import struct
import zlib
from collections.abc import Iterator
from dataclasses import dataclass, replace

from detect.directories import (
    COLOUR_PROFILE,
    ORIENTATION,
    Directory,
    DirectoryDamaged,
    first_directory,
    read_camera_notes,
    read_directory,
    taken_of,
    turn_of,
)
from detect.errors import PhotographUnreadable

PROFILE_NOTE = "colour profile not applied"
ALPHA_NOTE = "transparency dropped"
AGAIN = "copy it again from the camera or card"
EXPORT = "export it as an 8- or 16-bit RGB JPEG, PNG or TIFF"
_AFTER_SCAN = re.compile(rb"\xff[^\x00\xd0-\xd7\xff]")
_MOST_PAGES = 65536
RAW_ADVICE = (
    "{}, whose colours depend on how it is developed; develop it in the camera's own program, the"
    " same way for all, and give the JPEG or 16-bit TIFF, or set the camera to keep JPEG as well"
)
# Tags of TIFF/EP (ISO 12234-2) and DNG: a file of them begins with a small copy, or holds the sensor.
_RAW_TAG, _SENSOR_MODELS = 50706, (32803, 34892)


@dataclass(frozen=True, slots=True)
class Claim:
    """What a file says it holds.

    Parameters
    ----------
    width, height : int
        Pixels, as stored (before any turn).
    decoded_bytes : int
        Bytes of the pixels once unpacked, at the file's own depth.
    turn : int
        1..8, as in Exif: how to stand the picture upright.
    taken : str or None
        When, as ISO 8601.
    notes : tuple of str
        What reading will leave aside.
    data : bytes
        What to hand to the decoder.
    inverted : bool
        Whether the decoder leaves white as 0.
    by_phone : bool
        Whether `detect.phone` decodes it.
    """

    width: int
    height: int
    decoded_bytes: int
    data: bytes
    turn: int = 1
    taken: str | None = None
    notes: tuple[str, ...] = ()
    inverted: bool = False
    by_phone: bool = False


def read_claim(data: bytes) -> Claim:
    """Find out what an image file claims, and that it is whole.

    Parameters
    ----------
    data : bytes
        The whole file.

    Returns
    -------
    Claim

    Raises
    ------
    PhotographUnreadable
        If the bytes are no JPEG, PNG, TIFF or BMP, are cut short or damaged, or of a kind that
        would not be decoded faithfully. The message does not name the file.
    """
    for magic, reader in _READERS:
        if data.startswith(magic):
            return reader(data)
    if not data:
        raise PhotographUnreadable(f"the file is empty (0 bytes); {AGAIN}")
    if data[4:8] == b"ftyp":
        raise PhotographUnreadable(f"the file is an AVIF picture, a film or a raw file; {EXPORT}")
    raise PhotographUnreadable(
        f"the file is no JPEG, PNG, TIFF or BMP picture ({_beginning(data)}); {EXPORT}"
    )


def _beginning(data: bytes) -> str:
    """Say what a file that is no picture begins with, as a person would recognise it."""
    text = data[:24].decode("latin-1").split("\n")[0].rstrip()
    if text and text.isascii() and text.isprintable():
        return f"it is text that begins {text!r}"
    return f"it begins with the bytes {data[:8].hex(' ')}"


def _cut_short(what: str) -> PhotographUnreadable:
    return PhotographUnreadable(f"the file is cut short ({what}); {AGAIN}")


def with_camera_notes(claim: Claim, block: bytes | None) -> Claim:
    """Add turn and time from an Exif block, if there is one; a damaged one is noted, not fatal."""
    if block is None:
        return claim
    try:
        turn, taken = read_camera_notes(block)
    except DirectoryDamaged:
        return replace(claim, notes=(*claim.notes, "the camera's notes (Exif) are damaged"))
    return replace(claim, turn=turn, taken=taken)


def _read_jpeg(data: bytes) -> Claim:
    """Walk the segments, skipping what they hold (thumbnails have marks of their own)."""
    claim: Claim | None = None
    exif: bytes | None = None
    has_profile = False
    for marker, body in _jpeg_segments(data):
        if marker == 0xE1 and body.startswith(b"Exif\0\0") and exif is None:
            exif = body[6:]
        elif marker == 0xE2 and body.startswith(b"ICC_PROFILE\0"):
            has_profile = True
        elif 0xC0 <= marker <= 0xCF and marker not in (0xC4, 0xC8, 0xCC) and claim is None:
            claim = _jpeg_frame(data, marker, body)
    if claim is None:
        raise _cut_short("no picture before its end")
    if has_profile:
        claim = replace(claim, notes=(*claim.notes, PROFILE_NOTE))
    return with_camera_notes(claim, exif)


def _jpeg_segments(data: bytes) -> Iterator[tuple[int, bytes]]:
    """Yield marker and body of each segment up to the end-of-image marker, which must be there."""
    at, scans = 2, 0
    while True:
        while data[at : at + 2] == b"\xff\xff":
            at += 1
        if at + 2 > len(data):
            raise _cut_short("no end-of-image mark")
        if data[at] != 0xFF:
            raise PhotographUnreadable(f"the JPEG is damaged at byte {at}; {AGAIN}")
        marker = data[at + 1]
        if marker == 0xD9:
            if not scans:
                raise _cut_short("no picture before its end")
            return
        length = int.from_bytes(data[at + 2 : at + 4], "big")
        if length < 2 or at + 2 + length > len(data):
            raise _cut_short("a segment runs past the end")
        yield marker, data[at + 4 : at + 2 + length]
        at += 2 + length
        if marker == 0xDA:
            scans += 1
            found = _AFTER_SCAN.search(data, at)
            if found is None:
                raise _cut_short("no end-of-image mark")
            at = found.start()


def _jpeg_frame(data: bytes, marker: int, body: bytes) -> Claim:
    """Size and kind from the frame header; only 8-bit Huffman-coded grey, RGB and CMYK pass."""
    if len(body) < 6:
        raise _cut_short("its frame header is incomplete")
    depth, height, width, channels = struct.unpack_from(">BHHB", body)
    if marker not in (0xC0, 0xC1, 0xC2) or depth != 8:
        raise PhotographUnreadable(
            f"the JPEG is of a rare kind (frame type {marker - 0xC0}, {depth} bits); {EXPORT}"
        )
    if channels not in (1, 3, 4):
        raise PhotographUnreadable(f"the JPEG has {channels} colour channels; {EXPORT}")
    notes = ("printing colours (CMYK) turned into RGB without a profile",) if channels == 4 else ()
    return Claim(width, height, width * height * channels, data, notes=notes)


def _read_png(data: bytes) -> Claim:
    """Walk the chunks, each held against its check sum."""
    claim: Claim | None = None
    exif: bytes | None = None
    notes: list[str] = []
    for kind, body in _png_chunks(data):
        if claim is None:
            if kind != b"IHDR" or len(body) != 13:
                raise PhotographUnreadable(f"the PNG does not begin with its header; {AGAIN}")
            width, height, depth, colour = struct.unpack_from(">IIBB", body)
            channels = {0: 1, 2: 3, 3: 1, 4: 2, 6: 4}.get(colour, 4)
            claim = Claim(width, height, -(-width * channels * depth // 8) * height, data)
            notes += [ALPHA_NOTE] if colour in (4, 6) else []
        elif kind == b"tRNS":
            notes.append(ALPHA_NOTE)
        elif kind == b"iCCP":
            notes.append(PROFILE_NOTE)
        elif kind == b"eXIf":
            exif = body
    if claim is None:  # pragma: no cover - the walk raises before it yields nothing
        raise _cut_short("no header")
    return with_camera_notes(replace(claim, notes=tuple(dict.fromkeys(notes))), exif)


def _png_chunks(data: bytes) -> Iterator[tuple[bytes, bytes]]:
    """Yield kind and body of each chunk up to IEND, which must be there."""
    at = 8
    while True:
        if at + 12 > len(data):
            raise _cut_short("no end-of-image chunk")
        length = int.from_bytes(data[at : at + 4], "big")
        kind = data[at + 4 : at + 8]
        end = at + 8 + length
        if end + 4 > len(data):
            raise _cut_short(f"chunk {kind.decode('latin-1')!r} runs past the end")
        if zlib.crc32(memoryview(data)[at + 4 : end]) != int.from_bytes(data[end : end + 4], "big"):
            raise PhotographUnreadable(
                f"the PNG is damaged (chunk {kind.decode('latin-1')!r} fails its check); {AGAIN}"
            )
        yield kind, data[at + 8 : end]
        if kind == b"IEND":
            return
        at = end + 4


def _read_bmp(data: bytes) -> Claim:
    """Size from the header; unpacked rows must all be there."""
    if len(data) < 34:
        raise _cut_short("its header is incomplete")
    pixels_at, header = struct.unpack_from("<II", data, 10)
    if header == 12:
        width, height, _, bits = struct.unpack_from("<HHHH", data, 18)
        packing = 0
    else:
        width, height, _, bits, packing = struct.unpack_from("<iiHHI", data, 18)
    height = abs(height)
    size = -(-width * bits // 32) * 4 * height
    if packing in (0, 3) and pixels_at + size > len(data):
        raise _cut_short(f"{pixels_at + size} bytes announced, {len(data)} there")
    return Claim(width, height, size, data, notes=(ALPHA_NOTE,) if bits == 32 else ())


def _read_tiff(data: bytes) -> Claim:
    """Read the first page's directory; refuse what the decoder would get wrong."""
    try:
        page, wide = first_directory(data)
        notes = _tiff_notes(data, page, wide)
        taken = None if wide else taken_of(data, page)
    except DirectoryDamaged as error:
        raise _cut_short(str(error)) from error
    width, height = page.number(256, 0), page.number(257, 0)
    samples = page.number(277, 1)
    bits = page.numbers(258, (1,))
    _check_tiff_kind(page, samples, bits)
    starts, sizes = page.numbers(324) or page.numbers(273), page.numbers(325) or page.numbers(279)
    if not starts or len(starts) != len(sizes):
        raise PhotographUnreadable(f"the TIFF does not say where its pixels are; {AGAIN}")
    end = max(start + size for start, size in zip(starts, sizes, strict=True))
    if end > len(data):
        raise _cut_short(f"pixels up to byte {end} announced, {len(data)} there")
    return Claim(
        width,
        height,
        -(-width * samples * bits[0] // 8) * height,
        _patched_for_decoder(data, page),
        turn_of(page),
        taken,
        notes,
        inverted=page.number(262, 1) == 0 and bits[0] == 16,
    )


def _tiff_notes(data: bytes, page: Directory, wide: bool) -> tuple[str, ...]:
    """Say what will be left aside: more pages, transparency, a profile."""
    notes = []
    seen: set[int] = set()
    at = page.next_at
    while at and at not in seen and len(seen) < _MOST_PAGES:
        seen.add(at)
        at = read_directory(data, at, page.order, wide=wide).next_at
    if seen:
        notes.append(f"first of {len(seen) + 1} pages read")
    if page.numbers(338):
        notes.append(ALPHA_NOTE)
    if COLOUR_PROFILE in page.fields:
        notes.append(PROFILE_NOTE)
    return tuple(notes)


def _check_tiff_kind(page: Directory, samples: int, bits: tuple[int, ...]) -> None:
    """Refuse number formats, colour models and layouts that would not be decoded faithfully."""
    if set(page.numbers(339, (1,))) != {1}:
        raise PhotographUnreadable(
            f"the TIFF holds floating-point or signed numbers, not 8 or 16 bits; {EXPORT}"
        )
    model = page.number(262, 1)
    if _RAW_TAG in page.fields or model in _SENSOR_MODELS or page.number(254, 0) & 1:
        raise PhotographUnreadable(RAW_ADVICE.format("the file is a camera's raw file"))
    if len(set(bits)) != 1 or bits[0] not in (1, 8, 16) or (bits[0] == 16 and model == 3):
        raise PhotographUnreadable(f"the TIFF has {bits[0]} bits per channel; {EXPORT}")
    if model not in (0, 1, 2, 3, 6):
        raise PhotographUnreadable(
            f"the TIFF's colour model (number {model}) is not grey, RGB or palette; {EXPORT}"
        )
    if samples > 4 or (samples > 1 and bits[0] == 16 and page.number(284, 1) == 2):
        raise PhotographUnreadable(
            f"the TIFF keeps its {samples} channels in a layout that is not read; {EXPORT}"
        )


def _patched_for_decoder(data: bytes, page: Directory) -> bytes:
    """Neutralise two tags the decoder acts on: the turn, and unmultiplied transparency.

    Some releases turn a TIFF and others do not, and transparency would darken the colours;
    as "upright" and "already multiplied" both leave the stored colours as they are.
    """
    patched = bytearray(data)
    for tag, value in ((ORIENTATION, 1), (338, 1)):
        field = page.fields.get(tag)
        if field is not None and field.item_size == 2:
            for i in range(len(field.numbers)):
                struct.pack_into(page.order + "H", patched, field.at + 2 * i, value)
    return bytes(patched)


_READERS = (
    (b"\xff\xd8\xff", _read_jpeg),
    (b"\x89PNG\r\n\x1a\n", _read_png),
    (b"II\x2a\0", _read_tiff),
    (b"MM\0\x2a", _read_tiff),
    (b"II\x2b\0", _read_tiff),
    (b"MM\0\x2b", _read_tiff),
    (b"BM", _read_bmp),
)
