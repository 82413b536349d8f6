"""The rows of tests.csv about gradients of the density."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from scipy import special

from analyse.side_rows import side_rows
from analyse.trend_record import LEVEL, Trend
from analyse.trends import FEWEST_SPOTS
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.said import Findings

_POISSON = "log-linear trend of a Poisson process (Cox 1972; Berman and Turner 1992)"
_COUNTS = "log-linear trend of Poisson counts (McCullagh and Nelder 1989)"
_NONE = (
    f"no slope fitted: fewer than {FEWEST_SPOTS} spots, all of them at one end, or too few quadrats"
)
_BEYOND = (
    "index of dispersion with expected counts by the trend, simulated given the total (Davison and"
    " Hinkley 1997)"
)


def trend_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the gradients of the density; nothing for counts whose places are unknown.

    Parameters
    ----------
    each : Findings
        Of one photograph or table.

    Yields
    ------
    list
        The cells of tests.csv after `photograph`; `n` is the number of points. One row without
        numbers where no trend could be fitted.
    """
    base = _COUNTS if each.pattern is None else _POISSON
    if each.trend is None:
        if each.pattern is not None or each.settings["rows"] is not None:
            yield ["trend_plane", None, None, None, None, base, each.n, _NONE]
        return
    unit = each.unit or "quadrat"
    for trend, adjusted in zip(each.trend.fits, each.trend.adjusted, strict=True):
        yield from _trend(trend, adjusted, len(each.trend.fits), base, unit)
    beyond, clearest = each.trend.beyond, each.trend.clearest
    if beyond is None or clearest is None:
        return
    note = f"around the {clearest.kind} trend; {beyond.simulations} simulations, seed {each.seed}"
    name, q = "chi2_around_trend", len(each.counts)
    yield from side_rows(name, beyond.statistic, beyond, _BEYOND, q, note)


def _trend(trend: Trend, adjusted: float, tried: int, base: str, unit: str) -> Iterator[list[Cell]]:
    """Yield the rows of one trend."""
    name, n = f"trend_{trend.kind}", trend.n
    note = (
        f"density at the densest end over that at the other, limits at {100 * (1 - LEVEL):g} %"
        f" (Scheffe 1959); denser towards {trend.direction}; F {trend.f:.4g} on {trend.df} and"
        f" {trend.dispersion_df:.4g} df; dispersion around the trend {trend.dispersion:.4g}"
    )
    note += f"; p of {tried} trends adjusted (Holm 1979) {adjusted:.4g}" if tried > 1 else ""
    method = f"{base}, F test that allows for clumping (McCullagh and Nelder 1989)"
    yield [name, trend.ratio, trend.ratio_low, trend.ratio_high, trend.p, method, n, note]
    note = f"df {trend.df}; valid only for spots that are independent of one another"
    method = f"{base}, likelihood ratio"
    yield [f"{name}_independent", trend.lr, None, None, trend.p_poisson, method, n, note]
    reach = float(special.stdtrit(trend.dispersion_df, 1 - LEVEL / 2))
    axes = ("",) if trend.kind == "radial" else ("_x", "_y")
    per = f"{unit}2 of squared distance" if trend.kind == "radial" else unit
    for axis, slope, error in zip(axes, trend.coefficients, trend.standard_errors, strict=True):
        if error >= 0:  # NaN across a line of quadrats
            low, high = slope - reach * error, slope + reach * error
            note = f"change of log density per {per}; standard error {error:.4g}, allowing for clumping"
            yield [f"{name}_slope{axis}", slope, low, high, None, base, n, note]
