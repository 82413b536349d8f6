"""Flags: each has a sentence that can be filled in, and is raised where it should be."""

from __future__ import annotations

import string

import numpy as np
import pytest
from scipy import stats

from analyse.flags import FLAGS, count_flags, flag_sentences

VALUES = {
    "n": 60,
    "q": 32,
    "whole": 16,
    "mean_expected": 1.875,
    "clipped_percent": 38.0,
    "doubtful": 4,
    "outside": 3,
    "duplicates": 2,
    "touching": "1.14 mm",
    "width": "1.5 mm",
    "blind": 0.6,
    "dish_notes": "several round things are seen",
    "counted": "362",
    "corrected": "400",
    "corrected_low": "386",
    "corrected_high": "414",
}


@pytest.mark.parametrize("flag", FLAGS)
def test_every_flag_says_a_sentence_with_its_numbers(flag: str) -> None:
    (said,) = flag_sentences([flag], VALUES)
    assert said.endswith(".")
    assert "{" not in said
    for _, name, _, _ in string.Formatter().parse(FLAGS[flag]):
        assert name is None or name in VALUES


def test_flags_in_words() -> None:
    assert flag_sentences(["doubtful", "clipped_large", "low_expected"], VALUES) == (
        "Counted spots that are more likely false than real: 4 of 60;"
        " check them (orange in the pictures).",
        "Of the study area, 38 % lies in clipped quadrats; the verdict takes their areas into"
        " account, the VMR of whole quadrats leaves them out.",
        "A quadrat expects only 1.9 points on average: the chi-square p and the stated power are"
        " rough there; the simulated p holds.",
    )


@pytest.mark.parametrize(
    ("changes", "flags"),
    [
        ({}, ()),
        ({"q": 10, "whole": 10}, ()),
        ({"q": 9, "whole": 9}, ("few_quadrats",)),
        ({"mean_expected": 0.99}, ("low_expected",)),
        ({"mean_expected": 1.0}, ()),
        ({"mean_expected": 0.0, "n": 0, "q": 4, "whole": 4}, ()),
        ({"n": 30}, ("rough_chi_square",)),
        ({"n": 31}, ()),
        ({"n": 20, "mean_expected": 0.5}, ("low_expected",)),
        ({"q": 5, "whole": 5}, ("few_quadrats", "rough_chi_square")),
        ({"whole": 5}, ("few_whole",)),
        ({"whole": 6}, ()),
        ({"clipped_percent": 50.0}, ()),
        ({"clipped_percent": 51.0}, ("clipped_large",)),
        (
            {"q": 6, "whole": 0, "clipped_percent": 100.0},
            ("few_quadrats", "few_whole", "clipped_large"),
        ),
    ],
)
def test_flags_of_counts(changes: dict[str, float], flags: tuple[str, ...]) -> None:
    assert count_flags(VALUES | changes) == flags


@pytest.mark.parametrize(
    ("n", "q"),
    [(8, 4), (40, 4), (12, 10), (16, 10), (15, 15), (22, 20), (40, 9), (49, 49), (80, 16)],
)
def test_the_chi_square_p_is_called_rough_where_it_errs(n: int, q: int) -> None:
    """Share of 40,000 random sets of counts it rejects at 5 %: 3.5 to 6.5 %, or it is flagged."""
    counts = np.random.default_rng(1).multinomial(n, np.full(q, 1 / q), size=40_000)
    chi2 = ((counts - n / q) ** 2).sum(axis=1) * q / n
    upper, lower = stats.chi2.sf(chi2, q - 1), stats.chi2.cdf(chi2, q - 1)
    rate = np.mean(2 * np.minimum(upper, lower) <= 0.05)
    values = VALUES | {"n": n, "q": q, "whole": q, "mean_expected": n / q}
    assert 0.035 <= rate <= 0.065 or {"rough_chi_square", "low_expected"} & set(count_flags(values))
