"""Area averages of any part of a picture, on a grid whose cells need not be whole pixels."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from detect.photograph import Photograph, Readable, StoredPixels

Span = tuple[int, int]
# Photograph pixels read at once.
_MOST_READ = 12_000_000


def averaged(
    photograph: Photograph,
    corner: tuple[int, int],
    shape: tuple[int, int, int, int],
    columns: Span,
    rows: Span,
) -> NDArray[np.float32]:
    """Average a photograph over some cells of a grid.

    Parameters
    ----------
    photograph : Photograph
    corner : tuple of int
        The photograph's pixel, x and y, at the grid's corner.
    shape : tuple of int
        Width and height of the grid in photograph pixels, then in cells; no more cells than pixels.
    columns, rows : tuple of int
        First cell wanted, and the one after the last.

    Returns
    -------
    ndarray of shape (rows, columns, 3), float32
        Red, green and blue, 0..1, rounded to the depth that the file holds.
    """
    stored = averaged_cells(photograph.stored, corner, shape, columns, rows)
    return stored.astype(np.float32) * np.float32(1.0 / np.iinfo(stored.dtype).max)


def averaged_cells(
    stored: Readable,
    corner: tuple[int, int],
    shape: tuple[int, int, int, int],
    columns: Span,
    rows: Span,
) -> StoredPixels:
    """Average stored pixels over some cells of a grid, reading no more than lies under them.

    Parameters
    ----------
    stored : array-like of shape (height, width, 3)
        Pixels in memory or on disk, of which parts are read by two slices.
    corner, shape, columns, rows
        As for `averaged`.

    Returns
    -------
    ndarray of shape (rows, columns, 3), uint8 or uint16
    """
    width, height, n_columns, n_rows = shape
    x, y = corner
    if (width, height) == (n_columns, n_rows):
        return stored[y + rows[0] : y + rows[1], x + columns[0] : x + columns[1]]
    out = np.empty((rows[1] - rows[0], columns[1] - columns[0], 3), dtype=stored.dtype)
    across, left, right = _weights(columns, width / n_columns, width)
    for band in _bands(rows, right - left, height / n_rows):
        down, top, bottom = _weights(band, height / n_rows, height)
        read = stored[y + top : y + bottom, x + left : x + right]
        narrow = down @ read.reshape(bottom - top, -1).astype(np.float32)
        turned = narrow.reshape(-1, right - left, 3).transpose(1, 0, 2).reshape(right - left, -1)
        means = (across @ turned).reshape(columns[1] - columns[0], -1, 3).transpose(1, 0, 2)
        out[band[0] - rows[0] : band[1] - rows[0]] = np.rint(means)
    return out


def _bands(rows: Span, width: int, height: float) -> Iterator[Span]:
    """Cut rows of cells of some height into bands that do not take too much memory to read."""
    step = max(1, int(_MOST_READ / (width * height)))
    for first in range(rows[0], rows[1], step):
        yield first, min(first + step, rows[1])


def _weights(cells: Span, side: float, length: int) -> tuple[Any, int, int]:
    """Shares of pixels in cells of a side, with the first pixel and the one after the last."""
    from scipy.sparse import csr_array  # which help can do without

    edges = np.arange(cells[0], cells[1] + 1) * side
    first = math.floor(edges[0] + 1e-9)
    last = min(length, math.ceil(edges[-1] - 1e-9))
    reach = math.ceil(side) + 1
    pixel = np.floor(edges[:-1, None] + 1e-9).astype(np.int64) + np.arange(reach)
    overlap = np.minimum(edges[1:, None], pixel + 1) - np.maximum(edges[:-1, None], pixel)
    overlap = np.where(pixel < last, np.maximum(overlap, 0.0), 0.0)
    overlap /= overlap.sum(axis=1, keepdims=True)
    row, column = np.nonzero(overlap > 1e-9)
    values = overlap[row, column].astype(np.float32)
    shares = csr_array(
        (values, (row, pixel[row, column] - first)), shape=(len(overlap), last - first)
    )
    return shares, first, last
