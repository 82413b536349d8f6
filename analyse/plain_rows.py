"""What plain chance says beside the null with eyes, as rows and cells of tables."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from analyse.envelope_rows import tested_rows
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.findings import Findings

PLAIN = "_plain"  # ends the names of tests against plain chance
EYES_COLUMNS = [
    "p_simulated_plain",
    "verdict_plain",
    "blind_taken",
    "blind_taken_se",
    "blind_source",
]
_METHOD = "simulated given the total (Davison and Hinkley 1997), points as they are"
_SIDES = {"clumped": "upper tail", "even": "lower tail", "two_sided": "twice the smaller tail"}


def plain_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the rows of the table of statistics, without the photograph.

    Parameters
    ----------
    each : Findings
        Any result; there is nothing to yield where its null has no eyes.

    Yields
    ------
    list
        The simulated test of the quadrats, then those over sides and distances; all names end in
        ``_plain``, or in ``_plain_adjusted``.
    """
    if each.plain is None:
        return
    test = each.plain.simulated
    note = f"{test.simulations} simulations, seed {each.seed}; all quadrats; for reading, not for the verdict"
    for side, words in _SIDES.items():
        p = getattr(test, f"p_{side}")
        name = f"chi2_simulated{PLAIN}_{side}"
        method = f"{_METHOD}, {words}"
        yield [name, test.statistic, None, None, p, method, len(each.counts), note]
    yield from tested_rows(each, each.plain.tests, each.plain.holm, PLAIN)


def eyes_cells(each: Findings) -> list[Cell]:
    """Return the cells of the summary: what plain chance says, and the eyes the verdict rests on.

    Parameters
    ----------
    each : Findings
        Any result.

    Returns
    -------
    list
        As many as `EYES_COLUMNS`. The first two are the same as those of the verdict where its null
        has no eyes, and the last three empty; ``blind_source`` is planted, default, person or
        contact, and ``blind_taken`` in sums of both radii.
    """
    if each.plain is None or each.eyes is None:
        return [each.simulated.p_two_sided, each.verdict, None, None, None]
    eyes = each.eyes
    plain: list[Cell] = [each.plain.simulated.p_two_sided, each.plain.verdict]
    return [*plain, eyes.blind, eyes.blind_se, eyes.source]
