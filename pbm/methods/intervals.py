"""Exact intervals for counts and shares, and the bootstrap over days.

Poisson: "Fiducial limits for the Poisson distribution", Biometrika 1936;28:437-442. Binomial: "The use of confidence or fiducial limits
illustrated in the case of the binomial", Biometrika 1934;26:404-413.
"""

import math
from collections.abc import Callable

import numpy as np
from scipy.stats import beta, binomtest, chi2

from pbm.methods.jit import Floats, Integers


def poisson_interval(count: int, level: float = 0.9) -> tuple[float, float]:
    """Exact interval of the expectation of a Poisson count.

    Examples
    --------
    >>> [round(end, 4) for end in poisson_interval(3, 0.95)]
    [0.6187, 8.7673]
    """
    tail = (1 - level) / 2
    low = 0.0 if count == 0 else float(chi2.ppf(tail, 2 * count)) / 2
    return low, float(chi2.ppf(1 - tail, 2 * count + 2)) / 2


def binomial_interval(successes: int, trials: int, level: float = 0.9) -> tuple[float, float]:
    """Exact (Clopper-Pearson) interval of a share.

    Examples
    --------
    >>> [round(end, 6) for end in binomial_interval(4, 20, 0.9)]
    [0.071354, 0.401028]
    """
    tail = (1 - level) / 2
    low = 0.0 if successes == 0 else float(beta.ppf(tail, successes, trials - successes + 1))
    high = 1.0 if successes == trials else float(beta.ppf(1 - tail, successes + 1, trials - successes))
    return low, high


def rate_ratio(
    first: int, exposure: float, second: int, other_exposure: float, level: float = 0.9
) -> tuple[float, float, float]:
    """Ratio of two Poisson rates with its exact interval: given the sum of the counts, the first is binomial.

    Returns
    -------
    ratio, low, high
        Not a number, 0 and infinity where both counts are 0.

    Examples
    --------
    >>> [round(figure, 5) for figure in rate_ratio(11, 800, 21, 3011, 0.95)]
    [1.97149, 0.85843, 4.27727]
    """
    if first + second == 0:
        return math.nan, 0.0, math.inf
    low, high = (_odds(share) * other_exposure / exposure for share in binomial_interval(first, first + second, level))
    ratio = math.inf if second == 0 else first / exposure / (second / other_exposure)
    return ratio, low, high


def _odds(share: float) -> float:
    return share / (1 - share) if share < 1 else math.inf


def rates_differ(first: int, exposure: float, second: int, other_exposure: float) -> float:
    """Exact two-sided p-value of the hypothesis that two Poisson rates are equal.

    Examples
    --------
    >>> round(rates_differ(11, 800, 21, 3011), 6)
    0.079669
    """
    return float(binomtest(first, first + second, exposure / (exposure + other_exposure)).pvalue)


def day_weights(days: Integers, draws: int, random: np.random.Generator) -> Floats:
    """How often each observation counts in each bootstrap draw of whole days.

    Parameters
    ----------
    days : (n,)
        The day of each observation.
    draws
        Number of draws.

    Returns
    -------
    (draws, n)
        Weights; a draw takes as many days as there are, with replacement.
    """
    labels, place = np.unique(days, return_inverse=True)
    counts = random.multinomial(len(labels), np.full(len(labels), 1 / len(labels)), size=draws)
    return counts[:, place].astype(float)


def bootstrap_interval(figure: Callable[[Floats], float], weights: Floats, level: float = 0.9) -> tuple[float, float]:
    """Percentile interval of a figure that is a function of the observations' weights.

    Parameters
    ----------
    figure
        From weights, shape (n,), to the figure.
    weights : (draws, n)
        From `day_weights`.
    """
    tail = (1 - level) / 2
    low, high = np.quantile([figure(w) for w in weights], [tail, 1 - tail])
    return float(low), float(high)
