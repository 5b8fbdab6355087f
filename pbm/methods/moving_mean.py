"""Moving mean of the last N admitted values.

    s_t = (z_{t-N+1} + ... + z_t) / N,   judged from the N-th value on

The sum is kept by adding the new value and taking the oldest away, and replaced by a sum made afresh each time the ring of N values has
gone round, so that rounding errors do not grow with the length of the stream. The fresh sum grows beside it, one value at a time.

State: [1 once N values were seen, place of the oldest, running sum, sum of this lap, ring of N values]. Parameter: [N].
"""

import math

from pbm.methods.jit import Parameters, State


def start(par: Parameters, centre: float) -> list[float]:
    """Empty window; the centre is not used."""
    return [0.0, 0.0, 0.0, 0.0, *[0.0] * int(par[0])]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the mean of the window, or not a number until it is full.

    Examples
    --------
    >>> state = start([3], 0.0)
    >>> [step(state, x, [3]) for x in (1.0, 2.0, 6.0, 4.0)]
    [nan, nan, 3.0, 4.0]
    """
    n = par[0]
    place = 4 + int(state[1])
    total = state[2] + (x - state[place])
    fresh = state[3] + x
    state[place] = x
    state[1] += 1.0
    if state[1] == n:
        state[0] = 1.0
        state[1] = 0.0
        total = fresh
        fresh = 0.0
    state[2] = total
    state[3] = fresh
    return total / n if state[0] == 1.0 else math.nan
