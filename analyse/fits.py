"""How well a negative binomial law describes the counts, beside a Poisson law."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from analyse.columns import hold_columns
from analyse.dispersion import checked_counts
from analyse.k_estimates import k_by_corrected_moments, k_by_moments, k_by_zero_class
from analyse.models import countable
from analyse.negative_binomial import (
    POISSON_LIMIT,
    Likelihood,
    k_words,
    likelihood_of,
    negative_binomial_law,
    negative_binomial_share,
)
from analyse.pooling import (
    LARGEST_COUNT,
    SMALLEST_EXPECTED,
    ClassTest,
    CountClass,
    class_labels,
    compare_classes,
    pooled,
)

K_LEVEL = 0.95
_AIC_PARAMETERS = {"poisson": 1, "negative binomial": 2}


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class NegativeBinomialFit:
    """A negative binomial law fitted to counts in equal quadrats, beside the Poisson law.

    To be shown: k with its interval (or the words of `k_text`), and both AIC weights; drawn
    beside the frequencies of a `PoissonFit`: `law`. The estimates by moments and by the zero
    class are for comparison with older studies and belong into tables.

    Parameters
    ----------
    quadrats : int
        How many.
    mean : float
        Mean count, which is also the most likely one.
    k : float
        By maximum likelihood; `math.inf` is the Poisson limit, where no finite k exists.
    k_se : float
        Standard error of k from the observed information; NaN at the Poisson limit.
    k_low, k_high : float
        Profile-likelihood interval of k at 95 %; the upper end is `math.inf` where the Poisson
        law is within it.
    k_moments, k_moments_corrected, k_zero_class : float
        k by m^2 / (s^2 - m), by (m^2 - s^2 / q) / (s^2 - m), and by the empty quadrats.
    reasons : mapping of str to str
        Why one of the three before is infinite or NaN, by field name.
    log_likelihood, poisson_log_likelihood : float
        Of the two laws, each at its best.
    frequencies : ndarray of int, shape (k,)
        Quadrats with exactly 0, 1, ... k - 1 points.
    law : ndarray of shape (k,)
        The same as the fitted law expects them.
    classes : tuple of (low, high)
        Pooled classes of the test of fit; the last is open.
    observed, expected : ndarray of shape (len(classes),)
        Quadrats in each class, seen and expected.
    chi2 : float
        sum (observed - expected)^2 / expected.
    df : int
        Classes - 3: one each for the total, the mean and k.
    p : float
        Upper chi-square tail; NaN where `df` is below 1 and at the Poisson limit, where the test
        of the Poisson law stands instead.
    """

    quadrats: int
    mean: float
    k: float
    k_se: float
    k_low: float
    k_high: float
    k_moments: float
    k_moments_corrected: float
    k_zero_class: float
    reasons: Mapping[str, str]
    log_likelihood: float
    poisson_log_likelihood: float
    frequencies: NDArray[np.int64]
    law: NDArray[np.float64]
    classes: tuple[CountClass, ...]
    observed: NDArray[np.int64]
    expected: NDArray[np.float64]
    chi2: float
    df: int
    p: float

    def __post_init__(self) -> None:
        if not len(self.classes) == len(self.observed) == len(self.expected):
            raise ValueError("classes, observed and expected differ in length")
        hold_columns(self, ("frequencies", "law", "observed", "expected"))

    def __repr__(self) -> str:
        return f"<NegativeBinomialFit: {self.quadrats} quadrats, mean {self.mean:.4g}, k {self.k_text}>"

    @property
    def poisson_limit(self) -> bool:
        """Whether no finite k exists: the counts vary no more than chance makes them."""
        return math.isinf(self.k)

    @property
    def k_text(self) -> str:
        """The fitted k and its interval in words, such as "1.02 (0.625 to 1.84)"."""
        high = "without upper limit" if math.isinf(self.k_high) else f"to {self.k_high:.3g}"
        if self.poisson_limit:
            return f"{POISSON_LIMIT} ({self.k_low:.3g} or more)"
        return f"{k_words(self.k)} ({self.k_low:.3g} {high})"

    @property
    def labels(self) -> tuple[str, ...]:
        """The classes in words: "0", "1-2", "3 or more"."""
        return class_labels(self.classes)

    def expected_in(self, classes: Sequence[CountClass]) -> NDArray[np.float64]:
        """Return how many quadrats the fitted law expects in other classes than its own.

        Parameters
        ----------
        classes : sequence of (low, high)
            Both ends included; high None for no end.

        Returns
        -------
        ndarray of shape (len(classes),)
        """
        shares = [negative_binomial_share(self.mean, self.k, *each) for each in classes]
        return self.quadrats * np.array(shares)

    @property
    def aic(self) -> float:
        """Akaike's criterion of the negative binomial law: 4 - 2 log-likelihood."""
        return 2 * _AIC_PARAMETERS["negative binomial"] - 2 * self.log_likelihood

    @property
    def poisson_aic(self) -> float:
        """Akaike's criterion of the Poisson law: 2 - 2 log-likelihood."""
        return 2 * _AIC_PARAMETERS["poisson"] - 2 * self.poisson_log_likelihood

    @property
    def weight(self) -> float:
        """Akaike weight of the negative binomial law, 0..1; the Poisson law has the rest."""
        return float(special.expit((self.poisson_aic - self.aic) / 2))


