"""Pictures as phones keep them (HEIC), read where the extra `heif` is installed.

References
----------
ISO/IEC 23008-12:2022, "Image file format": the turn is a property of the picture, which the decoder
carries out; Exif's turn is for information only.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from importlib import import_module
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.containers import AGAIN, EXPORT, PROFILE_NOTE, Claim, with_camera_notes
from detect.errors import PhotographUnreadable

# What follows "ftyp" in the files of phones (the brands of HEVC-coded pictures and sequences).
_BRANDS = (b"heic", b"heix", b"heim", b"heis", b"hevc", b"hevx", b"mif1", b"msf1")


def is_phone_picture(data: bytes) -> bool:
    """Tell whether a file begins as a phone's HEIC picture does."""
    return data[4:8] == b"ftyp" and data[8:12] in _BRANDS and b"avif" not in data[16:64]


def read_phone_picture(data: bytes) -> Claim:
    """Find out what a phone's picture claims; its pixels are decoded later.

    Parameters
    ----------
    data : bytes
        The whole file.

    Returns
    -------
    Claim
        Width and height as the decoder will give them, already upright.

    Raises
    ------
    PhotographUnreadable
        If the extra `heif` is not installed, or the file is damaged. The message does not name
        the file.
    """
    picture = _tried(lambda: _library().open_heif(data))
    width, height = picture.size
    notes = []
    if picture.info.get("bit_depth", 8) > 8:
        notes.append(f"{picture.info['bit_depth']} bits per channel read as 8")
    if picture.info.get("icc_profile"):
        notes.append(PROFILE_NOTE)
    claim = Claim(width, height, width * height * 3, data, notes=tuple(notes), by_phone=True)
    exif = (picture.info.get("exif") or b"").removeprefix(b"Exif\0\0")
    return replace(with_camera_notes(claim, exif or None), turn=1)


def decode_phone_picture(data: bytes) -> NDArray[np.uint8]:
    """Decode a phone's picture.

    Parameters
    ----------
    data : bytes
        The whole file.

    Returns
    -------
    ndarray of shape (height, width, 3), uint8
        Blue, green, red, upright; transparency is dropped.

    Raises
    ------
    PhotographUnreadable
        If the pixels are damaged.
    """
    stored = _tried(lambda: np.asarray(_library().open_heif(data)))
    if stored.ndim == 2:
        stored = np.repeat(stored[..., None], 3, axis=2)
    return np.ascontiguousarray(stored[..., 2::-1], dtype=np.uint8)


def _library() -> Any:
    """Load the decoder, which is an extra."""
    try:
        return import_module("pillow_heif")
    except ImportError as trouble:
        raise PhotographUnreadable(
            "the file is a phone's HEIC picture; to have it read, install the extra heif"
            " (pip install pillow-heif), or export the picture as JPEG"
        ) from trouble


def _tried(read: Callable[[], Any]) -> Any:
    """Read, and say of whatever goes wrong that the file is damaged."""
    try:
        return read()
    except (ValueError, RuntimeError, EOFError, OSError, SyntaxError) as trouble:
        raise PhotographUnreadable(
            f"the phone's picture is damaged or cut short; {AGAIN}, or {EXPORT}"
        ) from trouble
