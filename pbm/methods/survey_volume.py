"""Volume by hour of the week, and gaps: stretches without results that the hour's own history makes unlikely.

The rate of an hour of the week is its mean count over the hours outside gaps. Over a stretch without results the rates sum to L expected
results; independent arrivals leave it empty with probability exp(-L). A gap is told where less than a hundredth of such a stretch was to
be expected by chance among all the stretches between two results. What is a gap and what the rates are is settled in a few rounds.
"""

import math
from dataclasses import dataclass

import numpy as np

from pbm.methods.clock_time import HOURS_A_WEEK, HOURS_FROM_MONDAY, MICROSECONDS_PER_HOUR
from pbm.methods.jit import Floats, Integers

BY_CHANCE = 0.01
SHORTEST_HOURS = 1.0
ROUNDS = 4


@dataclass(frozen=True, slots=True)
class Gap:
    """A stretch without results.

    Attributes
    ----------
    before
        Index of the last result before it.
    hours
        Its length.
    expected
        Results that the hours' own history makes likely in it.
    """

    before: int
    hours: float
    expected: float


def rates_and_gaps(local: Integers) -> tuple[Floats, list[Gap]]:
    """Mean results in each hour of the week outside gaps, shape (168,), and the gaps in order of time.

    Parameters
    ----------
    local : (n,)
        Wall-clock microseconds of the results, at least one, in order of time.
    """
    first = int(local.min()) // MICROSECONDS_PER_HOUR
    hours = np.arange(first, int(local.max()) // MICROSECONDS_PER_HOUR + 1)
    of_week = (hours + HOURS_FROM_MONDAY) % HOURS_A_WEEK
    count = np.bincount(of_week[local // MICROSECONDS_PER_HOUR - first], minlength=HOURS_A_WEEK)
    gaps: list[Gap] = []
    for _ in range(ROUNDS):
        outside = np.ones(len(hours), dtype=bool)
        for gap in gaps:
            begin, end = (int(t) // MICROSECONDS_PER_HOUR - first for t in local[gap.before : gap.before + 2])
            outside[begin + 1 : end] = False
        rates = count / np.maximum(np.bincount(of_week[outside], minlength=HOURS_A_WEEK), 1)
        before, gaps = gaps, _gaps(local, hours * MICROSECONDS_PER_HOUR, rates[of_week])
        if [gap.before for gap in gaps] == [gap.before for gap in before]:
            break
    return rates, gaps


def _gaps(local: Integers, edges: Integers, rates: Floats) -> list[Gap]:
    """Gaps, given where each hour begins and its rate."""
    edges = np.append(edges, edges[-1] + MICROSECONDS_PER_HOUR)
    expected = np.diff(np.interp(local, edges, np.concatenate([[0.0], np.cumsum(rates)])))
    length = np.diff(local) / MICROSECONDS_PER_HOUR
    unlikely = math.log(max(len(local) - 1, 1) / BY_CHANCE)
    found = np.flatnonzero((expected > unlikely) & (length >= SHORTEST_HOURS))
    return [Gap(int(i), float(length[i]), float(expected[i])) for i in found]
