"""Which gradients of the density are tried for one pattern or table, and which of them stand out."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from analyse.count_chance import SimulatedTest, simulated_p
from analyse.count_trend import fit_count_trend
from analyse.errors import GridWrong, TooCrowded, TrendNotFound
from analyse.holm import holm_adjusted
from analyse.nulls import Null
from analyse.pattern import Pattern
from analyse.quadrats import QuadratCounts
from analyse.seen_counts import seen_p
from analyse.trend import TrendRandomness, fit_trend
from analyse.trend_record import LEVEL, Trend

FEWEST_SPOTS = 10  # common practice, as for the verdict
_TINY = 1e-12  # of the total: what a quadrat expects at least


@dataclass(frozen=True, slots=True, eq=False)
class Trends:
    """The gradients tried for one pattern, judged together.

    Parameters
    ----------
    fits : tuple of Trend
        A plane; on a dish also from the middle to the edge.
    adjusted : tuple of float
        Their p allowing for clumping, adjusted for their number (Holm 1979).
    beyond : SimulatedTest or None
        X2 of the quadrats around the clearest trend, judged by simulation given n: whether the
        counts vary more or less than the gradient explains. None where no trend stands out.
    """

    fits: tuple[Trend, ...]
    adjusted: tuple[float, ...]
    beyond: SimulatedTest | None = None

    def __post_init__(self) -> None:
        if len(self.fits) != len(self.adjusted) or not self.fits:
            raise ValueError("each of one or more trends needs its adjusted p")

    def __repr__(self) -> str:
        found = ", ".join(
            f"{fit.kind} p = {p:.3g}" for fit, p in zip(self.fits, self.adjusted, strict=True)
        )
        return f"<Trends {found}>"

    @property
    def clearest(self) -> Trend | None:
        """The trend with the smallest p, if that is at most 5 % after adjustment."""
        best = int(np.argmin(self.adjusted))
        return self.fits[best] if self.adjusted[best] <= LEVEL else None

    @property
    def sentence(self) -> str:
        """What the trends show, and whether the counts vary beyond them."""
        clearest = self.clearest
        if clearest is None:
            best = min(self.adjusted)
            judged = f"p = {best:.2f}" + (", adjusted" if len(self.fits) > 1 else "")
            return f"No gradient of the density found ({judged}, allowing for clumping)."
        return " ".join([clearest.sentence, *_beyond_words(self.beyond)])


def _beyond_words(test: SimulatedTest | None) -> list[str]:
    """Say whether counts vary beyond a trend."""
    if test is None or not test.p_two_sided <= LEVEL:
        return ["The gradient explains how the counts vary."] if test is not None else []
    more = "more" if test.p_clumped < test.p_even else "less"
    judged = "p < 0.001" if test.p_two_sided < 0.001 else f"p = {test.p_two_sided:.3f}"
    return [
        f"Around it the counts still vary {more} than at random (two-sided {judged}, simulated)."
    ]


def pattern_trends(
    pattern: Pattern,
    counts: QuadratCounts,
    *,
    simulations: int,
    rng: np.random.Generator,
    seen: Callable[[Null], Null] | None = None,
) -> Trends | None:
    """Return the trends of a pattern of points.

    Parameters
    ----------
    pattern : Pattern
        The points, in their area.
    counts : QuadratCounts
        Their counts in a grid, judged around the clearest trend.
    simulations : int
        For that.
    rng : numpy.random.Generator
        Source of randomness.
    seen : callable, optional
        From a law of places to that of what is seen of them; None where points are seen as they are.

    Returns
    -------
    Trends or None
        None with fewer than 10 points, or where no trend can be fitted.

    Notes
    -----
    Where eyes are known, the counts around the trend are compared with random objects along it, as
    those eyes see them. The trend itself is fitted to what is seen, which is a little flatter than
    what is there, since more is merged where it is denser.

    Examples
    --------
    >>> from analyse.quadrats import count_in_quadrats, lay_grid
    >>> xy = np.random.default_rng(3).random((300, 2)) ** [0.5, 1.0] * 90
    >>> pattern = Pattern.of(xy, (0, 0, 90, 90))
    >>> grid = lay_grid(pattern.area, 300)
    >>> counts = QuadratCounts(count_in_quadrats(xy, grid), grid.area, grid.whole, grid)
    >>> rng = np.random.default_rng(1)
    >>> pattern_trends(pattern, counts, simulations=99, rng=rng).clearest.direction
    'the right'
    """
    if len(pattern) < FEWEST_SPOTS or counts.grid is None:
        return None
    try:
        fits = [fit_trend(pattern.points, pattern.area)]
        if pattern.dish is not None:
            centre = (pattern.dish.x, pattern.dish.y)
            fits.append(fit_trend(pattern.points, pattern.area, kind="radial", centre=centre))
    except (TrendNotFound, GridWrong):  # also where an area is too thin for coarse quadrats
        return None
    tried = _together(fits)
    if tried.clearest is None:
        return tried
    expected = tried.clearest.expected(np.array(counts.grid.polygons, dtype=object))
    if seen is not None:
        law = seen(TrendRandomness(pattern.area, tried.clearest))
        own = int(rng.integers(2**63))
        try:
            beyond = seen_p(
                counts.counts,
                counts.grid,
                law,
                simulations=simulations,
                seed=own,
                expected=_masses(expected),
            )
            return replace(tried, beyond=beyond)
        except TooCrowded:  # where the gradient is densest: plain chance then
            pass
    return _with_beyond(tried, counts, expected, simulations, rng)


def table_trends(
    counts: QuadratCounts,
    shape: tuple[int, int],
    *,
    side: float | None = None,
    simulations: int,
    rng: np.random.Generator,
) -> Trends | None:
    """Return the trend of a table of contiguous counts.

    Parameters
    ----------
    counts : QuadratCounts
        Row by row.
    shape : (rows, columns)
        Of the table.
    side : float or None
        Side of a quadrat; None for slopes per quadrat.
    simulations : int
        Random counts that those around the trend are compared with.
    rng : numpy.random.Generator
        Source of randomness.

    Returns
    -------
    Trends or None
        None with fewer than 10 points, or where no trend can be fitted.

    Examples
    --------
    >>> row, column = np.divmod(np.arange(16), 4)
    >>> counts = QuadratCounts(6 * column, None, np.ones(16, bool), None, row, column)
    >>> rng = np.random.default_rng(1)
    >>> table_trends(counts, (4, 4), simulations=99, rng=rng).clearest.direction
    'the right'
    """
    if int(counts.counts.sum()) < FEWEST_SPOTS:
        return None
    length = 1.0 if side is None else side
    try:
        tried = _together([fit_count_trend(counts.counts.reshape(shape), side=length)])
    except TrendNotFound:
        return None
    if tried.clearest is None:
        return tried
    row, column = np.divmod(np.arange(len(counts)), shape[1])
    slope = tried.clearest.log_density((np.column_stack([column, row]) + 0.5) * length)
    mass = np.exp(slope - slope.max())
    return _with_beyond(tried, counts, mass / mass.sum(), simulations, rng)


def _together(fits: list[Trend]) -> Trends:
    """Judge several trends of one pattern together."""
    return Trends(tuple(fits), tuple(holm_adjusted([fit.p for fit in fits]).tolist()))


def _masses(
    expected: np.ndarray[tuple[int], np.dtype[np.float64]],
) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    """Return expected counts, none of them 0."""
    return np.asarray(np.maximum(expected, _TINY * expected.sum()))


def _with_beyond(
    tried: Trends,
    counts: QuadratCounts,
    expected: np.ndarray[tuple[int], np.dtype[np.float64]],
    simulations: int,
    rng: np.random.Generator,
) -> Trends:
    """Add how the counts vary around the clearest trend."""
    beyond = simulated_p(counts.counts, _masses(expected), simulations=simulations, rng=rng)
    return Trends(tried.fits, tried.adjusted, beyond)
