"""Batch-weighted moving mean of the haematology literature: an estimate B moved once per batch of n values.

    S   = (1/n) sum_j sgn(z_j - B) |z_j - B|^P        over the batch, B from the batch before
    B'  = B + sgn(S) |S|^(1/P)                        B_0 = centre

An exponent P below 1 makes far values count for less; P = 1/2 is the form of 1974, P = 1 makes B the batch mean. The statistic is B' at
the last value of a batch. Between the ends of batches it is not judged (not a number) rather than held, so that each batch is judged
once: neither counts of alarms nor a run that begins inside a batch meet an old value again.

Sources: "A study of various estimators for the derivation of quality control procedures from patient erythrocyte indices", American
Journal of Clinical Pathology 1974;61:473-481; any batch size and exponent: American Journal of Clinical Pathology 1996;105:44-51.

State: [B, values in the batch, sum so far]. Parameters: [n, P].
"""

import math

from pbm.methods.jit import Parameters, State


def start(par: Parameters, centre: float) -> list[float]:
    """The estimate starts at the centre, with an empty batch."""
    return [centre, 0.0, 0.0]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the new estimate if it ends a batch, else not a number.

    Examples
    --------
    >>> par = [4, 0.5]
    >>> state = start(par, 90.0)
    >>> [step(state, x, par) for x in (91.0, 91.0, 90.0, 90.0)]
    [nan, nan, nan, 90.25]
    """
    apart = x - state[0]
    state[1] += 1.0
    state[2] += math.copysign(abs(apart) ** par[1], apart)
    if state[1] < par[0]:
        return math.nan
    mean = state[2] / par[0]
    state[0] += math.copysign(abs(mean) ** (1.0 / par[1]), mean)
    state[1] = 0.0
    state[2] = 0.0
    return state[0]
