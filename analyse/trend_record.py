"""The record of a trend of the density: slope, tests, and where it is denser, in words."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from analyse.columns import hold_columns
from analyse.power import LEVEL as LEVEL
from analyse.quadrature import quadrature
from analyse.trend_fit import Slope, largest_dispersion

TrendKind = Literal["plane", "radial"]
_OPPOSITE = {
    "the edge": "the middle", "the middle": "the edge", "the end": "the start", "the start": "the end",
}  # fmt: skip
_TOWARDS = (
    "the right", "the lower right", "the bottom", "the lower left",
    "the left", "the upper left", "the top", "the upper right",
)  # fmt: skip


@dataclass(frozen=True, slots=True, eq=False)
class Trend:
    """A log-linear trend of the density, with the test that allows for clumping.

    Parameters
    ----------
    kind : {"plane", "radial"}
        Log density linear in x and y, or in the squared distance from a centre.
    n : int
        Points.
    origin : (x, y)
        Where the slope is measured from; the centre of a radial trend.
    coefficients, standard_errors : ndarray of shape (2,) or (1,)
        Change of log density per unit of x and of y, or per squared unit of distance, and their
        standard errors widened for clumping. Where all quadrats lie in one line, the coefficient
        across it is 0 and its error NaN.
    lr : float
        Likelihood ratio statistic against the same density everywhere.
    df : int
        Its degrees of freedom.
    p_poisson : float
        Chi-square p of `lr`: valid only for points that are independent of one another.
    dispersion : float
        Dispersion of the counts around the trend in coarse quadrats: about 1 for independent
        points, above for clumped ones.
    dispersion_df : float
        Degrees of freedom of the dispersion: of about 16 quadrats, but no more than n over the
        dispersion, about the number of clusters, leaves after the slopes.
    f, p : float
        F = lr / df / dispersion and its p: the test that allows for clumping.
    direction : str
        Where it is denser: "the upper right", "the edge", ...
    ratio, ratio_low, ratio_high : float
        Density at the densest end of the area over that at the other end, with 95 % limits that
        allow for clumping and for the direction having been chosen by the points.
    """

    kind: TrendKind
    n: int
    origin: tuple[float, float]
    coefficients: NDArray[np.float64]
    standard_errors: NDArray[np.float64]
    lr: float
    df: int
    p_poisson: float
    dispersion: float
    dispersion_df: float
    f: float
    p: float
    direction: str
    ratio: float
    ratio_low: float
    ratio_high: float

    def __post_init__(self) -> None:
        hold_columns(self, ("coefficients", "standard_errors"))

    def __repr__(self) -> str:
        return (
            f"<Trend {self.kind}: denser towards {self.direction}, ratio {self.ratio:.3g}"
            f" ({self.ratio_low:.3g} to {self.ratio_high:.3g}), p = {self.p:.3g}>"
        )

    @property
    def sentence(self) -> str:
        """What the test says, in words."""
        judged = f"p = {self.p:.3f}" if self.p >= 0.001 else "p < 0.001"
        other = _OPPOSITE.get(self.direction, "the opposite end")
        limits = f"{self.ratio:.2g} times as dense as {other}"
        limits += f" ({self.ratio_low:.2g} to {self.ratio_high:.2g})"
        across = "from the middle to the edge" if self.kind == "radial" else "across the area"
        if self.p > LEVEL:
            return f"No gradient of the density {across} found ({judged}, allowing for clumping)."
        return f"A gradient: denser towards {self.direction}, {limits}; {judged}, allowing for clumping."

    def log_density(self, points: ArrayLike) -> NDArray[np.float64]:
        """Return log density at points (n, 2), up to a constant."""
        off = np.asarray(points, dtype=np.float64).reshape(-1, 2) - self.origin
        if self.kind == "radial":
            return np.asarray((off**2).sum(axis=1) * self.coefficients[0])
        return np.asarray(off @ self.coefficients)

    def expected(self, polygons: ArrayLike) -> NDArray[np.float64]:
        """Return the counts expected in polygons that together are the area; they sum to n."""
        rule = quadrature(list(np.asarray(polygons, dtype=object).reshape(-1)))
        slope = self.log_density(rule.nodes)
        mass = rule.integrals(np.exp(slope - slope.max()))
        return np.asarray(self.n * mass / mass.sum())


def assembled(
    kind: TrendKind,
    n: int,
    origin: tuple[float, float],
    unit: float,
    found: Slope,
    partitions: list[tuple[NDArray[np.int64], NDArray[np.float64]]],
    ends: NDArray[np.float64],
) -> Trend:
    """Put a trend together from its slope in covariates of `unit`, and judge it.

    Parameters
    ----------
    kind : {"plane", "radial"}
        Which trend.
    n : int
        Points.
    origin : (x, y)
        Where covariates are 0.
    unit : float
        Length that covariates are measured in.
    found : Slope
        The fit.
    partitions : list of (counts, expected)
        For the dispersion.
    ends : ndarray of shape (m, k)
        Covariates at places among which the ends of the area are.

    Returns
    -------
    Trend

    Examples
    --------
    >>> from analyse.trend_fit import best_slope
    >>> z = np.linspace(-1, 1, 8)[:, None]
    >>> x = np.array([2, 4, 3, 6, 5, 8, 9, 11])
    >>> found = best_slope(z, np.ones(8), (x @ z) / x.sum(), int(x.sum()))
    >>> mass = np.exp(z @ found.slope)
    >>> around = [(x, x.sum() * mass / mass.sum())]
    >>> assembled("plane", 48, (0.0, 0.0), 1.0, found, around, z)
    <Trend plane: denser towards the end, ratio 4.41 (2.71 to 7.18), p = 0.000246>
    """
    df = found.slope.size
    dispersion, of_quadrats = largest_dispersion(partitions, df)
    dispersion_df = min(float(of_quadrats), max(1.0, n / max(1.0, dispersion) - df))
    f = found.lr / df / dispersion
    along = ends @ found.slope
    span = ends[int(np.argmax(along))] - ends[int(np.argmin(along))]
    log_ratio, error = float(along.max() - along.min()), math.sqrt(dispersion)
    error *= math.sqrt(float(span @ found.covariance @ span))
    reach = math.sqrt(df * float(special.fdtri(df, dispersion_df, 1 - LEVEL))) * error
    scale = unit**2 if kind == "radial" else unit
    errors = np.sqrt(dispersion * np.diag(found.covariance))
    return Trend(
        kind,
        n,
        origin,
        found.slope / scale,
        errors / scale,
        found.lr,
        df,
        float(special.chdtrc(df, found.lr)),
        dispersion,
        dispersion_df,
        f,
        float(special.fdtrc(df, dispersion_df, f)),
        direction_words(found.slope, kind),
        math.exp(log_ratio),
        math.exp(log_ratio - reach),
        math.exp(log_ratio + reach),
    )


def direction_words(slope: NDArray[np.float64], kind: TrendKind) -> str:
    """Return where it is denser, in words; y points down.

    Parameters
    ----------
    slope : ndarray of shape (2,) or (1,)
        Along x and y, along a line, or along the squared distance.
    kind : {"plane", "radial"}
        Which trend.

    Returns
    -------
    str

    Examples
    --------
    >>> direction_words(np.array([1.0, -1.0]), "plane"), direction_words(np.array([-1.0]), "radial")
    ('the upper right', 'the middle')
    """
    if kind == "radial":
        return "the edge" if slope[0] > 0 else "the middle"
    if slope.size == 1:
        return "the end" if slope[0] > 0 else "the start"
    turn = math.atan2(slope[1], slope[0]) / (math.pi / 4)
    return _TOWARDS[round(turn) % 8]
