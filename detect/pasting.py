"""What a photograph looks like with copies of its spots in it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detect.photograph import Photograph
from detect.planting import Copies
from detect.stamps import Layer, SmoothGround

# Shade dims an object with its ground; a glare lies over both and does not make it brighter.
_LIGHT = (0.5, 1.1)
# Where two meet, one gives way to the other over this many pixels to each side.
_SEAM_PX = 0.7


@dataclass(frozen=True, slots=True)
class _Box:
    """A part of the photograph, right and bottom excluded."""

    left: int
    top: int
    right: int
    bottom: int

    def part_of(self, outer: _Box) -> tuple[slice, slice]:
        """Return the rows and columns of this box in those of one that holds it."""
        return (
            slice(self.top - outer.top, self.bottom - outer.top),
            slice(self.left - outer.left, self.right - outer.left),
        )


def paste(
    photograph: Photograph, ground: SmoothGround, copies: Copies, *, stacked: bool
) -> Photograph:
    """Return the photograph with copies set into it.

    Parameters
    ----------
    photograph : Photograph
    ground : SmoothGround
        Of this photograph.
    copies : Copies
    stacked : bool
        True where objects lie over each other, as plants do: the larger of a pair, which is the
        taller, hides the smaller. False where they lie beside each other and share out the
        ground they meet on, as colonies and lesions do: every pixel shows the one whose centre is
        nearer in units of its own radius, as if both had grown up to there.

    Returns
    -------
    Photograph

    Notes
    -----
    A pixel becomes a * lifted + (1 - cover) * (pixel - ground) + ground, where a is the
    brightness of the ground here over that where the stamp was taken: an object hides what lies
    below as far as it covers it, and is lit as its new place is. Of a pair, `lifted` and `cover`
    are first made one: where one alone covers, it is seen; where both do, the one that is in
    front; on the ground beside them both halos lie over each other, full where either is: of
    shares h and k of the strongest, h + k - h k.
    """
    stored: Any = photograph.stored.copy()
    most = np.float32(np.iinfo(stored.dtype).max)
    whole = _Box(0, 0, photograph.width, photograph.height)
    for unit in np.unique(copies.unit):
        rows = np.flatnonzero(copies.unit == unit)
        rows = rows[np.argsort(copies.radius[rows], kind="stable")]
        boxes = [_lies_at(copies, int(i), whole) for i in rows]
        box = _around(boxes)
        layers = [_laid(copies, int(i), box, ground) for i in rows]
        lifted, cover = layers[0]
        for row, behind in zip(rows[1:], rows, strict=False):
            before = np.float32(1.0) if stacked else _nearer(copies, int(row), int(behind), box)
            lifted, cover = _joined((lifted, cover), layers[1], before)
        there = box.part_of(whole)
        seen = stored[there].astype(np.float32) / most
        below = ground.at(box.left, box.top, box.right - box.left, box.bottom - box.top)
        new = seen + lifted - cover[..., None] * (seen - below)
        stored[there] = np.round(np.clip(new, 0.0, 1.0) * most).astype(stored.dtype)
    return Photograph(photograph.path, photograph.sha256, stored, photograph.taken)


def _corner(copies: Copies, row: int) -> tuple[int, int]:
    """Return where the left top pixel of a copy's stamp lies; it may be out of the picture."""
    stamp = copies.stamps[row]
    return round(copies.x[row] - stamp.x), round(copies.y[row] - stamp.y)


def _lies_at(copies: Copies, row: int, whole: _Box) -> _Box:
    """Return the part of the photograph that a copy's stamp takes up."""
    left, top = _corner(copies, row)
    height, width = copies.stamps[row].cover.shape
    return _Box(
        max(whole.left, left),
        max(whole.top, top),
        min(whole.right, left + width),
        min(whole.bottom, top + height),
    )


def _around(boxes: list[_Box]) -> _Box:
    """Return the least box around all."""
    return _Box(
        min(box.left for box in boxes),
        min(box.top for box in boxes),
        max(box.right for box in boxes),
        max(box.bottom for box in boxes),
    )


def _laid(copies: Copies, row: int, box: _Box, ground: SmoothGround) -> tuple[Layer, Layer]:
    """Lay a copy into an empty box, lit as its place is: how far it departs, and what it covers."""
    stamp = copies.stamps[row]
    left, top = _corner(copies, row)
    height, width = stamp.cover.shape
    own = _Box(left, top, left + width, top + height)
    here = _Box(
        max(box.left, left),
        max(box.top, top),
        min(box.right, own.right),
        min(box.bottom, own.bottom),
    )
    below = ground.at(here.left, here.top, here.right - here.left, here.bottom - here.top)
    gain = np.float32(np.clip(float(below.mean()) / max(stamp.light, 1e-3), *_LIGHT))
    shape = box.bottom - box.top, box.right - box.left
    lifted, cover = np.zeros((*shape, 3), np.float32), np.zeros(shape, np.float32)
    lifted[here.part_of(box)] = gain * stamp.lifted[here.part_of(own)]
    cover[here.part_of(box)] = stamp.cover[here.part_of(own)]
    return lifted, cover


def _nearer(copies: Copies, one: int, other: int, box: _Box) -> NDArray[np.float32]:
    """Return 1 where one copy's centre is nearer in its radii than the other's, 0 beyond the seam."""
    down, across = np.mgrid[box.top : box.bottom, box.left : box.right]
    reach = [
        np.hypot(across - copies.x[i], down - copies.y[i]) / copies.radius[i] for i in (one, other)
    ]
    usual = 0.5 * (copies.radius[one] + copies.radius[other])
    share = 0.5 + (reach[1] - reach[0]) * usual / (4.0 * _SEAM_PX)
    return np.asarray(np.clip(share, 0.0, 1.0), dtype=np.float32)


def _joined(
    first: tuple[Layer, Layer],
    second: tuple[Layer, Layer],
    before: NDArray[np.float32] | np.float32,
) -> tuple[Layer, Layer]:
    """Make two layers one; `before` is how far the second hides the first where both cover."""
    (lifted_a, cover_a), (lifted_b, cover_b) = first, second
    bare = (1.0 - cover_a) * (1.0 - cover_b)
    shown = cover_b * (1.0 - cover_a) + cover_a * cover_b * before
    objects = lifted_a * (1.0 - bare - shown)[..., None] + lifted_b * shown[..., None]
    lifted = objects + bare[..., None] * _halos(lifted_a, lifted_b, bare)
    return np.asarray(lifted, dtype=np.float32), np.maximum(cover_a, cover_b)


def _halos(one: Layer, other: Layer, bare: Layer) -> Layer:
    """Lay two halos over each other: each tints what the other leaves, as two thin veils do."""
    strength = [np.sqrt((layer**2).sum(axis=2)) for layer in (one, other)]
    full = max(float((bare * s).max()) for s in strength) + 1e-6
    a, b = (np.clip(s / full, 0.0, 1.0)[..., None] for s in strength)
    return np.asarray(one * (1.0 - 0.5 * b) + other * (1.0 - 0.5 * a), dtype=np.float32)
