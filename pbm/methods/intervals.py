"""Exact intervals for counts and shares, and the bootstrap over days.

Poisson: "Fiducial limits for the Poisson distribution", Biometrika 1936;28:437-442. Binomial: "The use of confidence or fiducial limits
illustrated in the case of the binomial", Biometrika 1934;26:404-413.
"""

from collections.abc import Callable

import numpy as np
from scipy.stats import beta, chi2

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
