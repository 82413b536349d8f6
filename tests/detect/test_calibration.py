"""Calibration of doubt: against plain optimisers, by simulation of known maps, and its edges."""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import minimize
from scipy.special import expit, logit

from detect.calibration import Calibration, CalibrationOptions, fit_calibration

doubts = st.lists(st.floats(0.001, 0.999), min_size=1, max_size=20)


def simulated(
    n: int, intercept: float, slope: float, *, seed: int
) -> tuple[np.ndarray, np.ndarray]:
    """Doubts of all sizes, and answers that follow a known calibration of them."""
    rng = np.random.default_rng(seed)
    doubt = expit(rng.normal(-1.5, 1.5, n))
    return doubt, rng.random(n) < expit(intercept + slope * logit(doubt))


def plain_loss(at: np.ndarray, doubt: np.ndarray, false: np.ndarray, spreads: tuple) -> float:
    """The penalised likelihood as the paper and the docstring say it."""
    up, down = (false.sum() + 1) / (false.sum() + 2), 1 / ((~false).sum() + 2)
    target = np.where(false, up, down)
    p = expit(at[0] + at[1] * logit(doubt))
    fit = -(target * np.log(p) + (1 - target) * np.log(1 - p)).sum()
    return fit + 0.5 * (at[0] / spreads[0]) ** 2 + 0.5 * ((at[1] - 1) / spreads[1]) ** 2


@pytest.mark.parametrize("n", [3, 30, 400])
@pytest.mark.parametrize("spreads", [(1.0, 0.25), (0.3, 2.0)])
def test_the_fit_is_where_a_plain_optimiser_ends(n: int, spreads: tuple[float, float]) -> None:
    doubt, false = simulated(n, 0.8, 0.7, seed=n)
    plain = minimize(
        plain_loss, [0, 1], args=(doubt, false, spreads), method="Nelder-Mead", tol=1e-10
    )
    fitted = fit_calibration(doubt, false, options=CalibrationOptions(*spreads))
    assert (fitted.intercept, fitted.slope) == pytest.approx(plain.x, abs=1e-5)


def test_without_a_ridge_the_fit_is_the_regression_of_statsmodels() -> None:
    # With 4,000 spots Platt's targets differ from 1 and 0 by less than one part in a thousand.
    doubt, false = simulated(4000, -0.5, 1.3, seed=7)
    design = sm.add_constant(logit(doubt))
    known = sm.GLM(false.astype(float), design, family=sm.families.Binomial()).fit()
    fitted = fit_calibration(doubt, false, options=CalibrationOptions(1e4, 1e4))
    assert (fitted.intercept, fitted.slope) == pytest.approx(known.params, abs=0.02)


@pytest.mark.parametrize(("intercept", "slope"), [(0.0, 1.0), (0.9, 0.6), (-1.2, 1.4)])
def test_a_known_calibration_is_found_again(intercept: float, slope: float) -> None:
    doubt, false = simulated(20_000, intercept, slope, seed=11)
    fitted = fit_calibration(doubt, false)
    assert fitted.intercept == pytest.approx(intercept, abs=0.1)
    assert fitted.slope == pytest.approx(slope, abs=0.06)


def test_thirty_spots_bring_doubts_nearer_to_the_truth_and_never_far_from_it() -> None:
    true = Calibration(0.8, 1.0)
    at = np.array([0.05, 0.2, 0.5])
    errors = []
    for seed in range(100):
        doubt, false = simulated(30, true.intercept, true.slope, seed=seed)
        errors.append(np.abs(fit_calibration(doubt, false).applied(at) - true.applied(at)))
    before = np.abs(true.applied(at) - at)
    assert (np.mean(errors, axis=0) < [0.85, 0.65, 0.6] * before).all()
    assert np.max(errors) < 0.35


def test_thirty_spots_leave_a_good_doubt_good() -> None:
    at = np.array([0.05, 0.2, 0.5])
    errors = [
        np.abs(fit_calibration(*simulated(30, 0.0, 1.0, seed=seed)).applied(at) - at)
        for seed in range(100)
    ]
    assert (np.mean(errors, axis=0) < [0.03, 0.07, 0.10]).all()


@pytest.mark.parametrize("false", [True, False])
def test_spots_of_one_sort_move_doubt_their_way_without_certainty(false: bool) -> None:
    fitted = fit_calibration(np.full(30, 0.3), np.full(30, false))
    new = fitted.applied([0.3])[0]
    assert 0.02 < new < 0.98
    assert (new > 0.3) == false


