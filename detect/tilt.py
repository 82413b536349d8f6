"""How a dish is tilted against the camera, and what that does to distances on it.

A circle seen aslant from near is an ellipse whose centre is not the circle's: the far half is seen
smaller. In the coordinates in which the ellipse is the unit circle, the true centre lies towards the
far side by sin(tilt) R / D, for a circle of radius R at a distance D from the camera. The ellipse
alone does not tell the far side from the near one; the rim does, for what is higher is shifted away
from the camera. How far away the camera was is not told by either: it is assumed.

References
----------
R. M. Haralick and L. G. Shapiro, "Computer and robot vision", vol. 2 (1993), chapter 13, and
D. A. Forsyth et al., "Invariant descriptors for 3D object recognition and pose", IEEE Trans. Pattern
Analysis and Machine Intelligence 13 (1991) 971-991: the two poses of a circle seen in perspective.
J. Richter-Gebert, "Perspectives on projective geometry" (2011), chapter 25: the projective maps that
leave a circle in place are the motions of a Klein disc.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.rings import Frame

Array = NDArray[Any]

# Distance of the camera in radii of the dish: 8 are 34 cm for a dish of 86 mm. The standard
# uncertainty of its inverse covers cameras from 18 cm (a telephone) to 80 cm (a stand).
RADII_AWAY = 8.0
INVERSE_UNCERTAINTY = 0.05
_RIM_HEIGHT = 0.2  # of a dish's rim over its agar, in radii
_LEAST_HEIGHT = 0.08


def sine_of_tilt(inner: Frame) -> float:
    """Return the sine of the tilt at which a circle is seen as this ellipse."""
    short, long = np.linalg.eigvalsh(inner.matrix)
    return math.sqrt(max(0.0, 1.0 - float(short / long) ** 2))


def far_centre(inner: Frame, rim: Frame, middle: Array) -> tuple[float, float]:
    """Return where a circle's true centre lies within its ellipse seen as the unit circle.

    Parameters
    ----------
    inner : Frame
        The ellipse of the circle.
    rim : Frame
        The ellipse of another circle about the same axis, nearer to the camera.
    middle : ndarray of shape (2,)
        The picture's middle, above which the camera is taken to stand.

    Returns
    -------
    tuple of float
        x and y, as a share of the radius; 0, 0 where no tilt is seen.

    Notes
    -----
    Of the ellipse's flattening only what lies along the rim's shift counts, so that the scatter of
    an ellipse that is nearly a circle makes no tilt. A camera beside the dish shifts the rim as well,
    outwards from the picture's middle, by the rim's height over the distance.
    """
    back = np.linalg.inv(inner.matrix)
    beside = back @ (inner.centre - np.asarray(middle)) * (_RIM_HEIGHT / RADII_AWAY)
    shift = back @ (rim.centre - inner.centre) - beside
    size = float(np.hypot(*shift))
    if size < 1e-6:
        return 0.0, 0.0
    (short, long), vectors = np.linalg.eigh(inner.matrix)
    along = float(np.clip(vectors[:, 0] @ shift / size, -1, 1))
    flat = max(0.0, math.log(long / short) * (2 * along**2 - 1))
    sine = min(math.sqrt(1 - math.exp(-2 * flat)), size / _LEAST_HEIGHT)
    x, y = shift / size * (sine / RADII_AWAY)
    return float(x), float(y)


def onto_circle(far: tuple[float, float]) -> Array:
    """Return the homography that maps the unit circle to itself and its point `far` to the centre.

    Parameters
    ----------
    far : tuple of float
        x and y, less than 1 from the centre.

    Returns
    -------
    ndarray of shape (3, 3)
    """
    size = math.hypot(*far)
    if size < 1e-12:
        return np.eye(3)
    c, s = far[0] / size, far[1] / size
    turn = np.array([[c, s, 0.0], [-s, c, 0.0], [0.0, 0.0, 1.0]])
    push = np.array([[1.0, 0.0, -size], [0.0, math.sqrt(1 - size**2), 0.0], [-size, 0.0, 1.0]])
    return np.asarray(turn.T @ push @ turn)
