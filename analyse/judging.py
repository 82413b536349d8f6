"""The counts of one photograph or table judged: every test done, and the findings put together."""

from __future__ import annotations

import math
import zlib
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from analyse.beside import Beside, judge_beside, remark
from analyse.chance import check_seed
from analyse.clumped_quadrats import clumped_in_quadrats
from analyse.contiguous import FEWEST_QUADRATS as FEWEST_IN_ORDER
from analyse.contiguous import Blocks, block_variances
from analyse.count_chance import least_chi2, simulated_p
from analyse.crowding import Crowding, crowding_of_patches
from analyse.density import Limits
from analyse.departures import length_words, within_a_spot
from analyse.dispersion import (
    Dispersion,
    clipped_dispersion,
    dispersion,
    expected_counts,
    residuals,
)
from analyse.fits import clumped_law
from analyse.flags import count_flags
from analyse.models import PoissonFit, poisson_frequencies
from analyse.pattern import Pattern, Unit
from analyse.pooling import LARGEST_COUNT
from analyse.power import WouldShow, would_show
from analyse.quadrats import QuadratCounts
from analyse.said import Findings
from analyse.seeing import PlainTests, Seeing, eyes_sentence, judge_seen, seen_null
from analyse.trends import Trends, pattern_trends, table_trends
from analyse.trust import assumed, trust_in
from analyse.verdict import LEVEL, Verdict, decide, detectable, sentence


@dataclass(frozen=True, slots=True, eq=False)
class Subject:
    """What is known of a photograph or table before any test."""

    name: str
    unit: Unit | None
    area: float | None
    pattern: Pattern | None
    counts: QuadratCounts
    density: Limits | None
    flags: tuple[str, ...]
    flag_values: dict[str, Any]
    settings: dict[str, Any]

    @property
    def relative_uncertainty(self) -> float:
        """Standard uncertainty of a length; a table of counts gives the side as exact."""
        return 0.0 if self.pattern is None else self.pattern.relative_uncertainty


def judged(subject: Subject, seed: int, simulations: int, workers: int = 1) -> Findings:
    """Test counts and put the findings together.

    Parameters
    ----------
    subject : Subject
        What is known before any test.
    seed : int
        Seed of the simulations, 0 or more.
    simulations : int
        How many.
    workers : int
        How many processes share those over sides and distances.

    Returns
    -------
    Findings

    Raises
    ------
    OptionWrong
        If the seed or the number of simulations is out of range.

    Examples
    --------
    >>> import numpy as np
    >>> counts = QuadratCounts(np.array([0, 9, 0, 0, 8, 1, 0, 7, 0, 0]), None, np.ones(10, bool))
    >>> unknown = dict.fromkeys(("side", "rows", "columns", "unit"))
    >>> bed = Subject("bed", None, None, None, counts, None, (), {}, unknown | {"quadrats": "counted"})
    >>> judged(bed, seed=1, simulations=99)
    <Findings bed: clumped, 25 in 10 quadrats>
    """
    x, areas, is_whole = subject.counts.counts, subject.counts.area, subject.counts.whole
    expected = expected_counts(x, areas)
    everything = dispersion(x) if areas is None else clipped_dispersion(x, areas)
    whole = dispersion(x[is_whole]) if is_whole.sum() >= 2 else None
    weights = np.ones(x.size) if areas is None else areas
    rng = stream(seed, subject.name)
    plain = simulated_p(x, weights, simulations=simulations, rng=rng)
    seeing = judge_seen(
        subject.pattern, subject.counts, plain, seed=seed, simulations=simulations, workers=workers
    )  # fmt: skip
    simulated = seeing.simulated
    clumped_mean, clumped_density = clumped_in_quadrats(
        subject.counts,
        rng=stream(seed, f"{subject.name}, bootstrap of quadrats"),
        relative_uncertainty=None if subject.density is None else subject.relative_uncertainty,
    )
    verdict = decide(everything.n, everything.q, simulated)
    values = subject.flag_values | {
        "n": everything.n,
        "q": everything.q,
        "whole": int(is_whole.sum()),
        "mean_expected": everything.mean,
        "clipped_percent": 100 * subject.counts.clipped_share,
        "blind": math.nan if seeing.eyes is None else seeing.eyes.blind,
    }
    seen = _seen(verdict, everything, weights)
    shown = _shown(verdict, everything, subject)
    trend = _trends(subject, seeing, seed, simulations)
    trust = trust_in(
        subject.pattern,
        subject.counts,
        simulated,
        verdict=verdict,
        rng=stream(seed, f"{subject.name}, draws"),
    )
    beside = Beside()
    if subject.pattern is not None:
        gradient = None if trend is None else trend.clearest
        beside = judge_beside(
            subject.pattern,
            gradient,
            seed=seed,
            simulations=simulations,
            workers=workers,
            eyes=seeing.eyes,
        )
    unseen = decide(everything.n, everything.q, plain)
    width = math.nan if subject.pattern is None else subject.pattern.width
    where = {"side": subject.settings["side"], "unit": subject.unit, "width": width}
    said = [
        sentence(verdict, everything, whole, simulated, seen, shown),
        eyes_sentence(verdict, unseen, seeing),
        remark(verdict, trend, beside, **where),
    ]
    touching = [each for each in beside.departures if within_a_spot(each, width)]
    if touching:
        lengths = {"touching": max(each.at for each in touching), "width": width}
        values |= {name: length_words(at, subject.unit or "") for name, at in lengths.items()}
    crowding = _crowding(subject.pattern)
    values |= {} if crowding is None else crowding.values
    return Findings(
        name=subject.name,
        n=everything.n,
        unit=subject.unit,
        area=subject.area,
        pattern=subject.pattern,
        counts=subject.counts,
        expected=expected,
        residuals=residuals(x, expected),
        dispersion_whole=whole,
        dispersion_all=everything,
        simulated=simulated,
        density=subject.density,
        poisson=_frequencies(x[is_whole]),
        verdict=verdict,
        sentence=" ".join(filter(None, said)),
        detectable=seen,
        shown=shown,
        flags=subject.flags
        + seeing.flags
        + ("recall_assumed",) * assumed(trust)
        + ("touching",) * bool(touching)
        + (() if crowding is None else crowding.flags)
        + count_flags(values),
        flag_values=values,
        seed=seed,
        settings=subject.settings | {"simulations": simulations, "level": LEVEL},
        blocks=_blocks(subject, seed, simulations),
        negative_binomial=clumped_law(x[is_whole]),
        clumped_mean=clumped_mean,
        clumped_density=clumped_density,
        trend=trend,
        tests=beside.tests,
        holm=beside.holm,
        beyond=beside.beyond,
        beyond_holm=beside.beyond_holm,
        crowding=crowding,
        eyes=seeing.eyes,
        plain=None
        if seeing.eyes is None
        else PlainTests(unseen, plain, beside.plain, beside.plain_holm),
        trust=trust,
    )


