"""The distance at which two are seen as one, from pairs at known separations."""

from __future__ import annotations

import numpy as np
import pytest

from detect.blind import blind_distance
from detect.logistic import fit_logistic


def drawn(rng: np.random.Generator, half: float, width: float, n: int) -> tuple:
    apart = rng.uniform(0.3, 1.6, n)
    return apart, rng.random(n) < 1 / (1 + np.exp(-(apart - half) / width))


def test_the_half_of_the_curve_is_found_and_its_error_is_right() -> None:
    rng = np.random.default_rng(2)
    seen = [blind_distance(*drawn(rng, 0.85, 0.12, 60)) for _ in range(300)]
    values = np.array([each.value for each in seen])
    errors = np.array([each.standard_error for each in seen])
    assert values.mean() == pytest.approx(0.85, abs=0.015)
    assert values.std() == pytest.approx(errors.mean(), rel=0.2)
    assert 0.91 <= (np.abs(values - 0.85) < 1.96 * errors).mean() <= 0.99


def test_misses_far_apart_do_not_draw_the_half_nearer() -> None:
    """One of a pair missed for another reason once flattened the curve and moved its half."""
    rng = np.random.default_rng(3)
    values, plain = [], []
    for _ in range(60):
        apart, both = drawn(rng, 0.7, 0.04, 80)
        both &= rng.random(80) < 0.85
        values.append(blind_distance(apart, both).value)
        b0, b1 = fit_logistic(apart[:, None], both).weights
        plain.append(-b0 / b1)
    share = 0.5 / 0.85
    true = 0.7 + 0.04 * np.log(share / (1 - share))
    assert np.mean(values) == pytest.approx(true, abs=0.035)
    assert abs(np.mean(plain) - true) > 0.08


def test_a_sharp_step_lies_between_its_neighbours() -> None:
    apart = np.linspace(0.3, 1.6, 27)
    seen = blind_distance(apart, apart > 0.9)
    assert seen is not None
    assert seen.value == pytest.approx(0.9, abs=0.05)


@pytest.mark.parametrize(
    ("apart", "both"),
    [
        (np.linspace(0.3, 1.6, 7), np.arange(7) > 3),  # too few
        (np.linspace(0.3, 1.6, 20), np.ones(20, bool)),
        (np.linspace(0.3, 1.6, 20), np.zeros(20, bool)),
        (np.linspace(0.3, 1.6, 20), np.arange(20) < 10),  # the wrong way round
        (np.linspace(0.3, 1.6, 40), np.arange(40) == 39),  # half lies beyond
        ([], []),
    ],
)
def test_pairs_that_tell_no_distance_give_none(apart: np.ndarray, both: np.ndarray) -> None:
    assert blind_distance(apart, both) is None
