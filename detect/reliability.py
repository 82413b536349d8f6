"""Does doubt mean what it says: of the spots of a given doubt, what share is false."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from detect.files import Cell, csv_text

Binning = Literal["count", "width"]
N_BINS = 10
RELIABILITY_COLUMNS = (
    "binning",
    "low",
    "high",
    "spots",
    "mean_doubt",
    "share_false",
    "share_low",
    "share_high",
)
_Z = 1.959963984540054  # 97.5 % point of the normal distribution


@dataclass(frozen=True, slots=True, eq=False)
class Reliability:
    """Doubt against the share of false spots, bin by bin.

    Parameters
    ----------
    low, high : ndarray of shape (k,)
        Least and greatest doubt of each bin: of its spots for equal counts, its bounds for equal
        widths.
    number : ndarray of int, shape (k,)
        Spots in each bin; bins without spots are left out.
    doubt : ndarray of shape (k,)
        Their mean doubt.
    false : ndarray of shape (k,)
        Share of them that is false.

    References
    ----------
    Wilson EB (1927). Probable inference, the law of succession, and statistical inference. Journal
    of the American Statistical Association 22, 209-212: the interval of a share.
    """

    low: NDArray[np.float64]
    high: NDArray[np.float64]
    number: NDArray[np.intp]
    doubt: NDArray[np.float64]
    false: NDArray[np.float64]

    def __post_init__(self) -> None:
        for name in ("low", "high", "number", "doubt", "false"):
            column = getattr(self, name)
            if column.shape != self.number.shape:
                raise ValueError(f"{name} has {column.size} values for {self.number.size} bins")
            column.setflags(write=False)

    def __len__(self) -> int:
        return self.number.size

    @property
    def error(self) -> float:
        """Expected calibration error: how far doubt is off on average; NaN without spots.

        The mean over bins of |mean doubt - share false|, each bin weighing as many as it holds.
        """
        if not len(self):
            return math.nan
        return float(np.average(np.abs(self.doubt - self.false), weights=self.number))

    @property
    def interval(self) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Lower and upper ends of the 95 % interval of each share (Wilson 1927)."""
        n, share = self.number, self.false
        middle = (share + 0.5 * _Z**2 / n) / (1 + _Z**2 / n)
        half = np.sqrt(share * (1 - share) / n + 0.25 * (_Z / n) ** 2) * _Z / (1 + _Z**2 / n)
        return np.clip(middle - half, 0.0, share), np.clip(middle + half, share, 1.0)


def reliability(
    doubt: ArrayLike, false: ArrayLike, *, binning: Binning = "count", bins: int = N_BINS
) -> Reliability:
    """Compare doubt with the share of false spots, in bins.

    Parameters
    ----------
    doubt : array_like of shape (n,)
        Probabilities, 0..1.
    false : array_like of bool, shape (n,)
        Whether each spot is no real object.
    binning : {"count", "width"}
        Bins that hold equally many spots, or that are equally wide.
    bins : int
        Number of bins at most; with equal counts never more than there are spots.

    Returns
    -------
    Reliability

    Raises
    ------
    ValueError
        If the lengths differ, a doubt is not within 0..1, or there is no bin.

    Notes
    -----
    The diagram goes back to [1]_, its mean gap, the expected calibration error, to [2]_. Bins of
    equal count are what the program quotes: most spots have little doubt, so that of ten equally
    wide bins two or three hold nearly all spots, and within one of them doubts that are too high
    and doubts that are too low cancel. Both kinds of bin take the gaps of chance for error: over
    ten bins of n spots in all, a perfect doubt p has a gap of about 0.8 sqrt(10 p (1 - p) / n).
    Spots of one doubt share their answers evenly, so that their order has no say.

    References
    ----------
    .. [1] DeGroot MH, Fienberg SE (1983). The comparison and evaluation of forecasters. The
       Statistician 32, 12-22.
    .. [2] Naeini MP, Cooper GF, Hauskrecht M (2015). Obtaining well calibrated probabilities using
       Bayesian binning. Proceedings of the AAAI Conference 29, 2901-2907.

    Examples
    --------
    >>> table = reliability([0.1, 0.1, 0.4, 0.4], [False, False, True, False], bins=2)
    >>> table.false.tolist(), round(table.error, 3)
    ([0.0, 0.5], 0.1)
    """
    p, wrong = _checked(doubt, false)
    if bins < 1:
        raise ValueError(f"there must be 1 bin or more, not {bins}")
    order = np.argsort(p, kind="stable")
    p, wrong = p[order], wrong[order]
    _, first, group, size = np.unique(p, return_index=True, return_inverse=True, return_counts=True)
    wrong = (np.add.reduceat(wrong, first) / size)[group] if p.size else wrong
    if binning == "count":
        parts = [part for part in np.array_split(np.arange(p.size), bins) if part.size]
        low = np.array([p[part[0]] for part in parts])
        high = np.array([p[part[-1]] for part in parts])
    else:
        place = np.minimum((p * bins).astype(np.intp), bins - 1)
        used = np.unique(place)
        parts = [np.flatnonzero(place == k) for k in used]
        low, high = used / bins, (used + 1) / bins
    return Reliability(
        low,
        high,
        np.array([part.size for part in parts], dtype=np.intp),
        np.array([p[part].mean() for part in parts]),
        np.array([wrong[part].mean() for part in parts]),
    )


