"""Natural irregularity: clouds, grain, cells, threads and thin strokes as float32 layers."""

from __future__ import annotations

import cv2
import numpy as np
import numpy.typing as npt
from scipy import fft
from scipy.spatial import cKDTree

Layer = npt.NDArray[np.float32]
Points = npt.NDArray[np.float64]
Shape = tuple[int, int]


def soft(image: Layer, sigma: float) -> Layer:
    """Blur a layer by a Gaussian of `sigma` pixels."""
    if sigma <= 0.05:
        return image
    if sigma > 12:  # a wide blur is as good on a small copy
        factor = 4.0 / sigma
        small = resized(
            image, (max(4, round(image.shape[0] * factor)), max(4, round(image.shape[1] * factor)))
        )
        return resized(soft(small, sigma * factor), (image.shape[0], image.shape[1]))
    return np.asarray(
        cv2.GaussianBlur(image, (0, 0), sigma, borderType=cv2.BORDER_REFLECT), dtype=np.float32
    )


def resized(image: Layer, shape: Shape) -> Layer:
    """Bring a layer to `shape` (rows, columns), averaging when it shrinks."""
    shrinks = shape[0] * shape[1] < image.shape[0] * image.shape[1]
    how = cv2.INTER_AREA if shrinks else cv2.INTER_CUBIC
    return np.asarray(cv2.resize(image, (shape[1], shape[0]), interpolation=how), dtype=np.float32)


def moved(image: Layer, dx: float, dy: float) -> Layer:
    """Shift a layer by a fraction of pixels, repeating its border."""
    matrix = np.array([[1.0, 0.0, dx], [0.0, 1.0, dy]])
    size = (image.shape[1], image.shape[0])
    return np.asarray(
        cv2.warpAffine(
            image, matrix, size, flags=cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE
        ),
        dtype=np.float32,
    )


def sampled(image: Layer, x: Layer, y: Layer) -> Layer:
    """Read a layer at the pixel positions x, y (both of the result's shape)."""
    return np.asarray(
        cv2.remap(image, x, y, cv2.INTER_LINEAR, borderMode=cv2.BORDER_REFLECT), dtype=np.float32
    )


def step(low: float, high: float, values: Layer) -> Layer:
    """Rise smoothly from 0 at `low` to 1 at `high` (falls when low > high)."""
    t = np.clip((values - np.float32(low)) / np.float32(high - low), 0, 1)
    return np.asarray(t * t * (3 - 2 * t), dtype=np.float32)


