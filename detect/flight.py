"""How large the ground under a pixel is, from the height of the camera and its lens."""

from __future__ import annotations

import math

import numpy as np

from detect.errors import OptionWrong
from detect.scale import Scale

# Of the height a drone or a pole tells, and so of every length: a drone reckons it from the air
# pressure since take-off, and the ground is not level. Our own choice; a measured height is better.
HEIGHT_UNCERTAINTY = 0.05


def scale_from_height(
    height_mm: float,
    focal_length_mm: float,
    sensor_width_mm: float,
    *,
    longer_side_px: int,
    height_uncertainty: float = HEIGHT_UNCERTAINTY,
) -> Scale:
    """Take the scale from the height of a camera that looked straight down.

    Parameters
    ----------
    height_mm : float
        From the lens to the plane of the objects.
    focal_length_mm : float
        True focal length of the lens (not the one "equivalent to 35 mm").
    sensor_width_mm : float
        Longer side of the sensor.
    longer_side_px : int
        Longer side of the whole photograph, which lies along the sensor's whichever way up the
        picture is; a cropped picture would give a wrong scale.
    height_uncertainty : float
        Standard uncertainty of the height, as a fraction of it.

    Returns
    -------
    Scale
        height x sensor / (focal length x longer side) millimetres per pixel everywhere. Its
        relative uncertainty is that of the height.

    Raises
    ------
    OptionWrong
        If a length is not positive, or the height is not beyond the focal length.

    References
    ----------
    P. R. Wolf, B. A. Dewitt and B. E. Wilkinson, "Elements of photogrammetry with applications in
    GIS", 4th ed. (2014), chapter 6: the scale of a vertical photograph over level ground is focal
    length over height (cited from memory).

    Examples
    --------
    >>> scale = scale_from_height(30_000, 8.8, 13.2, longer_side_px=5472)
    >>> round(float(scale.mm_per_px([[0, 0]])[0]), 3)
    8.224
    """
    for name, value in (
        ("height", height_mm),
        ("focal length", focal_length_mm),
        ("sensor's width", sensor_width_mm),
    ):
        if not (math.isfinite(value) and value > 0):
            raise OptionWrong(f"The {name} must be a positive number of mm, not {value:g}.")
    if height_mm <= 10 * focal_length_mm:
        raise OptionWrong(
            f"A height of {height_mm:g} mm is too near for a focal length of {focal_length_mm:g} mm"
            " to tell the scale; give the height with its unit, or a known length instead."
        )
    mm_per_px = height_mm * sensor_width_mm / (focal_length_mm * longer_side_px)
    note = (
        f"{height_mm / 1000:g} m above the ground, focal length {focal_length_mm:g} mm,"
        f" sensor {sensor_width_mm:g} mm wide"
    )
    return Scale(np.diag([mm_per_px, mm_per_px, 1.0]), "height", height_uncertainty, note)
