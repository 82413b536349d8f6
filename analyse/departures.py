"""Where the tests over all sides and distances depart from chance, and what that adds to the verdict."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

from analyse.holm import HolmFamily
from analyse.verdict import LEVEL, Verdict, p_text

if TYPE_CHECKING:
    from analyse.envelopes import Envelope

Direction = Literal["clumped", "even"]
FAMILY = ("vmr_by_side", "l_function", "nearest_neighbour")
_TOLD = ("l_function", "nearest_neighbour", "vmr_by_side")  # of equals the first is told
FAMILY_WORDS = "the tests over all sides, over all distances and of nearest neighbours"
_SAID: dict[tuple[str, Direction], str] = {
    ("vmr_by_side", "clumped"): "In quadrats of {at} the counts vary more than chance would give",
    ("vmr_by_side", "even"): "In quadrats of {at} the counts vary less than chance would give",
    ("l_function", "clumped"): "Nearer than {at} there are more neighbours than chance would give",
    ("l_function", "even"): "Nearer than {at} there are fewer neighbours than chance would give",
    (
        "nearest_neighbour",
        "clumped",
    ): "More spots have a neighbour nearer than {at} than chance would give",
    (
        "nearest_neighbour",
        "even",
    ): "Fewer spots have a neighbour nearer than {at} than chance would give",
}
_TOUCHING = "touching ones are counted as one, or cannot lie nearer"
_WIDTHS = 1.25  # of a spot, up to which objects that touch may be why neighbours are few
_ALIKE = 1.15  # sides whose ratio is below this hardly differ


@dataclass(frozen=True, slots=True)
class Departure:
    """How one of the tests that are judged together departs from chance.

    Parameters
    ----------
    name : {"vmr_by_side", "l_function", "nearest_neighbour"}
        The curve.
    direction : {"clumped", "even"} or None
        None where the adjusted p is above 5 %.
    at : float
        Side or distance of the greatest departure, in the unit of the pattern.
    p, adjusted : float
        Of the whole curve, and allowing for the tests of the family.
    """

    name: str
    direction: Direction | None
    at: float
    p: float
    adjusted: float


def judged_together(envelopes: Mapping[str, Envelope]) -> HolmFamily:
    """Return the p of the tests over sides, over distances and of nearest neighbours, adjusted.

    Parameters
    ----------
    envelopes : mapping of str to Envelope
        Finished tests by name; those outside the family are for reading only.

    Returns
    -------
    HolmFamily

    Notes
    -----
    The quadrat test as asked comes first and alone decides the verdict, so it is not one of them.

    References
    ----------
    Holm, S. (1979). A simple sequentially rejective multiple test procedure. Scandinavian Journal
    of Statistics 6, 65-70.

    Examples
    --------
    >>> from analyse.global_tests import global_tests
    >>> from analyse.pattern import Pattern
    >>> lattice = [(x + 0.5, y + 0.5) for x in range(8) for y in range(8)]
    >>> tests = global_tests(Pattern.of(lattice, (0, 0, 8, 8)), simulations=99)
    >>> judged_together(tests.envelopes)
    HolmFamily(adjusted p: vmr_by_side 0.03, l_function 0.03, nearest_neighbour 0.03)
    """
    return HolmFamily.of({name: envelopes[name].p for name in FAMILY if name in envelopes})


def departures_of(envelopes: Mapping[str, Envelope], family: HolmFamily) -> tuple[Departure, ...]:
    """Return how each test of the family departs from chance.

    Parameters
    ----------
    envelopes : mapping of str to Envelope
        Finished tests by name.
    family : HolmFamily
        Their adjusted p.

    Returns
    -------
    tuple of Departure
        In the order of the family.

    Examples
    --------
    >>> from analyse.global_tests import global_tests
    >>> from analyse.pattern import Pattern
    >>> lattice = [(x + 0.5, y + 0.5) for x in range(8) for y in range(8)]
    >>> tests = global_tests(Pattern.of(lattice, (0, 0, 8, 8)), simulations=99)
    >>> found = departures_of(tests.envelopes, judged_together(tests.envelopes))
    >>> [each.direction for each in found]
    ['even', 'even', 'even']
    """
    found = []
    for name, p, adjusted in family:
        seen = envelopes[name]
        direction: Direction | None = None
        if adjusted <= LEVEL and seen.side is not None:
            direction = "clumped" if seen.side == "above" else "even"
        found.append(Departure(name, direction, seen.at, p, adjusted))
    return tuple(found)


def against(verdict: Verdict, departures: Sequence[Departure]) -> Departure | None:
    """Return the clearest departure that the verdict on the quadrats does not tell.

    Parameters
    ----------
    verdict : str
        On the quadrats as asked.
    departures : sequence of Departure
        Of the tests over sides and distances.

    Returns
    -------
    Departure or None
        The `clearest` of them; None where they agree.

    Examples
    --------
    >>> even = Departure("l_function", "even", 1.2, 0.004, 0.012)
    >>> against("no departure from random found", [even]).name
    'l_function'
    >>> against("evenly spaced", [even]) is None
    True
    """
    told = {"clumped": "clumped", "evenly spaced": "even"}.get(verdict)
    other = [each for each in departures if each.direction not in (None, told)]
    return clearest(other) if other else None


def clearest(departures: Sequence[Departure]) -> Departure:
    """Return the departure with the smallest adjusted p, then p; of equals one over distances.

    Parameters
    ----------
    departures : sequence of Departure
        One or more.

    Returns
    -------
    Departure

    Examples
    --------
    >>> sides = Departure("vmr_by_side", "clumped", 20.0, 0.004, 0.012)
    >>> clearest([sides, Departure("l_function", "clumped", 6.0, 0.001, 0.003)]).at
    6.0
    """
    return min(departures, key=lambda each: (each.adjusted, each.p, _TOLD.index(each.name)))


def disagreement(
    verdict: Verdict,
    departures: Sequence[Departure],
    *,
    side: float | None,
    unit: str,
    width: float = math.nan,
) -> str:
    """Say where the tests over sides and distances tell something else than the quadrats, and why.

    Parameters
    ----------
    verdict : str
        On the quadrats as asked.
    departures : sequence of Departure
        Of the tests over sides and distances.
    side : float or None
        Side of the quadrats; None where they are no squares.
    unit : {"mm", "px"}
        Of lengths.
    width : float
        Usual width of a spot; NaN where not known.

    Returns
    -------
    str
        A sentence; empty where they agree.

    Examples
    --------
    >>> even = Departure("l_function", "even", 1.2, 0.004, 0.012)
    >>> print(disagreement("no departure from random found", [even], side=8.0, unit="mm"))
    Nearer than 1.2 mm there are fewer neighbours than chance would give (adjusted p = 0.012): spots...
    """
    if verdict == "too few to tell" or not departures:
        return ""
    other = against(verdict, departures)
    if other is not None:
        if within_a_spot(other, width):
            why = f", but a spot is usually {length_words(width, unit)} wide: {_TOUCHING}"
        else:
            why = f": {_why(verdict, other, side, unit)}"
        return f"{departure_words(other, unit)}{why}."
    if verdict == "no departure from random found" or any(d.direction for d in departures):
        return ""
    least = min(each.adjusted for each in departures)
    return (
        f"The tests over all sides and distances do not show it (smallest adjusted {p_text(least)}):"
        " they look everywhere at once, and so need a stronger departure."
    )


def within_a_spot(departure: Departure, width: float) -> bool:
    """Tell whether a lack of near neighbours may be that of spots which touch or overlap.

    Parameters
    ----------
    departure : Departure
        Of one of the tests.
    width : float
        Usual width of a spot; NaN where not known.

    Returns
    -------
    bool
        Whether neighbours are too few at a distance up to 1.25 widths (our own limit, for sizes
        differ); never of a test over sides.

    Examples
    --------
    >>> even = Departure("l_function", "even", 1.2, 0.004, 0.012)
    >>> within_a_spot(even, 1.5), within_a_spot(even, 0.5)
    (True, False)
    """
    near = departure.name != "vmr_by_side" and departure.at <= _WIDTHS * width
    return departure.direction == "even" and near


def departure_words(departure: Departure, unit: str) -> str:
    """Say at which side or distance a test departs, in which direction, and how sure that is.

    Parameters
    ----------
    departure : Departure
        With a direction.
    unit : {"mm", "px"}
        Of lengths.

    Returns
    -------
    str
        A sentence without its stop.

    Raises
    ------
    ValueError
        If the test does not depart.

    Examples
    --------
    >>> departure_words(Departure("vmr_by_side", "clumped", 20.0, 0.004, 0.012), "mm")
    'In quadrats of 20 mm the counts vary more than chance would give (adjusted p = 0.012)'
    """
    if departure.direction is None:
        raise ValueError(f"{departure.name} shows no departure to be told")
    said = _SAID[departure.name, departure.direction].format(at=length_words(departure.at, unit))
    return f"{said} (adjusted {p_text(departure.adjusted)})"


def length_words(length: float, unit: str) -> str:
    """Return a length to three figures with its unit.

    Examples
    --------
    >>> length_words(1.2344, "mm"), length_words(1234.5, "px")
    ('1.23 mm', '1230 px')
    """
    return f"{float(f'{length:.3g}'):g} {unit}"


def _why(verdict: Verdict, other: Departure, side: float | None, unit: str) -> str:
    """Say why the quadrats do not show a departure that another test shows."""
    quadrats = "these quadrats" if side is None else f"quadrats of {length_words(side, unit)}"
    wide = side is None or other.at < side
    if verdict == "clumped":
        return (
            "within the clumps spots keep a distance from each other"
            if wide
            else "the clumps themselves are spread out"
        )
    if verdict == "evenly spaced" and wide:
        return "within the even spread some stand close together"
    if side is None:
        return f"{quadrats} do not show it"
    if other.name == "vmr_by_side" and side / _ALIKE < other.at < side * _ALIKE:
        return f"{quadrats}, nearly as wide, show it less clearly"
    if not wide:
        return f"{quadrats} are too small to show it"
    if other.direction == "even" and other.name != "vmr_by_side":
        return f"spots keep a distance that {quadrats} cannot see"
    return f"{quadrats} are too wide to show it"
