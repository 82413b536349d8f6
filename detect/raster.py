"""Rasters that stay on disk: very large or georeferenced TIFF files, of which windows are read.

They are read with rasterio, the extra `geo`; without it they are told from other pictures all the
same, by their tags, so that what is missing can be said before memory is taken.

References
----------
TIFF, revision 6.0 (Aldus, 1992). OGC GeoTIFF Standard 1.1 (OGC 19-008r4, 2019), section 7.
"""

from __future__ import annotations

import mmap
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from importlib.util import find_spec
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

import numpy as np
from numpy.typing import NDArray

from detect.directories import Directory, DirectoryDamaged, first_directory, taken_of, turn_of
from detect.errors import PhotographUnreadable

if TYPE_CHECKING:
    from shapely.geometry.base import BaseGeometry

    from detect.georeference import Georeference

Window = NDArray[np.uint8] | NDArray[np.uint16]
# From so many pixels on a TIFF stays on disk; without the extra, it is refused from `MOST_WHOLE` on.
LARGE, MOST_WHOLE = 100_000_000, 500_000_000
EXTRA = "pip install 'strewn[geo]'"
_PIXEL_SCALE, _TIE_POINTS, _TRANSFORM, _GEO_KEYS = 33550, 33922, 34264, 34735
# Of blocks once unpacked, rasterio keeps this many megabytes, so that rows of strips are read once.
_CACHE_MB = 128
_SEEN_SIDE = 1500  # the part that holds data is outlined on a copy of this size
_TIFF = (b"II\x2a\0", b"MM\0\x2a", b"II\x2b\0", b"MM\0\x2b")


@dataclass(frozen=True, slots=True, eq=False)
class RasterPixels:
    """Red, green and blue of a raster on disk, of which parts are read by two slices.

    Parameters
    ----------
    dataset : rasterio dataset
        Open for reading.
    bands : tuple of int
        Which bands are red, green and blue; one alone is grey, or an entry of the palette.
    palette : ndarray of shape (256, 3), uint8, or None
        Colours of a raster that stores their numbers.
    inverted : bool
        Whether white is stored as 0.
    """

    dataset: Any
    bands: tuple[int, ...]
    palette: NDArray[np.uint8] | None = None
    inverted: bool = False
    dtype: np.dtype[Any] = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "dtype", np.dtype(self.dataset.dtypes[self.bands[0] - 1]))

    @property
    def shape(self) -> tuple[int, int, int]:
        """Height, width, and 3 for the colours."""
        return int(self.dataset.height), int(self.dataset.width), 3

    @property
    def ndim(self) -> int:
        """Always 3."""
        return 3

    def __getitem__(self, part: tuple[slice, slice]) -> Window:
        """Read a part from the disk."""
        rows, columns = part
        top, bottom, _ = rows.indices(self.shape[0])
        left, right, _ = columns.indices(self.shape[1])
        return self._read(left, top, right, bottom)

    def copy(self) -> Window:
        """Read all pixels into memory, if they are not too many for that."""
        height, width, _ = self.shape
        if height * width > LARGE:
            raise PhotographUnreadable(
                f"{Path(self.dataset.name).name}: {width} x {height} pixels are too many to plant"
                " objects in; leave --planted out, or cut out a part and use that."
            )
        return self._read(0, 0, width, height)

    @property
    def has_copies(self) -> bool:
        """Whether the file holds reduced copies of itself (overviews)."""
        return self.palette is None and bool(self.dataset.overviews(self.bands[0]))

    def copied(self, left: int, top: int, right: int, bottom: int, size: tuple[int, int]) -> Window:
        """Read a part at a smaller size (width, height), from a reduced copy that the file holds."""
        return self._read(left, top, right, bottom, size)

    def _read(
        self, left: int, top: int, right: int, bottom: int, size: tuple[int, int] | None = None
    ) -> Window:
        """Read a part as (height, width, 3); a damaged one is told with its place."""
        from rasterio.enums import Resampling
        from rasterio.errors import RasterioError
        from rasterio.windows import Window as Part

        choices: dict[str, Any] = {}
        if size is not None:
            shape = (len(self.bands), size[1], size[0])
            choices = {"out_shape": shape, "resampling": Resampling.average}
        try:
            with _frugal():
                part = Part(left, top, right - left, bottom - top)
                read = self.dataset.read(self.bands, window=part, **choices)
        except RasterioError as trouble:
            raise PhotographUnreadable(
                f"{Path(self.dataset.name).name}: the raster cannot be read between pixels {left},{top}"
                f" and {right},{bottom}; it is damaged or cut short, copy it again."
            ) from trouble
        if self.palette is not None:
            return np.asarray(self.palette[read[0]])
        if len(self.bands) == 1:
            read = np.broadcast_to(read, (3, *read.shape[1:]))
        stored: Window = np.ascontiguousarray(read.transpose(1, 2, 0))
        return np.iinfo(stored.dtype).max - stored if self.inverted else stored


