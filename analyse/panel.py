"""What the review page shows of a photograph's statistics while a person edits its spots."""

from __future__ import annotations

from typing import Any

import numpy as np
import shapely
from shapely.geometry.base import BaseGeometry

from analyse.chance import SEED
from analyse.density import density_per_cm2
from analyse.errors import AnalyseError
from analyse.flags import count_flags, flag_sentences
from analyse.grid_options import GridOptions, default_side
from analyse.influence import look_first
from analyse.models import poisson_frequencies
from analyse.pattern import Pattern, pattern_of_state
from analyse.pooling import LARGEST_COUNT
from analyse.quadrats import Grid, lay_grid, quadrats_of
from analyse.quick import QuickTest, quick_test
from analyse.verdict import p_text
from analyse.wording import number, several
from detect.changes import Changes
from detect.errors import DetectError
from detect.scale import Scale
from detect.sheet import Sheet

MOST_OUTLINES = 400  # quadrats, above which none are drawn on the photograph
_COUNTS_SIMULATED = 400_000  # quadrats times simulations, so that an answer comes at once
_FEWEST, _MOST = 99, 999  # simulations
_POINTS_SIMULATED = 100_000  # where points must be drawn, as those that a detector sees


class PanelOf:
    """The statistics of a sheet that is being edited, for one way of laying quadrats.

    Parameters
    ----------
    options : GridOptions or None
        How to lay the quadrats; None for the rule.
    seed : int
        Of the simulations.

    Notes
    -----
    The quadrat test alone, with fewer simulations on many quadrats: 999 up to about 400, 99 on 4,000
    and more. The grid is laid anew only when the area or the side changes, and the sheet as found is
    tested once.
    """

    def __init__(self, options: GridOptions | None = None, *, seed: int = SEED) -> None:
        self._options, self._seed = options or GridOptions(), seed
        self._grid: tuple[Any, Grid] | None = None
        self._before: tuple[Sheet, QuickTest | None] | None = None

    def __call__(self, found: Sheet, now: Sheet, changes: Changes) -> dict[str, Any]:
        """Return the panel as plain values (see DEVELOPERS.md, "The panel").

        Parameters
        ----------
        found : Sheet
            As detected.
        now : Sheet
            As it is now.
        changes : Changes
            What people did in between.
        """
        if self._before is None or self._before[0] is not found:
            self._before = found, self._tested(found, Changes())[0]
        before = self._before[1]
        test, trouble = self._tested(now, changes)
        changed = test is not None and before is not None and test.verdict != before.verdict
        panel: dict[str, Any] = {
            "trouble": trouble,
            "now": None if test is None else _words(test),
            "before": None if before is None else _brief(before),
            "verdict_changed": changed,
            "said": None,
            "frequencies": None if test is None else _frequencies(test),
            "quadrats": None if test is None else _outlines(test, now.scale),
            "look_first": None if test is None else _look_first(test),
        }
        if changed and test is not None and before is not None:
            panel["said"] = (
                f"The verdict has changed through the edits: from {before.verdict} to {test.verdict}."
            )
        return panel

    def _tested(self, sheet: Sheet, changes: Changes) -> tuple[QuickTest | None, str | None]:
        """Test the spots of a sheet, or say why that cannot be done."""
        try:
            pattern = pattern_of_state(sheet, changes)
            grid = self._laid(pattern)
            simulations = min(_MOST, max(_FEWEST, _COUNTS_SIMULATED // len(grid)))
            test = quick_test(
                pattern,
                grid=grid,
                seed=self._seed,
                simulations=simulations,
                points_at_most=_POINTS_SIMULATED,
            )
        except (AnalyseError, DetectError) as trouble:
            return None, str(trouble)
        return test, None

    def _laid(self, pattern: Pattern) -> Grid:
        """Return the grid of a pattern, the last one where it would be the same."""
        by_rule = self._options == GridOptions(join_below=self._options.join_below)
        side = default_side(pattern.area.area, len(pattern)) if by_rule else None
        key = (shapely.to_wkb(pattern.area), pattern.unit, side)
        if self._grid is None or self._grid[0] != key:
            grid = lay_grid(pattern.area, len(pattern), self._options, pattern.unit, pattern.dish)
            self._grid = key, grid
        return self._grid[1]


def _look_first(test: QuickTest) -> dict[str, Any] | None:
    """Return which spots to look at first; None where a person has checked all, or nothing doubts them."""
    pattern, counts = test.pattern, test.counts
    unsure = pattern.doubt > 0
    checked = pattern.changes is not None and pattern.changes.is_checked
    if checked or counts.grid is None or counts.area is None or not unsure.any():
        return None
    where = quadrats_of(pattern.points, counts.grid)
    look = look_first(
        pattern.doubt, counts.counts, counts.area, where, test.simulated, verdict=test.verdict
    )
    return {
        "order": [pattern.spots[k] for k in look.order.tolist() if unsure[k]],
        "decisive": look.decisive,
        "settled": look.settled,
        "said": look.sentence,
    }


def _brief(test: QuickTest) -> dict[str, Any]:
    """Return the few figures that are compared before and after."""
    return {
        "count": test.everything.n,
        "vmr": number(None if test.whole is None else test.whole.vmr),
        "ratio": number(test.everything.vmr),
        "p": p_text(test.simulated.p_two_sided),
        "verdict": test.verdict,
    }


def _words(test: QuickTest) -> dict[str, Any]:
    """Return everything that is said about the spots as they are now."""
    pattern, values = test.pattern, _flag_values(test)
    density, interval = "not given: no scale is known", None
    if pattern.unit == "mm":
        limits = density_per_cm2(len(pattern), pattern.area.area, pattern.relative_uncertainty)
        density = f"{number(limits.value)} per cm\u00b2"
        interval = f"{number(limits.low)} to {number(limits.high)}"
    flags = pattern.flags + count_flags(values)
    return {
        **_brief(test),
        "density": density,
        "density_interval": interval,
        "area": _area_words(pattern),
        "sentence": _sentence(test),
        "quadrats": _quadrats_words(test),
        "simulations": test.simulated.simulations,
        "flags": [
            {"name": name, "sentence": sentence}
            for name, sentence in zip(flags, flag_sentences(flags, values), strict=True)
        ],
    }


def _flag_values(test: QuickTest) -> dict[str, Any]:
    """Return the numbers that the sentences of flags quote."""
    pattern, whole = test.pattern, test.counts.whole
    return {
        "outside": pattern.outside,
        "duplicates": pattern.duplicates if "duplicates" in pattern.flags else 0,
        "doubtful": pattern.doubtful,
        "dish_notes": "; ".join(pattern.dish_notes),
        "n": test.everything.n,
        "q": test.everything.q,
        "whole": int(whole.sum()),
        "mean_expected": test.everything.mean,
        "clipped_percent": 100 * test.counts.clipped_share,
    }


def _sentence(test: QuickTest) -> str:
    """Return the verdict with the figures it rests on."""
    seen = test.everything
    verdict = test.verdict[0].upper() + test.verdict[1:]
    if seen.n == 0:
        return "No spots: nothing to test."
    if test.verdict == "too few to tell":
        return f"{verdict}: {several(seen.n, 'spot')} in {several(seen.q, 'quadrat')}."
    return (
        f"{verdict}: X\u00b2/df {number(seen.vmr)} over {several(seen.q, 'quadrat')}, two-sided"
        f" {p_text(test.simulated.p_two_sided)}, simulated."
    )


def _area_words(pattern: Pattern) -> str:
    """Return the study area in a unit that suits its size."""
    area = float(pattern.area.area)
    if pattern.unit == "px":
        return f"{area:,.0f} square pixels"
    cm2 = area / 100.0
    return f"{number(cm2 / 1e4)} m\u00b2" if cm2 >= 1000 else f"{number(cm2)} cm\u00b2"


def _quadrats_words(test: QuickTest) -> str:
    """Return how many quadrats of which size there are."""
    grid = test.counts.grid
    assert grid is not None
    made = several(len(grid), "quadrat")
    if grid.side is not None:
        made += f" of {grid.side:g} {grid.unit}"
    return f"{made}, {int(grid.whole.sum()):,} of them whole"


def _frequencies(test: QuickTest) -> dict[str, Any] | None:
    """Return how many whole quadrats hold 0, 1, 2, ... and how many chance expects, for a figure."""
    counts = test.counts.counts[test.counts.whole]
    if counts.size < 2 or counts.max() > LARGEST_COUNT:
        return None
    fit = poisson_frequencies(counts)
    return {
        "labels": list(fit.labels),
        "observed": np.asarray(fit.observed).tolist(),
        "expected": np.round(np.asarray(fit.expected, dtype=float), 3).tolist(),
    }


def _outlines(test: QuickTest, scale: Scale | None) -> dict[str, Any] | None:
    """Return the quadrats and their counts in pixels, where they are few enough to be drawn."""
    grid = test.counts.grid
    if grid is None or len(grid) > MOST_OUTLINES:
        return None
    middle = np.column_stack([grid.x, grid.y])
    if scale is not None:
        middle = scale.to_px(middle)
    return {
        "x": np.round(middle[:, 0], 1).tolist(),
        "y": np.round(middle[:, 1], 1).tolist(),
        "count": test.counts.counts.tolist(),
        "outlines": [_rings(polygon, scale) for polygon in grid.polygons],
    }


def _rings(polygon: BaseGeometry, scale: Scale | None) -> list[list[list[float]]]:
    """Return the rings of what a quadrat holds, in pixels."""
    if scale is not None:
        polygon = shapely.transform(polygon, scale.to_px)
    rings = []
    for part in shapely.get_parts(polygon):
        for ring in (part.exterior, *part.interiors):
            rings.append(np.round(shapely.get_coordinates(ring), 1).tolist())
    return rings
