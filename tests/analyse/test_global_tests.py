"""All tests of one pattern from one set of simulations: by hand, at random, and against known patterns."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
import shapely
from numpy.typing import NDArray
from scipy import stats
from scipy.spatial import cKDTree
from shapely.geometry.base import BaseGeometry

from analyse.departures import judged_together
from analyse.envelopes import global_envelope
from analyse.global_tests import Curves, GlobalTests, global_tests, index_test
from analyse.nulls import CompleteRandomness, random_points
from analyse.pattern import Pattern
from analyse.ruler import Ruler
from analyse.scales import Sides
from analyse.simulated_curves import stream_of
from analyse.trend import TrendRandomness, fit_trend
from detect.errors import OptionWrong
from tests.analyse import published
from tests.analyse.areas import AREAS, RAGGED

ALL = ["vmr_by_side", "l_function", "pair_correlation", "nearest_neighbour", "empty_space"]
Floats = NDArray[np.float64]


def judged(points: Floats, area: BaseGeometry, **choices: object) -> GlobalTests:
    """The tests of some points."""
    tests = global_tests(Pattern.of(points, area), **({"simulations": 99} | choices))  # type: ignore[arg-type]
    assert tests is not None
    return tests


def p_of(tests: GlobalTests) -> list[float]:
    """Every p of a pattern."""
    indices = (tests.clark_evans.p_two_sided, tests.hopkins_skellam.p_two_sided)
    return [*(envelope.p for envelope in tests.envelopes.values()), *indices]


def test_all_tests_come_from_the_same_simulations() -> None:
    """One after the other, by the plain way: draw, measure, judge."""
    area, n = AREAS["circle"], 40
    points = random_points(area, n, np.random.default_rng(2))
    tests = judged(points, area, seed=5)
    null, sides, ruler = CompleteRandomness(area), Sides.of(area, n), Ruler.of(area, n)
    drawn = [null.draw(n, stream_of(5, i)) for i in range(99)]
    assert list(tests.envelopes) == ALL
    for name, envelope in tests.envelopes.items():
        if name == "vmr_by_side":
            seen, others = sides.vmr(points), np.array([sides.vmr(xy) for xy in drawn])
        else:
            seen = ruler.split(ruler.curves(points))[name]
            others = np.array([ruler.split(ruler.curves(xy))[name] for xy in drawn])
        x = sides.x if name == "vmr_by_side" else ruler.x[name]
        plain = global_envelope(seen, others, x, name=name)
        assert envelope.p == plain.p
        assert envelope.high.tolist() == plain.high.tolist()
        assert envelope.simulations == 99
    apart = [cKDTree(xy).query(xy, k=2)[0][:, 1].mean() for xy in (points, *drawn)]
    ratio = 2 * math.sqrt(n / area.area)
    assert tests.clark_evans.value == pytest.approx(ratio * apart[0])
    assert tests.clark_evans.expected == pytest.approx(ratio * np.mean(apart[1:]))
    assert tests.clark_evans.p_clumped == np.mean(np.array(apart) <= apart[0])
    assert (tests.null, tests.seed, tests.left_out) == (null.name, 5, ())


def test_workers_and_runs_change_no_byte(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("analyse.simulated_curves._WORTH_SHARING", 0.0)
    points = random_points(RAGGED, 60, np.random.default_rng(1))
    one, again, two = (judged(points, RAGGED, seed=3, workers=k) for k in (1, 1, 2))
    for other in (again, two):
        for name in ALL:
            a, b = one.envelopes[name], other.envelopes[name]
            assert (a.low.tobytes(), a.high.tobytes(), a.p) == (
                b.low.tobytes(),
                b.high.tobytes(),
                b.p,
            )
        assert (one.clark_evans, one.hopkins_skellam) == (other.clark_evans, other.hopkins_skellam)
    assert p_of(judged(points, RAGGED, seed=4)) != p_of(one)


@pytest.mark.parametrize(
    ("name", "window", "side"),
    [("redwood", published.REDWOOD_WINDOW, "above"), ("cells", published.CELLS_WINDOW, "below")],
)
def test_published_patterns(name: str, window: tuple[float, ...], side: str) -> None:
    """Ripley (1977): redwood seedlings are clumped, biological cells evenly spaced."""
    tests = judged(published.points(name), shapely.box(*window), simulations=199)
    together = judged_together(tests.envelopes)
    for each in ("l_function", "nearest_neighbour", "pair_correlation"):
        assert tests.envelopes[each].p == 1 / 200
        assert tests.envelopes[each].side == side
    assert together["l_function"] <= 0.05
    clumped = name == "redwood"
    for index in (tests.clark_evans, tests.hopkins_skellam):
        assert (index.p_clumped if clumped else index.p_even) == 1 / 200
    assert (tests.clark_evans.value < tests.clark_evans.expected) == clumped
    assert (tests.hopkins_skellam.value > tests.hopkins_skellam.expected) == clumped


def test_a_gradient_departs_from_chance_but_not_from_its_own_null() -> None:
    square = shapely.box(0, 0, 100, 100)
    points = 100 * np.random.default_rng(3).random((200, 2)) ** [0.4, 1.0]
    plain = judged(points, square)
    assert plain.envelopes["l_function"].p == 0.01
    null = TrendRandomness(square, fit_trend(points, square))
    beyond = judged(points, square, null=null)
    assert beyond.null == null.name
    assert min(beyond.envelopes[name].p for name in ALL) > 0.05


@pytest.mark.parametrize("factor", [10.0, 0.001])
def test_units_places_and_order_change_no_p(factor: float) -> None:
    rng = np.random.default_rng(6)
    points = random_points(RAGGED, 50, rng)
    plain = judged(points, RAGGED)

    null, by = CompleteRandomness(RAGGED), np.array([1024.0, -512.0])

    class Moved:
        """The same random points in the other place."""

        name = "moved"

        def draw(self, n: int, rng: np.random.Generator) -> Floats:
            return moved(null.draw(n, rng))

    def moved(xy: Floats) -> Floats:
        return np.asarray((xy + by) * factor)

    elsewhere = shapely.transform(RAGGED, moved)
    other = judged(moved(rng.permutation(points)), elsewhere, null=Moved())
    assert p_of(other) == p_of(plain)
    for name in ALL:
        assert other.envelopes[name].x == pytest.approx(factor * plain.envelopes[name].x)


def test_random_patterns_are_rejected_as_often_as_said() -> None:
    """200 patterns of 20 points, each against 99 of 800 others; all rates near 5 %."""
    area, n, rng = RAGGED, 20, np.random.default_rng(7)
    null, curves = CompleteRandomness(area), Curves(Ruler.of(area, n), Sides.of(area, n))
    values = np.array([curves(null.draw(n, rng)) for _ in range(1000)])
    own, pool = curves.split(values[:200]), curves.split(values[200:])
    rejected = dict.fromkeys([*ALL, "mean_nearest", "hopkins_skellam"], 0)
    for k in range(200):
        chosen = rng.choice(800, 99, replace=False)
        for name in ALL:
            seen = global_envelope(own[name][k], pool[name][chosen], curves.x[name], name=name)
            rejected[name] += seen.p <= 0.05
        for name in ("mean_nearest", "hopkins_skellam"):
            test = index_test(own[name][k], pool[name][chosen], grows_with_evenness=True)
            rejected[name] += test.p_two_sided <= 0.05
    low, high = stats.binom.interval(0.999, 200, 0.05)
    assert all(low <= number <= high for number in rejected.values()), rejected


def test_what_each_test_sees() -> None:
    """Of 20 patterns each: clumps, points kept apart, and a gradient, 100 points in a dish."""
    area, n, rng = AREAS["circle"], 100, np.random.default_rng(8)
    null, curves = CompleteRandomness(area), Curves(Ruler.of(area, n), Sides.of(area, n))
    pool = curves.split(np.array([curves(null.draw(n, rng)) for _ in range(99)]))

    def seen(points: Floats) -> dict[str, bool]:
        own = curves.split(curves(points[:n]))
        return {
            name: global_envelope(own[name], pool[name], curves.x[name], name=name).p <= 0.05
            for name in ALL
        }

    def power(law: list[Floats]) -> dict[str, float]:
        found = [seen(points) for points in law]
        return {name: float(np.mean([each[name] for each in found])) for name in ALL}

    clumps, apart, rising = [], [], []
    for _ in range(20):
        centres = null.draw(30, rng)[rng.integers(30, size=900)]
        around = centres + 2.5 * rng.standard_normal((900, 2))
        clumps.append(around[np.hypot(*(around - 50).T) < 49.9])
        tries = null.draw(3000, rng)
        near = cKDTree(tries).query_ball_point(tries, 4.4)  # half the mean spacing
        kept: list[int] = []
        for k, around_k in enumerate(near):
            if not set(kept) & set(around_k):
                kept.append(k)
        apart.append(tries[kept])
        rising.append(tries[rng.random(3000) * 110 < 10 + tries[:, 0]])
    by_clump, by_distance, by_place = power(clumps), power(apart), power(rising)
    assert min(by_clump[name] for name in ("vmr_by_side", "l_function", "pair_correlation")) > 0.8
    assert min(by_distance[name] for name in ("l_function", "nearest_neighbour")) > 0.8
    assert by_place["vmr_by_side"] > 0.6 > 0.4 > by_place["nearest_neighbour"]


def test_few_points_are_not_judged_over_distances() -> None:
    points = random_points(RAGGED, 10, np.random.default_rng(1))
    assert global_tests(Pattern.of(points[:9], RAGGED), simulations=99) is None
    assert len(judged(points, RAGGED).envelopes) == 5


def test_points_on_top_of_each_other_are_clumped() -> None:
    """Every nearest distance is 0, and Hopkins and Skellam's index infinite."""
    points = np.repeat(random_points(RAGGED, 12, np.random.default_rng(1)), 2, axis=0)
    tests = judged(points, RAGGED)
    assert (tests.clark_evans.value, tests.hopkins_skellam.value) == (0.0, math.inf)
    assert (tests.clark_evans.p_clumped, tests.hopkins_skellam.p_clumped) == (0.01, 0.01)
    assert tests.envelopes["nearest_neighbour"].side == "above"


