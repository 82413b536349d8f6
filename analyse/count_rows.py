"""The rows of tests.csv about counts beyond the basics: indices, fitted laws, limits, presence."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING

from scipy import special

from analyse.density import Limits, garwood_limits
from analyse.dispersion import vmr_standard_error
from analyse.indices import patchiness
from analyse.morisita import morisita
from analyse.negative_binomial import k_words
from analyse.presence import mean_from_presence
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.clumped_density import ClumpedLimits
    from analyse.fits import NegativeBinomialFit
    from analyse.said import Findings

COUNT_SUMMARY_COLUMNS = [
    "k",
    "k_low",
    "k_high",
    "k_note",
    "density_low_clumped",
    "density_high_clumped",
]
_PROFILE = "negative binomial profile likelihood (Venzon and Moolgavkar 1988)"
_BOOTSTRAP = "bootstrap of quadrats (Efron 1987; Davison and Hinkley 1997)"
_WHOLE = "whole quadrats"
_OPEN = "no upper limit"


def count_summary_cells(each: Findings) -> list[Cell]:
    """Return the cells of the summary about clumping: k with its limits, and density limits.

    Parameters
    ----------
    each : Findings
        Of one photograph or table.

    Returns
    -------
    list
        As many as `COUNT_SUMMARY_COLUMNS`; empty where not known, and `k_note` says in words what
        an empty k means.
    """
    fit, dense = each.negative_binomial, each.clumped_density
    k: list[Cell] = [None] * 4
    if fit is not None:
        k = [_finite(fit.k), fit.k_low, _finite(fit.k_high), _k_note(fit)]
    profile = None if dense is None else dense.profile
    return [*k, *([None] * 2 if profile is None else [profile.low, _finite(profile.high)])]


def count_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield what is said of counts beyond the dispersion tests.

    Parameters
    ----------
    each : Findings
        Of one photograph or table.

    Yields
    ------
    list
        The cells of tests.csv after `photograph`. A value that does not exist is an empty cell,
        and the notes say why.
    """
    yield _count(each)
    yield from _index_rows(each)
    if each.negative_binomial is not None:
        yield from _k_rows(each.negative_binomial)
        yield from _law_rows(each.negative_binomial)
    yield from _limit_rows("mean_count", each.clumped_mean, "per full quadrat")
    yield from _limit_rows("density_per_cm2", each.clumped_density, "widened by the scale")
    yield from _presence_rows(each)


def _count(each: Findings) -> list[Cell]:
    """Return the total with its Poisson limits."""
    limits = garwood_limits(each.n)
    method = "exact Poisson limits (Garwood 1936)"
    note = f"total; limits at {100 * limits.level:g} %"
    return ["count", each.n, limits.low, limits.high, None, method, each.n, note]


def _index_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the standard error of the VMR, patchiness, and Morisita's critical values and form."""
    whole = each.dispersion_whole
    if whole is None or whole.n == 0:
        return
    q, counts = whole.q, each.counts.counts[each.counts.whole]
    error = vmr_standard_error(q)
    method = "sqrt(2 / (q - 1)) (Bartlett, in Greig-Smith 1983)"
    yield ["vmr_standard_error", error, None, None, None, method, q, f"at random; {_WHOLE}"]
    t = (whole.vmr - 1) / error
    p = 2 * float(special.stdtr(q - 1, -abs(t)))
    method = "(VMR - 1) / standard error, two-sided t (Bartlett, in Greig-Smith 1983)"
    yield ["vmr_deviate", t, None, None, p, method, q, f"df {q - 1}; {_WHOLE}"]
    method = "mean crowding / mean (Lloyd 1967)"
    yield ["patchiness", patchiness(counts), None, None, None, method, q, _WHOLE]
    seen = morisita(counts)
    for name, value in (
        ("morisita_even_limit", seen.even_limit),
        ("morisita_clumped_limit", seen.clumped_limit),
    ):
        if math.isfinite(value):
            method = "critical value of Morisita's index, two-sided at 5 % (Smith-Gill 1975)"
            yield [name, value, None, None, None, method, q, _WHOLE]
    note = f"branch {seen.branch}; {_WHOLE}" if seen.branch else _WHOLE
    if seen.reason:
        note = f"{seen.reason}; {note}"
    elif seen.even_limit <= 0:
        note += "; the even limit is not positive: too few points to be found evenly spaced"
    method = "standardised Morisita index (Smith-Gill 1975; Krebs 1999)"
    yield ["morisita_standardised", seen.standardised, None, None, None, method, q, note]


