"""How many points a quadrat holds on average, from which quadrats hold any at all."""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy import special

_LARGEST_EXPONENT = 700.0  # e to a greater power is no floating point number


@dataclass(frozen=True, slots=True, repr=False)
class PresenceMean:
    """Mean count of a quadrat, told from the share of occupied quadrats.

    Parameters
    ----------
    quadrats, occupied : int
        How many, and how many of them hold a point.
    k : float
        Clumping taken for granted; `math.inf` for points at random.
    value : float
        Mean count; NaN where every quadrat is occupied.
    standard_error : float
        Of it; NaN where it is undefined or 0.
    low, high : float
        Limits at `level`; `math.inf` where there is no upper one.
    level : float
        Confidence level.
    reason : str
        Why there is no value; empty otherwise.
    """

    quadrats: int
    occupied: int
    k: float
    value: float
    standard_error: float
    low: float
    high: float
    level: float
    reason: str = ""

    def __repr__(self) -> str:
        return (
            f"<PresenceMean {self.value:.4g} ({self.low:.4g} to {self.high:.4g}), from"
            f" {self.occupied} of {self.quadrats} quadrats>"
        )


def mean_from_presence(
    occupied: int, quadrats: int, *, k: float = math.inf, level: float = 0.95
) -> PresenceMean:
    """Return the mean count of a quadrat from the share p of quadrats that hold any point.

    Parameters
    ----------
    occupied : int
        Quadrats with at least one point.
    quadrats : int
        All quadrats of one size, at least 1.
    k : float
        Negative binomial k of the counts, taken as known; `math.inf` for points at random.
    level : float
        Confidence level, between 0 and 1.

    Returns
    -------
    PresenceMean
        Undefined (NaN, with its lower limit) where no quadrat is empty.

    Raises
    ------
    ValueError
        If the numbers, k or the level are impossible.

    Notes
    -----
    At random an empty quadrat has probability exp(-m), so that m = -ln(1 - p), with standard error
    sqrt(p / (q (1 - p))) by the delta method. Where points clump, more quadrats are empty and
    this form gives too few; with a known k, m = k ((1 - p)^(-1/k) - 1). The limits are the exact
    binomial ones of p put through the same formula; they do not know the uncertainty of k.

    References
    ----------
    Blackman, G. E. (1935). A study by statistical methods of the distribution of species in
    grassland associations. Annals of Botany 49, 749-777.
    Clopper, C. J. and Pearson, E. S. (1934). The use of confidence or fiducial limits illustrated
    in the case of the binomial. Biometrika 26, 404-413.
    Wilson, L. T. and Room, P. M. (1983). Clumping patterns of fruit and arthropods in cotton, with
    implications for binomial sampling. Environmental Entomology 12, 50-54 (the share of occupied
    units under a negative binomial law).

    Examples
    --------
    >>> mean_from_presence(347, 576)
    <PresenceMean 0.9224 (0.8236 to 1.029), from 347 of 576 quadrats>
    >>> mean_from_presence(12, 12).reason
    'no quadrat is empty: the mean cannot be told from presence'
    """
    if quadrats < 1 or not 0 <= occupied <= quadrats:
        raise ValueError(f"{occupied} occupied quadrats of {quadrats} is impossible")
    if not k > 0:
        raise ValueError(f"k must be positive, not {k}")
    if not 0 < level < 1:
        raise ValueError(f"a confidence level lies between 0 and 1, not at {level}")
    tail = (1 - level) / 2
    empty = quadrats - occupied
    low = _mean(float(special.betaincinv(empty + 1, occupied, 1 - tail)), k) if occupied else 0.0
    if empty == 0:
        reason = "no quadrat is empty: the mean cannot be told from presence"
        return PresenceMean(quadrats, occupied, k, math.nan, math.nan, low, math.inf, level, reason)
    high = _mean(float(special.betaincinv(empty, occupied + 1, tail)), k)
    share = empty / quadrats
    log_slope = -(1 / k + 1) * math.log(share)
    slope = math.exp(log_slope) if log_slope < _LARGEST_EXPONENT else math.inf
    error = slope * math.sqrt(share * (1 - share) / quadrats) if occupied else math.nan
    return PresenceMean(quadrats, occupied, k, _mean(share, k), error, low, high, level)


def _mean(empty: float, k: float) -> float:
    """Return the mean count from the share of empty quadrats."""
    if math.isinf(k):
        return -math.log(empty) + 0.0
    exponent = -math.log(empty) / k
    return k * math.expm1(exponent) + 0.0 if exponent < _LARGEST_EXPONENT else math.inf
