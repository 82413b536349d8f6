"""What the lens bends: straight lines that a camera shows curved, made straight again."""

from __future__ import annotations

import math
import tomllib
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from detect.errors import OptionWrong

Points = NDArray[np.float64]

SAME_SHAPE = 0.01  # by which a picture's sides may be in another ratio than the chessboards'
_BEYOND = 1.05  # half diagonals: farther out the map goes on straight, so that it never folds
_KEYS = ("k1", "k2", "width", "height", "rms_px", "photographs")


@dataclass(frozen=True, slots=True)
class Lens:
    """How a lens moves points along the rays from the middle of its pictures.

    Parameters
    ----------
    k1, k2 : float
        A point seen at r half diagonals from the picture's middle belongs at r (1 + k1 r^2 + k2 r^4).
    width, height : int
        Size of the pictures, in pixels.
    rms_px : float
        Root mean square distance of the chessboards' corners from where this puts them.
    photographs : int
        Number of chessboards it was measured on.

    Raises
    ------
    OptionWrong
        If a number is impossible, or the map would fold within the picture.

    Notes
    -----
    The middle of the picture is taken for the centre of distortion, so that a picture may be
    turned upright either way.

    References
    ----------
    D. C. Brown, "Close-range camera calibration", Photogrammetric Engineering 37 (1971) 855-866:
    the radial terms, as a correction of the place seen.
    """

    k1: float
    k2: float
    width: int
    height: int
    rms_px: float = 0.0
    photographs: int = 0

    def __post_init__(self) -> None:
        if not all(map(math.isfinite, (self.k1, self.k2, self.rms_px))) or not (
            self.width > 1 and self.height > 1
        ):
            raise OptionWrong("A lens needs finite k1 and k2 and the size of its pictures.")
        r = np.linspace(0, _BEYOND, 200)
        if self._slope(r).min() < 0.2:
            raise OptionWrong(
                f"The lens (k1 = {self.k1:g}, k2 = {self.k2:g}) folds its own picture; measure it"
                " again with chessboards that fill the whole frame."
            )

    def fitted_to(self, width: int, height: int) -> Lens:
        """Return the lens for a picture of another size and the same shape, upright or on its side.

        Raises
        ------
        OptionWrong
            If the picture is of another shape, so another camera's or cropped.
        """
        own, other = (
            max(a, b) / min(a, b) for a, b in ((self.width, self.height), (width, height))
        )
        if abs(own / other - 1) > SAME_SHAPE:
            raise OptionWrong(
                f"The lens was measured on pictures of {self.width} x {self.height} pixels; this one"
                f" has {width} x {height}, another shape. Use whole pictures of the same camera."
            )
        return replace(self, width=width, height=height)

    @property
    def _middle(self) -> Points:
        return np.array([(self.width - 1) / 2, (self.height - 1) / 2])

    @property
    def _half_diagonal(self) -> float:
        return 0.5 * math.hypot(self.width, self.height)

    def _radius(self, r: Points) -> Points:
        """Return where a point seen at r belongs; straight on beyond `_BEYOND`."""
        near = np.minimum(r, _BEYOND)
        own = near * (1 + self.k1 * near**2 + self.k2 * near**4)
        return np.asarray(own + (r - near) * self._slope(near))

    def _slope(self, r: Points) -> Points:
        near = np.minimum(r, _BEYOND)
        return np.asarray(1 + 3 * self.k1 * near**2 + 5 * self.k2 * near**4)

    def straighten(self, points_px: ArrayLike) -> Points:
        """Return where (n, 2) points of the photograph would lie without distortion, in pixels."""
        away, r = self._polar(points_px)
        stretch = np.divide(self._radius(r), r, out=np.ones_like(r), where=r > 0)
        return np.asarray(self._middle + away * stretch[:, None])

    def bend(self, points_px: ArrayLike) -> Points:
        """Return where in the photograph (n, 2) straightened points lie: the inverse, by halving."""
        away, target = self._polar(points_px)
        low, high = np.zeros_like(target), target / 0.2 + 1e-12
        for _ in range(70):
            middle = 0.5 * (low + high)
            short = self._radius(middle) < target
            low, high = np.where(short, middle, low), np.where(short, high, middle)
        stretch = np.divide(low, target, out=np.ones_like(target), where=target > 0)
        return np.asarray(self._middle + away * stretch[:, None])

    def area_factor(self, points_px: ArrayLike) -> Points:
        """Return by how much a small area of the photograph grows when it is straightened, (n,)."""
        _, r = self._polar(points_px)
        stretch = np.divide(self._radius(r), r, out=np.ones_like(r), where=r > 0)
        return np.asarray(stretch * self._slope(r))

    def _polar(self, points_px: ArrayLike) -> tuple[Points, Points]:
        """Return points from the middle, and their distance in half diagonals."""
        away = np.asarray(points_px, dtype=np.float64).reshape(-1, 2) - self._middle
        return away, np.hypot(away[:, 0], away[:, 1]) / self._half_diagonal

    def as_dict(self) -> dict[str, Any]:
        """Return the lens as plain values for a file."""
        return {key: getattr(self, key) for key in _KEYS}

    @classmethod
    def from_dict(cls, values: dict[str, Any]) -> Lens:
        """Return the lens a file holds."""
        return cls(
            float(values["k1"]),
            float(values["k2"]),
            int(values["width"]),
            int(values["height"]),
            float(values.get("rms_px", 0.0)),
            int(values.get("photographs", 0)),
        )

    def as_toml(self) -> str:
        """Return the text of a file that `read_lens` reads."""
        lines = [f"{key} = {value!r}" for key, value in self.as_dict().items()]
        head = (
            "# A lens: a point seen at r half diagonals from the picture's middle belongs at\n"
            "# r (1 + k1 r^2 + k2 r^4).\n"
        )
        return head + "\n".join(lines) + "\n"


def read_lens(path: Path) -> Lens:
    """Read a lens from the file that a measurement wrote.

    Raises
    ------
    OptionWrong
        If the file cannot be read or is no lens.
    """
    try:
        return Lens.from_dict(tomllib.loads(path.read_text(encoding="utf-8")))
    except OSError as trouble:
        reason = (trouble.strerror or "unknown reason").lower()
        raise OptionWrong(
            f"The lens {path} cannot be read ({reason}); check its path."
        ) from trouble
    except (ValueError, KeyError, TypeError) as trouble:
        raise OptionWrong(
            f"{path.name} is no lens: it needs k1, k2, width and height; measure the lens again by"
            " giving photographs of a chessboard."
        ) from trouble
