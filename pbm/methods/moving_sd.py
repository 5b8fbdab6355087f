"""Moving SD: the sample standard deviation of the last N admitted values.

    s_t = sqrt( sum_i (z_i - mean)^2 / (N - 1) ),   i = t-N+1 ... t,   judged from the N-th value on

Nothing is ever taken away from a sum of squares, because what a far value leaves behind when it is subtracted can be larger than the
variance itself. The window is the tail of the last whole lap of N values and the head of the present lap. Mean and sum of squared
deviations of every tail are made once a lap, those of the head grow with each value, and the two are joined by

    S = S_a + S_b + (mean_b - mean_a)^2 n_a n_b / (n_a + n_b)

Source of the joining: "Updating formulae and a pairwise algorithm for computing sample variances", COMPSTAT 1982 (Proceedings in
Computational Statistics), 30-41; of the growing: "Note on a method for calculating corrected sums of squares and products", Technometrics
1962;4:419-420.

State: [1 once N values were seen, values in the head, mean of the head, squares of the head, N numbers, N squares of the tails]; the N
numbers are the values of the head, then the means of the tails that begin there. Parameter: [N], at least 2.
"""

import math

from pbm.methods.jit import Parameters, State


def start(par: Parameters, centre: float) -> list[float]:
    """Empty window; the centre is not used."""
    return [0.0, 0.0, 0.0, 0.0, *[0.0] * (2 * int(par[0]))]


def step(state: State, x: float, par: Parameters) -> float:
    """Take a value; the SD of the window, or not a number until it is full.

    Examples
    --------
    >>> state = start([3], 0.0)
    >>> [step(state, x, [3]) for x in (1.0, 3.0, 5.0, 1e9, 1.0, 1.0, 3.0)][-1]
    1.1547005383792515
    """
    n = int(par[0])
    place = int(state[1])
    head = place + 1.0
    apart = x - state[2]
    mean = state[2] + apart / head
    squares = state[3] + apart * (x - mean)
    state[1] = head
    state[2] = mean
    state[3] = squares
    state[4 + place] = x
    if place + 1 < n:
        if state[0] == 0.0:
            return math.nan
        tail = n - head
        apart = state[5 + place] - mean
        squares += state[5 + place + n] + apart * apart * (head * tail / n)
        return math.sqrt(squares / (n - 1))
    state[0] = 1.0
    state[1] = 0.0
    state[2] = 0.0
    state[3] = 0.0
    tail_mean = 0.0
    tail_squares = 0.0
    for i in range(3 + n, 3, -1):
        apart = state[i] - tail_mean
        tail_mean += apart / (4 + n - i)
        tail_squares += apart * (state[i] - tail_mean)
        state[i] = tail_mean
        state[i + n] = tail_squares
    return math.sqrt(squares / (n - 1))
