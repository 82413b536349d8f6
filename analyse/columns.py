"""The columns of a record: arrays of its own that nobody changes, one entry per quadrat."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np


def hold_columns(record: object, names: Iterable[str], *, length: int | None = None) -> None:
    """Turn fields of a frozen record into read-only arrays that no one else holds.

    Parameters
    ----------
    record : frozen dataclass
        Changed in place; call this from its ``__post_init__`` alone.
    names : iterable of str
        Fields that hold arrays.
    length : int or None
        Number of quadrats that each must have an entry for; None leaves the shape free.

    Raises
    ------
    ValueError
        If a column has another shape than (length,).

    Examples
    --------
    >>> from dataclasses import dataclass
    >>> @dataclass(frozen=True)
    ... class Heights:
    ...     mm: object
    ...     def __post_init__(self):
    ...         hold_columns(self, ["mm"], length=2)
    >>> Heights([3, 4]).mm.flags.writeable
    False
    """
    for name in names:
        column = np.array(getattr(record, name))
        if length is not None and column.shape != (length,):
            raise ValueError(f"{name} has shape {column.shape} for {length} quadrats")
        column.setflags(write=False)
        object.__setattr__(record, name, column)
