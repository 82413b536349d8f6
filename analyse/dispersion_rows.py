"""The rows of tests.csv about quadrats: density, dispersion, its tests, and the Poisson law."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING

from scipy import special

from analyse.dispersion import normal_deviate
from analyse.indices import cluster_size_index, greens_index, mean_crowding, morisita_index
from analyse.seeing import rests_words
from analyse.side_rows import side_rows
from analyse.verdict import POWER
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.said import Findings

NORMAL_ABOVE = 30  # degrees of freedom from which the normal approximation serves (common practice)
_FISHER = "index of dispersion, chi-square (Fisher, Thornton and Mackenzie 1922)"
_BY_AREA = "index of dispersion with expected counts by area, chi-square (Pearson 1900)"
_SIMULATED = "simulated given the total (Davison and Hinkley 1997)"


def dispersion_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield what is said of the counts in quadrats, and of the tests that the verdict rests on.

    Parameters
    ----------
    each : Findings
        Of one photograph or table.

    Yields
    ------
    list
        The cells of tests.csv after `photograph`; `n` is the number of quadrats, for the density
        that of points.
    """
    yield from _density_rows(each)
    yield from _whole_rows(each)
    yield from _all_rows(each)
    yield from _simulated_rows(each)
    yield from _poisson_rows(each)


def _density_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the density."""
    if each.density is not None:
        low, high = each.density.low, each.density.high
        method = "exact Poisson limits (Garwood 1936), widened by the uncertainty of the scale"
        note = f"limits at {100 * each.density.level:g} %"
        yield ["density_per_cm2", each.density.value, low, high, None, method, each.n, note]


def _whole_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield what is said about whole quadrats."""
    whole = each.dispersion_whole
    if whole is None:
        return
    counts = each.counts.counts[each.counts.whole]
    note = "whole quadrats"
    for name, value, method in (
        ("mean", whole.mean, "points / quadrats"),
        ("variance", whole.variance, "sum of squared deviations / (q - 1)"),
    ):
        yield [name, value, None, None, None, method, whole.q, note]
    yield ["vmr", whole.vmr, None, None, None, "variance-to-mean ratio", whole.q, note]
    yield from side_rows(
        "chi2_whole", whole.chi2, whole, _FISHER, whole.q, f"df {whole.df}; {note}"
    )
    indices = {
        "morisita_index": (morisita_index(counts), "Morisita (1959)"),
        "mean_crowding": (mean_crowding(counts), "m + VMR - 1 (Lloyd 1967)"),
        "cluster_size_index": (cluster_size_index(counts), "VMR - 1 (David and Moore 1954)"),
        "greens_index": (greens_index(counts), "(VMR - 1) / (S - 1) (Green 1966)"),
    }
    for name, (value, method) in indices.items():
        yield [name, value, None, None, None, method, whole.q, note]


def _all_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield what is said about all quadrats."""
    seen = each.dispersion_all
    note = f"df {seen.df}; all quadrats"
    yield ["vmr_by_area", seen.vmr, None, None, None, "X2 / df", seen.q, note]
    yield from side_rows("chi2", seen.chi2, seen, _BY_AREA, seen.q, note)
    if seen.df > NORMAL_ABOVE and math.isfinite(seen.chi2):
        d = normal_deviate(seen.chi2, seen.df)
        p = 2 * float(special.ndtr(-abs(d)))
        method = "sqrt(2 X2) - sqrt(2 df - 1), two-sided normal p (Fisher 1925)"
        yield ["normal_deviate", d, None, None, p, method, seen.q, note]
    low, high = each.detectable
    if math.isnan(high):
        return
    method = "VMR at or beyond which a departure would have been seen (scaled chi-square)"
    note = f"with about {100 * POWER:.0f} % power, two-sided at {100 * each.settings['level']:g} %"
    yield ["vmr_seen", None, low, high, None, method, seen.q, note]


def _simulated_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the simulated test, which the verdict rests on."""
    test = each.simulated
    note = f"{test.simulations} simulations, seed {each.seed}; all quadrats"
    note += rests_words(each.eyes)
    if each.verdict != "too few to tell":
        note += "; the verdict's test"
    yield from side_rows("chi2_simulated", test.statistic, test, _SIMULATED, len(each.counts), note)


def _poisson_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the fit of a Poisson law to the frequencies."""
    fit = each.poisson
    if fit is not None and fit.df >= 1:
        method = "Poisson goodness of fit, chi-square (Student 1907; Cochran 1954)"
        note = f"df {fit.df}; classes {', '.join(fit.labels)}; whole quadrats"
        n = int(fit.observed.sum())
        yield ["poisson_fit", fit.chi2, None, None, fit.p, method, n, note]
