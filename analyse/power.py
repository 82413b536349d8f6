"""What this number of points and quadrats would have shown, had it been there."""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy import optimize, special

from analyse.chance import LEVEL as LEVEL
from analyse.count_chance import least_chi2

POWER = 0.80
WIDE = 0.25  # spread of a cluster in sides of a quadrat, at which it is about as wide as one
_FEWEST_CLUSTERS = 3
_DENSEST = 0.45  # share of the area that discs of the spacing's diameter may cover
# The area common to the neighbourhoods of two points, over their distances from 1 to 2 spacings:
_COMMON = 3 * math.sqrt(3) / (4 * math.pi)  # its share of what it is over all distances
_COMMON_R, _COMMON_R2 = 1.3251559, 1.8061330  # mean distance weighted with it, and mean square
_THIRD = 1.2  # measured by simulation, see `spacing_vmr`


@dataclass(frozen=True, slots=True)
class WouldShow:
    """The smallest departures that n points in q quadrats show with 80 % power at 5 %, two-sided.

    Parameters
    ----------
    n, q : int
        Points and quadrats.
    vmr_low, vmr_high : float
        VMR of even and of clumped counts.
    cluster : float
        Other members of its cluster beside a point, on average, for clusters much narrower than a
        quadrat.
    wide_cluster : float
        The same for clusters about as wide as a quadrat (standard deviation a quarter of a side).
    spacing : float
        Distance that all points keep from one another, in sides of a quadrat.
    side : float or None
        Side of a square of a quadrat's mean area, where it is known.
    unit : str or None
        Unit of `side`.

    Notes
    -----
    NaN where nothing of the kind would be seen: so few points can be neither so clumped nor so
    evenly spaced.
    """

    n: int
    q: int
    vmr_low: float
    vmr_high: float
    cluster: float
    wide_cluster: float
    spacing: float
    side: float | None = None
    unit: str | None = None

    def __repr__(self) -> str:
        return (
            f"<WouldShow {self.n} in {self.q}: VMR {self.vmr_low:.2f} or {self.vmr_high:.2f},"
            f" {self.cluster:#.2g} others in a cluster, spacing {self.spacing:#.2g} sides>"
        )

    @property
    def length(self) -> float:
        """The spacing in `unit`; NaN where the side is unknown."""
        return math.nan if self.side is None else self.spacing * self.side

    @property
    def sentence(self) -> str:
        """What would have been seen, in words; empty where nothing would."""
        seen = []
        if math.isfinite(self.cluster):
            wide = ""
            if math.isfinite(self.wide_cluster):
                wide = f" ({_figure(self.wide_cluster)} if clusters are about as wide as one)"
            seen.append(
                f"clusters in which a spot has on average {_figure(self.cluster)} others beside it,"
                f" much narrower than a quadrat{wide}"
            )
        if math.isfinite(self.spacing):
            length = f"{_figure(self.spacing)} of a quadrat's side"
            if self.side is not None:
                length = f"{_figure(self.length)} {self.unit}"
            seen.append(f"a spacing of {length} kept by all")
        if not seen:
            return ""
        return f"With about {100 * POWER:.0f} % power the counts would have shown {', or '.join(seen)}."


def would_show(n: int, q: int, *, side: float | None = None, unit: str | None = None) -> WouldShow:
    """Return the smallest departures that n points in q quadrats would have shown.

    Parameters
    ----------
    n, q : int
        Points and quadrats; at least 2 quadrats.
    side : float or None
        Side of a square of a quadrat's mean area, where it is known.
    unit : str or None
        Its unit.

    Returns
    -------
    WouldShow

    Examples
    --------
    >>> would_show(60, 30, side=5.0, unit="mm")
    <WouldShow 60 in 30: VMR 0.46 or 2.03, 1.1 others in a cluster, spacing 0.40 sides>
    >>> print(would_show(60, 30, side=5.0, unit="mm").sentence)
    With about 80 % power the counts would have shown clusters in which a spot has on average 1.1
    others beside it, much narrower than a quadrat (2.2 if clusters are about as wide as one), or a
    spacing of 2.0 mm kept by all.
    """
    low, high = detectable(q - 1)
    return WouldShow(
        n,
        q,
        low,
        high,
        smallest_cluster(n, q),
        smallest_cluster(n, q, spread=WIDE),
        smallest_spacing(n, q),
        side,
        unit,
    )


