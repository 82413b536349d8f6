"""Holm's adjustment: against another program, by hand, by its definition, and its identities."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from statsmodels.stats.multitest import multipletests

from analyse.holm import HolmFamily, holm_adjusted

SOME = st.lists(st.floats(0, 1), min_size=1, max_size=12)


@given(SOME)
def test_as_statsmodels_adjusts(p: list[float]) -> None:
    expected = multipletests(p, alpha=0.05, method="holm")
    np.testing.assert_allclose(holm_adjusted(p), expected[1], rtol=1e-12, atol=0)


def test_by_hand() -> None:
    """0.01 x 4, then 0.02 x 3, then the larger of 0.022 x 2 and 0.06, then 0.09 (Holm 1979)."""
    adjusted = holm_adjusted([0.022, 0.01, 0.09, 0.02])
    assert adjusted == pytest.approx([0.06, 0.04, 0.09, 0.06])


@given(SOME, st.sampled_from([0.01, 0.05, 0.2]))
def test_rejects_what_the_stepwise_procedure_rejects(p: list[float], level: float) -> None:
    """Holm's own words: from the smallest on, as long as p(i) <= level / (m - i + 1)."""
    order, rejected = sorted(range(len(p)), key=p.__getitem__), set()
    for step, k in enumerate(order):
        if p[k] * (len(p) - step) > level:
            break
        rejected.add(k)
    adjusted = holm_adjusted(p)
    assert {k for k in range(len(p)) if adjusted[k] <= level} == rejected


@given(SOME, st.randoms(use_true_random=False))
def test_identities(p: list[float], shuffle: object) -> None:
    """One test alone stays; nothing falls; order is kept; the order of telling does not matter."""
    adjusted = holm_adjusted(p)
    assert (adjusted >= p).all()
    assert adjusted.max() <= 1
    assert adjusted.min() == min(1.0, min(p) * len(p))
    ranked = adjusted[np.argsort(p, kind="stable")]
    assert (np.diff(ranked) >= 0).all()
    assert holm_adjusted(p[:1]).tolist() == p[:1]
    mixed = list(range(len(p)))
    shuffle.shuffle(mixed)  # type: ignore[attr-defined]
    np.testing.assert_array_equal(holm_adjusted([p[k] for k in mixed]), adjusted[mixed])


def test_never_more_careful_than_bonferroni() -> None:
    p = np.random.default_rng(4).uniform(0, 0.1, 20)
    assert (holm_adjusted(p) <= np.minimum(1, 20 * p)).all()
    assert (holm_adjusted(p) < np.minimum(1, 20 * p)).any()


@pytest.mark.parametrize("wrong", [[0.1, 1.2], [-0.01], [float("nan")], [[0.1, 0.2]]])
def test_impossible_p_are_refused(wrong: list[float]) -> None:
    with pytest.raises(ValueError, match=r"outside 0\.\.1|dimensions"):
        holm_adjusted(wrong)


def test_a_family_names_its_tests() -> None:
    family = HolmFamily.of({"sides": 0.02, "distances": 0.4, "neighbours": 0.01})
    assert list(family) == [
        ("sides", 0.02, pytest.approx(0.04)),
        ("distances", 0.4, 0.4),
        ("neighbours", 0.01, pytest.approx(0.03)),
    ]
    assert family.smallest == "neighbours"
    assert family["distances"] == 0.4
    assert repr(family) == "HolmFamily(adjusted p: sides 0.04, distances 0.4, neighbours 0.03)"
    with pytest.raises(KeyError, match="pairs"):
        family["pairs"]


def test_of_equal_adjusted_p_the_smaller_p_leads() -> None:
    family = HolmFamily.of({"sides": 0.03, "distances": 0.02})
    assert family.adjusted == (0.04, 0.04)
    assert family.smallest == "distances"


def test_a_family_needs_tests_of_different_names() -> None:
    with pytest.raises(ValueError, match="at least one"):
        HolmFamily.of({})
    with pytest.raises(ValueError, match="twice"):
        HolmFamily(("a", "a"), (0.1, 0.2), (0.2, 0.2))
