"""Moving share: which part of the last N admitted values lies outside [c, d].

    s_t = #{i : z_i < c or z_i > d} / N,   i = t-N+1 ... t,   judged from the N-th value on

A value on c or d is inside. One side can be left open (infinite). The statistic is a multiple of 1/N, so a limit belongs between two
multiples.

Source: moving sum of outliers: "Moving standard deviation and moving sum of outliers as quality tools for monitoring analytical
precision", Clinical Biochemistry 2018;52:112-116.

State: [1 once N values were seen, place of the oldest, count outside, ring of N marks (1 outside, 0 inside)]. Parameters: [N, c, d].
"""

import math

from pbm.methods.jit import Parameters, State


def start(par: Parameters, centre: float) -> list[float]:
    """Empty window; the centre is not used."""
    return [0.0, 0.0, 0.0, *[0.0] * int(par[0])]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the share of the window outside, or not a number until it is full.

    Examples
    --------
    >>> par = [4, 135.0, 145.0]
    >>> state = start(par, 0.0)
    >>> [step(state, x, par) for x in (140.0, 146.0, 145.0, 134.0, 141.0, 141.0)]
    [nan, nan, nan, 0.5, 0.5, 0.25]
    """
    n = par[0]
    place = 3 + int(state[1])
    outside = 1.0 if x < par[1] or x > par[2] else 0.0
    state[2] += outside - state[place]
    state[place] = outside
    state[1] += 1.0
    if state[1] == n:
        state[0] = 1.0
        state[1] = 0.0
    return state[2] / n if state[0] == 1.0 else math.nan