def detectable(df: int, *, level: float = LEVEL, power: float = POWER) -> tuple[float, float]:
    """Return the VMR at or below which, and at or above which, a departure would have been seen.

    Parameters
    ----------
    df : int
        Quadrats - 1.
    level : float
        Two-sided level of the test.
    power : float
        Wanted probability of seeing the departure.

    Returns
    -------
    (low, high) : tuple of float
        VMR of even and of clumped counts.

    Notes
    -----
    With a true ratio V, X2 / V is taken as chi-square on `df` degrees of freedom, so that
    V = chi2(1 - level / 2) / chi2(1 - power) on the clumped side. An approximation, so that it
    is said as "about": of negative binomial counts with the VMR for 80 %, the simulated test saw
    77 to 82 % at a mean count of 5 or more, 75 to 78 % at 2, and 67 to 77 % at 1 (10 to 100
    quadrats). How even counts can be is bounded by their number: see `analyse.count_chance.least_chi2`.

    References
    ----------
    Bartlett, M. S. (1936). Some notes on insecticide tests in the laboratory and in the field.
    Journal of the Royal Statistical Society, Supplement 3, 185-194 (the scaled chi-square).

    Examples
    --------
    >>> low, high = detectable(24)
    >>> round(low, 2), round(high, 2)
    (0.42, 2.18)
    """
    upper, lower = _quantile(df, 1 - level / 2), _quantile(df, level / 2)
    return lower / _quantile(df, power), upper / _quantile(df, 1 - power)


def cluster_vmr(others: float, spread: float) -> float:
    """Return the VMR of counts in square quadrats of points in independent clusters.

    Parameters
    ----------
    others : float
        Other members of its cluster beside a point, on average.
    spread : float
        Standard deviation of a cluster along x and along y, in sides of the quadrat.

    Returns
    -------
    float
        1 + others times the chance that two members of a cluster fall in one quadrat.

    Notes
    -----
    VMR = 1 + density times the integral of g - 1 over pairs of places in the quadrat. For a
    Thomas process two members differ by a normal vector of standard deviation v = sqrt(2) spread
    along each side, which leaves both in one quadrat with the chance c^2,
    c = 2 Phi(1/v) - 1 - 2 v (phi(0) - phi(1/v)).

    References
    ----------
    Neyman, J. and Scott, E. L. (1958). Statistical approach to problems of cosmology. Journal of
    the Royal Statistical Society B 20, 1-43. Thomas, M. (1949). A generalization of Poisson's
    binomial limit for use in ecology. Biometrika 36, 18-25.

    Examples
    --------
    >>> round(cluster_vmr(2.0, 0.0), 3), round(cluster_vmr(2.0, 0.25), 3)
    (3.0, 2.032)
    """
    if spread <= 0:
        return 1 + others
    v = math.sqrt(2) * spread
    lost = 2 * v * (1 - math.exp(-0.5 / v**2)) / math.sqrt(2 * math.pi)
    one_way = 2 * float(special.ndtr(1 / v)) - 1 - lost
    return 1 + others * one_way**2


def spacing_vmr(spacing: float, mean: float) -> float:
    """Return the VMR of counts in square quadrats of points that keep a distance.

    Parameters
    ----------
    spacing : float
        Distance that all keep, in sides of the quadrat.
    mean : float
        Mean count.

    Returns
    -------
    float
        An approximation, good to about 0.02 where discs of that diameter cover up to 0.4 of the
        area.

    Notes
    -----
    Points are set one after the other at random, those too near to an earlier one being refused.
    Then VMR = 1 + mean times the mean of (g - 1) (1 - 4 r / pi + r^2 / pi) over the plane, the
    bracket being the share of places for which both points of a pair at distance r lie in one
    quadrat. g is 0 below the spacing; to second order in the density it is
    1 + (2/3) density times the area common to the two neighbourhoods up to twice the spacing: a
    third point there held places off both others, unless it came last of the three. What is left,
    1.2 times the cube of the share that discs of that diameter cover, was measured by simulation.

    References
    ----------
    Matern, B. (1960). Spatial Variation. Meddelanden fran Statens Skogsforskningsinstitut 49.
    Diggle, P. J. (1983). Statistical Analysis of Spatial Point Patterns. Academic Press.

    Examples
    --------
    >>> round(spacing_vmr(0.0, 2.0), 3), round(spacing_vmr(0.3, 2.0), 3)
    (1.0, 0.622)
    """
    core = mean * math.pi * spacing**2
    kept = core * (1 - 8 * spacing / (3 * math.pi) + spacing**2 / (2 * math.pi))
    apart = (4 * _COMMON_R * spacing - _COMMON_R2 * spacing**2) / math.pi
    crowded = 2 / 3 * _COMMON * core**2 * (1 - apart)
    return 1 - kept + crowded + _THIRD * (core / 4) ** 3