def test_a_slope_against_the_order_is_held_at_its_least() -> None:
    # What was doubtful is real and what was sure is false: the order must not turn round.
    doubt = np.r_[np.full(300, 0.9), np.full(300, 0.1)]
    false = np.r_[np.zeros(300, bool), np.ones(300, bool)]
    fitted = fit_calibration(doubt, false, options=CalibrationOptions(1.0, 10.0))
    assert fitted.slope == 0.05
    best = min(
        np.linspace(-1, 1, 2001), key=lambda a: plain_loss([a, 0.05], doubt, false, (1.0, 10.0))
    )
    assert fitted.intercept == pytest.approx(best, abs=1e-3)


def test_no_spots_change_nothing() -> None:
    assert fit_calibration([], []) == Calibration()
    assert fit_calibration([0.4], [True], weight=[0.0]) == Calibration()


def test_a_weight_is_a_number_of_spots() -> None:
    doubt, false = simulated(40, 0.5, 1.0, seed=3)
    twice = fit_calibration(np.r_[doubt, doubt], np.r_[false, false])
    weighed = fit_calibration(doubt, false, weight=np.full(40, 2.0))
    assert (weighed.intercept, weighed.slope) == pytest.approx((twice.intercept, twice.slope))


def test_certain_doubts_can_be_fitted_and_stay_certain() -> None:
    fitted = fit_calibration([0.0, 1.0, 0.5], [False, True, True])
    assert fitted.applied([0.0, 1.0]).tolist() == [0.0, 1.0]


def test_the_order_of_the_spots_has_no_say() -> None:
    doubt, false = simulated(50, 0.5, 0.8, seed=5)
    order = np.random.default_rng(1).permutation(50)
    first, second = fit_calibration(doubt, false), fit_calibration(doubt[order], false[order])
    assert (first.intercept, first.slope) == pytest.approx((second.intercept, second.slope))


@settings(deadline=None)
@given(doubts, st.floats(-3, 3), st.floats(0.2, 4))
def test_a_calibration_keeps_the_order_and_can_be_undone(
    doubt: list[float], intercept: float, slope: float
) -> None:
    calibration = Calibration(intercept, slope)
    new = calibration.applied(sorted(doubt))
    assert (np.diff(new) >= 0).all()
    assert ((new >= 0) & (new <= 1)).all()
    back = calibration.inverse.applied(Calibration(intercept, slope).applied(doubt))
    assert back == pytest.approx(doubt, rel=1e-6, abs=1e-4)


@given(doubts, st.floats(-2, 2), st.floats(0.3, 3))
def test_two_calibrations_in_a_row_are_one(
    doubt: list[float], intercept: float, slope: float
) -> None:
    first, second = Calibration(0.4, 0.8), Calibration(intercept, slope)
    assert first.then(second).applied(doubt) == pytest.approx(
        second.applied(first.applied(doubt)), rel=1e-6, abs=1e-9
    )


def test_calibrated_by_hand() -> None:
    # Odds of 0.2 are 1:4; an intercept of log 2 doubles them to 1:2; a slope of 2 squares them.
    assert Calibration(np.log(2)).applied(0.2) == pytest.approx(1 / 3)
    assert Calibration(slope=2.0).applied(0.2) == pytest.approx(1 / 17)


@pytest.mark.parametrize(
    "wrong",
    [{"slope": 0.0}, {"slope": -1.0}, {"slope": np.inf}, {"intercept": np.nan}],
)
def test_an_impossible_calibration_is_refused(wrong: dict[str, float]) -> None:
    with pytest.raises(ValueError, match="needs a finite intercept and a positive slope"):
        Calibration(**wrong)


@pytest.mark.parametrize("spread", [0.0, -1.0, np.nan])
def test_an_impossible_spread_is_refused(spread: float) -> None:
    with pytest.raises(ValueError, match="a spread must be positive, not"):
        CalibrationOptions(slope_spread=spread)


@pytest.mark.parametrize(
    ("doubt", "false", "weight", "message"),
    [
        ([1.2], [True], None, r"a doubt is not within 0\.\.1"),
        ([np.nan], [True], None, r"a doubt is not within 0\.\.1"),
        ([0.1, 0.2], [True], None, "2 doubts, 1 answers and 2 weights differ"),
        ([0.1], [True], [-1.0], "a weight is negative or not finite"),
    ],
)
def test_impossible_spots_are_refused(
    doubt: list, false: list, weight: list | None, message: str
) -> None:
    with pytest.raises(ValueError, match=message):
        fit_calibration(doubt, false, weight=weight)
