"""Many photographs: order, failures and progress, on one core or on several."""

from __future__ import annotations

import os
from pathlib import Path

import cv2
import pytest

from detect.batch import Each, Failure, do_each, workers_for
from detect.errors import OptionWrong, PhotographUnreadable, RequestWrong


def _work(item: int) -> int:
    if item == 3:
        raise PhotographUnreadable("three.jpg: it is cut short.")
    if item == 4:
        raise OptionWrong("Four cannot be.")
    if item == 5:
        raise MemoryError
    if item == 6:
        raise ZeroDivisionError
    if item == 7:
        os._exit(1)
    return item * item


def _name(item: int) -> str:
    return {3: "three.jpg", 4: "four.jpg"}.get(item, "other.jpg")


EACH = Each(_work, _name)


@pytest.mark.parametrize("workers", [1, 2])
def test_results_come_in_order_and_failures_stay_with_their_photograph(workers: int) -> None:
    seen: list[tuple[int, int]] = []
    results = do_each(
        EACH,
        [9, 3, 1, 4, 5],
        workers=workers,
        progress=lambda done, total: seen.append((done, total)),
    )
    assert results == [
        81,
        Failure("three.jpg", "it is cut short.", request_wrong=False),
        1,
        Failure("four.jpg", "Four cannot be.", request_wrong=True),
        Failure(
            "other.jpg",
            "It does not fit into memory; use fewer --workers or a smaller photograph.",
        ),
    ]
    assert seen == [(done, 5) for done in range(1, 6)]


@pytest.mark.parametrize("workers", [1, 2])
def test_a_bug_keeps_its_traceback(workers: int) -> None:
    with pytest.raises(ZeroDivisionError):
        do_each(EACH, [1, 6], workers=workers)


def test_a_worker_that_the_system_ends_is_told_in_a_sentence() -> None:
    with pytest.raises(RequestWrong, match="The system ended a worker, mostly for want of memory"):
        do_each(EACH, [1, 7], workers=2)


def test_no_photographs_give_no_results() -> None:
    assert do_each(EACH, []) == []


@pytest.mark.parametrize("workers", [0, -2])
def test_no_workers_are_refused(workers: int) -> None:
    with pytest.raises(RequestWrong, match=f"--workers must be 1 or more, not {workers}"):
        do_each(EACH, [1], workers=workers)


def test_workers_are_the_cores_of_the_computer_unless_named() -> None:
    assert 1 <= workers_for() <= 8
    assert workers_for(12) == 12


def _threads(item: int) -> int:
    return cv2.getNumThreads()


THREADS = Each(_threads, str)


@pytest.mark.parametrize(
    ("items", "workers", "threads"), [(1, 1, 1), (3, 1, 1), (1, 4, 4), (2, 2, 1), (2, 4, 2)]
)
def test_no_more_cores_are_used_than_asked_for(items: int, workers: int, threads: int) -> None:
    before = cv2.getNumThreads()
    assert do_each(THREADS, range(items), workers=workers) == [threads] * items
    assert cv2.getNumThreads() == before


def test_the_name_before_a_reason_is_not_repeated() -> None:
    trouble = PhotographUnreadable("a.jpg: it holds no image.")
    assert Failure.of("a.jpg", trouble).reason == "it holds no image."
    at_start = RequestWrong("a.csv, row 3, is empty.")
    assert Failure.of("a.csv", at_start).reason == "row 3, is empty."
    assert Failure.of("a.csv", RequestWrong("a.csv is empty.")).reason == "is empty."
    assert Failure.of("b.jpg", trouble).reason == "a.jpg: it holds no image."
    assert Path(Failure.of("b.jpg", trouble).name).suffix == ".jpg"
