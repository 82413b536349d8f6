"""What a spot check says: how much the detector misses and invents, and how many there really are."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy import special

from analyse.density import CM2, Limits, widened
from analyse.double_sampling import (
    LEVEL,
    DoubleSample,
    Estimate,
    difference_limits,
    difference_total,
    ratio_limits,
    ratio_total,
)
from analyse.quadrat_draw import SpotCheckOptions
from detect.amended import Amended
from detect.matching import MatchOptions, match_spots
from detect.sheet import Amendment, Sheet
from detect.spot_check import Checked, latest_spot_check, outline_of
from detect.spots import Spots

Trusted = Literal["trusted", "not trusted", "open"]
_REACH = 0.75  # of the usual radius: a person's click lies farther from the middle than a centre


@dataclass(frozen=True, slots=True, eq=False)
class SpotCheck:
    """What a person's blind count of some quadrats says of the spots of a photograph.

    Parameters
    ----------
    drawn, quadrats : int
        Quadrats counted by eye, and in all.
    counted : int
        Spots that counted in the study area when the check was drawn.
    sample : DoubleSample
        The counts by quadrat.
    total : Limits
        Objects in the study area by the difference estimate, with 95 % limits.
    by_ratio : Limits or None
        The same by the ratio estimate; None where too few were counted for a ratio.
    plain, plain_ratio : Estimate or None
        Both with the standard errors of the textbook, which fail where errors are rare.
    density : Limits or None
        Objects per square centimetre that follow from `total`; None where no scale is known.
    recall, precision : Limits or None
        Share of the objects that were found, and of the spots that are real; None where hand counts
        tell no places, or there is nothing to take a share of.
    trusted : {"trusted", "not trusted", "open"}
        Whether the detector's count may be relied on beyond what was checked.
    sentence : str
        All of it in plain words.
    seed : int
        Of the draw.
    who : tuple of str
        Who counted.
    """

    drawn: int
    quadrats: int
    counted: int
    sample: DoubleSample
    total: Limits
    by_ratio: Limits | None
    plain: Estimate
    plain_ratio: Estimate | None
    density: Limits | None
    recall: Limits | None
    precision: Limits | None
    trusted: Trusted
    sentence: str
    seed: int
    who: tuple[str, ...]

    def __repr__(self) -> str:
        return (
            f"<SpotCheck: {self.drawn} of {self.quadrats} quadrats, {self.counted} counted,"
            f" {self.total.value:.4g} corrected, {self.trusted}>"
        )


def spot_check_of(
    sheet: Sheet, amendments: Sequence[Amendment], options: SpotCheckOptions | None = None
) -> SpotCheck | None:
    """Compare what a person saw in the quadrats of a spot check with the spots.

    Parameters
    ----------
    sheet : Sheet
        As found.
    amendments : sequence of Amendment
        Its log, with the draw and the marks.
    options : SpotCheckOptions or None
        How near the count must be to be trusted.

    Returns
    -------
    SpotCheck or None
        Of the newest spot check; None where there is none, or not all its quadrats were looked at.

    Notes
    -----
    What is checked is the spots as they stood at the draw; later edits change them, but not what
    the check says of how many objects there are.
    """
    checked = latest_spot_check(amendments)
    if checked is None or not checked.is_done:
        return None
    options = options or SpotCheckOptions()
    state = Amended.of(sheet, amendments[: checked.before]).state()
    return compared(checked, state, within=options.within)


def compared(checked: Checked, state: Sheet, *, within: float) -> SpotCheck:
    """Compare a finished spot check with the spots as they stood when it was drawn.

    Parameters
    ----------
    checked : Checked
        With every quadrat looked at.
    state : Sheet
        As it stood at the draw.
    within : float
        Share of its own count within which the detector's total must be right to be trusted.

    Returns
    -------
    SpotCheck
    """
    draw = checked.draw
    seen = [checked.marked[each.quadrat] for each in draw.quadrats]
    sample = DoubleSample(
        np.array([each.stratum for each in draw.quadrats], dtype=np.int64),
        np.array([each.counted for each in draw.quadrats], dtype=np.float64),
        np.array([each.count for each in seen], dtype=np.float64),
        np.array(draw.sizes, dtype=np.int64),
        float(draw.total),
    )
    total, by_ratio = difference_limits(sample), ratio_limits(sample)
    recall, precision = _found_and_real(checked, state, sample)
    trusted = judged_by(total, draw.total, within, recall, precision)
    return SpotCheck(
        drawn=len(sample),
        quadrats=int(sum(draw.sizes)),
        counted=draw.total,
        sample=sample,
        total=total,
        by_ratio=by_ratio,
        plain=difference_total(sample),
        plain_ratio=ratio_total(sample),
        density=_density(total, state),
        recall=recall,
        precision=precision,
        trusted=trusted,
        sentence=_said(sample, total, draw.total, recall, precision, trusted, within),
        seed=draw.seed,
        who=tuple(dict.fromkeys(each.who for each in seen)),
    )


def missed_marks(sheet: Sheet, amendments: Sequence[Amendment]) -> list[list[float]]:
    """Return the places that a person marked in a spot check and where no spot counts now.

    Parameters
    ----------
    sheet : Sheet
        As found.
    amendments : sequence of Amendment
        Its log.

    Returns
    -------
    list of [x, y]
        In pixels; empty where nothing was marked.
    """
    checked = latest_spot_check(amendments)
    if checked is None:
        return []
    spots = Amended.of(sheet, amendments).state().spots
    spots = spots.where(spots.counted)
    marks = [each.marks for each in checked.marked.values() if each.marks is not None]
    places = np.concatenate(marks) if marks else np.empty((0, 2))
    pairs = match_spots(places, spots.centres, spots.radius, options=MatchOptions(radii=_REACH))
    missed = np.delete(places, pairs.found, axis=0)
    return [[float(x), float(y)] for x, y in missed]


def judged_by(
    total: Limits, counted: int, within: float, recall: Limits | None, precision: Limits | None
) -> Trusted:
    """Say whether a count may be relied on, by a rule told beforehand.

    Parameters
    ----------
    total : Limits
        The corrected total.
    counted : int
        The detector's.
    within : float
        The share of its own count by which it may be off.
    recall, precision : Limits or None
        Where known.

    Returns
    -------
    {"trusted", "not trusted", "open"}
        Trusted where both limits lie within that share of the count, and neither recall nor
        precision is below 1 - `within`; not trusted where both limits lie beyond it on one side, or
        recall or precision are surely below 1 - `within`; open in between.

    Examples
    --------
    >>> judged_by(Limits(103.0, 98.0, 108.0, 0.95), 100, 0.1, None, None)
    'trusted'
    >>> judged_by(Limits(130.0, 112.0, 150.0, 0.95), 100, 0.1, None, None)
    'not trusted'
    """
    low, high = counted * (1 - within), counted * (1 + within)
    shares = [each for each in (recall, precision) if each is not None]
    if total.low > high or total.high < low or any(each.high < 1 - within for each in shares):
        return "not trusted"
    if low <= total.low and total.high <= high and all(each.value >= 1 - within for each in shares):
        return "trusted"
    return "open"


def share_limits(
    sample: DoubleSample, hits: NDArray[np.float64], of: NDArray[np.float64]
) -> Limits | None:
    """Return a share over all quadrats, estimated from those drawn, with 95 % limits.

    Parameters
    ----------
    sample : DoubleSample
    hits : ndarray of shape (n,)
        What was hit in each quadrat drawn.
    of : ndarray of shape (n,)
        Out of how many.

    Returns
    -------
    Limits or None
        None where there is nothing to take a share of.

    Notes
    -----
    The ratio of weighted sums; its variance between quadrats tells how many independent trials the
    sample is worth, never more than it holds, and exact binomial limits of so many are taken.

    References
    ----------
    Korn, E. L. and Graubard, B. I. (1998). Confidence intervals for proportions with small expected
    number of positive counts estimated from survey data. Survey Methodology 24, 193-201.
    Clopper, C. J. and Pearson, E. S. (1934). The use of confidence or fiducial limits illustrated in
    the case of the binomial. Biometrika 26, 404-413.

    Examples
    --------
    >>> found, there = np.array([4.0, 0, 7, 3, 5]), np.array([5.0, 0, 7, 4, 5])
    >>> sample = DoubleSample(np.zeros(5, int), found, there, np.array([40]), 150.0)
    >>> share = share_limits(sample, found, there)
    >>> f"{share.value:.3f}, from {share.low:.2f} to {share.high:.2f}"
    '0.905, from 0.60 to 1.00'
    """
    trials, weights = float(of.sum()), sample.weights
    whole = float((weights * of).sum())
    if trials == 0:
        return None
    share = float((weights * hits).sum()) / whole
    rest = DoubleSample(sample.stratum, np.zeros(len(sample)), hits - share * of, sample.sizes, 0.0)
    estimate = difference_total(rest)
    worth = trials
    if 0 < share < 1 and estimate.standard_error > 0:
        variance = (estimate.standard_error / whole) ** 2
        worth = min(trials, share * (1 - share) / variance)
        t = special.stdtrit([max(1.0, trials - 1), estimate.df], 0.5 + LEVEL / 2)
        worth = max(1.0, min(trials, worth * float(t[0] / t[1]) ** 2))
    k, tail = share * worth, (1 - LEVEL) / 2
    low = float(special.betaincinv(k, worth - k + 1, tail)) if share > 0 else 0.0
    high = float(special.betaincinv(k + 1, worth - k, 1 - tail)) if share < 1 else 1.0
    return Limits(share, low, high, LEVEL)


def _found_and_real(
    checked: Checked, state: Sheet, sample: DoubleSample
) -> tuple[Limits | None, Limits | None]:
    """Return recall and precision, where the marks have places and the spots are those checked."""
    draw, spots = checked.draw, state.spots.where(state.spots.counted)
    spots = spots.where(state.area.contains(spots.centres))
    if any(checked.marked[each.quadrat].marks is None for each in draw.quadrats):
        return None, None
    if len(spots) != draw.total:
        return None, None  # detected again since
    rows = [
        _hits(outline_of(each.outline), checked.marked[each.quadrat].marks, spots)
        for each in draw.quadrats
    ]
    columns = np.array(rows, dtype=np.float64).reshape(-1, 4).T
    return share_limits(sample, columns[0], columns[1]), share_limits(
        sample, columns[2], columns[3]
    )


def _hits(
    outline: shapely.Geometry, marks: NDArray[np.float64], spots: Spots
) -> tuple[int, int, int, int]:
    """Return of one quadrat: marks found, marks, spots that are real, spots that could be judged.

    A mark may belong to a spot whose centre lies just outside, and is found then; a spot just
    inside, of which no mark was made, may be an object whose middle lies outside, and is not judged.
    """
    usual = float(np.median(spots.radius)) if len(spots) else 0.0
    edge = np.asarray(
        shapely.distance(outline, shapely.points(spots.centres)), dtype=np.float64
    ).reshape(-1)
    near = spots.where(edge <= np.maximum(spots.radius, usual))
    pairs = match_spots(marks, near.centres, near.radius, options=MatchOptions(radii=_REACH))
    hit = np.zeros(len(near), dtype=bool)
    hit[pairs.truth] = True
    centres = shapely.points(near.centres)
    inside = np.asarray(shapely.intersects(outline, centres), dtype=bool).reshape(-1)
    border = np.asarray(shapely.distance(shapely.boundary(outline), centres)).reshape(-1)
    judged = inside & (hit | (border > _REACH * near.radius))
    return len(pairs), len(marks), int((hit & judged).sum()), int(judged.sum())


def _density(total: Limits, state: Sheet) -> Limits | None:
    """Return the corrected total per square centimetre."""
    if state.scale is None:
        return None
    area = shapely.transform(state.area.polygon, state.scale.to_mm).area
    return widened(total, CM2 / area, state.scale.relative_uncertainty)


def _said(
    sample: DoubleSample,
    total: Limits,
    counted: int,
    recall: Limits | None,
    precision: Limits | None,
    trusted: Trusted,
    within: float,
) -> str:
    """Say what the check found, in the words of a person who counts."""
    all_quadrats, seen = int(sample.sizes.sum()), int(sample.careful.sum())
    said = (
        f"Spot check: in {len(sample)} of {all_quadrats} quadrats, drawn at random, a person"
        f" counted {seen} without seeing the detections, the detector {int(sample.quick.sum())};"
        f" the {counted:,} counted in all are corrected to {total.value:,.0f} (95 % limits"
        f" {total.low:,.0f} to {total.high:,.0f})."
    )
    if recall is not None:
        said += f" Of the objects {_percent(recall)} were found"
        said += "." if precision is None else f"; of the spots {_percent(precision)} are real."
    allowed = f"{100 * within:.0f} %"
    if trusted == "trusted":
        return f"{said} The count may be trusted on the rest: it is within {allowed} of the truth."
    if trusted == "not trusted":
        return (
            f"{said} The count may not be trusted on the rest: it is off, or errs both ways, by more"
            f" than {allowed}. Use the corrected total, or check every spot."
        )
    more = _would_settle(sample, total, counted, within)
    told = f" About {more} such quadrats would settle it, or fewer larger ones." if more else ""
    return f"{said} Whether it is within {allowed} of the truth is not settled.{told}"


def _would_settle(sample: DoubleSample, total: Limits, counted: int, within: float) -> int | None:
    """Return about how many quadrats would make the limits as narrow as the rule asks."""
    spare = abs(within * counted - abs(total.value - counted))
    if counted == 0 or spare <= 0.2 * within * counted:
        return None
    n, q = len(sample), int(sample.sizes.sum())
    half = max(total.high - total.value, total.value - total.low)
    # The square of the half width goes by 1/n - 1/q.
    unit = half**2 / (1 / n - 1 / q) if n < q else 0.0
    needed = math.ceil(1 / (spare**2 / unit + 1 / q)) if unit > 0 else q
    return needed if n < needed < q else None


def _percent(share: Limits) -> str:
    """Return a share with its limits in per cent."""
    return f"{100 * share.value:.0f} % ({100 * share.low:.0f} to {100 * share.high:.0f} %)"
