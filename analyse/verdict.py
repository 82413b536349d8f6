"""The verdict, in words a reader can defend, and the reasons for care that go with it."""

from __future__ import annotations

import math
from typing import Literal

from analyse.count_chance import SimulatedTest
from analyse.dispersion import Dispersion
from analyse.flags import FLAGS as FLAGS
from analyse.power import LEVEL as LEVEL
from analyse.power import POWER as POWER
from analyse.power import WouldShow
from analyse.power import detectable as detectable

Verdict = Literal["clumped", "evenly spaced", "no departure from random found", "too few to tell"]
FEWEST_SPOTS = 10  # common practice
FEWEST_QUADRATS = 6  # common practice: more than 5


def decide(n: int, q: int, simulated: SimulatedTest) -> Verdict:
    """Return the verdict on counts in quadrats.

    Parameters
    ----------
    n : int
        Points.
    q : int
        Quadrats, clipped ones included.
    simulated : SimulatedTest
        X2 over all quadrats, judged by simulation given n.

    Returns
    -------
    {"clumped", "evenly spaced", "no departure from random found", "too few to tell"}

    Notes
    -----
    Two-sided at 5 %. Fewer than 10 points or 6 quadrats are too few to tell (common practice).

    Examples
    --------
    >>> decide(62, 25, SimulatedTest(54.9, 0.001, 1.0, 0.002, 999))
    'clumped'
    """
    if n < FEWEST_SPOTS or q < FEWEST_QUADRATS:
        return "too few to tell"
    if simulated.p_two_sided > LEVEL:
        return "no departure from random found"
    return "clumped" if simulated.p_clumped < simulated.p_even else "evenly spaced"


def sentence(
    verdict: Verdict,
    everything: Dispersion,
    whole: Dispersion | None,
    simulated: SimulatedTest,
    seen: tuple[float, float],
    shown: WouldShow | None = None,
) -> str:
    """Return the verdict as a sentence.

    Parameters
    ----------
    verdict : str
        As `decide` gave it.
    everything : Dispersion
        Over all quadrats, by area.
    whole : Dispersion or None
        Over the whole quadrats only.
    simulated : SimulatedTest
        What the verdict rests on.
    seen : (low, high)
        What `detectable` gave; `low` is NaN where counts cannot be as even as that.
    shown : WouldShow or None
        The smallest clusters and the smallest spacing that would have been seen.

    Returns
    -------
    str

    Examples
    --------
    >>> from analyse.dispersion import dispersion
    >>> counts = dispersion([9, 0, 1, 0, 6, 0, 0, 8, 0, 1])
    >>> test = SimulatedTest(counts.chi2, 0.001, 1.0, 0.002, 999)
    >>> print(sentence("clumped", counts, counts, test, detectable(9)))
    Clumped: the counts vary 5.4 times as much as ... (VMR 5.36, two-sided p = 0.002, simulated).
    """
    if everything.n == 0:
        return "No spots: nothing to test."
    if verdict == "too few to tell":
        return _too_few(everything)
    numbers = _numbers(everything, whole, simulated)
    times = f"{_short(everything.vmr)} times as much as they would at random"
    if verdict == "clumped":
        return f"Clumped: the counts vary {times} ({numbers})."
    if verdict == "evenly spaced":
        return f"Evenly spaced: the counts vary only {times} ({numbers})."
    low, high = seen
    less = "" if math.isnan(low) else f", or of {_short(low)} or less,"
    bound = " So few spots can hardly show even spacing." if math.isnan(low) else ""
    return (
        f"No departure from random found ({numbers}). With these {everything.q} quadrats a VMR of"
        f" {_short(high)} or more{less} would have been seen with about {100 * POWER:.0f} % power"
        f"{_also_shown(shown)}.{bound}"
    )


def p_text(p: float) -> str:
    """Return a p in words; never "p = 0".

    Parameters
    ----------
    p : float
        Between 0 and 1.

    Returns
    -------
    str

    Examples
    --------
    >>> p_text(0.0002), p_text(0.002), p_text(0.25)
    ('p < 0.001', 'p = 0.002', 'p = 0.25')
    """
    if p < 0.001:
        return "p < 0.001"
    return f"p = {p:.3f}" if p < 0.1 else f"p = {p:.2f}"


def _too_few(seen: Dispersion) -> str:
    """Say how many there are and how many it takes."""
    lacking = []
    if seen.n < FEWEST_SPOTS:
        lacking.append(f"{seen.n} spot{'s' * (seen.n != 1)} (a test needs at least {FEWEST_SPOTS})")
    if seen.q < FEWEST_QUADRATS:
        lacking.append(f"{seen.q} quadrats (a test needs at least {FEWEST_QUADRATS})")
    return f"Too few to tell: {' and '.join(lacking)}."


def _numbers(everything: Dispersion, whole: Dispersion | None, simulated: SimulatedTest) -> str:
    """Return the figures behind a verdict, and say which of them it rests on."""
    judged = f"two-sided {p_text(simulated.p_two_sided)}, simulated"
    if whole is not None and whole.q == everything.q:
        return f"VMR {everything.vmr:.2f}, {judged}"
    rest = ""
    if whole is not None:
        alone = f"VMR {whole.vmr:.2f} on" if whole.n else "no spot in"
        rest = f"; {alone} the {whole.q} whole ones"
    return f"X2/df {everything.vmr:.2f} over all {everything.q} quadrats by area, {judged}{rest}"


def _also_shown(shown: WouldShow | None) -> str:
    """Say which clusters and which spacing would have been seen too."""
    found = []
    if shown is not None and math.isfinite(shown.cluster):
        found.append(f"clusters in which a spot has {_short(shown.cluster)} others beside it")
    if shown is not None and math.isfinite(shown.spacing):
        length = f"{_short(shown.spacing)} of a quadrat's side"
        if shown.side is not None:
            length = f"{float(f'{shown.length:.2g}'):g} {shown.unit}"
        found.append(f"a spacing of {length} kept by all")
    return f", as would {' or '.join(found)}" if found else ""


def _short(ratio: float) -> str:
    """Return a ratio with about two figures, more of them next to 1."""
    if ratio >= 10:
        return f"{ratio:.0f}"
    return f"{ratio:.1f}" if ratio >= 1.1 else f"{ratio:.2f}"
