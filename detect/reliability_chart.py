"""The reliability diagram: doubt against the share of spots that are false."""

from __future__ import annotations

import io
import math
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import PercentFormatter, StrMethodFormatter
from numpy.typing import NDArray

from detect.reliability import Reliability

_INK, _SOFT, _RULE = "#1b2429", "#55616a", "#c9d1d5"
_MEASURED, _REAL, _FALSE = "#174a7c", "#8fbcbb", "#dc8a44"
_STYLE: Any = {
    "font.family": "DejaVu Sans",
    "font.size": 9.0,
    "axes.edgecolor": _SOFT,
    "axes.labelcolor": _INK,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "text.color": _INK,
    "xtick.color": _SOFT,
    "ytick.color": _SOFT,
}


def reliability_figure(
    equal: Reliability,
    wide: Reliability,
    doubt: NDArray[np.float64],
    false: NDArray[np.bool_],
    area: float,
) -> Figure:
    """Draw the reliability diagram, and below it how many spots have which doubt.

    Parameters
    ----------
    equal, wide : Reliability
        Bins of equal count, drawn as dots with the 95 % interval of their share, and bins of equal
        width, drawn as hollow diamonds.
    doubt : ndarray of shape (n,)
        Doubts of all spots.
    false : ndarray of bool, shape (n,)
        Which of them are false.
    area : float
        Area under the curve of false against real, written beside the error.

    Returns
    -------
    matplotlib Figure
    """
    low, high = equal.interval
    reach = max(float(np.max([*high, *wide.doubt, *wide.false])), 0.1)
    end = min(1.0, math.ceil(10 * reach + 1e-9) / 10)
    with mpl.rc_context(_STYLE):
        figure = Figure(figsize=(4.8, 5.6), layout="constrained")
        upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(3.2, 1.0))
        upper.plot([0, 1], [0, 1], color=_RULE, linewidth=1.4, zorder=1, label="as it says")
        upper.plot(wide.doubt, wide.false, "D", color=_FALSE, mfc="white", markersize=5, zorder=2,
                   clip_on=False, label="bins of equal width")  # fmt: skip
        upper.errorbar(equal.doubt, equal.false, yerr=(equal.false - low, high - equal.false), fmt="o",
                       color=_MEASURED, markersize=4.5, elinewidth=1.1, capsize=2.5, zorder=3,
                       clip_on=False, label="bins of equal count, 95 %")  # fmt: skip
        upper.set(xlim=(0, end), ylim=(0, end), ylabel="share of these spots that is false")
        words = f"{doubt.size:,} spots, {int(false.sum()):,} false; expected calibration error"
        words += f" {equal.error:.3f}" + (
            f",\narea under the curve {area:.3f}" if area == area else ""
        )
        upper.set_title(words, loc="left", fontsize=9, color=_INK)
        upper.legend(fontsize=8, loc="lower right", edgecolor="none", framealpha=0.85)
        edges = np.linspace(0, end, 31)
        lower.hist(doubt[~false], edges, color=_REAL, label="real")
        lower.hist(doubt[false], edges, histtype="step", color=_FALSE, linewidth=1.4, label="false")
        lower.set(xlabel="doubt", ylabel="spots", yscale="log", ylim=(0.7, None))
        lower.legend(frameon=False, fontsize=8, loc="upper right")
        for axis in (upper.xaxis, upper.yaxis):
            axis.set_major_formatter(PercentFormatter(1.0))
        lower.yaxis.set_major_formatter(StrMethodFormatter("{x:,.0f}"))
    return figure


def figure_png(figure: Figure) -> bytes:
    """Return a figure as PNG, the same bytes for the same figure."""
    held = io.BytesIO()
    with mpl.rc_context(_STYLE):
        figure.savefig(held, format="png", dpi=160, metadata={"Software": None})
    return held.getvalue()
