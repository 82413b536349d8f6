"""A chart of what detection error leaves of a count and a verdict."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import matplotlib as mpl
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from analyse import look
from analyse.wording import percent

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from analyse.density import Limits
    from analyse.draws import UnderDoubt
    from analyse.verdict import Verdict

_WIDTH, _HEIGHT = 7.2, 2.5  # inches
_NARROW = 0.13  # share of the draws below which no name fits into a bar
_LOOKS: dict[Verdict, tuple[str, str, str]] = {
    "clumped": (look.CLUMPED, "", "white"),
    "evenly spaced": (look.EVEN, "", "white"),
    "no departure from random found": (look.BAND, "", look.INK),
    "too few to tell": ("white", "////", look.INK),
}
_SHORT: dict[Verdict, str] = {
    "clumped": "clumped",
    "evenly spaced": "even",
    "no departure from random found": "nothing found",
    "too few to tell": "too few",
}


@dataclass(frozen=True, slots=True)
class DrawnTrust:
    """What was drawn: intervals by name, and each verdict's share with where it begins."""

    intervals: dict[str, tuple[float, float, float]]
    shares: tuple[tuple[Verdict, float, float], ...]


def trust_figure(doubt: UnderDoubt, density: Limits | None) -> Figure:
    """Return count, density and verdicts under doubt as a figure of its own."""
    with mpl.rc_context(look.STYLE):
        figure = Figure((_WIDTH, _HEIGHT), layout="constrained")
        draw_trust(figure, doubt, density)
    return figure


def draw_trust(figure: Figure, doubt: UnderDoubt, density: Limits | None) -> DrawnTrust:
    """Draw how far errors of detection widen what is known, and what they do to the verdict.

    Parameters
    ----------
    figure : matplotlib Figure
        Empty.
    doubt : UnderDoubt
        The draws.
    density : Limits or None
        Density without detection error.

    Returns
    -------
    DrawnTrust
    """
    known = density is not None and doubt.density is not None
    grid = figure.add_gridspec(2, 2 if known else 1, height_ratios=(1.5, 1.0))
    counted = (float(doubt.n), float(doubt.n), float(doubt.n))
    intervals = {"count, as counted": counted, "count, with detection error": _three(doubt.count)}
    _draw_intervals(figure.add_subplot(grid[0, 0]), intervals, "objects in the photograph")
    if density is not None and doubt.density is not None:
        beside = {
            "density, as counted": _three(density),
            "density, with detection error": _three(doubt.density),
        }
        axes = figure.add_subplot(grid[0, 1])
        _draw_intervals(axes, beside, "objects per cm\u00b2")
        axes.set_yticklabels([])
        intervals |= beside
    shares = _draw_shares(figure.add_subplot(grid[1, :]), doubt)
    return DrawnTrust(intervals, shares)


def _three(limits: Limits) -> tuple[float, float, float]:
    """Return value and limits."""
    return limits.value, limits.low, limits.high


def _draw_intervals(
    axes: Axes, intervals: dict[str, tuple[float, float, float]], name: str
) -> None:
    """Draw one interval below the other, each with the sign of what it knows."""
    for y, (value, low, high), mark, colour in zip(
        (1, 0), intervals.values(), ("o", "D"), (look.SOFT, look.SPREAD), strict=True
    ):
        axes.plot([low, high], [y, y], "-", color=colour, lw=4.5 if y else 6.5, alpha=0.45)
        axes.plot([value], [y], mark, color=colour, ms=6.5)
    axes.set_yticks([1, 0], ["as counted", "with detection\nerror"])
    axes.set(ylim=(-0.6, 1.6), xlabel=name)
    axes.tick_params(axis="y", length=0)
    axes.margins(x=0.12)
    axes.xaxis.set_major_locator(MaxNLocator(5))


def _draw_shares(axes: Axes, doubt: UnderDoubt) -> tuple[tuple[Verdict, float, float], ...]:
    """Draw one bar of all draws, cut by their verdicts."""
    begun, drawn = 0.0, []
    for verdict, share in doubt.verdicts:
        colour, hatch, ink = _LOOKS[verdict]
        axes.barh(0, share, left=begun, height=0.8, fc=colour, ec=look.INK, lw=0.7, hatch=hatch)
        if share >= _NARROW:
            ground = {"fc": "white", "ec": "none", "pad": 1.0} if hatch else None
            axes.text(
                begun + share / 2, 0, f"{_SHORT[verdict]} {percent(share)}",
                color=ink, ha="center", va="center", size=8.5, bbox=ground,
            )  # fmt: skip
        drawn.append((verdict, begun, share))
        begun += share
    axes.set(
        xlim=(0, 1), ylim=(-0.6, 0.6), xlabel=f"share of {doubt.draws:,} draws with each verdict"
    )
    axes.set_xticks([0, 0.25, 0.5, 0.75, 1], ["0", "25 %", "50 %", "75 %", "100 %"])
    axes.set_yticks([0], ["verdict"])
    axes.tick_params(axis="y", length=0)
    return tuple(drawn)
