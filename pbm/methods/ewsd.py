"""Exponentially weighted standard deviation about a fixed level.

    v_t = v_{t-1} + w ((z_t - level)^2 - v_{t-1}),   s_t = sqrt(v_t),   s_0 = centre

It answers to a change of spread and, more slowly, to a shift (a shift d adds d^2 to the mean of v). The level is the in-control mean of
the values; the centre, as everywhere, is the in-control level of the statistic. The expected value of v is the in-control variance; that
of s is a little lower (about 1 - w / (4 (2 - w)) of the SD on normal values).

Source: "The exponentially weighted moving variance", Journal of Quality Technology 1993;25:106-118 (there: the mean square).

State: [v]. Parameters: [w, level].
"""

import math

from pbm.methods.jit import Parameters, State


def start(par: Parameters, centre: float) -> list[float]:
    """The statistic starts at the centre."""
    return [centre * centre]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the weighted SD after it.

    Examples
    --------
    >>> par = [0.5, 140.0]
    >>> state = start(par, 2.0)
    >>> [step(state, x, par) for x in (142.0, 140.0, 144.0)]
    [2.0, 1.4142135623730951, 3.0]
    """
    apart = x - par[1]
    state[0] += par[0] * (apart * apart - state[0])
    return math.sqrt(state[0])
