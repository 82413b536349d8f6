"""Where things of the scene land in the photograph: a pinhole camera above a level plane.

The scene is measured in millimetres: x right, y down, z up from the plane towards the camera. Pixel
centres lie at whole numbers, the first at (0, 0).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Points = npt.NDArray[np.float64]
Layer = npt.NDArray[np.float32]


@dataclass(frozen=True, slots=True, kw_only=True)
class Ellipse:
    """An ellipse in pixels; ``angle_deg`` turns the x axis towards the long half axis."""

    cx: float
    cy: float
    semi_a: float
    semi_b: float
    angle_deg: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Camera:
    """A camera looking at the origin of the scene.

    Parameters
    ----------
    width, height
        Size of the photograph in pixels.
    px_per_mm
        Pixels per millimetre at the origin of the scene, square to the line of sight.
    distance_mm
        From the lens to the origin.
    tilt_deg, towards_deg
        How far the camera stands off the vertical, and in which direction of the scene.
    roll_deg
        Turn of the camera about its own line of sight.
    aim_x, aim_y
        Where the origin lands, in pixels from the middle of the photograph.
    """

    width: int
    height: int
    px_per_mm: float
    distance_mm: float
    tilt_deg: float = 0.0
    towards_deg: float = 90.0
    roll_deg: float = 0.0
    aim_x: float = 0.0
    aim_y: float = 0.0

    def __post_init__(self) -> None:
        if min(self.width, self.height, self.px_per_mm, self.distance_mm) <= 0:
            raise ValueError(
                "A camera needs a positive size, scale and distance; give all four above zero."
            )
        if not 0 <= self.tilt_deg < 45:
            raise ValueError(f"The tilt is {self.tilt_deg} degrees; give one from 0 to below 45.")

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of the photograph."""
        return self.height, self.width

    def plane(self, z_mm: float = 0.0) -> Points:
        """Give the homography from millimetres on the plane at height `z_mm` to pixels, (3, 3)."""
        tilt, towards, roll = (
            math.radians(a) for a in (self.tilt_deg, self.towards_deg, self.roll_deg)
        )
        lean = np.array([math.cos(towards), math.sin(towards), 0.0])
        up = np.array([0.0, 0.0, 1.0])
        line = math.sin(tilt) * lean + math.cos(tilt) * up

        def tipped(axis: Points) -> Points:
            along = float(axis @ lean)
            turned = math.cos(tilt) * lean - math.sin(tilt) * up
            return np.asarray(axis - along * lean + along * turned)

        right, down = tipped(np.array([1.0, 0.0, 0.0])), tipped(np.array([0.0, 1.0, 0.0]))
        c, s = math.cos(roll), math.sin(roll)
        rows = np.stack([c * right + s * down, c * down - s * right, -line])
        focal = self.px_per_mm * self.distance_mm
        lens = np.array(
            [
                [focal, 0.0, (self.width - 1) / 2 + self.aim_x],
                [0.0, focal, (self.height - 1) / 2 + self.aim_y],
                [0.0, 0.0, 1.0],
            ]
        )
        start = z_mm * up - self.distance_mm * line
        columns = np.stack([rows[:, 0], rows[:, 1], rows @ start], axis=1)
        return np.asarray(lens @ columns)

    def to_pixels(self, points_mm: Points, *, z_mm: float = 0.0) -> Points:
        """Map (n, 2) millimetres on the plane at `z_mm` to (n, 2) pixels."""
        return apply(self.plane(z_mm), points_mm)

    def to_mm(self, points_px: Points, *, z_mm: float = 0.0) -> Points:
        """Map (n, 2) pixels to (n, 2) millimetres on the plane at `z_mm`."""
        return apply(np.asarray(np.linalg.inv(self.plane(z_mm)), dtype=np.float64), points_px)

    def grid(self, z_mm: float = 0.0) -> tuple[Layer, Layer]:
        """Give for every pixel the x and y, in mm, of the plane at `z_mm` it looks at."""
        back = np.linalg.inv(self.plane(z_mm))
        u = np.arange(self.width, dtype=np.float64)[None, :]
        v = np.arange(self.height, dtype=np.float64)[:, None]
        w = back[2, 0] * u + back[2, 1] * v + back[2, 2]
        x = (back[0, 0] * u + back[0, 1] * v + back[0, 2]) / w
        y = (back[1, 0] * u + back[1, 1] * v + back[1, 2]) / w
        return x.astype(np.float32), y.astype(np.float32)

    def px_per_mm_at(self, points_mm: Points, *, z_mm: float = 0.0) -> Points:
        """Give the square root of the local magnification of area at (n, 2) points, (n,) px per mm."""
        h = self.plane(z_mm)
        w = points_mm[:, 0] * h[2, 0] + points_mm[:, 1] * h[2, 1] + h[2, 2]
        return np.asarray(np.sqrt(np.abs(np.linalg.det(h) / w**3)))

    def circle(self, radius_mm: float, *, z_mm: float = 0.0) -> Ellipse:
        """Give the ellipse that a circle about the z axis becomes in the photograph."""
        back = np.linalg.inv(self.plane(z_mm))
        conic = back.T @ np.diag([1.0, 1.0, -(radius_mm**2)]) @ back
        quadratic, linear = conic[:2, :2], conic[:2, 2]
        centre = -np.linalg.solve(quadratic, linear)
        level = -(conic[2, 2] + linear @ centre)
        values, vectors = np.linalg.eigh(quadratic / level)
        semi = 1 / np.sqrt(values)
        angle = math.degrees(math.atan2(vectors[1, 0], vectors[0, 0])) % 180
        return Ellipse(
            cx=float(centre[0]),
            cy=float(centre[1]),
            semi_a=float(semi[0]),
            semi_b=float(semi[1]),
            angle_deg=angle,
        )

    def shrunk(self, factor: float) -> Camera:
        """Give the same view in fewer pixels, for quick looks and tests."""
        return Camera(
            width=round(self.width * factor),
            height=round(self.height * factor),
            px_per_mm=self.px_per_mm * factor,
            distance_mm=self.distance_mm,
            tilt_deg=self.tilt_deg,
            towards_deg=self.towards_deg,
            roll_deg=self.roll_deg,
            aim_x=self.aim_x * factor,
            aim_y=self.aim_y * factor,
        )


def apply(homography: Points, points: Points) -> Points:
    """Map (n, 2) points by a (3, 3) homography."""
    mapped = np.column_stack([points, np.ones(len(points))]) @ homography.T
    return np.asarray(mapped[:, :2] / mapped[:, 2:])
