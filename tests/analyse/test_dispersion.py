"""Dispersion against published counts, identities, and the variants it is often confused with."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from analyse.dispersion import (
    clipped_dispersion,
    dispersion,
    expected_counts,
    normal_deviate,
    residuals,
    vmr_standard_error,
)
from analyse.errors import TooFewQuadrats
from analyse.indices import greens_index, morisita_index
from tests.analyse import published

some_counts = st.lists(st.integers(0, 40), min_size=2, max_size=40).filter(lambda x: sum(x) > 1)

# "Student" (1907), Biometrika 5, 351-360: means published; the rest computed from his frequencies.
STUDENT = [
    ("student1907_A", 0.6825, 0.813728, 1.192276, 475.7179, 0.004908, 0.009817),
    ("student1907_B", 1.3225, 1.286711, 0.972938, 388.2023, 0.641355, 0.717290),
    ("student1907_C", 1.8000, 1.964912, 1.091618, 435.5556, 0.100282, 0.200564),
    ("student1907_D", 4.6800, 4.468772, 0.954866, 380.9915, 0.733573, 0.532854),
]


@pytest.mark.parametrize(("series", "mean", "variance", "vmr", "chi2", "upper", "two"), STUDENT)
def test_student_1907(
    series: str, mean: float, variance: float, vmr: float, chi2: float, upper: float, two: float
) -> None:
    d = dispersion(published.counts(series))
    assert (d.q, d.df) == (400, 399)
    assert d.mean == pytest.approx(mean, rel=1e-9)
    assert d.variance == pytest.approx(variance, abs=5e-7)
    assert d.vmr == pytest.approx(vmr, abs=5e-7)
    assert d.chi2 == pytest.approx(chi2, abs=5e-5)
    assert d.p_clumped == pytest.approx(upper, abs=5e-7)
    assert d.p_even == pytest.approx(1 - upper, abs=1e-6)
    assert d.p_two_sided == pytest.approx(two, abs=1e-6)


# Squares of Student's map merged to b x b blocks; computed from the published map.
MERGED = [
    (1, 400, 4.68, 4.468772, 0.954866, 380.9915, 0.73357, 0.53285, 0.990375),
    (2, 100, 18.72, 19.213737, 1.026375, 101.6111, 0.40856, 0.81712, 1.001396),
    (4, 25, 74.88, 98.36, 1.313568, 31.5256, 0.13920, 0.27840, 1.004022),
    (5, 16, 117.0, 194.266667, 1.660399, 24.9060, 0.05122, 0.10244, 1.005294),
    (10, 4, 468.0, 54.666667, 0.116809, 0.35043, 0.95028, 0.09944, 0.998584),
]


@pytest.mark.parametrize("row", MERGED)
def test_student_map_merged_to_blocks(row: tuple[float, ...]) -> None:
    b, q, mean, variance, vmr, chi2, upper, two, morisita = row
    b = int(b)
    blocks = published.student_grid().reshape(20 // b, b, 20 // b, b).sum(axis=(1, 3))
    d = dispersion(blocks)
    assert (d.q, d.n) == (q, 1872)
    assert d.mean == pytest.approx(mean, rel=1e-9)
    assert d.variance == pytest.approx(variance, abs=5e-7)
    assert d.vmr == pytest.approx(vmr, abs=5e-7)
    assert d.chi2 == pytest.approx(chi2, abs=5e-5)
    assert d.p_clumped == pytest.approx(upper, abs=5e-6)
    assert d.p_two_sided == pytest.approx(two, abs=1e-5)
    assert morisita_index(blocks) == pytest.approx(morisita, abs=5e-7)


def test_student_map_is_series_d() -> None:
    """Row totals and frequencies as published with the map ("Student" 1907, Table I)."""
    grid = published.student_grid()
    rows = "91 94 88 88 98 79 110 97 103 84 77 100 91 90 94 103 96 106 82 101"
    assert grid.sum(axis=1).tolist() == [int(total) for total in rows.split()]
    assert np.sort(grid.ravel()).tolist() == published.counts("student1907_D").tolist()
    assert dispersion(grid.sum(axis=1)).chi2 == pytest.approx(16.4188, abs=5e-5)
    assert dispersion(grid.sum(axis=0)).chi2 == pytest.approx(22.8718, abs=5e-5)
    assert dispersion(grid.sum(axis=1)).p_clumped == pytest.approx(0.629, abs=5e-4)
    assert dispersion(grid.sum(axis=0)).p_clumped == pytest.approx(0.243, abs=5e-4)


def test_clarke_1946_flying_bombs() -> None:
    """Clarke (1946): 537 bombs in 576 squares; the square of "5 or more" holds 7."""
    d = dispersion(published.counts("clarke1946_5plus_as_7"))
    assert (d.n, d.q) == (537, 576)
    assert d.mean == pytest.approx(0.932292, abs=5e-7)
    assert d.variance == pytest.approx(0.971060, abs=5e-7)
    assert d.vmr == pytest.approx(1.041584, abs=5e-7)
    assert d.chi2 == pytest.approx(598.9106, abs=5e-5)
    assert d.p_clumped == pytest.approx(0.23726, abs=5e-6)


def test_bortkiewicz_1898_horse_kicks() -> None:
    """Bortkiewicz (1898): mean .61; the textbook variance .611 divides by q - 1."""
    d = dispersion(published.counts("bortkiewicz1898"))
    assert d.mean == pytest.approx(0.61, rel=1e-9)
    assert round(d.variance, 3) == 0.611
    assert d.chi2 == pytest.approx(199.3115, abs=5e-5)
    assert d.p_clumped == pytest.approx(0.48045, abs=5e-6)


def test_rutherford_and_geiger_1910() -> None:
    """Rutherford and Geiger (1910): mean 3.87 published; a lower tail at 2607 degrees."""
    d = dispersion(published.counts("rutherford_geiger1910"))
    assert (d.q, d.n) == (2608, 10097)
    assert round(d.mean, 2) == 3.87
    assert d.vmr == pytest.approx(0.954706, abs=5e-7)
    assert d.chi2 == pytest.approx(2488.918, abs=5e-4)
    assert d.p_even == pytest.approx(0.04933, abs=5e-6)
    assert d.p_two_sided == pytest.approx(0.0987, abs=5e-5)


def test_weed_seeds_in_phleum() -> None:
    """Snedecor and Cochran, Statistical Methods: X2 = 105.3 on 97 df (quoted from memory)."""
    d = dispersion(published.counts("snedecor_phleum"))
    assert (d.q, d.n, d.df) == (98, 296, 97)
    assert round(d.chi2, 1) == 105.3
    assert d.p_clumped == pytest.approx(0.2659, abs=5e-5)


def test_azuki_weevils_are_even_and_moss_is_clumped() -> None:
    """Sokal and Rohlf, Biometry: coefficient of dispersion .579 for the weevils (from memory)."""
    weevils = dispersion(published.counts("sokal_rohlf_azuki"))
    assert round(weevils.vmr, 3) == 0.579
    assert weevils.mean == pytest.approx(0.464286, abs=5e-7)
    assert weevils.variance == pytest.approx(0.268983, abs=5e-7)
    assert weevils.chi2 == pytest.approx(64.3077, abs=5e-5)
    assert weevils.p_even == pytest.approx(1.16e-4, abs=5e-7)
    moss = published.counts("sokal_rohlf_moss")
    assert morisita_index(moss) == pytest.approx(4.544262, abs=5e-7)
    assert dispersion(moss).p_clumped < 1e-6


def test_replicate_plates() -> None:
    """Fisher, Thornton and Mackenzie (1922): the statistic; plates of the ISO/TR 13843 example."""
    d = dispersion([12, 16, 20])
    assert (d.chi2, d.df) == (2.0, 2)
    assert d.p_clumped == pytest.approx(math.exp(-1), rel=1e-12)


def test_many_quadrats_by_the_normal_approximation() -> None:
    """d = sqrt(2 X2) - sqrt(2 df - 1) for Student's series and for the mites of Bliss and Fisher."""
    wanted = {"A": 2.6142, "B": -0.3672, "C": 1.2834, "D": -0.6272}
    for series, d in wanted.items():
        seen = dispersion(published.counts(f"student1907_{series}"))
        assert normal_deviate(seen.chi2, seen.df) == pytest.approx(d, abs=5e-5)
    mites = dispersion(published.counts("bliss_fisher1953_mites"))
    assert normal_deviate(mites.chi2, mites.df) == pytest.approx(7.0744, abs=5e-5)


