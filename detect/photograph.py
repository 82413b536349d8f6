"""Read any image safely: turn, colour, bit depth, identity."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

PixelsFloat = NDArray[np.float32]
StoredPixels = NDArray[np.uint8] | NDArray[np.uint16]


@dataclass(frozen=True, slots=True, eq=False)
class Photograph:
    """One image file of one dish, plot or leaf, upright and in red, green, blue.

    Parameters
    ----------
    path : Path
        Where the file is.
    sha256 : str
        Identity of the file's bytes, in hexadecimal.
    stored : ndarray of shape (height, width, 3), uint8 or uint16
        Red, green and blue as the file holds them, turned upright.
    taken : str or None
        When it was taken, as the camera wrote it (ISO 8601), if it did.
    notes : tuple of str
        What was knowingly left aside in reading, such as a colour profile.
    """

    path: Path
    sha256: str
    stored: StoredPixels
    taken: str | None = None
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        if self.stored.ndim != 3 or self.stored.shape[2] != 3:
            raise ValueError(f"stored must be (height, width, 3), not {self.stored.shape}")
        if self.stored.dtype not in (np.uint8, np.uint16):
            raise ValueError(f"stored must be uint8 or uint16, not {self.stored.dtype}")
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

    def pixels(self, *, shrink: float = 1.0) -> PixelsFloat:
        """Return the pixels as red, green, blue in 0..1, made smaller by area averages.

        Parameters
        ----------
        shrink : float
            Factor from 0 (excluded) to 1 by which width and height are multiplied.

        Returns
        -------
        ndarray of shape (round(height * shrink), round(width * shrink), 3), float32
        """
        array = self.stored
        if shrink < 1.0:
            size = (max(1, round(self.width * shrink)), max(1, round(self.height * shrink)))
            array = cv2.resize(array, size, interpolation=cv2.INTER_AREA)  # type: ignore[assignment]
        return array.astype(np.float32) * np.float32(1.0 / np.iinfo(array.dtype).max)
