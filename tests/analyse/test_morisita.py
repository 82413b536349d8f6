"""Morisita's index, its critical values and all four branches of the standardised form."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from analyse.dispersion import dispersion
from analyse.morisita import morisita, morisita_index
from tests.analyse import published


@pytest.mark.parametrize(
    ("series", "index", "even", "clumped", "standardised", "branch"),
    [
        ("bliss_fisher1953_mites", 1.856385, 0.813438, 1.208696, 0.502177, "a"),
        ("student1907_C", 1.050842, 0.925662, 1.079605, 0.319340, "b"),
        ("student1907_D", 0.990375, 0.971433, 1.030591, -0.168465, "c"),
        ("sokal_rohlf_azuki", 0.084465, 0.465393, 1.608797, -0.909255, "d"),
    ],
)
def test_one_series_for_each_branch(
    series: str, index: float, even: float, clumped: float, standardised: float, branch: str
) -> None:
    """Sources in data/frequencies.csv; figures by the definition of Smith-Gill (1975) and Krebs."""
    seen = morisita(published.counts(series))
    assert (seen.index, seen.even_limit, seen.clumped_limit) == pytest.approx(
        (index, even, clumped), abs=6e-7
    )
    assert (seen.standardised, seen.branch) == (pytest.approx(standardised, abs=6e-7), branch)
    assert seen.reason == ""


def test_further_published_series() -> None:
    """ "Student" (1907) A, just beyond the border of a and b; Clarke (1946); Sokal and Rohlf."""
    for series, value in (
        ("student1907_A", 0.500090),
        ("clarke1946_5plus_as_7", 0.174941),
        ("sokal_rohlf_moss", 0.512041),
    ):
        seen = morisita(published.counts(series))
        assert seen.standardised == pytest.approx(value, abs=6e-7)
        assert seen.branch == ("b" if series.startswith("clarke") else "a")
    assert morisita_index(published.counts("sokal_rohlf_moss")) == pytest.approx(4.544262, abs=6e-7)


GRID_4 = [6, 5, 4, 3, 3, 3, 2, *[1] * 7, 0, 0]
GRID_6 = [6, 5, 4, 3, 2, *[1] * 13, *[0] * 18]
GRID_8 = [6, 4, 4, 3, 2, 2, 2, 2, *[1] * 7, *[0] * 49]


@pytest.mark.parametrize(
    ("counts", "points", "vmr", "chi2", "index", "standardised", "branch", "p"),
    [
        (GRID_4, 33, 1.517, 22.76, 1.242, 0.3106, "b", 0.08908),
        (GRID_6, 33, 2.268, 79.36, 2.386, 0.5119, "a", 0.00003),
        (GRID_8, 32, 2.667, 168.00, 4.387, 0.5210, "a", 0.00000),
    ],
)
def test_a_published_table(
    counts: list[int],
    points: int,
    vmr: float,
    chi2: float,
    index: float,
    standardised: float,
    branch: str,
    p: float,
) -> None:
    """Journal of Ecosystem and Ecography 3, 136 (2013), table 1: VMR, chi-square, index, I_p, p.

    The counts are not printed; these have the sums of the 4 x 4, 6 x 6 and 8 x 8 grids. The
    denominator M_c - 1 in branch (b) is settled here: M_u - 1, as some texts print, is negative.
    """
    seen, judged = morisita(counts), dispersion(counts)
    assert judged.n == points
    assert (judged.vmr, seen.index) == pytest.approx((vmr, index), abs=6e-4)
    assert judged.chi2 == pytest.approx(chi2, abs=6e-3)
    assert (seen.standardised, seen.branch) == (pytest.approx(standardised, abs=7e-4), branch)
    assert judged.p_clumped == pytest.approx(p, abs=4e-4)
    if branch == "b":
        confused = 0.5 * (seen.index - 1) / (seen.even_limit - 1)
        assert confused < 0 < seen.standardised


def test_the_index_multiplies_by_the_quadrats() -> None:
    """Confused variants: by the points or by the mean instead of q."""
    x = published.counts("bliss_fisher1953_mites")
    q, total = x.size, x.sum()
    share = (x * (x - 1)).sum() / (total * (total - 1))
    assert morisita_index(x) == pytest.approx(q * share)
    for wrong in (total * share, x.mean() * share):
        assert morisita_index(x) != pytest.approx(wrong, rel=0.01)


@given(st.integers(2, 200), st.integers(2, 400))
def test_critical_values_against_scipy(q: int, total: int) -> None:
    seen = morisita([total] + [0] * (q - 1))
    for value, quantile in ((seen.even_limit, 0.025), (seen.clumped_limit, 0.975)):
        wanted = (stats.chi2.ppf(quantile, q - 1) - q + total) / (total - 1)
        assert value == pytest.approx(wanted, rel=1e-9, abs=1e-9)
    assert seen.index == pytest.approx(q)
    if seen.clumped_limit < q:
        assert seen.standardised == pytest.approx(1)


@given(st.lists(st.integers(0, 30), min_size=2, max_size=40).filter(lambda x: sum(x) > 1))
def test_beyond_a_half_is_what_the_chi_square_finds(counts: list[int]) -> None:
    """X2 = I (S - 1) + q - S: |I_p| > 0.5 and a two-sided p below 5 % are the same."""
    seen, judged = morisita(counts), dispersion(counts)
    assert -1 <= seen.standardised <= 1
    if abs(judged.p_two_sided - 0.05) > 1e-9:
        assert (abs(seen.standardised) > 0.5) == (judged.p_two_sided < 0.05)
    sign = np.sign(seen.index - 1) if abs(seen.index - 1) > 1e-12 else 0
    assert sign == 0 or np.sign(seen.standardised) == sign


@given(st.lists(st.integers(0, 30), min_size=2, max_size=40).filter(lambda x: sum(x) > 1))
def test_order_does_not_matter_and_empty_quadrats_scale_the_index(counts: list[int]) -> None:
    more = [*counts[::-1], 0, 0]
    wanted = morisita_index(counts) * len(more) / len(counts)
    assert morisita_index(more) == pytest.approx(wanted)
    assert morisita(counts[::-1]).standardised == pytest.approx(morisita(counts).standardised)


def test_too_few_points_to_be_found_even() -> None:
    """100 quadrats, 20 points: M_u is -.349, below every index, so that branch (d) is out of reach."""
    seen = morisita([1] * 20 + [0] * 80)
    assert seen.even_limit == pytest.approx(-0.349, abs=6e-4)
    assert (seen.index, seen.branch) == (0, "c")
    assert -0.5 < seen.standardised < 0


def test_branch_d_without_a_positive_limit_has_no_value() -> None:
    from analyse.morisita import _standardised

    value, reason = _standardised("d", -0.4, -0.349, 1.5, 100)
    assert math.isnan(value)
    assert reason == "M_u is -0.349, not positive: too few points for branch (d)"


def test_too_few_points_or_quadrats_have_no_index() -> None:
    for counts, reason in (
        ([0, 0, 0], "fewer than 2 points"),
        ([0, 1, 0], "fewer than 2 points"),
        ([7], "fewer than 2 quadrats"),
    ):
        seen = morisita(counts)
        assert math.isnan(seen.standardised)
        assert (seen.branch, seen.reason) == (None, reason)


@pytest.mark.parametrize(
    ("df", "lower", "upper"),
    [
        (15, 6.262, 27.488),
        (24, 12.401, 39.364),
        (35, 20.569, 53.203),
        (63, 42.950, 86.830),
        (99, 73.361, 128.422),
    ],
)
def test_critical_values_against_a_printed_table_of_chi_square(
    df: int, lower: float, upper: float
) -> None:
    """Any table of chi-square, .025 and .975: M = (quantile - q + S) / (S - 1) turned round.

    "chi-square .975" in Krebs means the area to the right, the lower value; swapped, M_u and M_c
    would change places.
    """
    total = 40
    seen = morisita([total] + [0] * df)
    back = [limit * (total - 1) + df + 1 - total for limit in (seen.even_limit, seen.clumped_limit)]
    assert back == pytest.approx([lower, upper], abs=6e-4)
