"""The verdict, its words, and what would have been seen."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from analyse.count_chance import SimulatedTest, simulated_chi2
from analyse.dispersion import dispersion
from analyse.verdict import decide, detectable, p_text, sentence


def judged(upper: float, lower: float) -> SimulatedTest:
    """Return a simulated test with these one-sided p."""
    return SimulatedTest(10.0, upper, lower, min(1.0, 2 * min(upper, lower)), 999)


@pytest.mark.parametrize(
    ("n", "q", "upper", "lower", "verdict"),
    [
        (60, 30, 0.001, 1.0, "clumped"),
        (60, 30, 0.025, 0.98, "clumped"),
        (60, 30, 0.026, 0.98, "no departure from random found"),
        (60, 30, 0.98, 0.025, "evenly spaced"),
        (60, 30, 0.6, 0.5, "no departure from random found"),
        (10, 6, 0.001, 1.0, "clumped"),
        (9, 30, 0.001, 1.0, "too few to tell"),
        (60, 5, 0.001, 1.0, "too few to tell"),
        (0, 30, float("nan"), float("nan"), "too few to tell"),
    ],
)
def test_decisions(n: int, q: int, upper: float, lower: float, verdict: str) -> None:
    assert decide(n, q, judged(upper, lower)) == verdict


def test_sentence_of_clumped_counts() -> None:
    d = dispersion([9, 0, 1, 0, 6, 0, 0, 8, 0, 1])
    assert sentence("clumped", d, d, judged(0.001, 1.0), detectable(d.df)) == (
        "Clumped: the counts vary 5.4 times as much as they would at random"
        " (VMR 5.36, two-sided p = 0.002, simulated)."
    )


def test_sentence_of_even_counts_in_clipped_quadrats() -> None:
    d, whole = dispersion([4, 4, 5, 4, 4, 5, 4, 4]), dispersion([4, 4, 5])
    assert sentence("evenly spaced", d, whole, judged(1.0, 0.005), detectable(d.df)) == (
        "Evenly spaced: the counts vary only 0.05 times as much as they would at random"
        " (X2/df 0.05 over all 8 quadrats by area, two-sided p = 0.010, simulated;"
        " VMR 0.08 on the 3 whole ones)."
    )
    assert "on the" not in sentence("evenly spaced", d, None, judged(1.0, 0.005), detectable(d.df))


def test_sentence_where_nothing_is_found_never_says_that_it_is_random() -> None:
    d = dispersion([4, 2, 5, 3, 4, 5, 1, 4] * 3 + [3])
    said = sentence("no departure from random found", d, d, judged(0.7, 0.305), detectable(24))
    assert said == (
        "No departure from random found (VMR 0.51, two-sided p = 0.61, simulated). With these 25"
        " quadrats a VMR of 2.2 or more, or of 0.42 or less, would have been seen with about 80 % power."
    )
    assert "is random" not in said


def test_an_evenness_that_so_few_spots_cannot_have_is_not_said_to_have_been_seen() -> None:
    """12 points in 25 quadrats: the most even counts of all give a VMR of 13/24, above 0.42."""
    d = dispersion([1] * 10 + [2] + [0] * 14)
    seen = (float("nan"), detectable(24)[1])
    said = sentence("no departure from random found", d, d, judged(0.7, 0.305), seen)
    assert said.endswith(
        "With these 25 quadrats a VMR of 2.2 or more would have been seen with about 80 % power."
        " So few spots can hardly show even spacing."
    )


@pytest.mark.parametrize(
    ("counts", "said"),
    [
        ([0, 0, 0], "No spots: nothing to test."),
        (
            [1, 0, 0, 0, 0, 0],
            "Too few to tell: 1 spot (a test needs at least 10).",
        ),
        (
            [1, 8, 0, 0],
            "Too few to tell: 9 spots (a test needs at least 10)"
            " and 4 quadrats (a test needs at least 6).",
        ),
        ([50, 80, 70, 60], "Too few to tell: 4 quadrats (a test needs at least 6)."),
    ],
)
def test_sentence_where_there_is_too_little(counts: list[int], said: str) -> None:
    d = dispersion(counts)
    assert sentence("too few to tell", d, d, judged(0.5, 0.5), (0.5, 2.0)) == said


@pytest.mark.parametrize(
    ("p", "text"),
    [
        (0.0004, "p < 0.001"),
        (0.001, "p = 0.001"),
        (0.0496, "p = 0.050"),
        (0.12, "p = 0.12"),
        (1.0, "p = 1.00"),
    ],
)
def test_p_in_words(p: float, text: str) -> None:
    assert p_text(p) == text


@pytest.mark.parametrize(
    ("df", "low", "high"),
    [(15, 6.262, 27.488), (24, 12.401, 39.364), (35, 20.569, 53.203), (63, 42.950, 86.830)],
)
def test_detectable_ratios_rest_on_tabled_chi_square(df: int, low: float, high: float) -> None:
    """Chi-square quantiles .025 and .975 of any table; the median from scipy."""
    even, clumped = detectable(df, power=0.5)
    median = stats.chi2.ppf(0.5, df)
    assert even * median == pytest.approx(low, abs=6e-4)
    assert clumped * median == pytest.approx(high, abs=6e-4)


def test_detectable_ratio_is_seen_four_times_in_five() -> None:
    """Negative binomial counts of mean 6 in 40 quadrats, with the VMR that the rule names."""
    rng = np.random.default_rng(20)
    _, vmr = detectable(39)
    k = 6 / (vmr - 1)
    seen = [dispersion(rng.negative_binomial(k, 1 / vmr, 40)).p_two_sided for _ in range(2000)]
    assert np.mean(np.array(seen) <= 0.05) == pytest.approx(0.80, abs=0.06)


def test_more_quadrats_see_smaller_departures() -> None:
    ratios = [detectable(df) for df in (5, 20, 80, 400)]
    assert [low for low, _ in ratios] == sorted(low for low, _ in ratios)
    assert [high for _, high in ratios] == sorted((high for _, high in ratios), reverse=True)


@pytest.mark.parametrize(
    ("mean", "low", "high"), [(1, 0.60, 0.78), (2, 0.70, 0.82), (8, 0.74, 0.86)]
)
def test_the_verdicts_own_test_has_about_the_power_it_states(
    mean: int, low: float, high: float
) -> None:
    """Dirichlet-multinomial counts: negative binomial ones of the stated VMR, given their total."""
    q, rng = 25, np.random.default_rng(11)
    n, vmr = mean * q, detectable(q - 1)[1]
    null = np.sort(np.concatenate([*simulated_chi2(n, np.ones(q), 9999, rng)]))
    shares = rng.dirichlet(np.full(q, (n - vmr) / (vmr - 1) / q), 2000)
    counts = np.array([rng.multinomial(n, share) for share in shares])
    chi2 = ((counts - mean) ** 2).sum(axis=1) / mean
    upper = (1 + null.size - np.searchsorted(null, chi2 - 1e-9)) / (null.size + 1)
    assert low < np.mean(upper <= 0.025) < high


def test_whole_quadrats_without_a_spot_have_no_ratio_in_the_sentence() -> None:
    """The sentence once spoke of a VMR of nan."""
    everything = dispersion([9, 0, 1, 0, 6, 0, 0, 8, 0, 1])
    said = sentence("clumped", everything, dispersion([0, 0]), judged(0.001, 1.0), detectable(9))
    assert said.endswith("two-sided p = 0.002, simulated; no spot in the 2 whole ones).")
