"""The rows of tests.csv about contiguous quadrats: block variances and merged blocks."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from analyse.blocks import BlockVariance
from analyse.contiguous import Blocks, MergedBlocks
from analyse.side_rows import side_rows
from detect.files import Cell

if TYPE_CHECKING:
    from analyse.said import Findings

_HILL = "Hill 1973"
_METHODS = {
    "nested": ("nested_mean_square", "nested analysis of blocks (Greig-Smith 1952)"),
    "BQV": ("bqv", "blocked quadrat variance (Greig-Smith 1952)"),
    "TTLQV": ("ttlqv", f"two-term local quadrat variance ({_HILL})"),
    "3TLQV": ("three_tlqv", f"three-term local quadrat variance ({_HILL})"),
    "PQV": ("pqv", "paired quadrat variance (Ludwig and Goodall 1978)"),
}
_TEST = (
    "TTLQV against the same counts in random order, one global envelope over all sizes by extreme"
    " rank length (Myllymaki and others 2017)"
)
_MOVED = "between the middles of quadrats, side 1"


def block_rows(each: Findings) -> Iterator[list[Cell]]:
    """Yield the block variances of a table of contiguous quadrats; nothing for anything else.

    Parameters
    ----------
    each : Findings
        Of one photograph or table.

    Yields
    ------
    list
        The cells of tests.csv after `photograph`. `low` and `high` are the global band of random
        orders where there is one; `n` is the number of quadrats used.
    """
    blocks = each.blocks
    if blocks is None:
        return
    yield from _peak(blocks, each.seed)
    for variance in (
        blocks.nested,
        blocks.blocked,
        blocks.two_term,
        blocks.three_term,
        blocks.paired,
    ):
        if variance is not None:
            yield from _variance(blocks, variance)
    yield from _moved(blocks)
    for merged in blocks.merged[1:]:  # the first is the quadrats as they are
        yield from _merged(blocks, merged)


def _peak(blocks: Blocks, seed: int) -> Iterator[list[Cell]]:
    """Yield where TTLQV is largest, and the one test of the order."""
    test = blocks.test
    where = f"largest TTLQV among sizes 1 to {blocks.largest}, in quadrats"
    size = blocks.rows * blocks.columns
    if test is None:
        note = f"{where}; not tested: counts that are all equal, or too many of them"
        yield ["ttlqv_peak", blocks.peak, None, None, None, f"TTLQV ({_HILL})", size, note]
        return
    note = f"{where}; {test.simulations} random orders, seed {seed}; {blocks.sentence}"
    yield ["ttlqv_peak", blocks.peak, None, None, test.p, _TEST, size, note]


def _variance(blocks: Blocks, variance: BlockVariance) -> Iterator[list[Cell]]:
    """Yield one row per size of one variance."""
    name, method = _METHODS[variance.method]
    band = {}
    if variance.method == "TTLQV" and blocks.test is not None:
        edges = zip(blocks.test.low.tolist(), blocks.test.high.tolist(), strict=True)
        band = dict(zip(blocks.test.x.astype(int).tolist(), edges, strict=True))
    columns = (variance.sizes.tolist(), variance.values, variance.terms.tolist())
    for size, value, terms in zip(*columns, strict=True):
        what = f"distance {size}" if variance.method == "PQV" else f"blocks of {size}"
        counted = "df" if variance.method == "nested" else "comparisons"
        note = f"{what}; {terms} {counted if terms != 1 else counted.removesuffix('s')}"
        if variance.method == "nested":
            note += f"; sum of squares {value * terms:.9g}"
        if variance.left_out:
            note += f"; {_quadrats(variance.left_out)} beyond a power of two left out"
        low, high = band.get(size, (None, None))
        yield [f"{name}_{size}", value, low, high, None, method, variance.used, note]


def _moved(blocks: Blocks) -> Iterator[list[Cell]]:
    """Yield the distance to regularity, and its index where the counts were rearranged."""
    seen, size = blocks.regularity, blocks.rows * blocks.columns
    if seen is None:
        return
    method = "least total distance that makes all counts equal, in quadrats (Perry 1995)"
    yield ["distance_to_regularity", seen.distance, None, None, None, method, size, _MOVED]
    if seen.arrangements:
        note = f"{seen.arrangements} arrangements of the counts, expected {seen.expected:.9g}"
        method = "distance to regularity over its mean (Perry 1995), share at least as far"
        value = seen.index if np.isfinite(seen.index) else None
        yield ["regularity_index", value, None, None, seen.p, method, size, note]


def _merged(blocks: Blocks, merged: MergedBlocks) -> Iterator[list[Cell]]:
    """Yield the dispersion of the counts in merged blocks of one size."""
    seen, b = merged.counts, merged.size
    shape = f"{b}" if blocks.rows == 1 else f"{b}x{b}"
    note = f"quadrats merged to blocks of {shape}; mean {seen.mean:.9g}"
    if merged.left_out:
        note += f"; {_quadrats(merged.left_out)} at the right and bottom left out"
    for name, value, method in (
        ("vmr", seen.vmr, "variance-to-mean ratio"),
        ("morisita", merged.morisita, "Morisita (1959)"),
    ):
        if np.isfinite(value):
            yield [f"merged_{shape}_{name}", value, None, None, None, method, seen.q, note]
    method = "index of dispersion, chi-square (Fisher, Thornton and Mackenzie 1922)"
    note = f"df {seen.df}; {note}"
    yield from side_rows(f"merged_{shape}_chi2", seen.chi2, seen, method, seen.q, note)


def _quadrats(n: int) -> str:
    """Return a number of quadrats in words."""
    return f"{n} quadrat{'s' * (n != 1)}"
