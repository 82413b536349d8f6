"""Recall by radius and by crowding: classes by hand, their bounds, what they leave out."""

from __future__ import annotations

import csv
import math

import numpy as np
import pytest

from detect.breakdown import PART_COLUMNS, Part, parts_csv, parts_of
from detect.compared import Claims, Compared, Objects


def compared(
    radius: list[float],
    apart: list[float],
    hit: list[bool],
    *,
    name: str = "a.jpg",
    mm_per_px: float = math.nan,
    known: list[bool] | None = None,
) -> Compared:
    n = len(radius)
    off = np.where(hit, 2.0, np.nan)
    objects = Objects(
        np.zeros((n, 2)),
        np.array(radius, float),
        np.array(radius, float) * mm_per_px,
        np.array(known if known is not None else [True] * n, bool),
        np.array(apart, float),
        np.array(hit, bool),
        off,
        off * mm_per_px,
    )
    none = np.zeros(0)
    return Compared(name, objects, Claims(np.zeros((0, 2)), none, none, np.zeros(0, bool)))


def of(parts: list[Part], name: str, by: str) -> list[Part]:
    return [part for part in parts if (part.name, part.by) == (name, by)]


def test_quarters_of_the_radii() -> None:
    given = compared([1, 2, 3, 4, 5], [9] * 5, [True, False, True, True, False])
    parts = of(parts_of([given]), "a.jpg", "radius")
    assert [(p.low, p.high, p.unit) for p in parts] == [
        (1, 2, "px"),
        (2, 3, "px"),
        (3, 4, "px"),
        (4, 5, "px"),
    ]
    # A bound belongs to the class above it; the greatest to the last.
    assert [(p.truth, p.matched) for p in parts] == [(1, 1), (1, 0), (1, 1), (2, 1)]
    assert parts[3].recall == 0.5
    assert parts[0].rmse_px == 2.0
    assert math.isnan(parts[1].rmse_px)


def test_classes_of_crowding() -> None:
    given = compared([5] * 6, [0.2, 0.99, 1.0, 1.5, 2.9, math.inf], [False] * 2 + [True] * 4)
    parts = of(parts_of([given]), "all", "crowding")
    assert [(p.low, p.high) for p in parts] == [(0, 1), (1, 1.5), (1.5, 3), (3, math.inf)]
    assert [(p.truth, p.matched) for p in parts] == [(2, 0), (1, 1), (2, 2), (1, 1)]


def test_all_photographs_share_their_quarters() -> None:
    first = compared([1, 2], [9] * 2, [True] * 2, mm_per_px=1.0)
    second = compared([3, 4], [9] * 2, [False] * 2, name="b.jpg", mm_per_px=2.0)
    parts = parts_of([first, second])
    assert {p.unit for p in parts if p.by == "radius"} == {"mm"}
    assert [p.truth for p in of(parts, "a.jpg", "radius")] == [1, 1, 0, 0]
    assert [p.truth for p in of(parts, "b.jpg", "radius")] == [0, 0, 1, 1]
    assert [p.truth for p in of(parts, "all", "radius")] == [1, 1, 1, 1]
    assert math.isnan(of(parts, "a.jpg", "radius")[2].recall)
    assert of(parts, "all", "radius")[0].rmse_mm == 2.0


def test_one_photograph_without_a_scale_means_pixels() -> None:
    parts = parts_of([compared([1], [9], [True], mm_per_px=1.0), compared([2], [9], [True])])
    assert {p.unit for p in parts if p.by == "radius"} == {"px"}


def test_equal_radii_make_one_class() -> None:
    parts = of(parts_of([compared([3] * 4, [9] * 4, [True] * 4)]), "all", "radius")
    assert [(p.low, p.high, p.truth) for p in parts] == [(3, 3, 4)]


def test_radii_that_were_not_marked_are_left_out() -> None:
    given = compared([1, 9, 1, 9], [9] * 4, [True] * 4, known=[True, True, False, False])
    assert sum(p.truth for p in of(parts_of([given]), "all", "radius")) == 2
    unknown = compared([1, 9], [9] * 2, [True] * 2, known=[False, False])
    assert of(parts_of([unknown]), "all", "radius") == []
    assert sum(p.truth for p in of(parts_of([unknown]), "all", "crowding")) == 2


def test_no_objects_make_empty_classes() -> None:
    parts = parts_of([compared([], [], [])])
    assert [p.truth for p in parts] == [0] * 8
    assert all(math.isnan(p.recall) for p in parts)


def test_parts_as_a_table() -> None:
    rows = list(csv.DictReader(parts_csv(parts_of([compared([2], [4], [True])])).splitlines()))
    assert list(rows[0]) == list(PART_COLUMNS)
    last = rows[-1]
    assert last["photograph"] == "all"
    assert (last["by"], last["unit"]) == ("crowding", "radii")
    assert (last["low"], last["high"], last["truth"], last["recall"]) == ("3.0", "", "1", "1.0")
    assert (last["rmse_px"], last["rmse_mm"]) == ("2.0", "")


@pytest.mark.parametrize("n", [5, 100])
def test_quarters_hold_a_quarter_each(n: int) -> None:
    radius = np.random.default_rng(n).uniform(1, 9, 4 * n).tolist()
    parts = of(parts_of([compared(radius, [9] * 4 * n, [True] * 4 * n)]), "all", "radius")
    assert [p.truth for p in parts] == [n] * 4