def cloud(shape: Shape, rng: np.random.Generator, *, size: float, slope: float = 1.6) -> Layer:
    """Draw a cloudy layer of mean 0 and variance 1.

    Parameters
    ----------
    shape
        Rows and columns.
    rng
        Source of randomness.
    size
        Greatest size of its features in pixels; above it the spectrum is flat.
    slope
        How fast amplitude falls with frequency; 1 is rough, 3 is smooth.

    Returns
    -------
    Layer
        The layer, float32.
    """
    shrink = max(1.0, size / 160.0) if slope >= 2.4 else 1.0
    rows, columns = (int(np.ceil(n / shrink)) + 8 for n in shape)
    big = (
        fft.next_fast_len(rows + rows // 8),
        fft.next_fast_len(columns + columns // 8, real=True),
    )
    white = rng.standard_normal(big, dtype=np.float32)
    fy = fft.fftfreq(big[0]).astype(np.float32)[:, None]
    fx = fft.rfftfreq(big[1]).astype(np.float32)[None, :]
    knee = shrink / size
    weight = (fx * fx + fy * fy + knee * knee) ** (-slope / 2)
    layer = fft.irfft2(fft.rfft2(white) * weight, s=big)[:rows, :columns].astype(np.float32)
    if shrink > 1:
        layer = resized(np.ascontiguousarray(layer), shape)
    layer = layer[: shape[0], : shape[1]]
    return np.ascontiguousarray((layer - layer.mean()) / (layer.std() + 1e-9), dtype=np.float32)


def grain(shape: Shape, rng: np.random.Generator, *, sigma: float) -> Layer:
    """Draw Gaussian noise blurred by `sigma` pixels, brought back to variance 1."""
    layer = soft(rng.standard_normal(shape, dtype=np.float32), sigma)
    return np.asarray(layer / (layer.std() + 1e-9), dtype=np.float32)


def cells(
    shape: Shape, rng: np.random.Generator, *, spacing: float, warp: float, shrink: float = 2.0
) -> Layer:
    """Draw the walls of irregular cells: distance in pixels to the nearest wall, about.

    Parameters
    ----------
    shape
        Rows and columns.
    rng
        Source of randomness.
    spacing
        Mean distance of cells in pixels.
    warp
        How far walls are bent, in pixels.
    shrink
        Drawn on a grid this much coarser, then enlarged.

    Returns
    -------
    Layer
        Half the difference between the distances to the two nearest seeds.
    """
    rows, columns = (int(np.ceil(n / shrink)) for n in shape)
    step_px = spacing / shrink
    gy, gx = np.mgrid[-2 : rows / step_px + 2, -2 : columns / step_px + 2]
    seeds = np.column_stack([gx.ravel(), gy.ravel()]) + rng.uniform(-0.48, 0.48, (gx.size, 2))
    y, x = np.mgrid[0:rows, 0:columns].astype(np.float32)
    bend = warp / shrink
    x = x + bend * cloud((rows, columns), rng, size=step_px, slope=1.8)
    y = y + bend * cloud((rows, columns), rng, size=step_px, slope=1.8)
    found, _ = cKDTree(seeds * step_px).query(np.column_stack([x.ravel(), y.ravel()]), k=2)
    near = np.asarray(found, dtype=np.float64)
    wall = ((near[:, 1] - near[:, 0]) * 0.5 * shrink).reshape(rows, columns).astype(np.float32)
    return resized(wall, shape)


def smooth_line(points: Points, *, samples: int) -> Points:
    """Give `samples` points of a smooth curve through (n, 2) points (Catmull-Rom)."""
    ends = np.vstack([2 * points[0] - points[1], points, 2 * points[-1] - points[-2]])
    t = np.linspace(0, len(points) - 1 - 1e-9, samples)
    k = t.astype(int)
    f = (t - k)[:, None]
    a, b, c, d = ends[k], ends[k + 1], ends[k + 2], ends[k + 3]
    return np.asarray(
        0.5
        * (
            2 * b
            + (c - a) * f
            + (2 * a - 5 * b + 4 * c - d) * f**2
            + (3 * b - a - 3 * c + d) * f**3
        )
    )


def stroke(layer: Layer, line: Points, width: Points | float, value: float) -> None:
    """Draw a line of changing width (px, full width) into `layer` in place, with soft ends and edges."""
    widths = np.broadcast_to(np.asarray(width, dtype=np.float64), (len(line),))
    reach = float(widths.max()) / 2 + 2
    x0, y0 = np.floor(line.min(axis=0) - reach).astype(int)
    x1, y1 = np.ceil(line.max(axis=0) + reach).astype(int) + 1
    x0, y0, x1, y1 = max(x0, 0), max(y0, 0), min(x1, layer.shape[1]), min(y1, layer.shape[0])
    if x1 <= x0 or y1 <= y0:
        return
    fine = 4
    canvas = np.zeros(((y1 - y0) * fine, (x1 - x0) * fine), dtype=np.uint8)
    at = np.round(((line - (x0, y0)) * fine + (fine - 1) / 2) * 16).astype(int)
    for a, b, w in zip(at[:-1], at[1:], widths, strict=False):
        ends = (int(a[0]), int(a[1])), (int(b[0]), int(b[1]))
        cv2.line(canvas, ends[0], ends[1], 255, max(1, round(w * fine)), cv2.LINE_AA, 4)
    cover = (
        np.asarray(
            cv2.resize(canvas, (x1 - x0, y1 - y0), interpolation=cv2.INTER_AREA), dtype=np.float32
        )
        / 255
    )
    scale = min(1.0, float(widths.mean()) * fine)
    view = layer[y0:y1, x0:x1]
    np.maximum(view, cover * np.float32(value * scale), out=view)
