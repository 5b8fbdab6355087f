"""In-control behaviour of the values that a statistic takes: how far they move under a true shift, how much they hang together.

    slope      d(mean of admitted values) / d(true shift), both on the statistic's scale
    inflation  f, variance of a mean of successive values over what independence would give
    wander     t, SD of the slow wandering of their level from day to day

The mean of n successive values with variance v has variance v f / n + t^2: two lengths, 50 values and a day, tell f and t apart.
For fixed truncation limits on normal values the slope is Var(admitted) / Var(all); here it is measured on the results themselves, with
rounding and censoring, at half a TEa to either side.
"""

import math

import numpy as np

from pbm.methods.chain import Preparation
from pbm.methods.faults import Fault, inflict
from pbm.methods.jit import Floats
from pbm.methods.trials import Stretch

BATCH, LEAST_A_DAY = 50, 200
SMALLEST_SLOPE = 0.01


def inflation(z: Floats, wandering: float = 0.0) -> float:
    """f of the values, at least 1, where their level wanders by so much; z (n,) holds not a number where dropped."""
    admitted = z[~np.isnan(z)]
    if len(admitted) < 2 * BATCH or (variance := float(admitted.var())) == 0:
        return 1.0
    return max(1.0, BATCH * (_variance_of_means(admitted, BATCH) - wandering**2) / variance)


def wander(z: Floats, a_day: int) -> float:
    """t of the values, from means of 50 and of as many as come in a day (200 at least); z (n,) holds not a number where dropped."""
    admitted = z[~np.isnan(z)]
    day = max(a_day, LEAST_A_DAY)
    if len(admitted) < 2 * day:
        return 0.0
    short, long = BATCH * _variance_of_means(admitted, BATCH), day * _variance_of_means(admitted, day)
    return math.sqrt(max((long - short) / (day - BATCH), 0.0))


def _variance_of_means(admitted: Floats, batch: int) -> float:
    """Variance of the means of successive batches."""
    return float(admitted[: len(admitted) // batch * batch].reshape(-1, batch).mean(axis=1).var(ddof=1))


def slope(stretch: Stretch, preparation: Preparation) -> float:
    """Movement of the admitted mean for a unit of true shift at the median result; 1 where neither side can be told.

    A side cannot be told where the shift takes the median result to where it has no transform, or leaves no result to admit.
    """
    moved = [_moved(stretch, preparation, sign) for sign in (-1, 1)]
    told = [movement for movement in moved if math.isfinite(movement)]
    return max(float(np.mean(told)), SMALLEST_SLOPE) if told else 1.0


def _moved(stretch: Stretch, preparation: Preparation, sign: int) -> float:
    fault = Fault("shift", 0.5, "TEa", sign)
    typical = np.median(stretch.value, keepdims=True)
    there = float((typical + fault.bias(typical, stretch.error))[0])
    true = preparation.scale(there) - preparation.scale(float(typical[0]))
    values, censor = inflict(stretch.value, stretch.censor, fault, stretch.error, stretch.reporting, stretch.chance)
    shifted, base = preparation.all(values, censor, stretch.mix), stretch.prepared(preparation)
    if true == 0 or not np.isfinite(shifted).any():
        return math.nan
    return float(np.nanmean(shifted) - np.nanmean(base)) / true
