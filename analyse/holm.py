"""Several tests of one pattern, judged together: p values that allow for having looked more than once."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray


def holm_adjusted(p: ArrayLike) -> NDArray[np.float64]:
    """Return p values adjusted for their number.

    Parameters
    ----------
    p : array_like of float, shape (m,)
        Each between 0 and 1.

    Returns
    -------
    ndarray of shape (m,)
        In the same order. If those at most a level are rejected, the chance that any true null
        hypothesis among the m is rejected is at most that level, however the tests hang together.

    Raises
    ------
    ValueError
        If a p is not between 0 and 1, or they are not a list.

    Notes
    -----
    With p(1) <= ... <= p(m), the adjusted p(i) is the largest of (m - j + 1) p(j) over j <= i, at
    most 1.

    References
    ----------
    Holm, S. (1979). A simple sequentially rejective multiple test procedure. Scandinavian Journal
    of Statistics 6, 65-70.

    Examples
    --------
    >>> holm_adjusted([0.01, 0.04, 0.03]).round(3).tolist()
    [0.03, 0.06, 0.06]
    """
    values = np.array(p, dtype=np.float64)
    if values.ndim != 1:
        raise ValueError(f"p has {values.ndim} dimensions; give a list of numbers")
    if not ((values >= 0) & (values <= 1)).all():
        raise ValueError(f"a p lies outside 0..1: {values[~((values >= 0) & (values <= 1))][0]}")
    order = np.argsort(values, kind="stable")
    steps = values[order] * np.arange(values.size, 0, -1)
    adjusted = np.empty_like(values)
    adjusted[order] = np.minimum(1.0, np.maximum.accumulate(steps))
    return adjusted


@dataclass(frozen=True, slots=True)
class HolmFamily:
    """Tests that were judged together.

    Parameters
    ----------
    names : tuple of str
        What each test is called, in the order in which they are told.
    p : tuple of float
        The p of each by itself.
    adjusted : tuple of float
        The p that allows for all of them.

    Raises
    ------
    ValueError
        If the columns differ in length, are empty, or a name appears twice.

    Examples
    --------
    >>> family = HolmFamily.of({"sides": 0.02, "distances": 0.4})
    >>> family["sides"], family.smallest
    (0.04, 'sides')
    """

    names: tuple[str, ...]
    p: tuple[float, ...]
    adjusted: tuple[float, ...]

    def __post_init__(self) -> None:
        if not self.names:
            raise ValueError("a family needs at least one test")
        if not len(set(self.names)) == len(self.p) == len(self.adjusted) == len(self.names):
            raise ValueError("names, p and adjusted p differ in number, or a name appears twice")

    @classmethod
    def of(cls, p: Mapping[str, float]) -> HolmFamily:
        """Judge tests together.

        Parameters
        ----------
        p : mapping of str to float
            The p of each test by its name.

        Returns
        -------
        HolmFamily

        Raises
        ------
        ValueError
            If there is none, or a p is not between 0 and 1.
        """
        adjusted = holm_adjusted(list(p.values()))
        return cls(tuple(p), tuple(map(float, p.values())), tuple(adjusted.tolist()))

    def __getitem__(self, name: str) -> float:
        """Return the adjusted p of a test (KeyError where it is not of the family)."""
        try:
            return self.adjusted[self.names.index(name)]
        except ValueError:
            raise KeyError(name) from None

    def __iter__(self) -> Iterator[tuple[str, float, float]]:
        """Yield name, p and adjusted p of each test."""
        return zip(self.names, self.p, self.adjusted, strict=True)

    @property
    def smallest(self) -> str:
        """The test with the smallest adjusted p; of equals the one with the smallest p."""
        return min(self, key=lambda test: (test[2], test[1]))[0]

    def __repr__(self) -> str:
        told = ", ".join(f"{name} {adjusted:.3g}" for name, _, adjusted in self)
        return f"HolmFamily(adjusted p: {told})"
