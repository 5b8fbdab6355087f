"""Exponentially weighted moving average.

    s_t = s_{t-1} + w (z_t - s_{t-1}),   s_0 = centre

Source: "Exponentially weighted moving average control schemes: properties and enhancements", Technometrics 1990;32:1-12.

State: [s]. Parameter: [w].
"""

from pbm.methods.jit import Parameters, State


def start(par: Parameters, centre: float) -> list[float]:
    """The average starts at the centre."""
    return [centre]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the average after it.

    Examples
    --------
    The worked example of the NIST/SEMATECH e-Handbook of Statistical Methods, section 6.3.2.4 (first values):

    >>> state = start([0.3], 50.0)
    >>> [round(step(state, x, [0.3]), 2) for x in (52.0, 47.0, 53.0, 49.3)]
    [50.6, 49.52, 50.56, 50.18]
    """
    state[0] += par[0] * (x - state[0])
    return state[0]
