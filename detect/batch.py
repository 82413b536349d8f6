"""Many photographs, one after another or on several cores, each trouble kept to its photograph."""

from __future__ import annotations

import os
import signal
from collections.abc import Callable, Sequence
from concurrent.futures import Future, ProcessPoolExecutor, as_completed
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass
from multiprocessing import get_context
from typing import Generic, TypeVar

import cv2

from detect.errors import DetectError, PhotographFailed, RequestWrong

Item = TypeVar("Item")
Result = TypeVar("Result")
Progress = Callable[[int, int], None]
_MOST_WORKERS = 8


@dataclass(frozen=True, slots=True)
class Failure:
    """Why one photograph could not be done.

    Parameters
    ----------
    name : str
        The photograph's file name.
    reason : str
        A sentence.
    request_wrong : bool
        Whether the request, rather than the photograph, is to blame.
    """

    name: str
    reason: str
    request_wrong: bool = False

    @classmethod
    def of(cls, name: str, trouble: Exception) -> Failure:
        """Return the failure that a trouble means; what is no `PhotographFailed` is the request."""
        reason = str(trouble).removeprefix(name).lstrip(":, ")
        return cls(name, reason, not isinstance(trouble, PhotographFailed))


@dataclass(frozen=True, slots=True)
class Each(Generic[Item, Result]):
    """What to do with each photograph.

    Parameters
    ----------
    work : callable
        Does one; a function of a module, for it is sent to other processes.
    name : callable
        Gives the file name of one, for its failure; a function of a module.
    troubles : tuple of exception types
        What is caught and kept to the photograph; anything else is a bug and stops everything.
    """

    work: Callable[[Item], Result]
    name: Callable[[Item], str]
    troubles: tuple[type[Exception], ...] = (DetectError,)

    def __call__(self, item: Item) -> Result | Failure:
        """Do one photograph, or return why it cannot be done."""
        try:
            return self.work(item)
        except self.troubles as trouble:
            return Failure.of(self.name(item), trouble)
        except MemoryError:
            sentence = "It does not fit into memory; use fewer --workers or a smaller photograph."
            return Failure(self.name(item), sentence)


def workers_for(wanted: int | None = None) -> int:
    """Return the cores wanted, or what this computer lends us: all its cores, 8 at most."""
    if wanted is not None:
        return wanted
    allowed = getattr(os, "sched_getaffinity", None)
    cores = len(allowed(0)) if allowed else (os.cpu_count() or 1)
    return min(cores, _MOST_WORKERS)


def do_each(
    each: Each[Item, Result],
    items: Sequence[Item],
    *,
    workers: int | None = None,
    progress: Progress | None = None,
) -> list[Result | Failure]:
    """Do each photograph, on as many cores as asked and no more.

    Parameters
    ----------
    each : Each
        What to do with one.
    items : sequence
        What describes each photograph; sent to other processes.
    workers : int or None
        Cores to use, at least 1: one photograph on each, and what is left over when there are
        fewer photographs goes to OpenCV's threads. With more than one, the program that calls
        must be importable (its own start behind ``if __name__ == "__main__"``). None does them
        here, with OpenCV as it is.
    progress : callable, optional
        Called with (done, total) whenever one is done.

    Returns
    -------
    list
        A result or a `Failure` for each item, in the order of `items` whatever the workers.

    Raises
    ------
    RequestWrong
        If `workers` is less than 1, or the system ended a process (mostly for want of memory).
    """
    if workers is None:
        return _here(each, items, progress)
    if workers < 1:
        raise RequestWrong(f"--workers must be 1 or more, not {workers}.")
    processes = max(1, min(workers, len(items)))
    threads = workers // processes
    if processes > 1:
        return _on_many(each, items, processes, threads, progress)
    before = cv2.getNumThreads()
    cv2.setNumThreads(threads)
    try:
        return _here(each, items, progress)
    finally:
        cv2.setNumThreads(before)


def _here(
    each: Each[Item, Result], items: Sequence[Item], progress: Progress | None
) -> list[Result | Failure]:
    """Do each item in this process."""
    results: list[Result | Failure] = []
    for item in items:
        results.append(each(item))
        _tell(progress, len(results), len(items))
    return results


def _on_many(
    each: Each[Item, Result],
    items: Sequence[Item],
    processes: int,
    threads: int,
    progress: Progress | None,
) -> list[Result | Failure]:
    """Do each item on several processes, which start afresh so that no state leaks into them."""
    pool = ProcessPoolExecutor(
        processes, mp_context=get_context("spawn"), initializer=_begin, initargs=(threads,)
    )
    try:
        futures: list[Future[Result | Failure]] = [pool.submit(each, item) for item in items]
        for done, _ in enumerate(as_completed(futures), start=1):
            _tell(progress, done, len(items))
        return [future.result() for future in futures]
    except BrokenProcessPool as trouble:
        raise RequestWrong(
            "The system ended a worker, mostly for want of memory; try again with --workers 1."
        ) from trouble
    finally:
        pool.shutdown(wait=True, cancel_futures=True)


def _begin(threads: int) -> None:
    """Make a fresh process keep to its cores, and leave an interruption to its parent."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    cv2.setNumThreads(threads)


def _tell(progress: Progress | None, done: int, total: int) -> None:
    """Report progress if anybody listens."""
    if progress is not None:
        progress(done, total)