def _k_rows(fit: NegativeBinomialFit) -> Iterator[list[Cell]]:
    """Yield k by maximum likelihood with its standard error and limits, and the older estimates."""
    q = fit.quadrats
    method = "maximum likelihood (Bliss and Fisher 1953), 95 % profile-likelihood limits"
    low, high = fit.k_low, _finite(fit.k_high)
    note = "; ".join(part for part in (_k_note(fit), _WHOLE) if part)
    yield ["negative_binomial_k", _finite(fit.k), low, high, None, method, q, note]
    if not fit.poisson_limit:
        method = "curvature of the log-likelihood at its top (Fisher 1922)"
        yield ["k_standard_error", fit.k_se, None, None, None, method, q, _WHOLE]
    for name, method in (
        ("k_moments", "m^2 / (s^2 - m) (Anscombe 1950)"),
        ("k_moments_corrected", "(m^2 - s^2 / q) / (s^2 - m) (Elliott 1977)"),
        ("k_zero_class", "k ln(1 + m / k) = ln(q / n0) (Anscombe 1949)"),
    ):
        reason = fit.reasons.get(name)
        note = f"{reason}; {_WHOLE}" if reason else _WHOLE
        yield [name, _finite(getattr(fit, name)), None, None, None, method, q, note]


def _law_rows(fit: NegativeBinomialFit) -> Iterator[list[Cell]]:
    """Yield how well the two laws describe the counts."""
    q = fit.quadrats
    method = "negative binomial goodness of fit, chi-square (Bliss and Fisher 1953)"
    note = f"df {fit.df}; classes {', '.join(fit.labels)}; {_WHOLE}"
    if fit.poisson_limit:
        note = f"{k_words(fit.k)}, so that the Poisson fit stands for both; {_WHOLE}"
    elif fit.df < 1:
        note = f"too few classes to test the fit: {', '.join(fit.labels)}; {_WHOLE}"
    yield ["negative_binomial_fit", fit.chi2, None, None, fit.p, method, q, note]
    akaike = "2 parameters - 2 log-likelihood (Akaike 1974)"
    weight = "Akaike weight among these two laws (Burnham and Anderson 2002)"
    for law, likelihood, aic, share in (
        ("poisson", fit.poisson_log_likelihood, fit.poisson_aic, 1 - fit.weight),
        ("negative_binomial", fit.log_likelihood, fit.aic, fit.weight),
    ):
        method = "log-likelihood of the counts at the best parameters"
        yield [f"log_likelihood_{law}", likelihood, None, None, None, method, q, _WHOLE]
        yield [f"aic_{law}", aic, None, None, None, akaike, q, _WHOLE]
        yield [f"aic_weight_{law}", share, None, None, None, weight, q, _WHOLE]


def _limit_rows(name: str, seen: ClumpedLimits | None, what: str) -> Iterator[list[Cell]]:
    """Yield a mean or a density with both limits that allow for clumping."""
    if seen is None:
        return
    bootstrap = f"{_BOOTSTRAP}, {seen.resamples} resamples"
    for way, limits, reason, method in (
        ("clumped", seen.profile, seen.profile_reason, _PROFILE),
        ("bootstrap", seen.bootstrap, seen.bootstrap_reason, bootstrap),
    ):
        if limits is None:
            yield [f"{name}_{way}", None, None, None, None, method, seen.quadrats, reason]
            continue
        note = f"{what}; {_resting(seen)}; limits at {100 * limits.level:g} %"
        if math.isinf(limits.high):
            note = f"{_OPEN}: few quadrats hold nearly all points; {note}"
        yield [
            f"{name}_{way}",
            limits.value,
            limits.low,
            _finite(limits.high),
            None,
            method,
            seen.quadrats,
            note,
        ]


def _resting(seen: ClumpedLimits) -> str:
    """Return which quadrats limits rest on."""
    if seen.merged == (1, 1):
        return "all quadrats by area"
    rows, columns = seen.merged
    return f"all quadrats by area, merged to blocks of {rows} x {columns} so that clumps fit in"


def _presence_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the mean count as told by presence and absence, at random and clumped."""
    counts = each.counts.counts[each.counts.whole]
    if not counts.size:
        return
    occupied = int((counts > 0).sum())
    fit = each.negative_binomial
    laws = [("presence_mean", math.inf, "mean = -ln(1 - p), points at random (Blackman 1935)")]
    if fit is not None and not fit.poisson_limit:
        method = "mean = k ((1 - p)^(-1/k) - 1) (Wilson and Room 1983)"
        laws.append(("presence_mean_clumped", fit.k, method))
    for name, k, method in laws:
        seen = mean_from_presence(occupied, counts.size, k=k)
        note = f"per quadrat, from {occupied} of {counts.size} occupied {_WHOLE}"
        if math.isfinite(seen.standard_error):
            note += f"; standard error {seen.standard_error:.6g}"
        if math.isfinite(k):
            note += f"; k {k_words(k)} taken as known"
        if seen.reason:
            note = f"{seen.reason}; {note}"
        limits = Limits(seen.value, seen.low, seen.high, seen.level)
        yield [name, *_cells(limits), None, method, counts.size, note]


def _cells(limits: Limits) -> list[Cell]:
    """Return value, low and high, empty where they are not finite."""
    return [_finite(value) for value in (limits.value, limits.low, limits.high)]


def _finite(value: float) -> float | None:
    """Return a finite number, or nothing."""
    return value if math.isfinite(value) else None


def _k_note(fit: NegativeBinomialFit) -> str:
    """Return what an empty k or limit means, in words."""
    if fit.poisson_limit:
        return k_words(fit.k)
    return f"{_OPEN}: the Poisson limit lies within" if math.isinf(fit.k_high) else ""
