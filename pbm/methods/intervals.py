"""Exact intervals for counts and shares, and intervals of sums.

Poisson: "Fiducial limits for the Poisson distribution", Biometrika 1936;28:437-442. Binomial: "The use of confidence or fiducial limits
illustrated in the case of the binomial", Biometrika 1934;26:404-413.
"""

import math
from collections.abc import Sequence

import numpy as np
from scipy.stats import beta, binomtest, chi2, poisson


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


def poisson_mixture_interval(expectations: Sequence[float], level: float = 0.9) -> tuple[int, int]:
    """Interval of a count whose expectation is uncertain: Poisson, averaged over equally likely expectations.

    Returns
    -------
    low, high
        The counts between which it lies with at least that probability; each tail beyond has at most half of the rest.

    Examples
    --------
    >>> poisson_mixture_interval([3.0]), poisson_mixture_interval([1.0, 5.0])
    ((1, 6), (0, 8))
    """
    tail = (1 - level) / 2
    last = int(poisson.ppf(1 - tail, max(expectations))) + 1
    chances = np.asarray(poisson.cdf(np.arange(last + 1)[:, None], np.asarray(expectations)[None, :]))
    reached = chances.mean(axis=1)
    return int((reached <= tail).sum()), int((reached < 1 - tail).sum())


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


def weighted_poisson_interval(
    counts: Sequence[int], weights: Sequence[float], level: float = 0.9
) -> tuple[float, float]:
    """Interval of a weighted sum of Poisson expectations, from independent counts; exact where all weights are the same.

    Source: "Confidence intervals for directly standardized rates: a method based on the gamma distribution", Statistics in Medicine
    1997;16:791-801.

    Examples
    --------
    >>> [round(end, 4) for end in weighted_poisson_interval([1, 2], [1.0, 1.0], 0.95)]
    [0.6187, 8.7673]
    """
    tail, widest = (1 - level) / 2, max(weights, default=0.0)
    total = sum(weight * count for count, weight in zip(counts, weights, strict=True))
    variance = sum(weight**2 * count for count, weight in zip(counts, weights, strict=True))
    low = _scaled_chi(total, variance, tail) if total > 0 else 0.0
    return low, _scaled_chi(total + widest, variance + widest**2, 1 - tail) if widest else 0.0


def _scaled_chi(mean: float, variance: float, share: float) -> float:
    """Quantile of the gamma distribution with this mean and variance."""
    return float(chi2.ppf(share, 2 * mean**2 / variance)) * variance / (2 * mean)


def sum_interval(figures: Sequence[tuple[float, float, float]]) -> tuple[float, float, float]:
    """Sum of independent figures (value, low, high) with its interval: distances to the ends add as squares.

    Source: "Construction of confidence limits about effect measures: a general approach", Statistics in Medicine 2008;27:1693-1702.

    Examples
    --------
    >>> sum_interval([(10.0, 7.0, 14.0), (20.0, 16.0, 23.0)])
    (30.0, 25.0, 35.0)
    """
    value = math.fsum(one[0] for one in figures)
    below = math.sqrt(math.fsum((one[0] - one[1]) ** 2 for one in figures))
    above = math.sqrt(math.fsum((one[2] - one[0]) ** 2 for one in figures))
    return value, value - below, value + above
