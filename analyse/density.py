"""How dense the points lie, with limits that know the count's chance and the scale's uncertainty."""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy import special

CM2 = 100.0  # square millimetres in a square centimetre


@dataclass(frozen=True, slots=True)
class Limits:
    """A number with its confidence limits."""

    value: float
    low: float
    high: float
    level: float


def garwood_limits(count: int, *, level: float = 0.95) -> Limits:
    """Return exact confidence limits of the mean of a Poisson count.

    Parameters
    ----------
    count : int
        What was counted, 0 or more.
    level : float
        Confidence level, between 0 and 1.

    Returns
    -------
    Limits
        The lower limit of a count of 0 is 0.

    Raises
    ------
    ValueError
        If the count or the level is impossible.

    References
    ----------
    Garwood, F. (1936). Fiducial limits for the Poisson distribution. Biometrika 28, 437-442.

    Examples
    --------
    >>> limits = garwood_limits(10)
    >>> round(limits.low, 2), round(limits.high, 2)
    (4.8, 18.39)
    """
    if count < 0 or count != int(count):
        raise ValueError(f"a count must be a whole number of 0 or more, not {count}")
    if not 0 < level < 1:
        raise ValueError(f"a confidence level lies between 0 and 1, not at {level}")
    tail = (1 - level) / 2
    low = float(special.gammaincinv(count, tail)) if count > 0 else 0.0
    high = float(special.gammainccinv(count + 1, tail))
    return Limits(float(count), low, high, level)


def density_per_cm2(n: int, area_mm2: float, relative_uncertainty: float) -> Limits:
    """Return points per square centimetre with 95 % limits, widened by the scale's uncertainty.

    Parameters
    ----------
    n : int
        Points counted.
    area_mm2 : float
        Study area.
    relative_uncertainty : float
        Standard uncertainty of a length, as a fraction of it.

    Returns
    -------
    Limits

    Notes
    -----
    Garwood's limits of the count divided by the area. An area is a length squared, so its relative
    standard uncertainty is twice a length's; 1.96 times that is its half width on the log scale,
    and it is added in quadrature to the half width of each of Garwood's limits, ln(limit / n).
    Without points there is no half width to add to: the upper limit is multiplied instead.

    References
    ----------
    Garwood, F. (1936). Fiducial limits for the Poisson distribution. Biometrika 28, 437-442.

    Examples
    --------
    >>> d = density_per_cm2(100, 10_000.0, 0.01)
    >>> round(d.value, 3), round(d.low, 3), round(d.high, 3)
    (1.0, 0.811, 1.221)
    """
    return widened(garwood_limits(n), CM2 / area_mm2, relative_uncertainty)


def widened(limits: Limits, factor: float, relative_uncertainty: float) -> Limits:
    """Return limits of a count as those of a density, widened by the scale's uncertainty.

    Parameters
    ----------
    limits : Limits
        Of a count or a mean count, 0 or more.
    factor : float
        One over the area they stand for.
    relative_uncertainty : float
        Standard uncertainty of a length, as a fraction of it; see `density_per_cm2`.

    Returns
    -------
    Limits

    Examples
    --------
    >>> round(widened(Limits(4.0, 2.0, 8.0, 0.95), 0.5, 0.0).high, 6)
    4.0
    """
    value, low, high = limits.value, limits.low, limits.high
    of_area = float(special.ndtri(0.5 + limits.level / 2)) * 2 * relative_uncertainty
    if value == 0:
        return Limits(0.0, 0.0, high * math.exp(of_area) * factor, limits.level)
    if low > 0:
        low = value * math.exp(-math.hypot(math.log(value / low), of_area))
    if math.isfinite(high):
        high = value * math.exp(math.hypot(math.log(high / value), of_area))
    return Limits(value * factor, low * factor, high * factor, limits.level)