@dataclass(frozen=True, slots=True, eq=False)
class Raster:
    """A raster that stays on disk.

    Parameters
    ----------
    pixels : RasterPixels
    taken : str or None
        When it was taken (ISO 8601), if the file says so.
    notes : tuple of str
        What is left aside in reading.
    georeference : Georeference or None
    seen : shapely geometry or None
        The part that holds data, in pixels; None where all of it does.
    """

    pixels: RasterPixels
    taken: str | None
    notes: tuple[str, ...]
    georeference: Georeference | None
    seen: BaseGeometry | None


def is_raster(path: Path) -> bool:
    """Tell whether a file is a TIFF to be read in windows: very large, or georeferenced.

    Parameters
    ----------
    path : Path

    Returns
    -------
    bool
        False as well for what is no TIFF or cannot be opened, and without the extra `geo`.

    Raises
    ------
    PhotographUnreadable
        If the file is too large to be read whole and the extra is missing. The message does not
        name the file.
    """
    page = _first_page(path)
    if page is None:
        return False
    width, height = page.number(256, 0), page.number(257, 0)
    if _has_extra():
        return width * height > LARGE or _is_georeferenced(page)
    if width * height > MOST_WHOLE:
        raise PhotographUnreadable(
            f"the raster has {width} x {height} pixels, more than {MOST_WHOLE // 10**6} million;"
            f" rasters of that size are read with an extra ({EXTRA})"
        )
    return False


def unread_georeference(path: Path) -> tuple[str, ...]:
    """Return a note where a file is georeferenced and that was left aside for want of the extra."""
    page = None if _has_extra() else _first_page(path)
    if page is None or not _is_georeferenced(page):
        return ()
    return (f"georeference not read, for which an extra is needed ({EXTRA})",)


def read_raster(path: Path) -> Raster:
    """Open a raster; its pixels stay on disk.

    Parameters
    ----------
    path : Path
        A TIFF of which `is_raster` holds.

    Returns
    -------
    Raster

    Raises
    ------
    PhotographUnreadable
        If it holds other than 8- or 16-bit numbers, is turned, or is damaged. The message does not
        name the file.
    """
    import rasterio
    from rasterio.errors import RasterioError

    from detect.georeference import georeference_of

    try:
        with _frugal():
            dataset = rasterio.open(path)
    except RasterioError as trouble:
        raise PhotographUnreadable("the raster is damaged or cut short; copy it again") from trouble
    page = _first_page(path)
    if page is not None and turn_of(page) != 1 and not _is_georeferenced(page):
        raise PhotographUnreadable(
            "the raster is to be turned when shown, which is not done for very large ones;"
            " save it upright"
        )
    bands, palette, notes = _colours(dataset)
    inverted = dataset.tags(ns="IMAGE_STRUCTURE").get("MINISWHITE") == "YES"
    pixels = RasterPixels(dataset, bands, palette, inverted)
    return Raster(pixels, _taken(path), notes, georeference_of(dataset), _seen(dataset))


@contextmanager
def _frugal() -> Iterator[None]:
    """Keep the reader's own memory small, and its warnings about plain TIFF files away."""
    import warnings

    import rasterio

    with rasterio.Env(GDAL_CACHEMAX=_CACHE_MB), warnings.catch_warnings():
        warnings.simplefilter("ignore", rasterio.errors.NotGeoreferencedWarning)
        yield


def _has_extra() -> bool:
    """Whether rasterio is installed."""
    return find_spec("rasterio") is not None