def negative_binomial_fit(
    counts: ArrayLike,
    *,
    pool_classes: Sequence[CountClass] | None = None,
    smallest_expected: float = SMALLEST_EXPECTED,
) -> NegativeBinomialFit:
    """Fit a negative binomial law to counts in equal quadrats and test the fit.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat, at least 2, none above 10,000, not all 0. Clipped quadrats do not
        belong here: their counts follow another law.
    pool_classes : sequence of (low, high) or None
        Classes that cover 0, 1, 2, ... without a gap, the last with high None; None pools by
        `smallest_expected`.
    smallest_expected : float
        Classes are pooled from both tails until each expects this many quadrats.

    Returns
    -------
    NegativeBinomialFit

    Raises
    ------
    TooFewQuadrats
        If there are fewer than 2 counts.
    ValueError
        If there is no point, the classes leave a gap, or a count is impossible.

    Notes
    -----
    k solves the score equation sum A_x / (k + x) = q ln(1 + m / k), where A_x quadrats hold more
    than x points (Bliss and Fisher 1953). It has one root if the variance with divisor q exceeds
    the mean, and none otherwise (Levin and Reeds 1977); which of the two is decided in whole
    numbers, without rounding. The interval is that of the profile likelihood, for k is too skew
    for its standard error. The chi-square takes mean and k from the counts and not from the
    classes, so that p is a little too small. A good fit does not tell how clumping came about.

    References
    ----------
    Bliss, C. I. and Fisher, R. A. (1953). Fitting the negative binomial distribution to
    biological data. Biometrics 9, 176-200.
    Levin, B. and Reeds, J. (1977). Compound multinomial likelihood functions are unimodal.
    Annals of Statistics 5, 79-87.
    Akaike, H. (1974). A new look at the statistical model identification. IEEE Transactions on
    Automatic Control 19, 716-723.
    Burnham, K. P. and Anderson, D. R. (2002). Model Selection and Multimodel Inference, 2nd
    edition. Springer, New York (AIC weights).

    Examples
    --------
    >>> mites = np.repeat(range(8), [70, 38, 17, 10, 9, 3, 2, 1])
    >>> fit = negative_binomial_fit(mites)
    >>> fit
    <NegativeBinomialFit: 150 quadrats, mean 1.147, k 1.02 (0.625 to 1.84)>
    >>> round(fit.k_se, 3), round(fit.chi2, 4), fit.df
    (0.276, 2.9202, 5)
    >>> negative_binomial_fit([1, 1, 2, 1, 0, 1]).k_text
    'Poisson limit: no finite k (0.814 or more)'
    """
    x = countable(counts)
    seen = likelihood_of(x)
    k, mean = seen.best_k(), float(x.mean())
    low, high = seen.k_limits(K_LEVEL)
    frequencies = np.bincount(x)
    law = negative_binomial_law(mean, k, np.arange(frequencies.size))
    test = _test(frequencies, law, mean, k, pool_classes, smallest_expected)
    others = {
        "k_moments": k_by_moments(x),
        "k_moments_corrected": k_by_corrected_moments(x),
        "k_zero_class": k_by_zero_class(x),
    }
    poisson = float((special.xlogy(x, mean) - mean - special.gammaln(x + 1.0)).sum())
    return NegativeBinomialFit(
        quadrats=x.size,
        mean=mean,
        k=k,
        k_se=_standard_error(seen, k),
        k_low=low,
        k_high=high,
        **{name: each.value for name, each in others.items()},
        reasons={name: each.reason for name, each in others.items() if each.reason},
        log_likelihood=poisson + seen.gain(k),
        poisson_log_likelihood=poisson,
        frequencies=frequencies,
        law=x.size * law,
        classes=test.classes,
        observed=test.observed,
        expected=test.expected,
        chi2=test.chi2,
        df=test.df,
        p=test.p,
    )


def clumped_law(counts: ArrayLike) -> NegativeBinomialFit | None:
    """Return the fitted law of counts in whole quadrats, or None where it cannot be fitted.

    Parameters
    ----------
    counts : array_like of int, shape (q,)
        One count per quadrat.

    Returns
    -------
    NegativeBinomialFit or None
        None with fewer than 2 quadrats, without points, and with a count above 10,000.

    Raises
    ------
    ValueError
        If a count is negative or no whole number.

    Examples
    --------
    >>> clumped_law([0, 0, 0]) is None
    True
    """
    x = checked_counts(counts)
    if x.size < 2 or not 0 < x.max() <= LARGEST_COUNT:
        return None
    return negative_binomial_fit(x)


def _standard_error(seen: Likelihood, k: float) -> float:
    """Return the standard error of k; NaN at the Poisson limit."""
    return math.nan if math.isinf(k) else 1 / math.sqrt(seen.information(k))


def _test(
    frequencies: NDArray[np.int64],
    law: NDArray[np.float64],
    mean: float,
    k: float,
    classes: Sequence[CountClass] | None,
    smallest: float,
) -> ClassTest:
    """Return the chi-square of the fit; left open at the Poisson limit."""
    limit = math.isinf(k)

    def share(low: int, high: int | None) -> float:
        if low == high and low < law.size:
            return float(law[low])
        return negative_binomial_share(mean, k, low, high)

    mode = int(mean) if limit else max(0, math.floor(mean * (k - 1) / k))
    if classes is None:
        classes = pooled(share, mode, int(frequencies.sum()), smallest, frequencies.size - 1)
    test = compare_classes(frequencies, classes, share, fitted=2)
    if not limit:
        return test
    return ClassTest(test.classes, test.observed, test.expected, math.nan, test.df, math.nan)
