"""Read any image safely: turn, colour, bit depth, identity."""

from __future__ import annotations

import hashlib
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeAlias

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.averages import averaged_cells
from detect.containers import EXPORT, RAW_ADVICE, Claim, read_claim
from detect.errors import PhotographUnreadable, RequestWrong
from detect.phone import decode_phone_picture, is_phone_picture, read_phone_picture
from detect.raster import RasterPixels, is_raster, read_raster, unread_georeference

if TYPE_CHECKING:
    from shapely.geometry.base import BaseGeometry

    from detect.georeference import Georeference

PixelsFloat = NDArray[np.float32]
StoredPixels = NDArray[np.uint8] | NDArray[np.uint16]
Readable: TypeAlias = "StoredPixels | RasterPixels"

IMAGE_SUFFIXES = (".jpg", ".jpeg", ".png", ".tif", ".tiff", ".bmp")
PHONE_SUFFIXES = (".heic", ".heif")
RAW_SUFFIXES = (
    *(".dng", ".cr2", ".cr3", ".nef", ".arw", ".orf", ".rw2", ".raf", ".pef", ".srw", ".raw"),
)
SUFFIXES_TO_EXPORT = (".avif", ".webp", *RAW_SUFFIXES)
MOST_PIXELS = 500_000_000
SMALLEST_SIDE = 16
# Unpacking has limits: deflate gives at most 1,032 bytes for one (RFC 1951), a blank JPEG less. A
# phone's blank picture has no such limit; its decoder has limits of its own.
MOST_DECODED_PER_BYTE = 1200
_FLAGS = cv2.IMREAD_ANYCOLOR | cv2.IMREAD_ANYDEPTH | cv2.IMREAD_IGNORE_ORIENTATION


@dataclass(frozen=True, slots=True, eq=False)
class Photograph:
    """One image file of one dish, plot or leaf, upright and in red, green, blue.

    Parameters
    ----------
    path : Path
        Where the file is.
    sha256 : str
        Identity of the file's bytes, in hexadecimal.
    stored : ndarray or RasterPixels of shape (height, width, 3), uint8 or uint16
        Red, green and blue as the file holds them, turned upright; of a very large or georeferenced
        raster they stay on disk, and parts are read by two slices.
    taken : str or None
        When it was taken, as the camera wrote it (ISO 8601), if it did.
    notes : tuple of str
        What was knowingly left aside in reading, such as a colour profile.
    georeference : Georeference or None
        Where on Earth it lies, if the file says so.
    seen : shapely geometry or None
        The part that holds data, in pixels; None where all of it does.
    """

    path: Path
    sha256: str
    stored: Readable
    taken: str | None = None
    notes: tuple[str, ...] = ()
    georeference: Georeference | None = None
    seen: BaseGeometry | None = None

    def __post_init__(self) -> None:
        if self.stored.ndim != 3 or self.stored.shape[2] != 3:
            raise ValueError(f"stored must be (height, width, 3), not {self.stored.shape}")
        if self.stored.dtype not in (np.uint8, np.uint16):
            raise ValueError(f"stored must be uint8 or uint16, not {self.stored.dtype}")
        if isinstance(self.stored, np.ndarray):
            self.stored.setflags(write=False)

    @property
    def name(self) -> str:
        """File name without its folder."""
        return self.path.name

    @property
    def width(self) -> int:
        """Width in pixels."""
        return int(self.stored.shape[1])

    @property
    def height(self) -> int:
        """Height in pixels."""
        return int(self.stored.shape[0])

    def pixels(
        self,
        *,
        shrink: float = 1.0,
        box: tuple[int, int, int, int] | None = None,
        quick: bool = False,
    ) -> PixelsFloat:
        """Return the pixels as red, green, blue in 0..1, made smaller by area averages.

        Parameters
        ----------
        shrink : float
            Factor from 0 (excluded) to 1 by which width and height are multiplied.
        box : tuple of int or None
            Left, top, right, bottom of the part wanted (right and bottom excluded); None for all.
        quick : bool
            Good enough to be looked at: a raster's own reduced copies are used where it has some.

        Returns
        -------
        ndarray of shape (round(height * shrink), round(width * shrink), 3), float32
        """
        array = self.reduced(shrink=shrink, box=box, quick=quick)
        return array.astype(np.float32) * np.float32(1.0 / np.iinfo(array.dtype).max)

    def reduced(
        self,
        *,
        shrink: float = 1.0,
        box: tuple[int, int, int, int] | None = None,
        quick: bool = False,
    ) -> StoredPixels:
        """Return what `pixels` returns, as whole numbers of the depth that the file holds.

        Parameters
        ----------
        shrink : float
            Factor from 0 (excluded) to 1 by which width and height are multiplied.
        box : tuple of int or None
            Left, top, right, bottom of the part wanted (right and bottom excluded); None for all.
        quick : bool
            Good enough to be looked at: a raster's own reduced copies are used where it has some.

        Returns
        -------
        ndarray of shape (round(height * shrink), round(width * shrink), 3), uint8 or uint16
        """
        left, top, right, bottom = box or (0, 0, self.width, self.height)
        width, height = right - left, bottom - top
        size = (max(1, round(width * shrink)), max(1, round(height * shrink)))
        if shrink >= 1.0:
            return self.stored[top:bottom, left:right]
        if isinstance(self.stored, np.ndarray):
            return _averaged(self.stored[top:bottom, left:right], size, quick=quick)
        if quick and self.stored.has_copies:
            return self.stored.copied(left, top, right, bottom, size)
        spans = ((0, size[0]), (0, size[1]))
        return averaged_cells(self.stored, (left, top), (width, height, *size), *spans)


