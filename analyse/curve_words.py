"""What the report says about the curves: titles, captions, alternative texts, and their table."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from analyse.departures import length_words
from analyse.verdict import p_text
from analyse.wording import NOTHING, number, p_words, percent

if TYPE_CHECKING:
    from analyse.envelopes import Envelope
    from analyse.findings import Findings

_TITLES = {
    "vmr_by_side": "Dispersion by the side of the quadrats",
    "l_function": "Neighbours within a distance",
    "pair_correlation": "Neighbours at a distance",
    "nearest_neighbour": "The nearest neighbour",
    "empty_space": "Empty space",
}
_MEANINGS = {
    "vmr_by_side": "VMR when the area is cut into quadrats of other sides; near 1 by chance.",
    "l_function": "L(r) \u2212 r; near 0 by chance.",
    "pair_correlation": "How many pairs lie r apart, as a multiple of what chance would give.",
    "nearest_neighbour": "Share of the spots that have another within r.",
    "empty_space": "Share of places that have a spot within r.",
}
_DRAWN = ("vmr_by_side", "l_function", "pair_correlation", "nearest_neighbour")
_WORDS = {"above": "clumped", "below": "even"}


def curves_said(findings: Findings) -> dict[str, Any] | None:
    """Return all texts of the part on distances.

    Parameters
    ----------
    findings : Findings
        Any result.

    Returns
    -------
    dict or None
        None where no curves are known: from counts alone, or from fewer than 10 points.
    """
    tests, unit = findings.tests, findings.unit
    if tests is None or unit is None:
        return None
    return {
        "key": _key(findings),
        "drawn": [
            _drawn(tests.envelopes[name], unit) for name in _DRAWN if name in tests.envelopes
        ],
        "rows": [_row(findings, name, unit) for name in tests.envelopes],
        "beyond": findings.beyond is not None,
    }


def curve_alt(seen: Envelope, unit: str) -> str:
    """Return what the chart of a curve shows, for those who do not see it.

    Parameters
    ----------
    seen : Envelope
        A finished test.
    unit : {"mm", "px"}
        Of its lengths.

    Returns
    -------
    str
    """
    span = f"from {length_words(float(seen.x[0]), unit)} to {length_words(float(seen.x[-1]), unit)}"
    start = f"{_TITLES[seen.name]}, {span}, with the global band at {percent(1 - seen.level)}"
    if seen.side is None:
        return f"{start}. The curve stays within the band; {p_text(seen.p)}."
    beyond = seen.x[seen.outside]
    where = f"between {length_words(float(beyond[0]), unit)} and {length_words(float(beyond[-1]), unit)}"
    if beyond.size == 1:
        where = f"at {length_words(float(beyond[0]), unit)}"
    k = seen.strongest
    return (
        f"{start}. The curve leaves the band {where}, most at {length_words(seen.at, unit)}, where"
        f" it is {number(float(seen.observed[k]))} and the band runs from"
        f" {number(float(seen.low[k]))} to {number(float(seen.high[k]))}:"
        f" {_direction(seen)}; {p_text(seen.p)}."
    )


def _key(findings: Findings) -> str:
    """Say what the lines and the shade are, and which tests are judged together."""
    tests = findings.tests
    assert tests is not None
    text = (
        f"Line: these spots. Dashed: the mean of {tests.simulations:,} patterns of as many spots,"
        " placed at random in the same area. Shaded: the global band, which the line of a pattern"
        " placed at random leaves anywhere at all in 5 of 100 cases. Above it lie clumped patterns,"
        " below it even ones. The adjusted p (Holm 1979) allows for the three tests that are judged"
        " together; the others are for reading, not for the verdict."
    )
    if findings.beyond is not None:
        text += (
            " \u201cBeyond the gradient\u201d compares with patterns placed at random along the fitted"
            " gradient."
        )
    return text


def _drawn(seen: Envelope, unit: str) -> dict[str, str]:
    """Return name, title, caption and alternative text of one chart."""
    said = _MEANINGS[seen.name]
    if seen.side is not None:
        said += f" Greatest departure at {length_words(seen.at, unit)}: {_direction(seen)}."
    return {
        "name": seen.name,
        "title": _TITLES[seen.name],
        "said": f"{said} {p_text(seen.p)}.".replace("p = ", "p\u00a0=\u00a0").replace(
            "p < ", "p\u00a0<\u00a0"
        ),
        "alt": curve_alt(seen, unit),
    }


def _row(findings: Findings, name: str, unit: str) -> tuple[str, str, list[str]]:
    """Return a test's row: its name, where it departs, p and adjusted p, also beyond the gradient."""
    tests, family = findings.tests, findings.holm
    assert tests is not None
    seen = tests.envelopes[name]
    where = NOTHING if seen.side is None else f"{_direction(seen)}, {length_words(seen.at, unit)}"
    cells = [p_words(seen.p), _adjusted(family, name)]
    if findings.beyond is not None:
        also = findings.beyond.envelopes.get(name)
        cells += [
            NOTHING if also is None else p_words(also.p),
            _adjusted(findings.beyond_holm, name),
        ]
    return _TITLES[name], where, cells


def _adjusted(family: Any, name: str) -> str:
    """Return the adjusted p of a test, a dash for one outside the family."""
    return p_words(family[name]) if family is not None and name in family.names else NOTHING


def _direction(seen: Envelope) -> str:
    """Return what lying on that side of the band means; of empty space it is the other way round."""
    side = seen.side or "above"
    if seen.name == "empty_space":
        side = "below" if side == "above" else "above"
    return _WORDS[side]
