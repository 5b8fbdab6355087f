"""Moving median of the last N admitted values: the middle one, or the mean of the two middle ones when N is even.

The window is kept twice: in order of arrival (to know which value leaves) and in order of size (to read the middle).

State: [values seen (at most N), place of the oldest, ring of N values, the same values sorted]. Parameter: [N].
"""

import math

from pbm.methods.jit import Parameters, State


def start(par: Parameters, centre: float) -> list[float]:
    """Empty window; the centre is not used."""
    return [0.0, 0.0, *[0.0] * (2 * int(par[0]))]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the median of the window, or not a number until it is full.

    Examples
    --------
    >>> state = start([3], 0.0)
    >>> [step(state, x, [3]) for x in (1.0, 9.0, 2.0, 4.0)]
    [nan, nan, 2.0, 4.0]
    """
    n = int(par[0])
    seen = int(state[0])
    place = int(state[1])
    first = 2 + n
    last = first + seen
    if seen == n:
        gap = first
        while state[gap] < state[2 + place]:
            gap += 1
    else:
        gap = last
        state[0] += 1.0
    while gap > first and state[gap - 1] > x:
        state[gap] = state[gap - 1]
        gap -= 1
    while gap + 1 < last and state[gap + 1] < x:
        state[gap] = state[gap + 1]
        gap += 1
    state[gap] = x
    state[2 + place] = x
    state[1] = (place + 1) % n
    if state[0] < n:
        return math.nan
    middle = first + n // 2
    return state[middle] if n % 2 else (state[middle - 1] + state[middle]) / 2.0
