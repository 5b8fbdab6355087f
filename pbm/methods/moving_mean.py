"""Moving mean of the last N admitted values.

    s_t = (z_{t-N+1} + ... + z_t) / N,   judged from the N-th value on

The sum is kept by adding the new value and taking the oldest away, and summed afresh each time the ring of N values has gone round, so
that rounding errors do not grow with the length of the stream.

State: [values seen (at most N), place of the oldest, running sum, ring of N values]. Parameter: [N].
"""

import math

from pbm.methods.jit import Parameters, State


def start(par: Parameters, centre: float) -> list[float]:
    """Empty window; the centre is not used."""
    return [0.0, 0.0, 0.0, *[0.0] * int(par[0])]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the mean of the window, or not a number until it is full.

    Examples
    --------
    >>> state = start([3], 0.0)
    >>> [step(state, x, [3]) for x in (1.0, 2.0, 6.0, 4.0)]
    [nan, nan, 3.0, 4.0]
    """
    n = int(par[0])
    place = int(state[1])
    total = state[2] + x
    if state[0] == n:
        total -= state[3 + place]
    else:
        state[0] += 1.0
    state[3 + place] = x
    place += 1
    if place == n:
        place = 0
        total = 0.0
        for i in range(3, 3 + n):
            total += state[i]
    state[1] = place
    state[2] = total
    return total / n if state[0] == n else math.nan