def smallest_cluster(n: int, q: int, *, spread: float = 0.0) -> float:
    """Return the smallest clusters that n points in q quadrats show with 80 % power.

    Parameters
    ----------
    n, q : int
        Points and quadrats.
    spread : float
        Standard deviation of a cluster along x and along y, in sides of a quadrat.

    Returns
    -------
    float
        Other members of its cluster beside a point, on average; NaN where so few points cannot
        form three such clusters.

    Notes
    -----
    Clusters have Poisson numbers of members, so that a member has as many others beside it, on
    average, as a cluster has members. X2 given n is taken as gamma, with the mean q V - W, V and W
    being the VMR in a quadrat and in the whole area, and the variance that the cumulants of Neyman
    counts with that V give; the critical value is chi-square's and half of the step 2 / mean in
    which X2 moves.

    References
    ----------
    Neyman, J. (1939). On a new class of contagious distributions. Annals of Mathematical
    Statistics 10, 35-57 (the counts and their cumulants).

    Examples
    --------
    >>> round(smallest_cluster(60, 30), 2), round(smallest_cluster(60, 30, spread=0.25), 2)
    (1.1, 2.21)
    """
    if n < _FEWEST_CLUSTERS or q < 2:
        return math.nan
    most = n / _FEWEST_CLUSTERS

    def short(others: float) -> float:
        return _cluster_power(others, n, q, spread) - POWER

    if short(most) < 0:
        return math.nan
    return float(optimize.brentq(short, 1e-9, most, xtol=1e-6))


def smallest_spacing(n: int, q: int) -> float:
    """Return the smallest spacing kept by all that n points in q quadrats show with 80 % power.

    Parameters
    ----------
    n, q : int
        Points and quadrats.

    Returns
    -------
    float
        In sides of a quadrat; NaN where so few points cannot lie as evenly as that, or where
        discs of that diameter would cover more than 0.45 of the area, which points set at random
        hardly find room for.

    Notes
    -----
    The spacing whose X2 given n has the mean q V - W of `detectable`'s even side, V and W being
    `spacing_vmr` in a quadrat and in the whole area.

    Examples
    --------
    >>> round(smallest_spacing(60, 30), 3), smallest_spacing(12, 25)
    (0.396, nan)
    """
    if n < 2 or q < 2:
        return math.nan
    mean, wanted = n / q, detectable(q - 1)[0]
    largest = min(1.0, math.sqrt(4 * _DENSEST / (math.pi * mean)))

    def above(spacing: float) -> float:
        whole = spacing_vmr(spacing / math.sqrt(q), n)
        return (q * spacing_vmr(spacing, mean) - whole) / (q - 1) - wanted

    if above(largest) > 0 or least_chi2(n, [1.0] * q) > wanted * (q - 1):
        return math.nan
    return float(optimize.brentq(above, 0.0, largest, xtol=1e-9))


def _cluster_power(others: float, n: int, q: int, spread: float) -> float:
    """Return the chance that clusters are seen."""
    mean, u = n / q, cluster_vmr(others, spread) - 1
    expected = q * (1 + u) - cluster_vmr(others, spread / math.sqrt(q))
    second, third = 1 + u, 1 + 3 * u + u**2  # cumulants over the mean count
    fourth = 1 + 7 * u + 6 * u**2 + u**3
    variance = (q - 1) ** 2 / (mean * q) * (fourth - third**2 / second) + 2 * (q - 1) * second**2
    if not expected > 0:
        return 0.0
    critical = _quantile(q - 1, 1 - LEVEL / 2) + 1 / mean
    return float(special.gammaincc(expected**2 / variance, critical * expected / variance))


def _figure(value: float) -> str:
    """Return a number with about two figures."""
    return f"{value:.0f}" if value >= 9.95 else f"{value:#.2g}"


def _quantile(df: int, probability: float) -> float:
    """Return the chi-square value that this share lies below."""
    return float(special.chdtri(df, 1 - probability))