def reliability_csv(doubt: ArrayLike, false: ArrayLike) -> str:
    """Return the bins of equal count and those of equal width as a table, a row per bin."""
    rows: list[tuple[Cell, ...]] = []
    for binning in get_args(Binning):
        table = reliability(doubt, false, binning=binning)
        columns = (table.low, table.high, table.number, table.doubt, table.false, *table.interval)
        rows += [(binning, *row) for row in zip(*columns, strict=True)]
    return csv_text(RELIABILITY_COLUMNS, rows, digits=6)


def area_under_curve(doubt: ArrayLike, false: ArrayLike) -> float:
    """How well doubt tells false spots from real ones.

    Parameters
    ----------
    doubt : array_like of shape (n,)
        Probabilities, 0..1.
    false : array_like of bool, shape (n,)
        Whether each spot is no real object.

    Returns
    -------
    float
        The chance that a false spot has more doubt than a real one, ties counted half: 1 where
        doubt tells all apart, 0.5 where it tells nothing. NaN where all are false or none is.

    Raises
    ------
    ValueError
        If the lengths differ, or a doubt is not within 0..1.

    Notes
    -----
    The area under the receiver operating characteristic, by ranks [1]_.

    References
    ----------
    .. [1] Hanley JA, McNeil BJ (1982). The meaning and use of the area under a receiver operating
       characteristic (ROC) curve. Radiology 143, 29-36.

    Examples
    --------
    >>> area_under_curve([0.1, 0.2, 0.3, 0.4], [False, True, False, True])
    0.75
    """
    p, wrong = _checked(doubt, false)
    n_false = float(wrong.sum())
    n_real = p.size - n_false
    if not (n_false and n_real):
        return math.nan
    _, group, size = np.unique(p, return_inverse=True, return_counts=True)
    rank = (np.cumsum(size) - 0.5 * (size - 1))[group]
    above = float(rank[wrong > 0].sum()) - n_false * (n_false + 1) / 2
    return above / (n_false * n_real)


def _checked(doubt: ArrayLike, false: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return doubts within 0..1, and 1 for what is false."""
    p = np.asarray(doubt, dtype=np.float64).reshape(-1)
    wrong = np.asarray(false, dtype=np.bool_).reshape(-1).astype(np.float64)
    if p.size != wrong.size:
        raise ValueError(f"{p.size} doubts for {wrong.size} answers")
    if not ((p >= 0) & (p <= 1)).all():
        raise ValueError("a doubt is not within 0..1")
    return p, wrong
