"""Charts of a finished simulation test: a curve, the mean of its simulations, and its global band."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import matplotlib as mpl
import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator, NullLocator

from analyse import look
from analyse.drawn import DrawnCurve
from analyse.wording import number, percent

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from numpy.typing import NDArray

    from analyse.envelopes import Envelope

_WIDTH, _HEIGHT = 4.8, 3.0  # inches
_CLEAR = 0.05  # of the height, left free below what is drawn; thrice that above, for a label
_MOST_VALUES = 80  # of a curve are drawn; more would only take room in the report
_LATE = 0.7  # share of the width from which a label stands to the left of its mark


@dataclass(frozen=True, slots=True)
class CurveLook:
    """How a curve is named on its axes, and what lying above and below the band means."""

    x_name: str
    y_name: str
    above: str = "clumped"
    below: str = "even"
    stretched: bool = False  # x drawn by its logarithm
    lengths: bool = False  # y is a length too


LOOKS = {
    "vmr_by_side": CurveLook("side of a quadrat", "VMR", stretched=True),
    "l_function": CurveLook("distance r", "L(r) \u2212 r", lengths=True),
    "pair_correlation": CurveLook("distance r", "pair correlation g(r)"),
    "nearest_neighbour": CurveLook("distance r", "share with a neighbour within r"),
}


def curve_figure(envelope: Envelope, unit: str) -> Figure:
    """Return one of the curves as a figure of its own, of a size that suits half a page."""
    with mpl.rc_context(look.STYLE):
        figure = Figure((_WIDTH, _HEIGHT), layout="constrained")
        draw_curve(figure.subplots(), envelope, unit)
    return figure


def draw_curve(axes: Axes, envelope: Envelope, unit: str) -> DrawnCurve:
    """Draw a curve with the mean of its simulations and its global band.

    Parameters
    ----------
    axes : matplotlib Axes
        Empty.
    envelope : Envelope
        A finished test, of a name in `LOOKS`.
    unit : {"mm", "px"}
        Unit of its lengths.

    Returns
    -------
    DrawnCurve
        Of a curve of more than 80 values, some evenly chosen ones and its greatest departure.

    Raises
    ------
    KeyError
        If no look is known for the curve.
    """
    style = LOOKS[envelope.name]
    whole, envelope = envelope, _thinned(envelope)
    x, observed = envelope.x, envelope.observed
    band = axes.fill_between(
        x, envelope.low, envelope.high, fc=look.BAND, ec=look.BAND_EDGE, lw=0.6
    )
    band.set_label(f"global band, {percent(1 - envelope.level)}")
    (mean,) = axes.plot(
        x, envelope.central, "--", color=look.SOFT, lw=1.1, label="mean of simulations"
    )
    (seen,) = axes.plot(x, observed, "-", color=look.INK, lw=1.5, label="seen")
    _draw_outside(axes, envelope)
    if style.stretched:
        axes.set_xscale("log")
        axes.xaxis.set_major_locator(LogLocator(10, subs=(1, 1.5, 2, 3, 5, 7)))
        axes.xaxis.set_minor_locator(NullLocator())
    else:
        axes.xaxis.set_major_locator(MaxNLocator(7, steps=[1, 2, 5, 10]))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.set_xlim(float(x[0]) if style.stretched else 0.0, float(x[-1]))
    _set_height(axes, envelope)
    axes.yaxis.set_major_locator(MaxNLocator(5))
    axes.set(
        xlabel=f"{style.x_name} ({unit})",
        ylabel=f"{style.y_name} ({unit})" if style.lengths else style.y_name,
    )
    _draw_directions(axes, style)
    mark, label = _draw_mark(axes, whole, unit)
    axes.figure.legend(
        handles=[seen, mean, band], loc="outside upper left", ncols=3, frameon=False,
        fontsize=8.0, handlelength=1.6, columnspacing=1.2, borderaxespad=0.0,
    )  # fmt: skip
    return DrawnCurve(
        x, observed, envelope.central, envelope.low, envelope.high, x[envelope.outside], mark, label
    )


def _thinned(envelope: Envelope) -> Envelope:
    """Return a curve of so many values that no eye misses one, its greatest departure among them."""
    step = -(-len(envelope.x) // _MOST_VALUES)
    if step == 1:
        return envelope
    last, most = len(envelope.x) - 1, envelope.strongest
    kept = np.unique(np.concatenate([np.arange(0, last, step), [most, last]]))
    columns = ("x", "observed", "central", "low", "high")
    return replace(envelope, **{name: getattr(envelope, name)[kept] for name in columns})


def _set_height(axes: Axes, envelope: Envelope) -> None:
    """Leave room for everything that is drawn, and a little more."""
    shown = np.concatenate([envelope.observed, envelope.low, envelope.high, envelope.central])
    known = shown[np.isfinite(shown)]
    low, high = (float(known.min()), float(known.max())) if known.size else (0.0, 1.0)
    clear = _CLEAR * (high - low or 1.0)
    axes.set_ylim(low - clear, high + 3 * clear)


def _draw_outside(axes: Axes, envelope: Envelope) -> None:
    """Draw the curve broad where it leaves the band, in the colour of its side."""
    above = envelope.outside & (envelope.observed > envelope.high)
    below = envelope.outside & (envelope.observed < envelope.low)
    for beyond, colour in ((above, look.CLUMPED), (below, look.EVEN)):
        if beyond.any():
            shown: NDArray[np.float64] = np.where(beyond, envelope.observed, np.nan)
            axes.plot(
                envelope.x, shown, "-", color=colour, lw=3.4, solid_capstyle="round", zorder=3
            )


def _draw_directions(axes: Axes, style: CurveLook) -> None:
    """Say beside the chart what lying higher and lower means."""
    gap = "\u00a0" * 8
    said = f"{style.below} \u2190{gap}\u2192 {style.above}"
    axes.annotate(
        said, (1.0, 0.5), (7, 0), xycoords="axes fraction", textcoords="offset points",
        rotation=90, ha="left", va="center", size=8.5, color=look.INK,
    )  # fmt: skip


def _draw_mark(axes: Axes, envelope: Envelope, unit: str) -> tuple[tuple[float, float], str]:
    """Ring the greatest departure; where it leaves the band, say at the top where it is."""
    k = envelope.strongest
    x, y = float(envelope.x[k]), float(envelope.observed[k])
    if not envelope.outside[k]:
        axes.plot([x], [y], "o", ms=7, mfc="none", mec=look.SOFT, mew=1.0, zorder=4)
        return (x, y), ""
    colour = look.CLUMPED if envelope.side == "above" else look.EVEN
    axes.axvline(x, color=colour, lw=0.8, zorder=1)
    axes.plot([x], [y], "o", ms=8, mfc="white", mec=colour, mew=1.6, zorder=4)
    label = f"{number(x)} {unit}"
    at = axes.transAxes.inverted().transform(axes.transData.transform((x, y)))[0]
    axes.annotate(
        label, (x, 1.0), (-4 if at > _LATE else 4, 0), xycoords=("data", "axes fraction"),
        textcoords="offset points", size=8.5, ha="right" if at > _LATE else "left", va="top",
        color=colour, weight="bold",
    )  # fmt: skip
    return (x, y), label
