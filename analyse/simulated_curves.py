"""What do curves look like in many patterns drawn under a null, each from a seed of its own."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np
from numpy.typing import NDArray

from analyse.chance import check_seed
from analyse.nulls import Null

Curves = Callable[[NDArray[np.float64]], NDArray[np.float64]]


def simulate_curves(
    curves: Curves, null: Null, *, n: int, simulations: int, seed: int, workers: int = 1
) -> NDArray[np.float64]:
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
        How many threads share the work; the result does not depend on it.

    Returns
    -------
    ndarray of shape (simulations, k)

    Raises
    ------
    OptionWrong
        If the seed is negative.
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

    def one(i: int) -> NDArray[np.float64]:
        return np.asarray(curves(null.draw(n, stream_of(seed, i))), dtype=np.float64)

    first = one(0)
    found = np.empty((simulations, first.size))
    found[0] = first

    def fill(rows: range) -> None:
        for i in rows:
            values = one(i)
            if values.shape != first.shape:
                raise ValueError(f"curves of shape {values.shape} after some of {first.shape}")
            found[i] = values

    shares = [range(1 + k, simulations, workers) for k in range(workers)]
    if workers == 1:
        fill(shares[0])
    else:
        with ThreadPoolExecutor(workers) as pool:
            list(pool.map(fill, shares))
    return found


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
    """
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=(i,))))
