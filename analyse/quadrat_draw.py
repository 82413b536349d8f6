"""Which quadrats are drawn at random for a spot check: strata by count, the same seed the same draw."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry import mapping
from shapely.geometry.base import BaseGeometry

from analyse.chance import SEED, check_seed
from analyse.errors import TooFewQuadrats
from analyse.grid_options import GridOptions
from analyse.pattern import pattern_of_state
from analyse.quadrats import Grid, count_in_quadrats, lay_grid
from detect.changes import Changes
from detect.errors import OptionWrong
from detect.sheet import Sheet
from detect.spot_check import Draw, DrawnQuadrat

FEWEST_DRAWN = 5  # below this the limits are so wide that looking is not worth the while
MOST_CHECKED = 200  # more than anybody counts by eye in one sitting
_PER_STRATUM, _MOST_STRATA = 4, 4


@dataclass(frozen=True, slots=True)
class SpotCheckOptions:
    """How a spot check is drawn and judged.

    Parameters
    ----------
    quadrats : int
        To draw, 5 to 200.
    seed : int
        Of the draw, 0 or more.
    within : float
        Share of its own count within which the detector's total must be right to be trusted.

    Raises
    ------
    OptionWrong
        If a value is out of range.
    """

    quadrats: int = 10
    seed: int = SEED
    within: float = 0.1

    def __post_init__(self) -> None:
        check_seed(self.seed)
        if not FEWEST_DRAWN <= self.quadrats <= MOST_CHECKED:
            raise OptionWrong(
                f"A spot check takes {FEWEST_DRAWN} to {MOST_CHECKED} quadrats, not {self.quadrats}."
            )
        if not 0 < self.within < 1:
            raise OptionWrong(f"within must lie between 0 and 1, not at {self.within}.")


def strata_by_count(counts: ArrayLike, drawn: int) -> NDArray[np.int64]:
    """Put quadrats into strata by their counts, so that each stratum errs about as much in all.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        Quick counts.
    drawn : int
        How many quadrats will be drawn.

    Returns
    -------
    ndarray of int, shape (q,)
        Stratum of each, from 0, by rising count.

    Notes
    -----
    One stratum for every four quadrats drawn, four at most, so that each tells how its own
    quadrats vary. The errors of a count vary about as its root, so the quadrats are put in order of
    count (ties in order of place) and cut where the sum of sqrt(count + 1/2) passes equal shares;
    with as many drawn from each, that is near the best division [1]_. No count decides alone
    whether a quadrat can be drawn: all can.

    References
    ----------
    .. [1] Cochran, W. G. (1977). Sampling Techniques, 3rd ed. Wiley. Sections 5.5 and 5A.7 (after
       Dalenius and Hodges 1959).

    Examples
    --------
    >>> strata_by_count([0, 0, 9, 1, 0, 1, 0, 8], 8).tolist()
    [0, 0, 1, 0, 0, 0, 0, 1]
    """
    seen = np.asarray(counts, dtype=np.int64)
    strata = max(1, min(drawn // _PER_STRATUM, _MOST_STRATA, seen.size // 2))
    order = np.argsort(seen, kind="stable")
    weight = np.cumsum(np.sqrt(seen[order] + 0.5))
    share = (weight - np.sqrt(seen[order] + 0.5) / 2) / weight[-1]
    where = np.empty(seen.size, dtype=np.int64)
    where[order] = np.minimum((strata * share).astype(np.int64), strata - 1)
    return np.unique(where, return_inverse=True)[1].astype(np.int64).reshape(seen.shape)


def draw_quadrats(
    counts: ArrayLike, options: SpotCheckOptions
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Draw quadrats at random, as many from each stratum.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        Quick counts of all quadrats.
    options : SpotCheckOptions
        How many, and the seed.

    Returns
    -------
    drawn : ndarray of int, shape (n,)
        Positions of those drawn, in a random order, so that it tells nothing of their counts.
    stratum : ndarray of int, shape (q,)
        Of all quadrats.

    Raises
    ------
    TooFewQuadrats
        If there are fewer quadrats than are to be drawn.

    Examples
    --------
    >>> counts = [0, 3, 1, 0, 2, 5, 0, 1, 2, 2]
    >>> drawn, _ = draw_quadrats(counts, SpotCheckOptions(quadrats=5, seed=1))
    >>> len(set(drawn.tolist()))
    5
    """
    seen = np.asarray(counts, dtype=np.int64)
    if seen.size < options.quadrats:
        raise TooFewQuadrats(
            f"There are {seen.size} quadrats, fewer than the {options.quadrats} to be drawn; draw"
            " fewer, or lay smaller ones with --quadrat."
        )
    stratum = strata_by_count(seen, options.quadrats)
    sizes = np.bincount(stratum)
    rng = np.random.default_rng([options.seed, seen.size, options.quadrats])
    drawn = [
        rng.choice(np.flatnonzero(stratum == each), number, replace=False)
        for each, number in enumerate(_shared(options.quadrats, sizes))
    ]
    return rng.permutation(np.concatenate(drawn)), stratum


def draw_for_sheet(
    state: Sheet, grid: GridOptions | None = None, options: SpotCheckOptions | None = None
) -> Draw:
    """Draw the quadrats of a spot check over a photograph's study area.

    Parameters
    ----------
    state : Sheet
        As it stands.
    grid : GridOptions or None
        How to lay the quadrats; None for the rule, as an analysis does.
    options : SpotCheckOptions or None
        How many, and the seed.

    Returns
    -------
    Draw
        With the quadrats' outlines in pixels. Those clipped by the edge are drawn as others are:
        at the edge a detector errs most.

    Raises
    ------
    GridWrong, TooFewQuadrats
        If the quadrats do not fit the area, or are too few.
    """
    options = options or SpotCheckOptions()
    pattern = pattern_of_state(state, Changes())
    laid = lay_grid(pattern.area, len(pattern), grid or GridOptions(), pattern.unit, pattern.dish)
    counts = count_in_quadrats(pattern.points, laid)
    drawn, stratum = draw_quadrats(counts, options)
    return Draw(
        options.seed,
        tuple(np.bincount(stratum).tolist()),
        int(counts.sum()),
        tuple(
            DrawnQuadrat(
                int(each) + 1, int(stratum[each]), int(counts[each]), _outline(laid, each, state)
            )
            for each in drawn
        ),
    )


def _shared(drawn: int, sizes: NDArray[np.int64]) -> list[int]:
    """Share quadrats among strata: alike, the later ones first, none more than it holds."""
    numbers = [0] * sizes.size
    for _ in range(drawn):
        open_ones = [each for each in range(sizes.size) if numbers[each] < sizes[each]]
        fewest = min(numbers[each] for each in open_ones)
        numbers[max(each for each in open_ones if numbers[each] == fewest)] += 1
    return numbers


def _outline(grid: Grid, place: int, state: Sheet) -> dict[str, object]:
    """Return what a quadrat holds of the study area, in pixels to a tenth."""
    outline: BaseGeometry = grid.polygons[place]
    if state.scale is not None:
        outline = shapely.transform(outline, state.scale.to_px)
    outline = shapely.transform(outline, lambda xy: np.round(xy, 1))
    parts = [each for each in shapely.get_parts(outline) if each.area > 0]
    whole = parts[0] if len(parts) == 1 else shapely.multipolygons(parts)
    return {"type": whole.geom_type, "coordinates": _lists(mapping(whole)["coordinates"])}


def _lists(values: object) -> object:
    """Return nested tuples as lists, as a file gives them back."""
    return [_lists(each) for each in values] if isinstance(values, tuple | list) else values
