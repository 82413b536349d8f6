"""Felt-pen writing: a few letters and figures as wobbling strokes."""

from __future__ import annotations

import numpy as np
from texture import Points, smooth_line

# Each sign is a list of strokes on a unit square, y down.
SIGNS: dict[str, list[list[tuple[float, float]]]] = {
    "0": [
        [(0.5, 0.02), (0.15, 0.35), (0.2, 0.85), (0.5, 1.0), (0.82, 0.7), (0.78, 0.2), (0.48, 0.03)]
    ],
    "1": [[(0.3, 0.25), (0.55, 0.0), (0.53, 0.5), (0.52, 1.0)]],
    "2": [
        [
            (0.15, 0.25),
            (0.45, 0.0),
            (0.75, 0.25),
            (0.5, 0.65),
            (0.12, 1.0),
            (0.5, 0.96),
            (0.85, 0.97),
        ]
    ],
    "3": [
        [(0.2, 0.1), (0.6, 0.02), (0.7, 0.28), (0.4, 0.47), (0.75, 0.66), (0.6, 0.96), (0.15, 0.92)]
    ],
    "4": [
        [(0.55, 0.0), (0.35, 0.35), (0.1, 0.65), (0.5, 0.64), (0.9, 0.62)],
        [(0.65, 0.4), (0.63, 0.7), (0.62, 1.0)],
    ],
    "5": [
        [
            (0.75, 0.03),
            (0.3, 0.05),
            (0.24, 0.42),
            (0.6, 0.42),
            (0.75, 0.7),
            (0.5, 0.98),
            (0.15, 0.9),
        ]
    ],
    "6": [
        [(0.65, 0.0), (0.3, 0.35), (0.2, 0.75), (0.5, 1.0), (0.75, 0.75), (0.5, 0.55), (0.24, 0.72)]
    ],
    "7": [[(0.12, 0.05), (0.5, 0.04), (0.85, 0.04), (0.55, 0.5), (0.4, 1.0)]],
    "8": [
        [
            (0.5, 0.46),
            (0.22, 0.25),
            (0.5, 0.0),
            (0.75, 0.22),
            (0.48, 0.47),
            (0.18, 0.76),
            (0.5, 1.0),
            (0.8, 0.75),
            (0.5, 0.46),
        ]
    ],
    "/": [[(0.75, -0.05), (0.5, 0.5), (0.25, 1.08)]],
    "-": [[(0.15, 0.55), (0.45, 0.53), (0.8, 0.54)]],
    "A": [
        [(0.1, 1.0), (0.3, 0.5), (0.5, 0.0), (0.7, 0.5), (0.9, 1.0)],
        [(0.25, 0.65), (0.5, 0.63), (0.78, 0.64)],
    ],
    "B": [
        [(0.2, 0.0), (0.19, 0.5), (0.2, 1.0)],
        [
            (0.2, 0.02),
            (0.65, 0.08),
            (0.6, 0.42),
            (0.24, 0.5),
            (0.75, 0.62),
            (0.65, 0.95),
            (0.2, 1.0),
        ],
    ],
    "M": [[(0.05, 1.0), (0.15, 0.0), (0.48, 0.7), (0.82, 0.0), (0.95, 1.0)]],
    "T": [[(0.1, 0.03), (0.5, 0.02), (0.9, 0.0)], [(0.5, 0.02), (0.52, 0.5), (0.5, 1.0)]],
}
ADVANCE = {"1": 0.6, "/": 0.75, "-": 0.8, " ": 0.7, "M": 1.15}


def written(
    text: str, rng: np.random.Generator, *, height_mm: float
) -> list[tuple[Points, Points]]:
    """Write `text` from the origin rightwards; give strokes as (points in mm, relative widths)."""
    strokes: list[tuple[Points, Points]] = []
    at = 0.0
    for sign in text:
        if sign not in SIGNS and sign != " ":
            raise ValueError(
                f"The sign {sign!r} cannot be written; use {''.join(sorted(SIGNS))} and the space."
            )
        lift, size = rng.normal(0, 0.05), rng.uniform(0.9, 1.1)
        for shape in SIGNS.get(sign, []):
            nodes = np.asarray(shape) + rng.normal(0, 0.025, (len(shape), 2))
            nodes[:, 0] = nodes[:, 0] * 0.72 - 0.12 * nodes[:, 1]
            line = smooth_line(nodes * size, samples=14 * len(shape))
            line = (line + np.array([at, lift])) * height_mm
            pressure = 1 + 0.12 * np.cumsum(rng.normal(0, 0.25, len(line)))
            strokes.append((line, np.clip(pressure, 0.75, 1.35)))
        at += ADVANCE.get(sign, 0.92) * rng.uniform(0.92, 1.08)
    return strokes
