"""Measure a lens on photographs of a chessboard."""

from __future__ import annotations

from functools import cache
from pathlib import Path
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.errors import OptionWrong, PhotographUnreadable
from detect.lens import Lens, read_lens
from detect.photograph import Photograph, find_photographs, read_photograph

Points = NDArray[np.float64]

SMALLEST_BOARD = (4, 4)  # inner corners; larger boards are followed as far as they reach
LEAST_REACH = 0.6  # half diagonals: how far from the middle the boards must reach
LONGEST_SIDE = 2400  # of the picture in which the board is looked for


def lens_from(path: Path) -> Lens:
    """Return the lens of a camera, from a file of it or from photographs of a chessboard.

    Parameters
    ----------
    path : Path
        A file such as lens.toml, a photograph of a chessboard, or a folder of them.

    Returns
    -------
    Lens

    Raises
    ------
    OptionWrong
        If the file is no lens, no chessboard is seen, the boards stay near the middle of the
        frame, a photograph cannot be read, or the photographs are of different shapes.
    """
    if path.suffix.lower() == ".toml":
        return read_lens(path)
    paths = tuple(find_photographs(path)) if path.is_dir() else (path,)
    return _measured(tuple((p, p.stat().st_mtime_ns if p.exists() else 0) for p in paths))


@cache
def _measured(paths: tuple[tuple[Path, int], ...]) -> Lens:
    """Measure a lens once for all photographs of a survey."""
    boards, size = [], (0, 0)
    for path, _ in paths:
        try:
            photograph = read_photograph(path)
        except PhotographUnreadable as trouble:
            raise OptionWrong(f"The lens cannot be measured: {trouble}") from trouble
        seen = (
            max(photograph.width, photograph.height),
            min(photograph.width, photograph.height),
        )
        if size not in ((0, 0), seen):
            raise OptionWrong(
                f"The chessboard in {path.name} is on a picture of {seen[0]} x {seen[1]} pixels, the"
                f" others are of {size[0]} x {size[1]}; use whole pictures of one camera."
            )
        size = seen
        board = find_chessboard(photograph)
        boards.append(board if photograph.width == size[0] else _on_its_side(board, size))
    return fit_lens(boards, *size)


def _on_its_side(board: tuple[Points, Points], size: tuple[int, int]) -> tuple[Points, Points]:
    """Turn a board of an upright picture, for the middle of the picture is the centre of the lens."""
    flat, seen = board
    return flat, np.column_stack([seen[:, 1], size[1] - 1 - seen[:, 0]])


def find_chessboard(photograph: Photograph) -> tuple[Points, Points]:
    """Find the inner corners of a chessboard.

    Parameters
    ----------
    photograph : Photograph

    Returns
    -------
    flat, seen : ndarray of shape (n, 2)
        Corners on the board, in squares, and in the photograph, in pixels.

    Raises
    ------
    OptionWrong
        If no chessboard is seen.

    References
    ----------
    A. Duda and U. Frese, "Accurate detection and localization of checkerboard corners for
    calibration", British Machine Vision Conference (2018), as the library implements it.
    """
    factor = min(1.0, LONGEST_SIDE / max(photograph.width, photograph.height))
    grey = np.round(255 * photograph.pixels(shrink=factor).mean(axis=2)).astype(np.uint8)
    flags = cv2.CALIB_CB_LARGER | cv2.CALIB_CB_EXHAUSTIVE | cv2.CALIB_CB_ACCURACY
    found, corners, marks = cv2.findChessboardCornersSBWithMeta(grey, SMALLEST_BOARD, flags)
    if not found:
        raise OptionWrong(
            f"No chessboard is seen in {photograph.name}; photograph a flat board of at least five"
            " by five squares, whole, sharp and filling the frame."
        )
    rows, columns = marks.shape[:2]
    flat = np.stack(np.meshgrid(np.arange(columns), np.arange(rows)), axis=-1).reshape(-1, 2)
    seen = (corners.reshape(-1, 2).astype(np.float64) + 0.5) / factor - 0.5
    return flat.astype(np.float64), seen


def fit_lens(boards: list[tuple[Points, Points]], width: int, height: int) -> Lens:
    """Find the lens that makes chessboards plane.

    Parameters
    ----------
    boards : list of pairs of ndarray of shape (n, 2)
        Corners on each board, and in its photograph.
    width, height : int
        Size of the photographs.

    Returns
    -------
    Lens

    Raises
    ------
    OptionWrong
        If the boards stay near the middle, where no lens bends anything.

    Notes
    -----
    A plane seen through a lens without distortion is a homography of the plane; k1 and k2 are
    those that leave the least squared distance from one homography for each board. Neither the
    focal length nor the boards' poses need be known, so that a single board seen from straight
    above will do; several, over the whole frame, are better.

    References
    ----------
    Z. Zhang, "A flexible new technique for camera calibration", IEEE Transactions on Pattern
    Analysis and Machine Intelligence 22 (2000) 1330-1334: planes seen in several photographs.
    """
    from scipy.optimize import least_squares

    middle, half = np.array([(width - 1) / 2, (height - 1) / 2]), 0.5 * np.hypot(width, height)
    reach = max(float(np.hypot(*(seen - middle).T).max()) for _, seen in boards) / half
    if reach < LEAST_REACH:
        raise OptionWrong(
            f"The chessboard reaches only {100 * reach:.0f} % of the way from the middle of the"
            " picture to its corners; fill the frame with it, or add photographs with the board"
            " in the corners."
        )

    def away(k: NDArray[Any]) -> NDArray[Any]:
        offs = []
        for flat, seen in boards:
            r = np.hypot(*(seen - middle).T) / half
            straight = (seen - middle) * (1 + k[0] * r**2 + k[1] * r**4)[:, None] / half
            offs.append(half * off_a_plane(flat, straight).ravel())
        return np.concatenate(offs)

    k1, k2 = least_squares(away, [0.0, 0.0], x_scale=0.01, diff_step=[1e-3, 1e-3], xtol=1e-12).x
    rms = float(np.sqrt(2 * (away(np.array([k1, k2])) ** 2).mean()))
    return Lens(float(k1), float(k2), width, height, round(rms, 4), len(boards))


def off_a_plane(flat: Points, seen: Points) -> Points:
    """Return how far points (n, 2) lie off the homography of a plane that fits them best, (n, 2).

    The linear solution, its equations weighted thrice so that their errors are those in the picture.
    """
    x, y = ((flat - flat.mean(axis=0)) / np.ptp(flat)).T
    u, v = seen.T
    one, none = np.ones_like(x), np.zeros_like(x)
    rows = np.concatenate(
        [
            np.column_stack([x, y, one, none, none, none, -u * x, -u * y]),
            np.column_stack([none, none, none, x, y, one, -v * x, -v * y]),
        ]
    )
    values, w = np.concatenate([u, v]), np.ones(2 * len(x))
    for _ in range(3):
        h, *_ = np.linalg.lstsq(rows / w[:, None], values / w, rcond=None)
        depth = h[6] * x + h[7] * y + 1
        w = np.concatenate([depth, depth])
    mapped = np.column_stack([h[0] * x + h[1] * y + h[2], h[3] * x + h[4] * y + h[5]])
    return np.asarray(mapped / depth[:, None] - seen)
