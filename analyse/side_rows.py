"""A test as rows of tests.csv: one for each side, each saying which it is."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from detect.files import Cell

# For a statistic that is large where counts or points are clumped, and for one that is small there.
LARGE_IF_CLUMPED = {
    "clumped": "upper tail",
    "even": "lower tail",
    "two_sided": "twice the smaller tail",
}
SMALL_IF_CLUMPED = LARGE_IF_CLUMPED | {"clumped": "lower tail", "even": "upper tail"}


def side_rows(
    name: str,
    value: Cell,
    test: object,
    method: str,
    n: int,
    note: str,
    *,
    sides: Mapping[str, str] = LARGE_IF_CLUMPED,
) -> Iterator[list[Cell]]:
    """Yield one row per side of a test.

    Parameters
    ----------
    name : str
        Of the statistic; the side is added to it.
    value : float or None
        Of the statistic, the same in each row.
    test : object
        With the attributes p_clumped, p_even and p_two_sided.
    method : str
        With its source; the side is added to it in words.
    n : int
        Quadrats or points behind it.
    note : str
        Goes with each row.
    sides : mapping of str to str
        The words for each side.

    Yields
    ------
    list
        The cells of tests.csv after `photograph`.

    Examples
    --------
    >>> from analyse.dispersion import dispersion
    >>> test = dispersion([12, 16, 20])
    >>> [row[0] for row in side_rows("chi2", test.chi2, test, "chi-square", 3, "")]
    ['chi2_clumped', 'chi2_even', 'chi2_two_sided']
    """
    for side, words in sides.items():
        p = getattr(test, f"p_{side}")
        yield [f"{name}_{side}", value, None, None, p, f"{method}, {words}", n, note]
