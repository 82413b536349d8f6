"""Classes of counts for a test of fit, pooled until each expects enough quadrats."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from analyse.columns import hold_columns

CountClass = tuple[int, int | None]
Share = Callable[[int, int | None], float]
SMALLEST_EXPECTED = 1.0
LARGEST_COUNT = 10_000


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class ClassTest:
    """Quadrats in classes of counts, seen and expected under a law, and the chi-square of the fit.

    Parameters
    ----------
    classes : tuple of (low, high)
        Both ends included; the last is open (high is None).
    observed, expected : ndarray of shape (len(classes),)
        Quadrats in each class.
    chi2 : float
        sum (observed - expected)^2 / expected.
    df : int
        Classes - 1 - parameters fitted.
    p : float
        Upper chi-square tail; NaN, as `chi2` is, where `df` is below 1.
    """

    classes: tuple[CountClass, ...]
    observed: NDArray[np.int64]
    expected: NDArray[np.float64]
    chi2: float
    df: int
    p: float

    def __post_init__(self) -> None:
        if not len(self.classes) == len(self.observed) == len(self.expected):
            raise ValueError("classes, observed and expected differ in length")
        hold_columns(self, ("observed", "expected"))

    def __repr__(self) -> str:
        fit = f"chi-square {self.chi2:.4g} on {self.df} df, p = {self.p:.3g}"
        return f"<ClassTest: {len(self.classes)} classes, {fit}>"

    @property
    def labels(self) -> tuple[str, ...]:
        """The classes in words: "0", "1-2", "3 or more"."""
        return class_labels(self.classes)


def class_labels(classes: Sequence[CountClass]) -> tuple[str, ...]:
    """Return classes in words.

    Parameters
    ----------
    classes : sequence of (low, high)
        The last with high None.

    Returns
    -------
    tuple of str

    Examples
    --------
    >>> class_labels([(0, 0), (1, 2), (3, None)])
    ('0', '1-2', '3 or more')
    """
    return tuple(_label(low, high) for low, high in classes)


def compare_classes(
    frequencies: NDArray[np.int64], classes: Sequence[CountClass], share: Share, *, fitted: int
) -> ClassTest:
    """Compare the quadrats in classes of counts with what a law expects there.

    Parameters
    ----------
    frequencies : ndarray of int, shape (k,)
        Quadrats with exactly 0, 1, ... k - 1 points.
    classes : sequence of (low, high)
        Classes that cover 0, 1, 2, ... without a gap, the last with high None.
    share : callable of (low, high)
        Probability of a class under the law.
    fitted : int
        Parameters of the law taken from the counts: 1 for Poisson, 2 for negative binomial.

    Returns
    -------
    ClassTest

    Raises
    ------
    ValueError
        If the classes leave a gap.

    References
    ----------
    Cochran, W. G. (1954). Some methods for strengthening the common chi-square tests. Biometrics
    10, 417-451 (expected counts of 1 in the tails).

    Examples
    --------
    >>> fair = lambda low, high: 0.5
    >>> test = compare_classes(np.array([40, 60]), [(0, 0), (1, None)], fair, fitted=0)
    >>> test.chi2, test.df, round(test.p, 4)
    (4.0, 1, 0.0455)
    """
    _check_classes(classes)
    q = int(frequencies.sum())
    observed = np.array([_seen(frequencies, low, high) for low, high in classes])
    expected = q * np.array([share(low, high) for low, high in classes])
    df = len(classes) - 1 - fitted
    usable = df >= 1 and bool((expected > 0).all())
    chi2 = float(((observed - expected) ** 2 / expected).sum()) if usable else math.nan
    p = float(special.chdtrc(df, chi2)) if usable else math.nan
    held = tuple((int(low), high) for low, high in classes)
    return ClassTest(held, observed, expected, chi2, df, p)


def pooled(share: Share, mode: int, q: int, smallest: float, top: int) -> tuple[CountClass, ...]:
    """Return classes pooled from both tails towards the mode until each expects enough quadrats.

    Parameters
    ----------
    share : callable of (low, high)
        Probability of a class under the law.
    mode : int
        The likeliest count.
    q : int
        Quadrats.
    smallest : float
        Quadrats each class must expect.
    top : int
        Largest count seen; no class starts above it plus one.

    Returns
    -------
    tuple of (low, high)

    Examples
    --------
    >>> halves = lambda low, high: 0.5**low - (0 if high is None else 0.5 ** (high + 1))
    >>> pooled(halves, 0, 8, 1.0, 6)
    ((0, 0), (1, 1), (2, 2), (3, None))
    """
    ends = [*range(max(top, mode) + 1), None]
    expected = [q * share(k, end) for k, end in enumerate(ends)]
    left, spare = _gathered(range(mode + 1), expected, smallest)
    right, more = _gathered(range(len(ends) - 1, mode, -1), expected, smallest)
    middle = [*spare, *more]
    if sum(expected[k] for k in middle) >= smallest or not (left or right):
        left.append(middle)
    else:
        (left or right)[-1].extend(middle)
    starts = sorted(min(group) for group in [*left, *right] if group)
    return (*zip(starts, [start - 1 for start in starts[1:]], strict=False), (starts[-1], None))


def _gathered(
    values: Iterable[int], expected: Sequence[float], smallest: float
) -> tuple[list[list[int]], list[int]]:
    """Group values in order until each group expects enough; return the groups and what is left."""
    groups: list[list[int]] = []
    group: list[int] = []
    total = 0.0
    for value in values:
        group.append(value)
        total += expected[value]
        if total >= smallest:
            groups.append(group)
            group, total = [], 0.0
    return groups, group


def _seen(frequencies: NDArray[np.int64], low: int, high: int | None) -> int:
    """Return how many quadrats fall in a class."""
    return int(frequencies[low : None if high is None else high + 1].sum())


def _check_classes(classes: Sequence[CountClass]) -> None:
    """Refuse classes that do not cover 0, 1, 2, ... once."""
    starts = [low for low, _ in classes]
    ends = [high for _, high in classes]
    joined = all(
        high is not None and low <= high and high + 1 == after
        for low, high, after in zip(starts, ends, starts[1:], strict=False)
    )
    if not classes or starts[0] != 0 or ends[-1] is not None or not joined:
        raise ValueError("classes must run from 0 upwards without a gap, the last without an end")


def _label(low: int, high: int | None) -> str:
    """Return a class in words."""
    if high is None:
        return f"{low} or more"
    return str(low) if low == high else f"{low}-{high}"