def test_clipped_quadrats_by_hand() -> None:
    """E = 2, 4, 6: X2 = 1/2 + 1/4 + 0 by hand, against scipy's chi-square."""
    d = clipped_dispersion([3, 3, 6], [1, 2, 3])
    assert d.chi2 == pytest.approx(0.75)
    assert (d.df, d.vmr) == (2, pytest.approx(0.375))
    assert d.variance == pytest.approx(d.vmr * d.mean)
    reference = stats.chisquare([3, 3, 6], [2, 4, 6])
    assert d.p_clumped == pytest.approx(reference.pvalue, rel=1e-12)


@given(some_counts, st.floats(1e-3, 1e6))
def test_clipped_equals_plain_where_all_areas_are_equal(counts: list[int], area: float) -> None:
    plain, clipped = dispersion(counts), clipped_dispersion(counts, [area] * len(counts))
    for name in ("mean", "variance", "vmr", "chi2", "p_clumped", "p_even", "p_two_sided"):
        wanted = pytest.approx(getattr(plain, name), rel=1e-8, abs=1e-9)
        assert getattr(clipped, name) == wanted
    assert clipped.chi2 == pytest.approx((clipped.q - 1) * plain.vmr, rel=1e-8, abs=1e-9)


@given(some_counts)
def test_order_does_not_matter(counts: list[int]) -> None:
    assert dispersion(counts[::-1]).chi2 == pytest.approx(dispersion(counts).chi2)


