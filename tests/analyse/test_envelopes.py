"""Global envelopes: against plain definitions, by hand, and p uniform under the null."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy import stats

from analyse.envelopes import Envelope, Measure, global_envelope

MEASURES: tuple[Measure, ...] = ("extreme rank length", "studentised maximum deviation")
LENGTH, DEVIATION = MEASURES
COLUMNS = ("x", "observed", "central", "low", "high")
Curves = NDArray[np.float64]


def judged(curves: Curves, measure: Measure = LENGTH, level: float = 0.05) -> Envelope:
    """The first of some curves against the others."""
    x = np.arange(curves.shape[1])
    return global_envelope(
        curves[0], curves[1:], x, name="curve", level=level, measure=measure
    )  # fmt: skip


def ordered_ranks(curves: Curves) -> list[list[float]]:
    """Two-sided ranks of each curve, smallest first, by counting."""
    n = len(curves)
    lists = []
    for curve in curves:
        below = [
            sum(c[k] < v for c in curves) + (1 + sum(c[k] == v for c in curves)) / 2
            for k, v in enumerate(curve)
        ]
        lists.append(sorted(min(rank, n + 1 - rank) for rank in below))
    return lists


def plain_length(curves: Curves, level: float) -> tuple[float, Curves, Curves]:
    """p and band by taking the most extreme curves away, one set of ranks after the other."""
    ranks, n = ordered_ranks(curves), len(curves)
    kept, p = list(range(n)), 1.0
    low, high = curves.min(axis=0), curves.max(axis=0)
    while True:
        worst = min(ranks[i] for i in kept)
        kept = [i for i in kept if ranks[i] > worst]
        if not kept:
            return p, low, high
        left = curves[kept]
        out = ((curves < left.min(axis=0)) | (curves > left.max(axis=0))).any(axis=1)
        if out[0] and p == 1.0:
            p = out.sum() / n
        if out.sum() / n <= level:
            low, high = left.min(axis=0), left.max(axis=0)


def plain_deviations(curves: Curves) -> NDArray[np.float64]:
    """Largest distance of each curve from the mean of the others in their standard deviations."""
    sizes = []
    for i in range(len(curves)):
        others = np.delete(curves, i, axis=0)
        off, spread = np.abs(curves[i] - others.mean(axis=0)), others.std(axis=0, ddof=1)
        sizes.append(max(o / s if s > 0 else (np.inf if o > 0 else 0.0) for o, s in zip(off, spread, strict=True)))  # fmt: skip
    return np.array(sizes)


def counts(draw: st.DrawFn, most: int) -> Curves:
    """Curves of small whole numbers, of which many tie."""
    n, k = draw(st.integers(5, 14)), draw(st.integers(1, 5))
    values = draw(st.lists(st.integers(0, most), min_size=n * k, max_size=n * k))
    return np.array(values, dtype=float).reshape(n, k)


@st.composite
def tying(draw: st.DrawFn) -> Curves:
    return counts(draw, draw(st.sampled_from([1, 3, 8])))


@st.composite
def untied(draw: st.DrawFn) -> Curves:
    n, k = draw(st.integers(5, 16)), draw(st.integers(1, 5))
    rng = np.random.default_rng(draw(st.integers(0, 2**32)))
    return np.array([rng.permutation(n) for _ in range(k)], dtype=float).T


@given(untied(), st.sampled_from([0.2, 0.3, 0.5]))
@settings(max_examples=150, deadline=None)
def test_without_ties_p_is_the_share_of_curves_at_least_as_extreme(
    curves: Curves, level: float
) -> None:
    """The definition of Myllymaki and others (2017): p and the range of what is not rejected."""
    ranks = ordered_ranks(curves)
    shares = [sum(other <= own for other in ranks) / len(ranks) for own in ranks]
    seen = judged(curves, level=level)
    assert seen.p == shares[0]
    kept = curves[[share > level for share in shares]]
    assert seen.low.tolist() == kept.min(axis=0).tolist()
    assert seen.high.tolist() == kept.max(axis=0).tolist()


@given(tying(), st.sampled_from([0.2, 0.3, 0.5]))
@settings(max_examples=150, deadline=None)
def test_with_ties_curves_are_taken_away_by_rank_length(curves: Curves, level: float) -> None:
    p, low, high = plain_length(curves, level)
    seen = judged(curves, level=level)
    assert seen.p == p
    assert (seen.low.tolist(), seen.high.tolist()) == (low.tolist(), high.tolist())


@given(st.one_of(tying(), untied()), st.sampled_from([0.2, 0.3, 0.5]))
@settings(max_examples=150, deadline=None)
def test_deviation_equals_the_plain_definition(curves: Curves, level: float) -> None:
    sizes = plain_deviations(curves)
    near = 1e-9 * np.maximum(1, sizes[np.isfinite(sizes)].max(initial=0))
    share = [np.mean(sizes >= own - near) for own in sizes]
    seen = judged(curves, DEVIATION, level)
    assert seen.p == share[0]
    reach = max(size for size, p in zip(sizes, share, strict=True) if p > level)
    if np.isfinite(reach):
        spread = reach * curves[1:].std(axis=0, ddof=1)
        middle = curves[1:].mean(axis=0)
        assert seen.high == pytest.approx(middle + spread, abs=1e-6)
        assert seen.low == pytest.approx(middle - spread, abs=1e-6)


@given(
    st.one_of(tying(), untied()), st.sampled_from([0.2, 0.3, 0.5]), st.sampled_from(MEASURES)
)  # fmt: skip
@settings(max_examples=300, deadline=None)
def test_the_curve_leaves_the_band_exactly_where_p_is_at_most_the_level(
    curves: Curves, level: float, measure: Measure
) -> None:
    for first in range(len(curves)):
        seen = judged(np.roll(curves, -first, axis=0), measure, level)
        assert bool(seen.outside.any()) == (seen.p <= level)
        assert (seen.side is not None) == (seen.p <= level)


@given(st.one_of(tying(), untied()), st.sampled_from(MEASURES))
@settings(max_examples=100, deadline=None)
def test_at_any_level_no_more_curves_are_rejected(curves: Curves, measure: Measure) -> None:
    """Whatever ties: of the curves themselves, a share of at most the level has a p that low."""
    p = np.array([judged(np.roll(curves, -i, axis=0), measure, 0.5).p for i in range(len(curves))])
    assert all(np.mean(p <= level) <= level for level in p)


@given(st.one_of(tying(), untied()), st.sampled_from(MEASURES), st.integers(0, 2**32))
@settings(max_examples=100, deadline=None)
def test_order_units_and_rounding_change_nothing(
    curves: Curves, measure: Measure, seed: int
) -> None:
    rng, seen = np.random.default_rng(seed), judged(curves, measure, 0.3)
    shuffled = curves.copy()
    shuffled[1:] = rng.permutation(curves[1:])
    shuffled = shuffled * (1 + 1e-14 * rng.standard_normal(curves.shape))
    again = judged(-1000 * shuffled, measure, 0.3)
    assert again.p == seen.p
    assert again.low == pytest.approx(-1000 * seen.high, abs=1e-6)


def test_by_hand() -> None:
    """Nineteen flat curves at 1..19 and one that is extreme once, or twice, or not at all."""
    flat = np.repeat(np.arange(1.0, 20.0)[:, None], 3, axis=1)
    once = judged(np.vstack([[10.4, 20.0, 10.4], flat]), level=0.1)
    # Smallest ranks: 1 thrice for the curve at 1, 1 twice for that at 19, 1 once for this one.
    assert once.p == 3 / 20
    assert not once.outside.any()
    twice = judged(np.vstack([[22.0, 20.0, 0.0], flat]), level=0.1)
    assert twice.p == 1 / 20
    assert (twice.side, twice.strongest) == ("above", 0)
    # Next goes the curve at 1 (ranks 1, 1, 2), before that at 19 (1, 2, 2).
    assert twice.low.tolist() == [2.0] * 3
    assert twice.high.tolist() == [19.0] * 3
    middle = judged(np.vstack([[10.5, 10.4, 10.6], flat]), level=0.1)
    assert middle.p == 1.0
    assert middle.side is None


def test_a_single_column_is_the_two_sided_rank_test() -> None:
    values = np.arange(1.0, 100.0)[:, None]
    assert judged(np.vstack([[[100.0]], values])).p == 2 / 100
    assert judged(np.vstack([[[3.5]], values])).p == 8 / 100


def test_columns_without_variation_have_no_say() -> None:
    """At small distances all is zero: no departure there, and no other p for it."""
    rng = np.random.default_rng(3)
    curves = rng.standard_normal((100, 6))
    padded = np.hstack([np.zeros((100, 4)), curves])
    for measure in MEASURES:
        plain, wide = judged(curves, measure), judged(padded, measure)
        assert wide.p == plain.p
        assert wide.low[:4].tolist() == wide.high[:4].tolist() == [0.0] * 4
        assert judged(np.zeros((100, 3)), measure).p == 1.0


def test_what_stands_alone_where_all_others_agree_has_left_the_band() -> None:
    curves = np.hstack([np.zeros((100, 1)), np.random.default_rng(4).standard_normal((100, 5))])
    curves[0] = [1.0, 0, 0, 0, 0, 0]
    seen = judged(curves, DEVIATION)
    assert (seen.p, seen.at, seen.side) == (1 / 100, 0.0, "above")
    assert (seen.low[0], seen.high[0]) == (0.0, 0.0)
    once = judged(curves)  # one of at most eleven curves with a smallest rank of 1
    assert 1 / 100 < once.p <= 11 / 100
    assert (once.low[0], once.high[0]) == (0.0, 1.0 if once.p > 0.05 else 0.0)
    alone = np.eye(20)  # each of them stands alone somewhere
    assert judged(alone, DEVIATION, 0.1).p == 1.0
    assert not judged(alone, DEVIATION, 0.1).outside.any()


@pytest.mark.parametrize("measure", MEASURES)
@pytest.mark.parametrize("kind", ["walks", "counts"])
def test_p_is_uniform_under_the_null(measure: Measure, kind: str) -> None:
    """1,000 curves, each against its own 199: the share of p at most 0.01 ... 0.5 is that."""
    rng, p = np.random.default_rng(5), []
    for _ in range(1000):
        if kind == "walks":
            curves = rng.standard_normal((200, 12)).cumsum(axis=1)
        else:
            curves = rng.poisson(np.linspace(0.05, 3, 12), (200, 12)).cumsum(axis=1).astype(float)
        p.append(judged(curves, measure).p)
    for level in (0.01, 0.05, 0.2, 0.5):
        low, high = stats.binom.interval(0.999, 1000, level)
        assert low <= np.sum(np.array(p) <= level) <= high


def test_the_rates_of_both_measures_on_a_shift() -> None:
    """Both see a curve lifted by a standard deviation and a half everywhere, mostly."""
    rng, p = np.random.default_rng(6), []
    for _ in range(200):
        curves = rng.standard_normal((200, 10))
        curves[0] += 1.5
        p.append([judged(curves, measure).p for measure in MEASURES])
    assert (np.mean(np.array(p) <= 0.05, axis=0) > 0.5).all()


def test_an_envelope_says_what_it_holds() -> None:
    curves = np.vstack([[0.0, 9.0, 8.0], np.random.default_rng(7).standard_normal((199, 3))])
    seen = judged(curves)
    assert repr(seen) == (
        "<Envelope curve: p = 0.005 by extreme rank length, 199 simulations,"
        " above the band most at 1>"
    )
    assert judged(curves[1:]).side is None
    assert repr(judged(curves[1:])).endswith("198 simulations>")
    with pytest.raises(ValueError, match="read-only"):
        seen.low[0] = 3


def test_unusable_curves_are_refused() -> None:
    curves = np.random.default_rng(8).standard_normal((100, 4))
    with pytest.raises(ValueError, match=r"shape \(99, 4\) do not fit 3 observed values"):
        global_envelope(curves[0, :3], curves[1:], range(3), name="curve")
    with pytest.raises(ValueError, match=r"18 simulations cannot reach level 0\.05"):
        judged(curves[:19])
    with pytest.raises(ValueError, match=r"cannot reach level 1"):
        judged(curves, level=1.0)
    with pytest.raises(ValueError, match="measure must be one of extreme rank length, stud"):
        judged(curves, "area")  # type: ignore[arg-type]
    with pytest.raises(ValueError, match="x of the curve curve does not increase"):
        global_envelope(curves[0], curves[1:], [1, 2, 2, 3], name="curve")
    with pytest.raises(ValueError, match=r"3 places for curves of 4 values"):
        global_envelope(curves[0], curves[1:], [1, 2, 3], name="curve")
    curves[5, 2] = np.nan
    with pytest.raises(ValueError, match="not finite in 1 of 4 columns, first in column 2; leave"):
        judged(curves)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"low": [np.nan]}, "low of the curve c is not finite"),
        ({"p": 0.0}, "p 0.0 and level 0.05 must lie"),
        ({"high": [1.0, 2.0]}, r"high has shape \(2,\) for 1"),
        ({column: [] for column in COLUMNS}, "c has no values"),
    ],
)
def test_impossible_envelopes_are_refused(change: dict[str, object], message: str) -> None:
    fields = {column: [1.0] for column in COLUMNS}
    rest = {"name": "c", "p": 0.5, "level": 0.05, "simulations": 99, "measure": LENGTH}
    with pytest.raises(ValueError, match=message):
        Envelope(**(fields | rest | change))  # type: ignore[arg-type]
