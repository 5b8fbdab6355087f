"""Two-sided CUSUM as one signed number.

    u_t = (z_t - level) / spread
    C+_t = max(0, C+_{t-1} + u_t - k),   C-_t = max(0, C-_{t-1} - u_t - k),   C+_0 = C-_0 = 0
    s_t  = +C+_t if C+_t >= C-_t, else -C-_t

The reference k is half of the shift (in SDs of one value) that is to be found soonest; the limits are the decision intervals, U = h and
L = -h. One number tells both sums: while both are above 0 their total falls by 2k with each value, so that as long as no alarm is open
their total is at most the wider of U and -L, and the smaller sum cannot hide a crossing if the wider limit is at most twice the narrower
(proof: a sum hidden beyond its limit h would need a total of more than 2h). Symmetric limits give exactly the classical two-sided
scheme. The centre is 0.

Source: "Continuous inspection schemes", Biometrika 1954;41:100-115; two-sided with h: "Fast initial response for CUSUM quality-control
schemes: give your CUSUM a headstart", Technometrics 1982;24:199-205 (a head start is a state [a, a]).

State: [C+, C-]. Parameters: [k, level, spread].
"""

from pbm.methods.jit import Parameters, State

MOST_UNEVEN = 2.0  # how many times as far out as the other one limit may lie, without the smaller sum hiding a crossing


def start(par: Parameters, centre: float) -> list[float]:
    """Both sums at 0; the centre is not used."""
    return [0.0, 0.0]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the larger of the two sums, with its sign.

    Examples
    --------
    >>> par = [0.5, 140.0, 2.0]
    >>> state = start(par, 0.0)
    >>> [step(state, x, par) for x in (143.0, 143.0, 140.0, 134.0)]
    [1.0, 2.0, 1.5, -2.5]
    """
    u = (x - par[1]) / par[2]
    up = state[0] + u - par[0]
    down = state[1] - u - par[0]
    state[0] = up if up > 0.0 else 0.0
    state[1] = down if down > 0.0 else 0.0
    return state[0] if state[0] >= state[1] else -state[1]