def test_a_curve_that_is_unknown_somewhere_is_judged_where_it_is_known(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    measure = Curves.__call__

    def holed(self: Curves, points: Floats) -> Floats:
        values = measure(self, points).copy()
        parts = self.split(values)  # views of the same numbers
        parts["l_function"][:3] = np.nan
        parts["empty_space"][:] = np.nan
        return values

    monkeypatch.setattr(Curves, "__call__", holed)
    points = random_points(RAGGED, 30, np.random.default_rng(1))
    tests = judged(points, RAGGED)
    whole = Ruler.of(RAGGED, 30).x["l_function"]
    assert tests.envelopes["l_function"].x.tolist() == whole[3:].tolist()
    assert "empty_space" not in tests.envelopes
    assert tests.left_out == ("No value of empty_space is known for every simulated pattern.",)


def test_where_no_quadrats_fit_the_distances_are_still_judged(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr("analyse.scales.FEWEST_QUADRATS", 10_000)
    tests = judged(random_points(RAGGED, 30, np.random.default_rng(1)), RAGGED)
    assert list(tests.envelopes) == ALL[1:]
    assert tests.left_out[0].startswith("No side of quadrats leaves")


def test_an_index_against_every_way_a_small_sample_can_fall() -> None:
    """p by counting, with ties, and never 0."""
    for own, others in itertools.product(range(5), itertools.product(range(4), repeat=3)):
        test = index_test(own, others, grows_with_evenness=False)
        larger = (1 + sum(other >= own for other in others)) / 4
        smaller = (1 + sum(other <= own for other in others)) / 4
        assert (test.p_clumped, test.p_even) == (larger, smaller)
        assert test.p_two_sided == min(1.0, 2 * min(larger, smaller))
        turned = index_test(own, others, grows_with_evenness=True)
        assert (turned.p_even, turned.p_clumped) == (larger, smaller)
    assert index_test(0.1 + 0.2, [0.3] * 99, grows_with_evenness=True).p_two_sided == 1.0


def test_results_are_short_to_read() -> None:
    tests = judged(random_points(RAGGED, 30, np.random.default_rng(1)), RAGGED)
    assert repr(tests).startswith(
        "<GlobalTests against complete spatial randomness, 99 simulations: p vmr_by_side "
    )
    assert len(repr(tests)) < 220
    assert repr(tests.clark_evans).startswith("<SimulatedIndex ")
    with pytest.raises(TypeError):
        tests.envelopes["l_function"] = tests.envelopes["empty_space"]  # type: ignore[index]


def test_unusable_choices_are_refused() -> None:
    points = random_points(RAGGED, 30, np.random.default_rng(1))
    with pytest.raises(OptionWrong, match="between 99 and 1,000,000, not at 98"):
        judged(points, RAGGED, simulations=98)
    with pytest.raises(OptionWrong, match="--seed must be a whole number of 0 or more, not -2"):
        judged(points, RAGGED, seed=-2)