def stream(seed: int, name: str) -> np.random.Generator:
    """Return the source of randomness of one photograph, which no other one disturbs.

    Parameters
    ----------
    seed : int
        0 or more.
    name : str
        File name of the photograph or table.

    Returns
    -------
    numpy.random.Generator

    Raises
    ------
    OptionWrong
        If the seed is negative.

    Examples
    --------
    >>> one, again = stream(1, "dish_01.jpg"), stream(1, "dish_01.jpg")
    >>> bool(one.random() == again.random())
    True
    """
    check_seed(seed)
    return np.random.default_rng([seed, zlib.crc32(name.encode("utf-8"))])


def _crowding(pattern: Pattern | None) -> Crowding | None:
    """Return the count corrected for spots too near to others to be seen, where that is measured."""
    if pattern is None or pattern.planted is None or pattern.planted.blind is None:
        return None
    blind = pattern.planted.blind
    return crowding_of_patches(pattern, blind.value, blind.standard_error)


def _trends(subject: Subject, seeing: Seeing, seed: int, simulations: int) -> Trends | None:
    """Return the gradients of the density of a pattern, or of a table of contiguous quadrats."""
    rng = stream(seed, f"{subject.name}, trend")
    counts, settings = subject.counts, subject.settings
    if subject.pattern is not None:
        seen = None if seeing.eyes is None else partial(seen_null, subject.pattern, seeing.eyes)
        return pattern_trends(subject.pattern, counts, simulations=simulations, rng=rng, seen=seen)
    if settings["rows"] is None:
        return None
    shape = (settings["rows"], settings["columns"])
    return table_trends(counts, shape, side=settings["side"], simulations=simulations, rng=rng)


def _blocks(subject: Subject, seed: int, simulations: int) -> Blocks | None:
    """Return the block variances of a table of contiguous quadrats."""
    rows, columns = subject.settings["rows"], subject.settings["columns"]
    counted = subject.counts.counts
    if subject.pattern is not None or rows is None or counted.size < FEWEST_IN_ORDER:
        return None
    rng = stream(seed, f"{subject.name}, blocks")
    return block_variances(counted.reshape(rows, columns), rng=rng, simulations=simulations)


def _shown(verdict: Verdict, everything: Dispersion, subject: Subject) -> WouldShow | None:
    """Return the smallest clusters and spacing that would have been seen, where a test is made."""
    if verdict == "too few to tell":
        return None
    side = None if subject.area is None else math.sqrt(subject.area / everything.q)
    return would_show(everything.n, everything.q, side=side, unit=subject.unit)


def _seen(
    verdict: Verdict, everything: Dispersion, areas: NDArray[np.float64]
) -> tuple[float, float]:
    """Return the VMR that would have been seen; NaN for what n points cannot show."""
    if verdict == "too few to tell":
        return math.nan, math.nan
    low, high = detectable(everything.df)
    possible = low * everything.df >= least_chi2(everything.n, areas)
    return low if possible else math.nan, high


def _frequencies(counts: NDArray[np.int64]) -> PoissonFit | None:
    """Return the frequencies of counts in whole quadrats, where they can be given."""
    if counts.size < 2 or counts.max() > LARGEST_COUNT:
        return None
    return poisson_frequencies(counts)
