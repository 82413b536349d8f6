"""Where on Earth a raster lies, and how large its pixels are on the ground."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from detect.errors import PhotographUnreadable
from detect.scale import Scale

# The ellipsoid of the World Geodetic System 1984 (NIMA TR8350.2, 3rd edition, 2000, table 3.1).
_AXIS_M, _FLATTENING = 6_378_137.0, 1.0 / 298.257223563
# What the heights of the ground above the ellipsoid leave open, up to some 3 km: 3 km / 6371 km.
_HEIGHT_UNCERTAINTY = 0.0005


@dataclass(frozen=True, slots=True, eq=False)
class Georeference:
    """Where on Earth a raster lies.

    Parameters
    ----------
    affine : ndarray of shape (2, 3)
        Map of pixel x, y, 1 (pixel centres at whole numbers) to map coordinates.
    name : str
        The coordinate reference system in words, such as EPSG:32632.
    trouble : str
        Why no lengths can be had from it, with what to do; empty where they can.
    ground : ndarray of shape (2, 2), or None
        Millimetres east and south on the ground per pixel right and down, in the middle.
    factor : float
        Point scale factor of the map projection in the middle: map length over ground length.
    spread : float
        How much that differs over the raster, as a fraction of it.
    """

    affine: NDArray[np.float64]
    name: str
    trouble: str = ""
    ground: NDArray[np.float64] | None = None
    factor: float = 1.0
    spread: float = 0.0

    @property
    def is_named(self) -> bool:
        """Whether its coordinate reference system has a number by which it is looked up."""
        return self.name.startswith("EPSG:")

    def to_map(self, points_px: ArrayLike) -> NDArray[np.float64]:
        """Map (n, 2) pixel positions to map coordinates."""
        points = np.asarray(points_px, dtype=np.float64).reshape(-1, 2)
        return np.asarray(points @ self.affine[:, :2].T + self.affine[:, 2])

    def to_px(self, points_map: ArrayLike) -> NDArray[np.float64]:
        """Map (n, 2) map coordinates to pixel positions."""
        points = np.asarray(points_map, dtype=np.float64).reshape(-1, 2)
        return np.asarray(np.linalg.solve(self.affine[:, :2], (points - self.affine[:, 2]).T).T)

    def scale(self) -> Scale:
        """Return the scale on the ground.

        Returns
        -------
        Scale
            It stretches as the ground does and turns nothing: x stays right and y stays down.

        Raises
        ------
        PhotographUnreadable
            If the georeference gives no lengths.

        Notes
        -----
        Lengths on a map are not those on the ground; pixels are measured on the ellipsoid instead,
        by its radii of curvature [1]_ in the raster's middle. The relative uncertainty adds the
        change of the map's scale over the raster and 0.05 % for heights up to 3 km.

        References
        ----------
        .. [1] Snyder JP (1987). Map projections: a working manual. US Geological Survey
           Professional Paper 1395, section 4.
        """
        if self.trouble or self.ground is None:
            raise PhotographUnreadable(self.trouble)
        # The polar decomposition takes the turn away and keeps the stretch.
        left, stretch, right = np.linalg.svd(self.ground)
        plane = right.T @ np.diag(stretch) @ right
        if np.linalg.det(left @ right) < 0:
            raise PhotographUnreadable(
                "the raster's georeference mirrors it; export it again with north up"
            )
        matrix = np.eye(3)
        matrix[:2, :2] = plane
        side = math.sqrt(float(np.linalg.det(plane)))
        return Scale(
            matrix,
            "georeference",
            math.hypot(_HEIGHT_UNCERTAINTY, self.spread),
            f"the raster's own georeference ({self.name}): {side:.6g} mm per pixel on the ground,"
            f" map lengths divided by the projection's point scale factor of {self.factor:.5f}",
        )


def georeference_of(dataset: Any) -> Georeference | None:
    """Read where a raster lies.

    Parameters
    ----------
    dataset : rasterio dataset

    Returns
    -------
    Georeference or None
        None where the file says nothing about it.
    """
    transform, crs = dataset.transform, dataset.crs
    if transform.is_identity and not crs:
        return None
    corner = np.array([transform[:3], transform[3:6]], dtype=np.float64).reshape(2, 3)
    affine = corner.copy()
    affine[:, 2] += corner[:, :2] @ [0.5, 0.5]  # pixel centres at whole numbers
    middle = np.array([dataset.width - 1, dataset.height - 1]) / 2.0
    if transform.is_identity:
        return Georeference(
            affine, _name(crs), _told("names a map but not where it lies on it; export it again")
        )
    if not crs:
        trouble = _told(
            "has map coordinates, but does not say of which map; assign its coordinate reference"
            " system"
        )
        return Georeference(affine, "unknown map", trouble)
    at = affine[:, :2] @ middle + affine[:, 2]
    if crs.is_geographic:
        zone = utm_zone(*at)
        trouble = _told(
            f"is in degrees ({_name(crs)}), which are no lengths; reproject it to a map in metres,"
            f" here {zone}"
        )
        return Georeference(affine, _name(crs), trouble)
    if not crs.is_projected:
        return Georeference(
            affine,
            _name(crs),
            _told(f"is in {_name(crs)}, which is no map projection; reproject it to one"),
        )
    return _measured(affine, crs, dataset.width, dataset.height)


def utm_zone(longitude: float, latitude: float) -> str:
    """Name the zone of the Universal Transverse Mercator grid (WGS 84) that a place lies in.

    Examples
    --------
    >>> utm_zone(8.5, 47.4)
    'EPSG:32632 (UTM zone 32 north)'
    >>> utm_zone(-70.7, -33.4)
    'EPSG:32719 (UTM zone 19 south)'
    """
    number = min(60, max(1, math.floor((longitude + 180.0) / 6.0) + 1))
    code, half = (32600, "north") if latitude >= 0 else (32700, "south")
    return f"EPSG:{code + number} (UTM zone {number} {half})"


def _told(what: str) -> str:
    return f"the raster's georeference {what}, or give --mm-per-pixel"


def _name(crs: Any) -> str:
    """Name a coordinate reference system as people look it up."""
    code = crs.to_epsg() if crs else None
    if code is not None:
        return f"EPSG:{code}"
    return str(crs.to_wkt()).split('"')[1] if crs else "no map"


def _measured(affine: NDArray[np.float64], crs: Any, width: int, height: int) -> Georeference:
    """Measure pixels on the ellipsoid, in the middle and at the corners."""
    across, down = width - 1.0, height - 1.0
    places = [(across / 2, down / 2), (0, 0), (across, 0), (0, down), (across, down)]
    grounds = [_ground(affine, crs, np.array(place)) for place in places]
    sides = np.sqrt([abs(np.linalg.det(ground)) for ground in grounds])
    if not (np.isfinite(sides).all() and sides.min() > 0):
        trouble = _told(f"({_name(crs)}) does not reach where the raster is said to lie; check it")
        return Georeference(affine, _name(crs), trouble)
    unit_mm = 1000.0 * float(crs.linear_units_factor[1])
    on_map = math.sqrt(abs(float(np.linalg.det(affine[:, :2])))) * unit_mm
    spread = float(np.abs(sides / sides[0] - 1.0).max())
    return Georeference(affine, _name(crs), "", grounds[0], on_map / float(sides[0]), spread)


def _ground(
    affine: NDArray[np.float64], crs: Any, pixel: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Millimetres east and south per pixel right and down, by differences over 100 pixels."""
    from rasterio.warp import transform

    step = 50.0
    around = pixel + step * np.array([[0, 0], [1, 0], [-1, 0], [0, 1], [0, -1]])
    on_map = around @ affine[:, :2].T + affine[:, 2]
    longitude, latitude = (
        np.radians(values) for values in transform(crs, "EPSG:4326", *on_map.T.tolist())
    )
    square = _FLATTENING * (2.0 - _FLATTENING)
    flat = 1.0 - square * math.sin(latitude[0]) ** 2
    north_m = _AXIS_M * (1.0 - square) / flat**1.5
    east_m = _AXIS_M / math.sqrt(flat) * math.cos(latitude[0])
    east = east_m * (longitude[[1, 3]] - longitude[[2, 4]])
    south = -north_m * (latitude[[1, 3]] - latitude[[2, 4]])
    return np.array([east, south]) * (1000.0 / (2.0 * step))