def read_photograph(path: Path) -> Photograph:
    """Read one image file, upright, in red, green and blue.

    Parameters
    ----------
    path : Path
        A JPEG, PNG, TIFF or BMP file, or with the extra `heif` a phone's HEIC file, told by what it
        holds rather than by its name.

    Returns
    -------
    Photograph
        Grey becomes three equal channels; transparency and colour profiles are left aside, and
        of a TIFF with many pages the first is read: each of these with a note.

    Raises
    ------
    PhotographUnreadable
        If the file cannot be read, is no image, is damaged or cut short, claims more than its
        bytes can hold or more than `MOST_PIXELS`, or is smaller than `SMALLEST_SIDE`.
    """
    try:
        if is_raster(path):
            return _raster(path)
        data = _bytes_of(path)
        claim = read_phone_picture(data) if is_phone_picture(data) else read_claim(data)
        _check_size(claim, len(data))
        stored = _decode(claim)
    except PhotographUnreadable as trouble:
        raise PhotographUnreadable(f"{path.name}: {trouble}.") from trouble
    notes = (*claim.notes, *unread_georeference(path))
    return Photograph(path, hashlib.sha256(data).hexdigest(), stored, claim.taken, notes)


def _raster(path: Path) -> Photograph:
    """Open a raster whose pixels stay on disk."""
    raster = read_raster(path)
    _check_side(raster.pixels.shape[1], raster.pixels.shape[0])
    with path.open("rb") as file:
        identity = hashlib.file_digest(file, "sha256").hexdigest()
    return Photograph(
        path,
        identity,
        raster.pixels,
        raster.taken,
        raster.notes,
        raster.georeference,
        raster.seen,
    )


def find_photographs(folder: Path) -> list[Path]:
    """Return the photographs of a folder, in natural order (dish_2 before dish_10).

    Parameters
    ----------
    folder : Path
        Looked through without its subfolders. Hidden files and pictures that this program drew
        (`*.overlay.jpg`) are passed over, and so is a raw or phone file beside a readable
        picture of the same name; without one it is listed, so that its trouble is told.

    Returns
    -------
    list of Path

    Raises
    ------
    RequestWrong
        If there is no such folder or no photograph in it.
    """
    if not folder.is_dir():
        raise RequestWrong(f"There is no folder {folder}; check the path.")
    files = [f for f in folder.iterdir() if f.is_file() and not f.name.startswith(".")]
    files = [f for f in files if not f.name.lower().endswith(".overlay.jpg")]
    found = [f for f in files if f.suffix.lower() in IMAGE_SUFFIXES]
    stems = {f.stem for f in found}
    others = (*PHONE_SUFFIXES, *SUFFIXES_TO_EXPORT)
    found += [f for f in files if f.suffix.lower() in others and f.stem not in stems]
    if not found:
        known = ", ".join(IMAGE_SUFFIXES)
        raise RequestWrong(
            f"The folder {folder} holds no photograph ({known}); give the folder they lie in."
        )
    return sorted(found, key=lambda f: (natural_order(f.name), f.name))


def natural_order(name: str) -> list[tuple[int, int, str]]:
    """Return a key that puts dish_2 before dish_10.

    Examples
    --------
    >>> sorted(["dish_10.jpg", "Dish_2.jpg"], key=natural_order)
    ['Dish_2.jpg', 'dish_10.jpg']
    """
    parts = re.split(r"(\d+)", name.casefold())
    return [(1, int(part), "") if part.isdecimal() else (0, 0, part) for part in parts]


