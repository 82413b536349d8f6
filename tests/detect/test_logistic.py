"""Logistic curves by penalised maximum likelihood."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import minimize

from detect.logistic import fit_logistic


def penalised_slowly(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """Firth's penalised likelihood climbed by a general optimiser, as a second opinion."""
    design = np.column_stack([np.ones(len(x)), x])

    def loss(weights: np.ndarray) -> float:
        odds = design @ weights
        p = 1 / (1 + np.exp(-odds))
        information = (design * (p * (1 - p))[:, None]).T @ design
        likelihood = (y * odds - np.logaddexp(0, odds)).sum()
        return -float(likelihood + 0.5 * np.linalg.slogdet(information)[1])

    return np.asarray(minimize(loss, np.zeros(design.shape[1]), method="BFGS", tol=1e-10).x)


@pytest.mark.parametrize("seed", range(4))
def test_the_fit_is_the_top_of_the_penalised_likelihood(seed: int) -> None:
    rng = np.random.default_rng(seed)
    x = rng.normal(size=(60, 2))
    y = rng.random(60) < 1 / (1 + np.exp(-(0.5 + x @ [1.5, -0.7])))
    assert fit_logistic(x, y).weights == pytest.approx(penalised_slowly(x, y), abs=1e-4)


def test_a_constant_chance_is_that_of_half_a_trial_more_on_each_side() -> None:
    """With Jeffreys' prior the weight of one share s of n is log((s + 1/2)/(n - s + 1/2)) (Firth 1993)."""
    curve = fit_logistic(np.empty((20, 0)), np.arange(20) < 17)
    assert curve.weights[0] == pytest.approx(np.log(17.5 / 3.5))


def test_two_by_two_is_the_table_with_half_added_to_each_cell() -> None:
    """A saturated two by two table: log odds ratio with 1/2 added to each cell (Haldane's; Firth 1993)."""
    x = np.repeat([0.0, 1.0], [12, 15])[:, None]
    y = np.concatenate([np.arange(12) < 3, np.arange(15) < 15])
    b0, b1 = fit_logistic(x, y).weights
    assert b0 == pytest.approx(np.log(3.5 / 9.5))
    assert b0 + b1 == pytest.approx(np.log(15.5 / 0.5))


def test_parted_groups_still_give_finite_weights() -> None:
    x = np.linspace(0, 1, 30)
    curve = fit_logistic(x[:, None], x > 0.5)
    assert np.isfinite(curve.weights).all()
    assert curve.at([[0.0], [1.0]]) == pytest.approx([0, 1], abs=0.05)


def test_the_weights_spread_as_the_covariance_says() -> None:
    rng = np.random.default_rng(8)
    x = rng.uniform(-1, 1, (200, 1))
    chance = 1 / (1 + np.exp(-(0.3 + 2 * x[:, 0])))
    fits = [fit_logistic(x, rng.random(200) < chance) for _ in range(300)]
    weights = np.array([fit.weights for fit in fits])
    told = np.mean([np.sqrt(np.diag(fit.covariance)) for fit in fits], axis=0)
    assert weights.std(axis=0) == pytest.approx(told, rel=0.15)
    assert weights.mean(axis=0) == pytest.approx([0.3, 2.0], abs=0.1)


def test_columns_of_different_length_are_refused() -> None:
    with pytest.raises(ValueError, match="3 rows of terms for 2 trials"):
        fit_logistic(np.zeros((3, 1)), [True, False])
    with pytest.raises(ValueError, match="0 rows of terms for 0 trials"):
        fit_logistic(np.zeros((0, 1)), [])
