"""What counts in quadrats would chance give, seen through the eyes that counted them."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.count_chance import SimulatedTest, check_simulations, judged_among
from analyse.nulls import Null
from analyse.quadrats import Grid, count_in_quadrats
from analyse.simulated_curves import simulate_curves

Floats = NDArray[np.float64]


def seen_p(
    counts: ArrayLike,
    grid: Grid,
    null: Null,
    *,
    simulations: int,
    seed: int,
    expected: ArrayLike | None = None,
    workers: int = 1,
) -> SimulatedTest:
    """Judge X2 of counts in quadrats against points drawn from a null and counted alike.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.
    grid : Grid
        The quadrats.
    null : Null
        What draws as many points as were counted.
    simulations : int
        How many patterns to draw, from 99 to 1,000,000.
    seed : int
        0 or more. It fixes the result, on any number of workers.
    expected : array_like of shape (q,), optional
        Counts that X2 is measured from; by area where not given.
    workers : int
        How many processes may share the simulations.

    Returns
    -------
    SimulatedTest
        All NaN without points.

    Raises
    ------
    OptionWrong
        If the seed or the number of simulations is out of range.
    TooCrowded
        If the null cannot draw as many.

    Notes
    -----
    As `analyse.count_chance.simulated_p`, which needs no points because counts of points placed
    independently follow a multinomial law; here they are placed, since what is seen of them does not.

    References
    ----------
    Besag, J. and Diggle, P. J. (1977). Simple Monte Carlo tests for spatial pattern. Journal of
    the Royal Statistical Society C 26, 327-333.
    Phipson, B. and Smyth, G. K. (2010). Permutation p-values should never be zero. Statistical
    Applications in Genetics and Molecular Biology 9, article 39.

    Examples
    --------
    >>> import shapely
    >>> from analyse.nulls import CompleteRandomness
    >>> from analyse.quadrats import GridOptions, lay_grid
    >>> square = shapely.box(0, 0, 2, 2)
    >>> grid = lay_grid(square, 10, GridOptions(shape=(2, 2)))
    >>> null = CompleteRandomness(square)
    >>> seen_p([9, 0, 0, 1], grid, null, simulations=199, seed=1).p_clumped < 0.02
    True
    """
    check_simulations(simulations)
    x = np.asarray(counts, dtype=np.int64)
    n = int(x.sum())
    if n == 0:
        return SimulatedTest(math.nan, math.nan, math.nan, math.nan, simulations)
    weights = np.asarray(grid.area if expected is None else expected, dtype=np.float64)
    ratio = _Ratio(grid, n * weights / weights.sum())
    own = ratio.of(x)
    drawn = simulate_curves(
        ratio, null, n=n, simulations=simulations, seed=seed, workers=workers
    )[:, 0]  # fmt: skip
    return judged_among(own, drawn)


@dataclass(frozen=True, slots=True, eq=False)
class _Ratio:
    """X2 of the counts of any points in a grid, about expected counts."""

    grid: Grid
    expected: Floats

    def __call__(self, points: Floats) -> Floats:
        """Return X2 of points, as an array of one."""
        return np.array([self.of(count_in_quadrats(points, self.grid))])

    def of(self, counts: NDArray[np.int64]) -> float:
        """Return X2 of counts."""
        off = counts - self.expected
        return float((off * off / self.expected).sum())