def _bytes_of(path: Path) -> bytes:
    """Read a file's bytes; every way this can fail becomes one sentence."""
    if path.suffix.lower() in RAW_SUFFIXES:
        raise PhotographUnreadable(RAW_ADVICE.format(f"{path.suffix} files are raw files"))
    if path.suffix.lower() in SUFFIXES_TO_EXPORT:
        raise PhotographUnreadable(f"{path.suffix} files are not read; {EXPORT}")
    try:
        return path.read_bytes()
    except FileNotFoundError as error:
        raise PhotographUnreadable("there is no such file; check the path") from error
    except IsADirectoryError as error:
        raise PhotographUnreadable("this is a folder; give a picture in it") from error
    except OSError as error:
        reason = (error.strerror or "unknown reason").lower()
        raise PhotographUnreadable(
            f"the file cannot be opened ({reason}); check its permissions"
        ) from error


def _check_side(width: int, height: int) -> None:
    """Refuse a picture too small to count in."""
    if min(width, height) < SMALLEST_SIDE:
        raise PhotographUnreadable(
            f"the picture has {width} x {height} pixels, too small to count in;"
            f" at least {SMALLEST_SIDE} each way are needed"
        )


def _check_size(claim: Claim, file_size: int) -> None:
    """Refuse sizes that are of no use, or that the bytes cannot hold, before memory is taken."""
    size = f"{claim.width} x {claim.height} pixels"
    _check_side(claim.width, claim.height)
    if claim.width * claim.height > MOST_PIXELS:
        raise PhotographUnreadable(
            f"the picture has {size}, more than {MOST_PIXELS // 10**6} million; cut it into parts"
        )
    if claim.decoded_bytes > MOST_DECODED_PER_BYTE * file_size and not claim.by_phone:
        raise PhotographUnreadable(
            f"the header claims {size}, which {file_size} bytes cannot hold; the file is damaged"
        )


def _averaged(array: StoredPixels, size: tuple[int, int], *, quick: bool) -> StoredPixels:
    """Average areas down to a size (width, height), large ones by halves first, which is faster.

    What is left after the halves is at least a factor of 2, or of 1 where `quick` will do: of few
    pixels some would be averaged and others not.
    """
    height, width = array.shape[:2]
    least = 1 if quick else 2
    while height % 2 == width % 2 == 0:
        half = (width // 2, height // 2)
        if half != size and (least * size[0] > half[0] or least * size[1] > half[1]):
            break
        # Halfway between four pixels linear interpolation is their average.
        array = cv2.resize(array, half, interpolation=cv2.INTER_LINEAR)
        width, height = half
    if (width, height) != size:
        array = cv2.resize(array, size, interpolation=cv2.INTER_AREA)
    return array


def _decode(claim: Claim) -> StoredPixels:
    """Decode, make three channels, and stand the picture upright."""
    array: Any
    try:
        array = decode_phone_picture(claim.data) if claim.by_phone else _decode_silently(claim.data)
    except cv2.error:
        array = None
    if array is None or array.shape[:2] != (claim.height, claim.width):
        raise PhotographUnreadable(
            "the picture cannot be decoded; open it in an image viewer and save it as JPEG or TIFF"
        )
    if claim.inverted:
        array = np.iinfo(array.dtype).max - array
    turned = _TURNS[claim.turn](array)
    code = cv2.COLOR_GRAY2RGB if turned.ndim == 2 else cv2.COLOR_BGR2RGB
    stored: StoredPixels = cv2.cvtColor(turned, code)
    return stored


def _decode_silently(data: bytes) -> Any:
    """Decode without the decoder's own remarks on tags it does not know, which help nobody."""
    logging: Any = cv2.utils.logging
    before = logging.setLogLevel(logging.LOG_LEVEL_ERROR)
    try:
        return cv2.imdecode(np.frombuffer(data, dtype=np.uint8), _FLAGS)
    finally:
        logging.setLogLevel(before)


# Exif's eight turns (Exif 2.32, tag 0112 hex), each undone.
_TURNS: dict[int, Callable[[Any], Any]] = {
    1: lambda array: array,
    2: lambda array: cv2.flip(array, 1),
    3: lambda array: cv2.rotate(array, cv2.ROTATE_180),
    4: lambda array: cv2.flip(array, 0),
    5: cv2.transpose,
    6: lambda array: cv2.rotate(array, cv2.ROTATE_90_CLOCKWISE),
    7: lambda array: cv2.rotate(cv2.transpose(array), cv2.ROTATE_180),
    8: lambda array: cv2.rotate(array, cv2.ROTATE_90_COUNTERCLOCKWISE),
}