@given(some_counts)
def test_against_an_independent_library(counts: list[int]) -> None:
    """scipy.stats.chisquare with equal expected counts is the index-of-dispersion test."""
    reference = stats.chisquare(counts)
    d = dispersion(counts)
    assert d.chi2 == pytest.approx(reference.statistic, rel=1e-9, abs=1e-9)
    assert d.p_clumped == pytest.approx(reference.pvalue, rel=1e-6, abs=1e-12)


def test_not_the_variants_it_is_confused_with() -> None:
    """The variance divides by q - 1, the degrees are q - 1, S in Green's index is the total."""
    counts = published.counts("student1907_A")
    d = dispersion(counts)
    assert d.variance != pytest.approx(0.811694, abs=5e-6)  # divisor q
    assert d.variance == pytest.approx(0.813728, abs=5e-6)
    assert d.df == 399
    assert d.p_clumped == pytest.approx(float(stats.chi2.sf(d.chi2, 399)), rel=1e-9)
    assert d.p_clumped != pytest.approx(float(stats.chi2.sf(d.chi2, 400)), rel=1e-3)
    assert d.p_two_sided == pytest.approx(2 * d.p_clumped)
    assert d.p_clumped + d.p_even == pytest.approx(1)
    assert greens_index(counts) == pytest.approx((d.vmr - 1) / (273 - 1))
    assert greens_index(counts) != pytest.approx((d.vmr - 1) / (400 - 1), rel=1e-3)
    total, q = counts.sum(), counts.size
    pairs = (counts * (counts - 1)).sum()
    assert morisita_index(counts) == pytest.approx(q * pairs / (total * (total - 1)))


def test_standard_error_of_the_ratio_and_its_variants() -> None:
    """sqrt(2 / (q - 1)) (Bartlett), not sqrt(2 q / (q - 1)^2) (Blackman), nor sqrt(2 / q)."""
    for q in (2, 25, 400):
        error = vmr_standard_error(q)
        assert error == pytest.approx(math.sqrt(2 / (q - 1)))
        assert error < math.sqrt(2 * q / (q - 1) ** 2)
        assert error > math.sqrt(2 / q)
    with pytest.raises(TooFewQuadrats, match="at least 2 quadrats, not 1"):
        vmr_standard_error(1)


@pytest.mark.parametrize(("q", "total"), [(2, 7), (3, 5), (4, 4)])
def test_the_spread_of_the_ratio_by_all_patterns(q: int, total: int) -> None:
    """All ways to put S points into q quadrats: mean 1, variance 2 (1 - 1 / S) / (q - 1).

    Haldane (1940), Biometrika 31, 346-355; Bartlett's standard error is its limit for many points.
    """
    ratios = np.array(
        [
            dispersion(np.bincount(homes, minlength=q)).vmr
            for homes in itertools.product(range(q), repeat=total)
        ]
    )
    assert ratios.mean() == pytest.approx(1)
    assert ratios.var() == pytest.approx(vmr_standard_error(q) ** 2 * (1 - 1 / total))


