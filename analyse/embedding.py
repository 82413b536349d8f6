"""Figures and photographs as bytes that fit into one file: small, sharp, the same every time."""

from __future__ import annotations

import base64
import re
from typing import TYPE_CHECKING

import cv2
import numpy as np

from analyse.figures import svg_text
from detect.photograph import Photograph

if TYPE_CHECKING:
    from matplotlib.figure import Figure

LONGEST_SIDE = 1400
_BEST_QUALITY, _LEAST_QUALITY = 82, 58
_MOST_BYTES = 350_000
_FONTS = (
    "system-ui, -apple-system, 'Segoe UI', 'Helvetica Neue', Arial, 'Liberation Sans', sans-serif"
)


def svg_bytes(figure: Figure) -> bytes:
    """Return a figure as SVG, the same bytes for the same figure.

    Parameters
    ----------
    figure : matplotlib Figure
        Drawn under `analyse.figures.STYLE`.

    Returns
    -------
    bytes
        Without date, program name, document type and names that nothing refers to; coordinates to
        a hundredth of a point; text stays text and is set in the reader's own system font.
    """
    text = re.sub(r"<!DOCTYPE.*?>\n?|<!--.*?-->\n?", "", svg_text(figure), flags=re.DOTALL)
    text = re.sub(r'(?<= d=")[^"]*', lambda path: _rounded(path[0]), text)
    text = re.sub(r"'DejaVu Sans'(?:, [^;\"]*)?(?=[;\"])", _FONTS, text)
    return _tightened(text).encode("utf-8")


def photograph_jpeg(photograph: Photograph, *, longest_side: int = LONGEST_SIDE) -> bytes:
    """Return a photograph as a small JPEG.

    Parameters
    ----------
    photograph : Photograph
        Any size and depth.
    longest_side : int
        Pixels of the longer side at most; a smaller photograph keeps its size.

    Returns
    -------
    bytes
        Quality 82, or lower (58 at least) where a rough texture would take more than 350 kB.
    """
    shrink = min(1.0, longest_side / max(photograph.width, photograph.height))
    pixels = np.round(photograph.pixels(shrink=shrink, quick=True) * 255.0).astype(np.uint8)
    for quality in range(_BEST_QUALITY, _LEAST_QUALITY - 1, -6):
        settings = [cv2.IMWRITE_JPEG_QUALITY, quality, cv2.IMWRITE_JPEG_OPTIMIZE, 1]
        done, encoded = cv2.imencode(".jpg", cv2.cvtColor(pixels, cv2.COLOR_RGB2BGR), settings)
        if not done:
            raise RuntimeError("the JPEG encoder refused an ordinary picture")
        if encoded.size <= _MOST_BYTES:
            break
    return encoded.tobytes()


def data_uri(data: bytes) -> str:
    """Return a picture as the address of itself, for a page that asks for nothing outside."""
    kind = "image/jpeg" if data.startswith(b"\xff\xd8") else "image/svg+xml"
    return f"data:{kind};base64,{base64.b64encode(data).decode('ascii')}"


def _rounded(path: str) -> str:
    """Round the coordinates of a path to two decimals."""
    return re.sub(
        r"-?\d+\.\d+", lambda number: f"{float(number[0]):.2f}".rstrip("0").rstrip("."), path
    )


def _tightened(text: str) -> str:
    """Return the same drawing in fewer bytes: one rule for the font, no idle names, turns or spaces."""
    text = text.replace(f"font-family: {_FONTS}; ", "").replace(f"; font-family: {_FONTS}", "")
    text = text.replace("</style>", f" text{{font-family: {_FONTS}}}</style>", 1)
    named = set(re.findall(r"#([\w.-]+)", text))
    text = re.sub(r' id="([^"]*)"', lambda name: name[0] if name[1] in named else "", text)
    text = re.sub(r' transform="rotate\(-?0 [^"]*\)"', "", text)
    text = re.sub(r' (?:x|y)="[^"]*', lambda place: _rounded(place[0]), text)
    text = re.sub(r'(?<= d=")[^"]*', lambda path: re.sub(r"\s*([A-Za-z])\s*", r"\1", path[0]), text)
    return re.sub(r">\s+<", "><", text)
