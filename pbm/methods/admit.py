"""Truncation limits [low, high]: which results are admitted to the statistic, and as what value.

Mode *truncate* drops a result outside the limits; mode *winsorize* sets it to the nearer limit. A censored result ("<5", ">1000") counts
as lying at the limit that was printed; where its true place against [low, high] is not known it is dropped. What is not a finite
number is dropped. A dropped result is returned as not a number, and the caller counts it.
"""

import math

from pbm.methods.jit import Parameters


def admit(x: float, censor: float, par: Parameters) -> float:
    """The value to use for a result, or not a number if it is dropped.

    Parameters
    ----------
    x
        The result, in its own unit; for a censored one the printed limit.
    censor
        -1 for "<x", +1 for ">x", 0.
    par
        [low, high, winsorize (1) or truncate (0)]; an open side is infinite.

    Examples
    --------
    >>> admit(160.0, 0, [125.0, 155.0, 0]), admit(160.0, 0, [125.0, 155.0, 1])
    (nan, 155.0)
    >>> admit(5.0, -1, [3.0, 80.0, 0]), admit(5.0, -1, [10.0, 80.0, 1]), admit(5.0, -1, [-math.inf, 80.0, 0])
    (nan, 10.0, 5.0)
    """
    low = par[0]
    high = par[1]
    if not -math.inf < x < math.inf:
        return math.nan
    below = x < low
    above = x > high
    if censor < 0 and low > -math.inf:
        below = x <= low
        if not below:
            return math.nan
    elif censor < 0 and above:
        return math.nan
    if censor > 0 and high < math.inf:
        above = x >= high
        if not above:
            return math.nan
    elif censor > 0 and below:
        return math.nan
    if below or above:
        limit = low if below else high
        return limit if par[2] else math.nan
    return x
