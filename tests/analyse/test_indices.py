"""Indices of clumping: published values, identities between them, and their limits."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analyse.dispersion import dispersion
from analyse.indices import (
    cluster_size_index,
    greens_index,
    mean_crowding,
    morisita_index,
    patchiness,
)
from tests.analyse import published

some_counts = st.lists(st.integers(0, 40), min_size=2, max_size=40).filter(lambda x: sum(x) > 1)


def test_indices_of_the_mites() -> None:
    """Bliss and Fisher (1953), Biometrics 9, 176-200: computed from their frequencies."""
    mites = published.counts("bliss_fisher1953_mites")
    d = dispersion(mites)
    assert (d.vmr, d.chi2) == pytest.approx((1.982831, 295.4419), abs=5e-5)
    assert morisita_index(mites) == pytest.approx(1.856385, abs=5e-7)
    assert mean_crowding(mites) == pytest.approx(2.129498, abs=5e-7)
    assert patchiness(mites) == pytest.approx(1.857120, abs=5e-7)
    assert greens_index(mites) == pytest.approx(0.005748, abs=5e-7)
    assert cluster_size_index(mites) == pytest.approx(0.982831, abs=5e-7)


@given(some_counts)
def test_identities_between_the_indices(counts: list[int]) -> None:
    """Exact identities: X2 from Morisita's index; Lloyd, David and Moore, Green from the VMR."""
    x = np.array(counts)
    q, total, d = x.size, x.sum(), dispersion(counts)
    index = morisita_index(counts)
    assert index * (total - 1) + q - total == pytest.approx(d.chi2, abs=1e-9 * total * q)
    crowding = (x * (x - 1)).sum() / total
    assert crowding == pytest.approx(d.mean + x.var() / d.mean - 1, abs=1e-9)
    assert index == pytest.approx(q * crowding / (total - 1), abs=1e-9)
    assert mean_crowding(counts) == pytest.approx(d.mean + d.vmr - 1, abs=1e-9)
    assert cluster_size_index(counts) == pytest.approx(d.vmr - 1, abs=1e-9)
    assert greens_index(counts) == pytest.approx((d.vmr - 1) / (total - 1), abs=1e-9)


@given(st.integers(2, 30), st.integers(2, 50))
def test_limits_of_the_indices(q: int, total: int) -> None:
    """All in one quadrat: Green 1, Morisita q; one or none in each: Morisita 0; even: -1/(S - 1)."""
    together = [total] + [0] * (q - 1)
    assert greens_index(together) == pytest.approx(1)
    assert morisita_index(together) == pytest.approx(q)
    assert morisita_index([1, 1] + [0] * (q - 2)) == 0
    assert greens_index([total] * q) == pytest.approx(-1 / (q * total - 1))


def test_not_the_variants_they_are_confused_with() -> None:
    """Misprints seen in print: m + s^2 / (m - 1) for Lloyd, s^2 / (m - 1) for David and Moore.

    And Green's with the quadrats for the points, and the test of 1 / VMR for VMR - 1.
    """
    mites = published.counts("bliss_fisher1953_mites")
    d = dispersion(mites)
    assert mean_crowding(mites) != pytest.approx(d.mean + d.variance / (d.mean - 1), rel=0.1)
    assert cluster_size_index(mites) != pytest.approx(d.variance / (d.mean - 1), rel=0.1)
    assert greens_index(mites) == pytest.approx((d.vmr - 1) / 171)
    assert greens_index(mites) != pytest.approx((d.vmr - 1) / 149, rel=0.1)
    assert cluster_size_index(mites) == pytest.approx(d.vmr - 1)
    assert cluster_size_index(mites) != pytest.approx(1 / d.vmr - 1, rel=0.1)
    census = (mites * (mites - 1)).sum() / mites.sum()
    assert mean_crowding(mites) != pytest.approx(census, rel=1e-4)  # that form divides by q
    assert census == pytest.approx(d.mean + mites.var() / d.mean - 1)


@given(some_counts)
def test_empty_quadrats_leave_the_census_of_neighbours_alone(counts: list[int]) -> None:
    """Zeros appended: Morisita's index grows as the quadrats do, the others do not fall."""
    more = [*counts, 0, 0, 0]
    share = len(more) / len(counts)
    assert morisita_index(more) == pytest.approx(morisita_index(counts) * share)
    assert patchiness(more) >= patchiness(counts) - 1e-9
    assert greens_index(more) >= greens_index(counts) - 1e-12


@given(some_counts, st.randoms(use_true_random=False))
def test_order_does_not_matter(counts: list[int], random: object) -> None:
    mixed = list(counts)
    random.shuffle(mixed)  # type: ignore[attr-defined]
    for index in (morisita_index, mean_crowding, patchiness, cluster_size_index, greens_index):
        assert index(mixed) == pytest.approx(index(counts), rel=1e-12, abs=1e-12)
