"""What the order of contiguous counts shows: block variances, merged blocks, and one test of them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyse.blocks import (
    BlockVariance,
    blocked_quadrat_variance,
    contiguous,
    nested_blocks,
    paired_quadrat_variance,
    three_term_variance,
    two_term_variance,
)
from analyse.chance import SIMULATIONS, check_simulations
from analyse.dispersion import Dispersion, dispersion
from analyse.envelopes import Envelope, global_envelope
from analyse.indices import morisita_index
from analyse.local_variances import largest_size, local_variances
from analyse.regularity import LONGEST, Regularity, regularity
from analyse.regularity import MOST_QUADRATS as MOST_MOVED

FEWEST_QUADRATS = 4  # fewer have no order to speak of
FEWEST_BLOCKS = 4  # merged blocks of which there are fewer are left out
MOST_TESTED_SIZES = 60
MOST_TESTED_QUADRATS = 10_000  # beyond this the random orders would take minutes
_CELLS_AT_ONCE = 2_000_000
_QUARTER = 4  # sizes up to this part of the longest side are compared: beyond, few places are left


@dataclass(frozen=True, slots=True)
class MergedBlocks:
    """Dispersion of the counts of quadrats merged to larger blocks.

    Parameters
    ----------
    size : int
        Quadrats along a side of a block (along the line of a transect).
    counts : Dispersion
        Of the blocks' totals.
    morisita : float
        Morisita's index of them.
    left_out : int
        Quadrats at the right and bottom that filled no block.
    """

    size: int
    counts: Dispersion
    morisita: float
    left_out: int

    def __repr__(self) -> str:
        return f"<MergedBlocks of {self.size}: {self.counts.q} blocks, VMR {self.counts.vmr:.3f}>"


@dataclass(frozen=True, slots=True, eq=False)
class Blocks:
    """Block variances of contiguous quadrats.

    Parameters
    ----------
    layout : {"transect", "grid"}
        One line of quadrats, or rows and columns of them.
    rows, columns : int
        Shape; 1 row for a transect.
    nested, two_term, three_term, paired : BlockVariance
        Nested mean squares, TTLQV, 3TLQV, PQV.
    blocked : BlockVariance or None
        BQV; transects only, where it is what `nested` holds.
    merged : tuple of MergedBlocks
        Dispersion of the counts at each size of block that leaves at least 4 of them.
    test : Envelope or None
        TTLQV against that of the same counts in random order, one p for all sizes up to a quarter
        of the longest side; None where all counts are equal, or there are more than 10,000.
    regularity : Regularity or None
        Distance to regularity (Perry 1995); None for grids above 400 quadrats and transects above
        2,000, and where all counts are equal.
    """

    layout: Literal["transect", "grid"]
    rows: int
    columns: int
    nested: BlockVariance
    two_term: BlockVariance
    three_term: BlockVariance
    paired: BlockVariance
    blocked: BlockVariance | None
    merged: tuple[MergedBlocks, ...]
    test: Envelope | None
    regularity: Regularity | None = None

    def __repr__(self) -> str:
        tested = "" if self.test is None else f", p = {self.test.p:.3g}"
        return (
            f"<Blocks of a {self.layout} of {self.rows} x {self.columns}: peak {self.peak}{tested}>"
        )

    @property
    def largest(self) -> int:
        """The largest size that is compared: a quarter of the longest side."""
        return _largest(self.rows, self.columns)

    @property
    def peak(self) -> int:
        """The size of block with the largest TTLQV, among those up to a quarter of the side."""
        return 1 + int(np.argmax(self.two_term.values[: self.largest]))

    @property
    def sentence(self) -> str:
        """What the block variances show, in words that claim no more."""
        return _said(self)


def block_variances(
    counts: ArrayLike, *, rng: np.random.Generator, simulations: int = SIMULATIONS
) -> Blocks:
    """Return all block variances of contiguous quadrats, and test their order.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats, along a line or in a grid; at least 4 of them.
    rng : numpy.random.Generator
        Source of randomness.
    simulations : int
        Random orders of the counts.

    Returns
    -------
    Blocks

    Raises
    ------
    ValueError
        If there are fewer than 4 quadrats or a count is impossible.
    OptionWrong
        If the number of simulations is out of range.

    Notes
    -----
    Block variances have no test of their own. Under the hypothesis that the counts could stand in
    any order, TTLQV at all sizes up to a quarter of the longest side is compared with that of the
    same counts in random orders, by one global envelope. That the counts vary more or less than
    Poisson counts plays no part in it: it is the order alone that is judged.

    References
    ----------
    Hill, M. O. (1973). The intensity of spatial pattern in plant communities. Journal of Ecology
    61, 225-235. Manly, B. F. J. (2007). Randomization, Bootstrap and Monte Carlo Methods in
    Biology, 3rd edition. Chapman and Hall. Myllymaki, M. and others (2017). Journal of the Royal
    Statistical Society B 79, 381-404.

    Examples
    --------
    >>> wave = ([5] * 4 + [0] * 4) * 4
    >>> blocks = block_variances(wave, rng=np.random.default_rng(1))
    >>> blocks.peak, blocks.test.p
    (4, 0.001)
    >>> blocks
    <Blocks of a transect of 1 x 32: peak 4, p = 0.001>
    """
    check_simulations(simulations)
    grid = contiguous(counts)
    if grid.size < FEWEST_QUADRATS:
        raise ValueError(f"block variances need at least {FEWEST_QUADRATS} quadrats")
    rows, columns = grid.shape
    return Blocks(
        "transect" if rows == 1 else "grid",
        rows,
        columns,
        nested_blocks(grid),
        two_term_variance(grid),
        three_term_variance(grid),
        paired_quadrat_variance(grid),
        blocked_quadrat_variance(grid) if rows == 1 else None,
        merged_blocks(grid),
        _order_test(grid, rng, simulations),
        _regularity(grid, rng, simulations),
    )


def merged_blocks(counts: ArrayLike) -> tuple[MergedBlocks, ...]:
    """Return the dispersion of counts in quadrats merged to square blocks, or to lengths of a line.

    Parameters
    ----------
    counts : array_like of int, shape (n,) or (rows, columns)
        Contiguous quadrats.

    Returns
    -------
    tuple of MergedBlocks
        At every size that divides both sides, and at every power of two, that leaves at least 4
        blocks; the size 1 first. What fills no block at the right and bottom is left out.

    Notes
    -----
    Each size is judged by itself: among many of them some are beyond 5 % by chance.

    Examples
    --------
    >>> [merged.size for merged in merged_blocks(np.ones((6, 9), dtype=int))]
    [1, 2, 3]
    """
    grid = contiguous(counts)
    rows, columns = grid.shape
    wide = columns if rows == 1 else min(rows, columns)
    found = []
    for b in range(1, wide + 1):
        height = 1 if rows == 1 else b
        shape = (rows // height, columns // b)
        divides = rows % height == 0 and columns % b == 0
        if shape[0] * shape[1] < FEWEST_BLOCKS or not (divides or b & (b - 1) == 0):
            continue
        part = grid[: shape[0] * height, : shape[1] * b]
        totals = part.reshape(shape[0], height, shape[1], b).sum(axis=(1, 3))
        found.append(
            MergedBlocks(b, dispersion(totals), morisita_index(totals), grid.size - part.size)
        )
    return tuple(found)


def _order_test(
    grid: NDArray[np.int64], rng: np.random.Generator, simulations: int
) -> Envelope | None:
    """Compare TTLQV with that of the same counts in random order."""
    largest = _largest(*grid.shape)
    if grid.min() == grid.max() or grid.size > MOST_TESTED_QUADRATS:
        return None
    sizes = np.unique(np.geomspace(1, largest, MOST_TESTED_SIZES).round().astype(np.int64))
    if largest <= MOST_TESTED_SIZES:
        sizes = np.arange(1, largest + 1)
    observed = local_variances(grid[None], "TTLQV", sizes)[0][0]
    drawn = np.empty((simulations, len(sizes)))
    batch = max(1, _CELLS_AT_ONCE // grid.size)
    for start in range(0, simulations, batch):
        many = np.tile(grid.ravel(), (min(batch, simulations - start), 1))
        orders = rng.permuted(many, axis=1).reshape(-1, *grid.shape)
        drawn[start : start + len(orders)] = local_variances(orders, "TTLQV", sizes)[0]
    return global_envelope(observed, drawn, sizes, name="two_term_variance")


def _regularity(
    grid: NDArray[np.int64], rng: np.random.Generator, simulations: int
) -> Regularity | None:
    """Return the distance to regularity where it can be solved for in good time."""
    most = LONGEST if grid.shape[0] == 1 else MOST_MOVED
    if grid.min() == grid.max() or grid.size > most:
        return None
    return regularity(grid, rng=rng, simulations=simulations)


def _largest(rows: int, columns: int) -> int:
    """Return a quarter of the longest side, at least 1."""
    return max(1, min(max(rows, columns) // _QUARTER, largest_size((rows, columns), "TTLQV")))


def _said(blocks: Blocks) -> str:
    """Say what the order of the counts shows."""
    test = blocks.test
    if test is None:
        return ""
    judged = (
        f"one p for sizes 1 to {blocks.largest}: {test.p:.3g}, {test.simulations} random orders"
    )
    if test.side is None:
        return f"The order of the counts departs from chance at no size of block ({judged})."
    size = blocks.peak if blocks.peak in test.x[test.outside] else int(test.at)
    unit = "quadrat" if size == 1 else f"{size} quadrats"
    if test.side == "below":
        return (
            f"Neighbouring blocks of {unit} are more alike than in random order ({judged}), as"
            " counts are that change slowly from place to place."
        )
    if size == blocks.largest:
        reason = "a gradient, or patches that are as wide or wider, would do that"
    else:
        reason = (
            f"patches and gaps of about {'that size' if size > 1 else 'one quadrat'} would do that"
        )
    return f"Neighbouring blocks of {unit} differ more than in random order ({judged}); {reason}."