def test_clarkes_last_square_holds_seven() -> None:
    """Clarke (1946): 537 hits make it 7; a 5 for "5 or more" gives another mean and ratio."""
    right = published.counts("clarke1946_5plus_as_7")
    wrong = np.where(right == 7, 5, right)
    one, other = dispersion(right), dispersion(wrong)
    assert (one.n, other.n) == (537, 535)
    assert (one.mean, one.vmr) == pytest.approx((0.932292, 1.041584), abs=6e-7)
    assert (other.mean, other.vmr, other.chi2) == pytest.approx(
        (0.92882, 1.00751, 579.318), abs=6e-4
    )


def test_upper_is_clumped_and_lower_is_even() -> None:
    clumped, even = dispersion([20, 0, 0, 0, 0]), dispersion([4, 4, 4, 4, 4])
    assert clumped.p_clumped < 1e-9 < 0.99 < clumped.p_even
    assert even.p_even == 0.0
    assert even.p_clumped == 1.0
    assert even.p_two_sided == 0.0


def test_two_sided_p_is_capped() -> None:
    """At the median of chi-square both tails are one half; twice that may not pass 1."""
    assert dispersion([1, 2, 3]).p_two_sided <= 1
    counts = [2, 2, 2, 3, 0]
    d = dispersion(counts)
    assert d.p_two_sided == min(1.0, 2 * min(d.p_clumped, d.p_even))


def test_residuals_by_hand_and_their_spread_at_random() -> None:
    """(x - E) / sqrt(E (1 - a/A)); over multinomial draws the variance of each is 1."""
    assert residuals([5, 1], [2, 4]) == pytest.approx([3 / math.sqrt(4 / 3), -3 / math.sqrt(4 / 3)])
    rng = np.random.default_rng(5)
    shares = np.array([0.5, 0.3, 0.15, 0.05])
    draws = rng.multinomial(60, shares, size=4000)
    z = np.array([residuals(x, 60 * shares) for x in draws])
    assert z.mean(axis=0) == pytest.approx(np.zeros(4), abs=0.08)
    assert z.var(axis=0) == pytest.approx(np.ones(4), abs=0.12)


def test_no_points_leave_everything_undefined_but_the_counts() -> None:
    for d in (dispersion([0, 0, 0]), clipped_dispersion([0, 0, 0], [1, 2, 3])):
        assert (d.q, d.n, d.mean, d.variance, d.df) == (3, 0, 0.0, 0.0, 2)
        assert all(map(math.isnan, (d.vmr, d.chi2, d.p_clumped, d.p_even, d.p_two_sided)))
    assert np.isnan(residuals([0, 0], [0, 0])).all()
    assert math.isnan(morisita_index([0, 0]))
    assert math.isnan(greens_index([1, 0]))


def test_huge_counts_keep_their_figures() -> None:
    d = dispersion([10**11, 10**11 + 10**6])
    assert d.chi2 == pytest.approx((5e5**2) * 2 / (10**11 + 5e5), rel=1e-9)


def test_a_residual_of_the_only_quadrat_is_unknown() -> None:
    assert np.isnan(residuals([5], [5])).all()


def test_expected_counts_go_by_area() -> None:
    assert expected_counts([1, 2, 7], [1, 1, 3]).tolist() == pytest.approx([2, 2, 6])
    assert expected_counts([1, 2, 6], None).tolist() == pytest.approx([3, 3, 3])


@pytest.mark.parametrize("test", [dispersion, lambda x: clipped_dispersion(x, [1] * len(x))])
@pytest.mark.parametrize("q", [0, 1])
def test_fewer_than_two_quadrats_are_refused(test: object, q: int) -> None:
    message = f"Dispersion needs at least 2 quadrats, not {q}; choose smaller quadrats"
    with pytest.raises(TooFewQuadrats, match=message):
        test([4] * q)  # type: ignore[operator]


@pytest.mark.parametrize("counts", [[1.5, 2], [-1, 2], [math.nan, 1], [math.inf, 1]])
def test_impossible_counts_are_refused(counts: list[float]) -> None:
    with pytest.raises(ValueError, match="counts must be whole numbers of 0 or more"):
        dispersion(counts)


@pytest.mark.parametrize("areas", [[0, 1], [-1, 1], [math.nan, 1]])
def test_impossible_areas_are_refused(areas: list[float]) -> None:
    with pytest.raises(ValueError, match="areas must be positive and finite"):
        clipped_dispersion([1, 2], areas)


def test_areas_and_counts_must_pair() -> None:
    with pytest.raises(ValueError, match="3 areas for 2 counts"):
        clipped_dispersion([1, 2], [1, 1, 1])
