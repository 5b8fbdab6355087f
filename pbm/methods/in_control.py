"""In-control behaviour of the values that a statistic takes: how far they move under a true shift, how much they hang together.

    slope      d(mean of admitted values) / d(true shift), both on the statistic's scale
    inflation  variance of a mean of successive values over what independence would give
    wander     SD of the slow wandering of the level: of means over a day beyond what values that hang together briefly would give

For fixed truncation limits on normal values the slope is Var(admitted) / Var(all); here it is measured on the results themselves, with
rounding and censoring, at half a TEa to either side.
"""

import math

import numpy as np

from pbm.methods.chain import Preparation
from pbm.methods.faults import Fault, inflict
from pbm.methods.jit import Floats
from pbm.methods.trials import Stretch

BATCH = 50
SMALLEST_SLOPE = 0.01


def inflation(z: Floats, batch: int = BATCH) -> float:
    """Variance inflation of the mean of `batch` successive admitted values, at least 1; z (n,) holds not a number where dropped."""
    admitted = z[~np.isnan(z)]
    whole = admitted[: len(admitted) // batch * batch].reshape(-1, batch)
    if len(whole) < 2 or (variance := float(admitted.var())) == 0:
        return 1.0
    return max(1.0, batch * float(whole.mean(axis=1).var(ddof=1)) / variance)


def wander(z: Floats, a_day: int) -> float:
    """SD of the in-control level from day to day; z (n,) holds not a number where dropped, `a_day` is the number of values a day."""
    admitted = z[~np.isnan(z)]
    batch = max(a_day, BATCH)
    whole = admitted[: len(admitted) // batch * batch].reshape(-1, batch)
    if len(whole) < 2:
        return 0.0
    brief = float(admitted.var()) * inflation(z) / batch
    return math.sqrt(max(float(whole.mean(axis=1).var(ddof=1)) - brief, 0.0))


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