def _first_page(path: Path) -> Directory | None:
    """Tags of a TIFF's first page, without reading the file; None for anything else."""
    try:
        with path.open("rb") as file:
            if file.read(4) not in _TIFF:
                return None
            with mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ) as data:
                return first_directory(data)[0]  # type: ignore[arg-type]  # is read like bytes
    except (OSError, ValueError, DirectoryDamaged):
        return None


def _taken(path: Path) -> str | None:
    """When the picture was taken, as its camera wrote it."""
    with path.open("rb") as file, mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ) as data:
        try:
            page, wide = first_directory(data)  # type: ignore[arg-type]  # is read like bytes
            return None if wide else taken_of(data, page)  # type: ignore[arg-type]
        except DirectoryDamaged:
            return None


def _is_georeferenced(page: Directory) -> bool:
    """Whether tags say where the raster lies."""
    placed = _TRANSFORM in page.fields or {_PIXEL_SCALE, _TIE_POINTS} <= page.fields.keys()
    return placed or _GEO_KEYS in page.fields


def _colours(
    dataset: Any,
) -> tuple[tuple[int, ...], NDArray[np.uint8] | None, tuple[str, ...]]:
    """Which bands are red, green and blue, the palette, and what is left aside."""
    from rasterio.enums import ColorInterp

    kinds = dataset.colorinterp
    seen = [k + 1 for k, kind in enumerate(kinds) if kind != ColorInterp.alpha]
    if not seen:
        raise PhotographUnreadable("the raster holds no picture, only transparency")
    _check_numbers(dataset, seen[:3])
    if kinds[0] == ColorInterp.palette:
        entries = dataset.colormap(1)
        table = np.array([entries.get(k, (0, 0, 0, 0))[:3] for k in range(256)], dtype=np.uint8)
        return (1,), table, ()
    named = [
        next((k + 1 for k, kind in enumerate(kinds) if kind == wanted), 0)
        for wanted in (ColorInterp.red, ColorInterp.green, ColorInterp.blue)
    ]
    bands = tuple(named) if all(named) else tuple(seen[:3] if len(seen) >= 3 else seen[:1])
    if len(seen) == len(bands):
        return bands, None, ()
    taken = ", ".join(map(str, bands))
    return bands, None, (f"of {len(seen)} bands only {taken} used",)


def _check_numbers(dataset: Any, bands: list[int]) -> None:
    """Refuse what is neither 8 nor 16 bits without sign."""
    kinds = {dataset.dtypes[band - 1] for band in bands}
    if not kinds <= {"uint8", "uint16"} or len(kinds) > 1:
        raise PhotographUnreadable(
            f"the raster holds {' and '.join(sorted(kinds))} numbers, not 8 or 16 bits without sign;"
            " export it as an 8- or 16-bit RGB GeoTIFF"
        )


def _seen(dataset: Any) -> BaseGeometry | None:
    """Outline what holds data, a pixel of a reduced copy inwards; None where everything does."""
    import shapely
    from rasterio.enums import MaskFlags
    from rasterio.features import shapes
    from rasterio.transform import from_bounds

    if all(MaskFlags.all_valid in flags for flags in dataset.mask_flag_enums):
        return None
    width, height = dataset.width, dataset.height
    shrink = min(1.0, _SEEN_SIDE / max(width, height))
    size = (max(1, round(height * shrink)), max(1, round(width * shrink)))
    with _frugal():
        mask = dataset.dataset_mask(out_shape=size)
    if mask.all():
        return None
    # Pixel centres are at whole numbers, so the picture runs from -0.5 to its size less 0.5.
    place = from_bounds(-0.5, height - 0.5, width - 0.5, -0.5, size[1], size[0])
    seen = (mask > 0).astype(np.uint8)
    parts = [
        shapely.geometry.shape(part) for part, _ in shapes(seen, mask=seen > 0, transform=place)
    ]
    if not parts:
        _nothing()
    step = 1.0 / shrink
    frame = shapely.box(-0.5, -0.5, width - 0.5, height - 0.5)
    holes = frame.difference(shapely.union_all(parts)).buffer(step)
    outline = frame.difference(holes).simplify(0.5 * step)
    if outline.is_empty:
        _nothing()
    return outline


def _nothing() -> NoReturn:
    raise PhotographUnreadable("the raster holds no data anywhere; export it again")
