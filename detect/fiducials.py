"""Square fiducial marks: which are in a photograph, and where."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import cv2
import numpy as np

from detect.errors import ScaleNotFound
from detect.photograph import Photograph
from detect.squares import Square, dark_quads, is_square, reduced_grey, settle_square

DICTIONARY = cv2.aruco.DICT_4X4_50
LONGEST_SIDE = 2400  # of the picture in which marks are read


def read_fiducials(photograph: Photograph) -> dict[int, Square]:
    """Read the fiducial marks of a picture, by their ids.

    Parameters
    ----------
    photograph : Photograph

    Returns
    -------
    dict
        The outer black square of each mark, by its id; its first corner is not the mark's own.

    Raises
    ------
    ScaleNotFound
        If two marks have one id.

    References
    ----------
    S. Garrido-Jurado et al., "Automatic generation and detection of highly reliable fiducial
    markers under occlusion", Pattern Recognition 47 (2014) 2280-2292.
    """
    found: dict[int, Square] = {}
    marks = list(_detected(photograph))
    if len({number for number, _ in marks}) < 4:
        marks += _in_dark_quads(photograph, tuple(square for _, square in marks))
    for number, square in marks:
        known = found.setdefault(number, square)
        if np.hypot(*(known.centre - square.centre)) > known.side_px:
            raise ScaleNotFound(
                f"The fiducial mark {number} is seen twice in {photograph.name}; use four different"
                " ids, or give the corners' positions."
            )
    return found


def _detected(photograph: Photograph) -> Iterator[tuple[int, Square]]:
    """Yield the marks that the library's detector reads."""
    factor = min(1.0, LONGEST_SIDE / max(photograph.width, photograph.height))
    grey = np.round(255 * photograph.pixels(shrink=factor).mean(axis=2)).astype(np.uint8)
    detector = cv2.aruco.ArucoDetector(cv2.aruco.getPredefinedDictionary(DICTIONARY))
    quads, ids, _ = detector.detectMarkers(grey)
    for quad, number in zip(quads, [] if ids is None else ids.ravel(), strict=True):
        corners = np.asarray(quad, dtype=np.float64).reshape(4, 2)
        square = settle_square(photograph, (corners + 0.5) / factor - 0.5)
        if square is not None:
            yield int(number), square


def _in_dark_quads(photograph: Photograph, known: Sequence[Square]) -> Iterator[tuple[int, Square]]:
    """Yield the marks in other dark squares, which a leaf at their edge does not hide."""
    grey, factor = reduced_grey(photograph)
    places = [(square.centre, square.side_px) for square in known]
    dictionary = cv2.aruco.getPredefinedDictionary(DICTIONARY)
    for quad in dark_quads(grey):
        middle = (quad.mean(axis=0) + 0.5) / factor - 0.5
        if not is_square(quad) or any(np.hypot(*(middle - at)) < 0.5 * d for at, d in places):
            continue
        cells = np.array([[0, 0], [48, 0], [48, 48], [0, 48]], dtype=np.float32)
        flat = cv2.warpPerspective(
            grey, cv2.getPerspectiveTransform((quad + 0.5).astype(np.float32), cells), (48, 48)
        )
        means = flat.reshape(6, 8, 6, 8)[:, 2:6, :, 2:6].mean(axis=(1, 3))
        white = means > 0.5 * (means.min() + means.max())
        inner = white[1:5, 1:5]
        if np.ptp(means) < 40 or white.sum() > inner.sum():
            continue
        read, number, _ = dictionary.identify(inner.astype(np.uint8), 0.0)
        square = settle_square(photograph, (quad + 0.5) / factor - 0.5) if read else None
        if square is not None:
            places.append((square.centre, square.side_px))
            yield int(number), square
