"""Morisita's index of dispersion, the values chance would not exceed, and the standardised form."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from analyse.dispersion import checked_counts

Branch = Literal["a", "b", "c", "d"]


@dataclass(frozen=True, slots=True, repr=False)
class Morisita:
    """Morisita's index with its critical values and its standardised form.

    To be shown: the standardised form, which runs from -1 (even) over 0 (random) to 1 (clumped)
    and exceeds 0.5 in size where a two-sided test at 5 % finds a departure.

    Parameters
    ----------
    index : float
        Morisita's index: 1 at random, q if all points are in one quadrat; NaN below 2 points.
    even_limit, clumped_limit : float
        Critical values M_u and M_c: two-sided 5 % limits of the index at random.
    standardised : float
        From -1 to 1; NaN where `reason` says why.
    branch : {"a", "b", "c", "d"} or None
        Which of the four forms gave it: (a) beyond the clumped limit, (b) between it and random,
        (c) between random and the even limit, (d) beyond that.
    reason : str
        Why there is no standardised form; empty otherwise.
    """

    index: float
    even_limit: float
    clumped_limit: float
    standardised: float
    branch: Branch | None
    reason: str = ""

    def __repr__(self) -> str:
        return f"<Morisita: index {self.index:.4g}, standardised {self.standardised:.4g}>"


def morisita_index(counts: ArrayLike) -> float:
    """Return Morisita's index, q sum x(x - 1) / (S (S - 1)): 1 at random, q if all are in one.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.

    Returns
    -------
    float
        NaN with fewer than 2 points.

    Raises
    ------
    ValueError
        If a count is negative or no whole number.

    References
    ----------
    Morisita, M. (1959). Measuring of the dispersion of individuals and analysis of the
    distributional patterns. Memoirs of the Faculty of Science, Kyushu University, E 2, 215-235.

    Examples
    --------
    >>> morisita_index([5, 0, 0, 0])
    4.0
    """
    x = checked_counts(counts).astype(np.float64)
    total = x.sum()
    return float(x.size * (x * (x - 1)).sum() / (total * (total - 1))) if total > 1 else math.nan


def morisita(counts: ArrayLike) -> Morisita:
    """Return Morisita's index of counts in equal quadrats, its limits and its standardised form.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2 of them.

    Returns
    -------
    Morisita

    Raises
    ------
    ValueError
        If a count is negative or no whole number.

    Notes
    -----
    X2 is linear in the index, so that its 2.5 % quantiles on q - 1 degrees of freedom give the
    critical values: M = (quantile - q + S) / (S - 1), M_u from the lower and M_c from the upper
    one. The standardised form I_p of an index I is

    - (a) I >= M_c > 1: 0.5 + 0.5 (I - M_c) / (q - M_c)
    - (b) M_c > I >= 1: 0.5 (I - 1) / (M_c - 1)
    - (c) 1 > I > M_u: -0.5 (I - 1) / (M_u - 1)
    - (d) 1 > M_u >= I: -0.5 + 0.5 (I - M_u) / M_u

    With few points M_u can be 0 or less: then no pattern is even enough for (d), which would
    divide by a number that is not positive, and -0.5 is never reached.

    References
    ----------
    Smith-Gill, S. J. (1975). Cytophysiological basis of disruptive pigmentary patterns in the
    leopard frog, Rana pipiens. II. Journal of Morphology 146, 35-54.
    Krebs, C. J. (1999). Ecological Methodology, 2nd edition. Benjamin Cummings, Menlo Park.

    Examples
    --------
    >>> azuki = [0] * 61 + [1] * 50 + [2]
    >>> morisita(azuki), morisita(azuki).branch
    (<Morisita: index 0.08446, standardised -0.9093>, 'd')
    """
    x = checked_counts(counts)
    q, total, index = x.size, int(x.sum()), morisita_index(x)
    if q < 2 or total < 2:
        few = "fewer than 2 points" if q > 1 else "fewer than 2 quadrats"
        return Morisita(index, math.nan, math.nan, math.nan, None, few)
    even = (float(special.chdtri(q - 1, 0.975)) - q + total) / (total - 1)
    clumped = (float(special.chdtri(q - 1, 0.025)) - q + total) / (total - 1)
    branch = _branch(index, even, clumped)
    value, reason = _standardised(branch, index, even, clumped, q)
    return Morisita(index, even, clumped, value, branch, reason)


def _branch(index: float, even: float, clumped: float) -> Branch:
    """Return which of the four forms applies."""
    if index >= 1:
        return "a" if index >= clumped else "b"
    return "c" if index > even else "d"


def _standardised(
    branch: Branch, index: float, even: float, clumped: float, q: int
) -> tuple[float, str]:
    """Return the standardised form, and why it is missing."""
    match branch:
        case "a":
            room = q - clumped
            return (0.5 + 0.5 * (index - clumped) / room if room > 0 else 0.5), ""
        case "b":
            return 0.5 * (index - 1) / (clumped - 1), ""
        case "c":
            return -0.5 * (index - 1) / (even - 1), ""
    if even <= 0:
        return math.nan, f"M_u is {even:.3g}, not positive: too few points for branch (d)"
    return -0.5 + 0.5 * (index - even) / even, ""
