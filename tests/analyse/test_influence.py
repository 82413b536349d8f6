"""Which spots to look at first: against plain definitions and all ways of being wrong."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyse.breaking_point import Judge
from analyse.count_chance import simulated_p
from analyse.dispersion import clipped_dispersion
from analyse.influence import LookFirst, influence, look_first
from analyse.recalls import DrawOptions
from analyse.verdict import decide


def looked(counts: np.ndarray, doubt: np.ndarray, areas: np.ndarray | None = None):
    areas = np.ones(counts.size) if areas is None else areas
    test = simulated_p(counts, areas, simulations=199, rng=np.random.default_rng(1))
    verdict = decide(int(counts.sum()), counts.size, test)
    quadrat = np.repeat(np.arange(counts.size), counts)
    look = look_first(doubt, counts, areas, quadrat, test, verdict=verdict)
    return look, quadrat, Judge.of(counts, areas, test), verdict


def test_influence_is_the_change_of_the_statistic_without_the_spot():
    counts, areas = np.array([5, 0, 2, 7, 1, 3]), np.array([1.0, 0.4, 0.7, 1.0, 1.0, 0.9])
    changes = influence(counts, areas, np.arange(6))
    judge = Judge(18, 6, 0.0, 0.0, float((areas.sum() / areas).sum()))

    def deviate(x):
        seen = clipped_dispersion(x, areas)
        return (seen.chi2 - seen.df) / judge.spread(seen.n)

    for k in np.flatnonzero(counts):
        without = counts.copy()
        without[k] -= 1
        assert changes[k] == pytest.approx(abs(deviate(without) - deviate(counts)))


def test_the_order_is_by_doubt_times_influence():
    counts = np.array([9, 2, 2, 2, 2, 2, 2, 2, 2])
    doubt = np.random.default_rng(2).random(25)
    look, quadrat, _, _ = looked(counts, doubt)
    weight = doubt * influence(counts, np.ones(9), quadrat)
    assert (np.diff(weight[look.order]) <= 0).all()
    assert sorted(look.order.tolist()) == list(range(25))


@settings(max_examples=30, deadline=None)
@given(st.data())
def test_after_the_decisive_ones_no_plausible_set_of_errors_changes_the_verdict(data):
    q = data.draw(st.integers(6, 8))
    where = data.draw(st.lists(st.integers(0, q - 1), min_size=11, max_size=14))
    counts = np.bincount(where, minlength=q)
    levels = st.sampled_from([0.0, 0.01, 0.1, 0.5])
    doubt = np.array(data.draw(st.lists(levels, min_size=len(where), max_size=len(where))))
    look, quadrat, judge, verdict = looked(counts, doubt)

    def may_change(first: int, many: int) -> bool:
        left = [k for k in look.order[first:] if doubt[k] > 0]
        return any(
            judge.verdict(counts - np.bincount(quadrat[list(out)], minlength=q), np.ones(q))
            != verdict
            for size in range(1, min(many, len(left)) + 1)
            for out in itertools.combinations(left, size)
        )

    assert not may_change(look.decisive, look.plausible)
    if look.decisive:
        assert may_change(look.decisive - 1, plausible(doubt[look.order[look.decisive - 1 :]]))


def plausible(doubt: np.ndarray) -> int:
    """The 97.5 % point of the number of false spots, by brute simulation of its Poisson law."""
    rng = np.random.default_rng(3)
    known = doubt[doubt > 0]
    logit = np.log(known / (1 - known))
    steps = DrawOptions().shared_doubt * rng.standard_normal((200_000, 1))
    mean = (1 / (1 + np.exp(-(logit + steps)))).sum(axis=1)
    return int(np.quantile(rng.poisson(mean), 0.977, method="inverted_cdf"))


def test_a_strong_verdict_with_little_doubt_is_settled_at_once():
    look, *_ = looked(np.array([30, 0, 0, 25, 0, 0, 28, 0, 0]), np.full(83, 0.01))
    assert look.settled
    assert look.sentence == (
        "No spot needs to be looked at for the verdict's sake: no plausible number of false ones"
        " would change it."
    )


def test_it_says_how_many_decide():
    counts = np.array([9, 3, 3, 2, 3, 2, 3, 2, 3])
    doubt = np.where(np.arange(30) < 5, 0.5, 0.001)
    look, *_ = looked(counts, doubt)
    assert 0 < look.decisive <= 5
    assert "decide" in look.sentence
    assert f"among the other {30 - look.decisive}" in look.sentence
    everything = LookFirst(np.arange(13), np.ones(13), 13, 0)
    assert everything.sentence == "All 13 spots matter to the verdict: look at every one."


def test_too_few_spots_or_quadrats_need_no_order():
    look, *_ = looked(np.array([2, 1, 0, 0, 0, 1]), np.full(4, 0.5))
    assert look.settled
    assert look.order.size == 4
    nothing = LookFirst(np.empty(0, dtype=np.int64), np.empty(0), 0, 0)
    assert nothing.sentence == "There is no spot to look at."
    assert influence([1, 1], [1, 1], [0, 1]).tolist() == [0.0, 0.0]
