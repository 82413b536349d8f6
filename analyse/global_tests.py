"""All tests over sides and distances of one pattern, from one set of simulations."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.chance import SEED, SIMULATIONS, check_simulations
from analyse.envelopes import Envelope, Measure, global_envelope
from analyse.errors import GridWrong
from analyse.nulls import CompleteRandomness, Null
from analyse.pattern import Pattern
from analyse.ruler import Ruler
from analyse.scales import Sides
from analyse.simulated_curves import simulate_curves

FEWEST_POINTS = 10  # fewer show no curve worth judging
_TIE = 1e-9  # of a value: indices nearer to each other count as equal
Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class SimulatedIndex:
    """A number of the pattern beside that of its simulations.

    Parameters
    ----------
    value : float
        Of the pattern.
    expected : float
        Mean of the simulations.
    p_clumped, p_even, p_two_sided : float
        Share of simulations, the pattern included, at least as far on the side of clumps, of
        evenness, and twice the smaller (at most 1); never 0.
    simulations : int
        How many there were.
    """

    value: float
    expected: float
    p_clumped: float
    p_even: float
    p_two_sided: float
    simulations: int

    def __repr__(self) -> str:
        return (
            f"<SimulatedIndex {self.value:.4g}, expected {self.expected:.4g}:"
            f" two-sided p = {self.p_two_sided:.3g}>"
        )


@dataclass(frozen=True, slots=True, eq=False)
class GlobalTests:
    """Curves and indices of a pattern, each judged by the same simulations.

    Parameters
    ----------
    envelopes : mapping of str to Envelope
        ``vmr_by_side``, ``l_function`` (L(r) - r), ``pair_correlation``, ``nearest_neighbour`` and
        ``empty_space``.
    clark_evans : SimulatedIndex
        Mean distance to the nearest neighbour over half the root of the area per point: below 1
        clumped.
    hopkins_skellam : SimulatedIndex
        Mean squared distance from a place to the nearest point over that from a point to the
        nearest other: above 1 clumped.
    null : str
        What the simulations were drawn from.
    seed, simulations : int
        Of the simulations.
    left_out : tuple of str
        A sentence for each curve that could not be judged.
    """

    envelopes: Mapping[str, Envelope]
    clark_evans: SimulatedIndex
    hopkins_skellam: SimulatedIndex
    null: str
    seed: int
    simulations: int
    left_out: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        object.__setattr__(self, "envelopes", MappingProxyType(dict(self.envelopes)))

    def __reduce__(self) -> tuple[type[GlobalTests], tuple[Any, ...]]:
        """Travel between processes, which the read-only view of the curves by itself cannot."""
        values = (getattr(self, field.name) for field in fields(self))
        return GlobalTests, (dict(self.envelopes), *tuple(values)[1:])

    def __repr__(self) -> str:
        p = ", ".join(f"{name} {envelope.p:.3g}" for name, envelope in self.envelopes.items())
        return f"<GlobalTests against {self.null}, {self.simulations} simulations: p {p}>"


@dataclass(frozen=True, slots=True, eq=False)
class Curves:
    """What is measured of every pattern of one area: dispersion by side, then all over distances.

    Parameters
    ----------
    ruler : Ruler
        For the distances.
    sides : Sides or None
        For the quadrats; None where none can be laid.

    Examples
    --------
    >>> import shapely
    >>> area = shapely.box(0, 0, 10, 10)
    >>> curves = Curves(Ruler.of(area, 40), Sides.of(area, 40))
    >>> points = np.random.default_rng(1).uniform(0, 10, (40, 2))
    >>> list(curves.split(curves(points)))
    ['vmr_by_side', 'l_function', 'pair_correlation', 'nearest_neighbour', 'empty_space', 'mean_nearest', 'hopkins_skellam']
    """

    ruler: Ruler
    sides: Sides | None

    def __call__(self, points: Floats) -> Floats:
        """Return all values of a pattern, end to end."""
        by_distance = self.ruler.curves(points)
        if self.sides is None:
            return by_distance
        return np.concatenate([self.sides.vmr(points), by_distance])

    def split(self, values: Floats) -> dict[str, Floats]:
        """Return the values of one pattern, or of many in rows, by name."""
        count = 0 if self.sides is None else len(self.sides)
        by_side = {} if self.sides is None else {"vmr_by_side": values[..., :count]}
        return by_side | self.ruler.split(values[..., count:])

    @property
    def x(self) -> dict[str, Floats]:
        """Sides or distances of each curve, by name."""
        by_side = {} if self.sides is None else {"vmr_by_side": self.sides.x}
        return by_side | dict(self.ruler.x)


def global_tests(
    pattern: Pattern,
    *,
    simulations: int = SIMULATIONS,
    seed: int = SEED,
    workers: int = 1,
    null: Null | None = None,
    measure: Measure = "extreme rank length",
    progress: Callable[[int, int], None] | None = None,
) -> GlobalTests | None:
    """Judge a pattern over all sides of quadrats and all distances, against patterns of chance.

    Parameters
    ----------
    pattern : Pattern
        Points in a study area.
    simulations : int
        How many patterns to draw, from 99 to 1,000,000.
    seed : int
        0 or more. It fixes the result, on any number of workers.
    workers : int
        How many processes share the simulations (see `simulate_curves`).
    null : Null or None
        What to draw them from; None for complete spatial randomness given the number of points.
    measure : {"extreme rank length", "studentised maximum deviation"}
        How the curves are ordered.
    progress : callable, optional
        Called with (done, total) simulations now and then.

    Returns
    -------
    GlobalTests or None
        None with fewer than 10 points.

    Raises
    ------
    OptionWrong
        If the seed or the number of simulations is out of range.

    Notes
    -----
    One set of simulations, each of as many points as the pattern has, gives the curves and indices
    of all tests; sides and distances are a rule of the area and that number alone. Every test
    alone rejects 5 % of random patterns at 5 %; how several are judged together is said where
    they are.

    References
    ----------
    Myllymaki, M., Mrkvicka, T., Grabarnik, P., Seijo, H. and Hahn, U. (2017). Global envelope tests
    for spatial processes. Journal of the Royal Statistical Society B 79, 381-404.
    Clark, P. J. and Evans, F. C. (1954). Distance to nearest neighbor as a measure of spatial
    relationships in populations. Ecology 35, 445-453.
    Hopkins, B. and Skellam, J. G. (1954). A new method for determining the type of distribution of
    plant individuals. Annals of Botany 18, 213-227.
    Besag, J. and Diggle, P. J. (1977). Simple Monte Carlo tests for spatial pattern. Journal of
    the Royal Statistical Society C 26, 327-333 (tests conditional on the number of points).

    Examples
    --------
    >>> lattice = [(x + 0.5, y + 0.5) for x in range(8) for y in range(8)]
    >>> tests = global_tests(Pattern.of(lattice, (0, 0, 8, 8)), simulations=99)
    >>> tests.clark_evans.p_even, tests.envelopes["nearest_neighbour"].p <= 0.05
    (0.01, True)
    """
    check_simulations(simulations)
    n = len(pattern)
    if n < FEWEST_POINTS:
        return None
    law = CompleteRandomness(pattern.area) if null is None else null
    sides, left_out = _sides(pattern)
    curves = Curves(Ruler.of(pattern.area, n), sides)
    drawn = simulate_curves(
        curves, law, n=n, simulations=simulations, seed=seed, workers=workers, progress=progress
    )  # fmt: skip
    seen, simulated = curves.split(curves(pattern.points)), curves.split(drawn)
    envelopes = {}
    for name, x in curves.x.items():
        fine = np.isfinite(seen[name]) & np.isfinite(simulated[name]).all(axis=0)
        if not fine.any():
            left_out += (f"No value of {name} is known for every simulated pattern.",)
            continue
        envelopes[name] = global_envelope(
            seen[name][fine], simulated[name][:, fine], x[fine], name=name, measure=measure
        )
    evans, skellam = "mean_nearest", "hopkins_skellam"
    unit = 0.5 * math.sqrt(pattern.area.area / n)  # expected nearest distance without an edge
    return GlobalTests(
        envelopes,
        index_test(seen[evans] / unit, simulated[evans] / unit, grows_with_evenness=True),
        index_test(seen[skellam], simulated[skellam], grows_with_evenness=False),
        law.name,
        seed,
        simulations,
        left_out,
    )


def _sides(pattern: Pattern) -> tuple[Sides | None, tuple[str, ...]]:
    """Return the sides of quadrats for a pattern, or None and why."""
    try:
        return Sides.of(pattern.area, len(pattern)), ()
    except GridWrong as trouble:
        return None, (str(trouble),)


def index_test(
    value: ArrayLike, simulated: ArrayLike, *, grows_with_evenness: bool
) -> SimulatedIndex:
    """Judge a number of a pattern against that of simulated ones.

    Parameters
    ----------
    value : float
        Of the pattern.
    simulated : array_like of shape (simulations,)
        Of patterns drawn under the null.
    grows_with_evenness : bool
        Whether large values mean even; otherwise they mean clumped.

    Returns
    -------
    SimulatedIndex

    Notes
    -----
    p = (1 + number at least as extreme) / (simulations + 1); ties count as extreme.

    Examples
    --------
    >>> index_test(3.0, range(99), grows_with_evenness=True)
    <SimulatedIndex 3, expected 49: two-sided p = 0.1>
    """
    own, drawn = float(np.asarray(value)), np.asarray(simulated, dtype=np.float64)
    tie = _TIE * abs(own) if math.isfinite(own) else 0.0
    larger = (1 + int((drawn >= own - tie).sum())) / (drawn.size + 1)
    smaller = (1 + int((drawn <= own + tie).sum())) / (drawn.size + 1)
    clumped, even = (smaller, larger) if grows_with_evenness else (larger, smaller)
    both = min(1.0, 2 * min(larger, smaller))
    return SimulatedIndex(own, float(drawn.mean()), clumped, even, both, drawn.size)
