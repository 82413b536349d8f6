"""What the review page shows of a spot check: the draw, and the comparison at its end."""

from __future__ import annotations

from typing import Any

from analyse.density import Limits
from analyse.errors import AnalyseError
from analyse.grid_options import GridOptions
from analyse.quadrat_draw import SpotCheckOptions, draw_for_sheet
from analyse.spot_check import SpotCheck, missed_marks, spot_check_of
from analyse.wording import number
from detect.errors import RequestWrong
from detect.sheet import Amendment, Sheet
from detect.spot_check import Draw, latest_spot_check


class CheckerOf:
    """Spot checks with one way of laying quadrats.

    Parameters
    ----------
    grid : GridOptions or None
        How to lay them; None for the rule.
    options : SpotCheckOptions or None
        How many are drawn, and the seed.

    Examples
    --------
    >>> CheckerOf(options=SpotCheckOptions(quadrats=8))
    <CheckerOf 8 quadrats, seed 1>
    """

    def __init__(
        self, grid: GridOptions | None = None, options: SpotCheckOptions | None = None
    ) -> None:
        self._grid, self._options = grid, options or SpotCheckOptions()

    def __repr__(self) -> str:
        return f"<CheckerOf {self._options.quadrats} quadrats, seed {self._options.seed}>"

    def draw(self, state: Sheet) -> Draw:
        """Draw quadrats over a photograph as it stands.

        Parameters
        ----------
        state : Sheet
            As it stands.

        Returns
        -------
        Draw

        Raises
        ------
        RequestWrong
            If the quadrats do not fit the area, or are too few.
        """
        try:
            return draw_for_sheet(state, self._grid, self._options)
        except AnalyseError as trouble:
            raise RequestWrong(str(trouble)) from trouble

    def result(self, sheet: Sheet, amendments: list[Amendment]) -> dict[str, Any] | None:
        """Return what a finished spot check says, as plain values for the page.

        Parameters
        ----------
        sheet : Sheet
            As found.
        amendments : list of Amendment
            Its log.

        Returns
        -------
        dict or None
            None where not all quadrats were looked at.
        """
        check = spot_check_of(sheet, amendments, self._options)
        known = latest_spot_check(amendments)
        if check is None or known is None:
            return None
        return {
            "sentence": check.sentence,
            "trusted": check.trusted,
            "figures": _figures(check),
            "quadrats": [
                {
                    "quadrat": each.quadrat,
                    "detected": each.counted,
                    "marked": known.marked[each.quadrat].count,
                }
                for each in known.draw.quadrats
            ],
            "missed": missed_marks(sheet, amendments),
        }


def _figures(check: SpotCheck) -> list[list[str]]:
    """Return the estimates as pairs of words."""
    known = {
        "Counted by the detector": f"{check.counted:,}",
        "Corrected": _whole(check.total),
        "Corrected by ratio": _whole(check.by_ratio),
        "Corrected density per cm\u00b2": _with_limits(check.density),
        "Found of the objects": _percent(check.recall),
        "Real of the spots": _percent(check.precision),
    }
    return [[name, value] for name, value in known.items() if value is not None]


def _with_limits(limits: Limits | None) -> str | None:
    """Return a number with its limits."""
    if limits is None:
        return None
    return f"{number(limits.value)} ({number(limits.low)} to {number(limits.high)})"


def _whole(limits: Limits | None) -> str | None:
    """Return a number of objects with its limits."""
    if limits is None:
        return None
    return f"{limits.value:,.0f} ({limits.low:,.0f} to {limits.high:,.0f})"


def _percent(share: Limits | None) -> str | None:
    """Return a share with its limits in per cent."""
    if share is None:
        return None
    low, value, high = (f"{100 * each:.0f}" for each in (share.low, share.value, share.high))
    return f"{value} % ({low} to {high} %)"
