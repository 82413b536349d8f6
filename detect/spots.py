"""The record of spots: what was found or placed, where, how large, how doubtful."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

Standing = Literal["counted", "struck"]
Origin = Literal["found", "placed"]


@dataclass(frozen=True, slots=True, eq=False)
class Spots:
    """Detected or hand-placed objects as columns of one length; no spots is a length of 0.

    Parameters
    ----------
    id : tuple of str
        One name per spot, never used again once given on a sheet.
    x, y : ndarray of shape (n,)
        Centres in pixels.
    radius : ndarray of shape (n,)
        Radius in pixels of the circle of equal area.
    area : ndarray of shape (n,)
        Area in square pixels.
    contrast : ndarray of shape (n,)
        Mean contrast with the background in units of local noise; NaN where not measured.
    fill : ndarray of shape (n,)
        Area over that of the ellipse of equal second moments: 1 for a disc or an ellipse.
    doubt : ndarray of shape (n,)
        Estimated probability, 0..1, that the spot is not a real object.
    found : ndarray of bool, shape (n,)
        True where the detector found it, False where a person placed it.
    counted : ndarray of bool, shape (n,)
        False where a person struck it.

    Raises
    ------
    ValueError
        If the columns differ in length, or hold impossible values.
    """

    id: tuple[str, ...]
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    radius: NDArray[np.float64]
    area: NDArray[np.float64]
    contrast: NDArray[np.float64]
    fill: NDArray[np.float64]
    doubt: NDArray[np.float64]
    found: NDArray[np.bool_]
    counted: NDArray[np.bool_]

    def __post_init__(self) -> None:
        n = len(self.id)
        for field in fields(self)[1:]:
            kind = np.bool_ if field.name in ("found", "counted") else np.float64
            column: NDArray[Any] = np.array(getattr(self, field.name), dtype=kind).reshape(-1)
            if column.size != n:
                raise ValueError(f"{field.name} has {column.size} values for {n} spots")
            column.setflags(write=False)
            object.__setattr__(self, field.name, column)
        if len(set(self.id)) != n:
            raise ValueError("two spots have one id")
        if not (np.isfinite(self.x).all() and np.isfinite(self.y).all()):
            raise ValueError("a spot's centre is not finite")
        if not ((self.radius > 0).all() and np.isfinite(self.radius).all()):
            raise ValueError("a spot's radius is not positive")
        if not ((self.doubt >= 0) & (self.doubt <= 1)).all():
            raise ValueError("a spot's doubt is not within 0..1")

    def __len__(self) -> int:
        return len(self.id)

    @classmethod
    def none(cls) -> Spots:
        """Return a table of length 0."""
        return cls.found_at([], [], [])

    @classmethod
    def found_at(
        cls,
        x: ArrayLike,
        y: ArrayLike,
        radius: ArrayLike,
        *,
        area: ArrayLike | None = None,
        contrast: ArrayLike | None = None,
        fill: ArrayLike | None = None,
        doubt: ArrayLike | None = None,
    ) -> Spots:
        """Return found, counted spots named "1", "2", ... (area pi r^2, doubt 0 unless given)."""
        radius = np.asarray(radius, dtype=np.float64)
        n = radius.size
        return cls(
            tuple(str(i + 1) for i in range(n)),
            np.asarray(x, dtype=np.float64),
            np.asarray(y, dtype=np.float64),
            radius,
            np.asarray(np.pi * radius**2 if area is None else area, dtype=np.float64),
            np.asarray(np.full(n, np.nan) if contrast is None else contrast, dtype=np.float64),
            np.asarray(np.ones(n) if fill is None else fill, dtype=np.float64),
            np.asarray(np.zeros(n) if doubt is None else doubt, dtype=np.float64),
            np.ones(n, dtype=np.bool_),
            np.ones(n, dtype=np.bool_),
        )

    @property
    def centres(self) -> NDArray[np.float64]:
        """Centres as an (n, 2) array of x, y."""
        return np.column_stack([self.x, self.y])

    def where(self, chosen: NDArray[np.bool_] | NDArray[np.integer[Any]] | Sequence[int]) -> Spots:
        """Return the chosen rows, by a mask or by positions."""
        rows = np.arange(len(self))[chosen]
        columns: list[Any] = [tuple(self.id[i] for i in rows)]
        columns += [getattr(self, field.name)[rows] for field in fields(self)[1:]]
        return Spots(*columns)

    def renumbered(self) -> Spots:
        """Return the same spots named "1", "2", ... in their order; for a new detection only."""
        return replace(self, id=tuple(str(i + 1) for i in range(len(self))))
