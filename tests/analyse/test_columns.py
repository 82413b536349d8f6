"""Columns of a record: copied, read-only, and of the length they must have."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray

from analyse.columns import hold_columns


@dataclass(frozen=True)
class Record:
    counts: NDArray[np.int64]


def test_a_column_is_held_apart_from_where_it_came_from() -> None:
    given = np.array([1, 2, 3])
    record = Record(given)
    hold_columns(record, ["counts"], length=3)
    given[0] = 9
    assert record.counts.tolist() == [1, 2, 3]
    with pytest.raises(ValueError, match="read-only"):
        record.counts[0] = 9


def test_a_column_of_another_length_is_refused() -> None:
    with pytest.raises(ValueError, match=r"counts has shape \(2,\) for 3 quadrats"):
        hold_columns(Record(np.array([1, 2])), ["counts"], length=3)
    free = Record(np.zeros((2, 2), dtype=np.int64))
    hold_columns(free, ["counts"])
    assert free.counts.shape == (2, 2)
