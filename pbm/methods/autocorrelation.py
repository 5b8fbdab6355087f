"""Autocorrelation of successive values, and how many independent values they are worth.

    effective n = n / (1 + 2 sum of r_k),   summed while the pairs r_k + r_(k+1) stay above 0 (initial positive sequence)

Source of the cut: "Practical Markov chain Monte Carlo", Statistical Science 1992;7:473-483. statsmodels computes r_k.
"""

import numpy as np

from pbm.methods.jit import Floats

LAGS = 60


def autocorrelation(z: Floats, lags: int = LAGS) -> Floats:
    """r_1 ... r_lags of values z (n,) in order of time, as many as there are; none where the values do not vary."""
    lags = min(lags, len(z) - 1)
    if lags < 1 or np.ptp(z) == 0:
        return np.zeros(0)
    from statsmodels.tsa.stattools import acf  # 1.6 s to load

    found: Floats = np.asarray(acf(z, nlags=lags, fft=True), dtype=np.float64)[1:]
    return found


def effective_size(n: int, r: Floats) -> float:
    """Independent values that n values with autocorrelations r_1, r_2, ... are worth, for their mean; at most n.

    Examples
    --------
    >>> effective_size(1000, np.array([0.5, 0.25, 0.125, 0.0625])), effective_size(1000, np.array([-0.1, 0.05]))
    (347.82608695652175, 1000.0)
    """
    pairs = r[: len(r) // 2 * 2].reshape(-1, 2).sum(axis=1)
    ended = np.flatnonzero(pairs <= 0)
    kept = float(pairs[: ended[0] if len(ended) else len(pairs)].sum())
    return n / max(1 + 2 * kept, 1.0)
