"""What do curves look like in many patterns drawn under a null, each from a seed of its own."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass
from multiprocessing import get_context

import numpy as np
from numpy.typing import NDArray

from analyse.chance import check_seed
from analyse.nulls import Null
from detect.errors import RequestWrong

Floats = NDArray[np.float64]
_WORTH_SHARING = 4.0  # seconds of work; less is done before other processes have begun
_SHARES = 20  # of the work for each process, so that none waits long for another


def simulate_curves(
    curves: Callable[[Floats], Floats],
    null: Null,
    *,
    n: int,
    simulations: int,
    seed: int,
    workers: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> Floats:
    """Return the curves of patterns drawn under a null.

    Parameters
    ----------
    curves : callable
        From points of shape (n, 2) to any number k of values; it must not change anything.
    null : Null
        What draws the points.
    n : int
        Points in each pattern.
    simulations : int
        How many patterns, 1 or more.
    seed : int
        0 or more. Simulation i depends on the seed and i alone.
    workers : int
        How many processes may share the work; one does all where there is too little for others
        to be started. The result does not depend on it. With more than one,
        `curves` and `null` are sent to them, and the program that calls must be importable (its
        own start behind ``if __name__ == "__main__"``).
    progress : callable, optional
        Called with (done, total) now and then.

    Returns
    -------
    ndarray of shape (simulations, k)

    Raises
    ------
    OptionWrong
        If the seed is negative.
    RequestWrong
        If the system ended a process (mostly for want of memory).
    ValueError
        If there are no simulations or workers, or `curves` does not always give k values.

    Notes
    -----
    Only the values are kept, never the patterns, so the memory goes by simulations times k and,
    for each worker, by one pattern.

    Examples
    --------
    >>> import shapely
    >>> from analyse.nulls import CompleteRandomness
    >>> null = CompleteRandomness(shapely.box(0, 0, 2, 1))
    >>> means = simulate_curves(lambda xy: xy.mean(axis=0), null, n=50, simulations=200, seed=1)
    >>> means.shape, means.mean(axis=0).round(1).tolist()
    ((200, 2), [1.0, 0.5])
    """
    check_seed(seed)
    if simulations < 1 or workers < 1:
        raise ValueError(
            f"there must be 1 or more simulations and workers, not {simulations} and {workers}"
        )

    work = _Work(curves, null, n, seed)
    first = work(range(1))
    found = np.empty((simulations, first.shape[1]))
    found[:1] = first
    start = time.perf_counter()
    work(range(1))  # once more, for what the first had to prepare
    alone = workers == 1 or (time.perf_counter() - start) * simulations < _WORTH_SHARING
    shares = _shares(simulations, workers)
    done = map(work, shares) if alone else _on_many(work, shares, workers)
    for rows, values in zip(shares, done, strict=True):
        if values.shape[1:] != first.shape[1:]:
            raise ValueError(
                f"the curves of some patterns have {values.shape[1]} values, of others"
                f" {first.shape[1]}"
            )
        found[rows.start : rows.stop] = values
        if progress is not None:
            progress(rows.stop, simulations)
    return found


@dataclass(frozen=True, slots=True)
class _Work:
    """How the curves of any simulations are found."""

    curves: Callable[[Floats], Floats]
    null: Null
    n: int
    seed: int

    def __call__(self, rows: range) -> Floats:
        """Return the curves of some simulations, one in a row."""
        drawn = (self.null.draw(self.n, stream_of(self.seed, i)) for i in rows)
        return np.stack([np.asarray(self.curves(xy), dtype=np.float64) for xy in drawn])


def _shares(simulations: int, workers: int) -> list[range]:
    """Cut the simulations after the first into shares."""
    length = max(1, -(-simulations // (workers * _SHARES)))
    starts = range(1, simulations, length)
    return [range(start, min(start + length, simulations)) for start in starts]


def _on_many(work: _Work, shares: list[range], workers: int) -> Iterator[Floats]:
    """Do shares on several processes, which start afresh so that no state leaks into them."""
    processes = min(workers, max(1, len(shares)))
    with ProcessPoolExecutor(
        processes, mp_context=get_context("spawn"), initializer=_begin, initargs=(work,)
    ) as pool:
        try:
            yield from pool.map(_one_share, shares)
        except BrokenProcessPool as trouble:
            raise RequestWrong(
                "The system ended a process of the simulations, mostly for want of memory;"
                " try again with one worker."
            ) from trouble


_begun: list[_Work] = []  # in a process of its own: what it was started for


def _begin(work: _Work) -> None:
    """Keep the work of a fresh process."""
    _begun[:] = [work]


def _one_share(rows: range) -> Floats:
    """Do one share in a process that has begun."""
    return _begun[0](rows)


def stream_of(seed: int, i: int) -> np.random.Generator:
    """Return the source of randomness of simulation i, which no other simulation disturbs.

    Parameters
    ----------
    seed : int
        0 or more.
    i : int
        Number of the simulation, from 0.

    Returns
    -------
    numpy.random.Generator
        That of child i of the seed's sequence.

    Examples
    --------
    >>> bool(stream_of(1, 7).random() == stream_of(1, 7).random())
    True
    """
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=(i,))))
