"""Does the density rise towards one side, the edge or the middle; a gradient told from clumping."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry.base import BaseGeometry

from analyse.errors import TrendNotFound
from analyse.grid_options import GridOptions
from analyse.nulls import CompleteRandomness
from analyse.quadrats import Grid, count_in_quadrats, lay_grid
from analyse.quadrature import Quadrature, quadrature
from analyse.trend_fit import PARTITIONS, best_slope
from analyse.trend_record import Trend as Trend
from analyse.trend_record import TrendKind as TrendKind
from analyse.trend_record import assembled
from detect.lengths import Length

_TRIES_AT_ONCE = 1_000_000
_JOIN = 0.5  # clipped quadrats smaller than this share are joined: quadrats of about one size


def fit_trend(
    points: ArrayLike,
    area: BaseGeometry,
    *,
    kind: TrendKind = "plane",
    centre: tuple[float, float] | None = None,
) -> Trend:
    """Fit a log-linear trend to the density of points, and test it.

    Parameters
    ----------
    points : array_like of shape (n, 2)
        Points in the area; at least 1.
    area : shapely Polygon or MultiPolygon
        Study area, in the unit of the points; may have holes.
    kind : {"plane", "radial"}
        Log density linear in x and y, or in the squared distance from a centre.
    centre : (x, y) or None
        Of a radial trend; None for the middle (centroid) of the area.

    Returns
    -------
    Trend

    Raises
    ------
    TrendNotFound
        If there are no points, or all lie so near one end that no slope fits.

    Notes
    -----
    The points are an inhomogeneous Poisson process, fitted by its exact likelihood: no quadrats
    are chosen, and nothing is lost by counting. A log density linear in the squared distance has
    no kink at the centre, and its one slope is the log ratio of the densities at edge and middle.

    Points in clusters without any gradient make the likelihood ratio test reject far too often. So
    the dispersion of counts around the fitted trend is estimated by Pearson's X2 over its degrees
    of freedom, and F = lr / df / dispersion is referred to the F distribution. It is the largest of
    the dispersions in about 9, 16 and 36 quadrats, with the degrees of freedom of the 16, or fewer
    where n over the dispersion, about the number of clusters, is smaller. Clusters wider than about
    a third of the area look like gradients, and are called one in about 10 % instead of 5 %.

    The limits of the ratio are Scheffe's: they hold in all directions at once, so also in that
    which the points chose.

    References
    ----------
    Cox, D. R. (1972). The statistical analysis of dependencies in point processes. In: Lewis,
    P. A. W. (ed.), Stochastic Point Processes, Wiley, 55-66. Berman, M. and Turner, T. R. (1992).
    Approximating point process likelihoods with GLIM. Applied Statistics 41, 31-38. McCullagh, P.
    and Nelder, J. A. (1989). Generalized Linear Models, 2nd edition, chapters 6 and 9. Chapman
    and Hall. Scheffe, H. (1959). The Analysis of Variance, section 3.5. Wiley.

    Examples
    --------
    >>> import shapely
    >>> xy = np.random.default_rng(3).random((300, 2)) ** [0.5, 1.0]
    >>> fit_trend(xy, shapely.box(0, 0, 1, 1)).direction
    'the right'
    """
    return TrendModel.of(area, kind=kind, centre=centre).fit(points)


@dataclass(frozen=True, slots=True, eq=False)
class TrendModel:
    """What a trend in one area needs, prepared once for many patterns.

    Parameters
    ----------
    area : shapely geometry
        Study area.
    kind : {"plane", "radial"}
        Which trend.
    origin : (x, y)
        Middle of the area, or the centre of a radial trend.
    whole : Quadrature
        Of the area.
    grids : tuple of (Grid, Quadrature)
        Coarse quadrats for the dispersion.

    Examples
    --------
    >>> TrendModel.of(shapely.box(0, 0, 100, 80))
    <TrendModel plane in an area of 8000>
    """

    area: BaseGeometry
    kind: TrendKind
    origin: tuple[float, float]
    whole: Quadrature
    grids: tuple[tuple[Grid, Quadrature], ...]

    def __repr__(self) -> str:
        return f"<TrendModel {self.kind} in an area of {self.area.area:.4g}>"

    @classmethod
    def of(
        cls,
        area: BaseGeometry,
        *,
        kind: TrendKind = "plane",
        centre: tuple[float, float] | None = None,
    ) -> TrendModel:
        """Prepare a trend in an area; see `fit_trend`."""
        middle = area.centroid
        origin = (middle.x, middle.y) if centre is None else centre
        grids = []
        for quadrats in PARTITIONS:
            side = Length(math.sqrt(area.area / quadrats), "mm")
            grid = lay_grid(area, 1, GridOptions(side=side, join_below=_JOIN))
            grids.append((grid, quadrature(grid.polygons)))
        return cls(area, kind, origin, quadrature([area]), tuple(grids))

    def fit(self, points: ArrayLike) -> Trend:
        """Fit the trend to points in the area; see `fit_trend`."""
        xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
        unit = math.sqrt(self.area.area)

        def covariates(places: NDArray[np.float64]) -> NDArray[np.float64]:
            return _covariates((places - self.origin) / unit, self.kind)

        if not len(xy):
            raise TrendNotFound("Without points there is no slope of the density.")
        mean = covariates(xy).mean(axis=0)
        found = best_slope(covariates(self.whole.nodes), self.whole.weights, mean, len(xy))
        partitions = [
            (
                count_in_quadrats(xy, grid),
                _shared(rule, covariates(rule.nodes) @ found.slope, len(xy)),
            )
            for grid, rule in self.grids
        ]
        ends = covariates(_ends(self.area, self.origin, self.kind))
        return assembled(self.kind, len(xy), self.origin, unit, found, partitions, ends)


def _shared(rule: Quadrature, slope: NDArray[np.float64], n: int) -> NDArray[np.float64]:
    """Return the expected counts of polygons under a slope."""
    mass = rule.integrals(np.exp(slope - slope.max()))
    return np.asarray(n * mass / mass.sum())


def _covariates(places: NDArray[np.float64], kind: TrendKind) -> NDArray[np.float64]:
    """Return what log density is linear in."""
    if kind == "plane":
        return places
    return np.asarray((places**2).sum(axis=1, keepdims=True))


def _ends(area: BaseGeometry, origin: tuple[float, float], kind: TrendKind) -> NDArray[np.float64]:
    """Return places among which a trend is highest and lowest: corners, and the nearest to a centre."""
    corners = shapely.get_coordinates(area)
    if kind == "plane":
        return corners
    near = area.distance(shapely.Point(origin))
    return np.vstack([corners, [origin[0] + near, origin[1]]])  # only its distance counts


@dataclass(frozen=True, slots=True, eq=False)
class TrendRandomness:
    """Points placed independently with the density of a fitted trend: the null beyond a gradient.

    Parameters
    ----------
    area : shapely Polygon or MultiPolygon
        Any polygon, with holes.
    trend : Trend
        As fitted in the area.

    Notes
    -----
    A point is drawn uniformly in the area and kept with the chance that its density is of the
    area's highest, which is exact: the density is highest at a corner of the area, or for a
    radial trend at its place nearest to the centre.

    References
    ----------
    Lewis, P. A. W. and Shedler, G. S. (1979). Simulation of nonhomogeneous Poisson processes by
    thinning. Naval Research Logistics Quarterly 26, 403-413.

    Examples
    --------
    >>> import shapely
    >>> xy = np.random.default_rng(3).random((300, 2)) ** [0.5, 1.0]
    >>> square = shapely.box(0, 0, 1, 1)
    >>> null = TrendRandomness(square, fit_trend(xy, square))
    >>> null.name, null.draw(5, np.random.default_rng(1)).shape
    ('plane trend', (5, 2))
    """

    area: BaseGeometry
    trend: Trend
    name: str = field(init=False)
    _top: float = field(init=False)
    _share: float = field(init=False)
    _even: CompleteRandomness = field(init=False)

    def __post_init__(self) -> None:
        trend = self.trend
        top = float(trend.log_density(_ends(self.area, trend.origin, trend.kind)).max())
        rule = quadrature([self.area])
        kept = float(rule.integrals(np.exp(trend.log_density(rule.nodes) - top))[0])
        object.__setattr__(self, "name", f"{trend.kind} trend")
        object.__setattr__(self, "_top", top)
        object.__setattr__(self, "_even", CompleteRandomness(self.area))
        object.__setattr__(self, "_share", kept / self.area.area)

    def __repr__(self) -> str:
        return (
            f"<TrendRandomness denser towards {self.trend.direction}, ratio {self.trend.ratio:.3g}>"
        )

    def draw(self, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
        """Return exactly n points, (n, 2), in the unit of the area; ValueError if n is negative."""
        if n < 0:
            raise ValueError(f"the number of points must be 0 or more, not {n}")
        found, missing = [np.empty((0, 2))], n
        while missing > 0:
            tries = min(_TRIES_AT_ONCE, math.ceil(missing / self._share * 1.1) + 8)
            xy = self._even.draw(tries, rng)
            kept = np.log(rng.random(tries)) < self.trend.log_density(xy) - self._top
            found.append(xy[kept][:missing])
            missing -= len(found[-1])
        return np.concatenate(found)
