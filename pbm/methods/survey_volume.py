"""Volume by hour of the week, and gaps: stretches without results that the hour's own history makes unlikely.

The rate of an hour of the week is its mean count over the days that have results at all. Over a stretch without results the rates sum to
L expected results; independent arrivals leave it empty with probability exp(-L). A gap is told where less than a hundredth of such a
stretch was to be expected by chance among all the stretches between two results.
"""

import math
from dataclasses import dataclass

import numpy as np

from pbm.methods.clock_time import HOURS_A_WEEK, HOURS_FROM_MONDAY, MICROSECONDS_PER_DAY, MICROSECONDS_PER_HOUR
from pbm.methods.jit import Floats, Integers

BY_CHANCE = 0.01
SHORTEST_HOURS = 1.0


def hourly_rates(local: Integers) -> Floats:
    """Mean results in each hour of the week over the days that have results, shape (168,); `local` (n,) in wall-clock microseconds."""
    hour = (local // MICROSECONDS_PER_HOUR + HOURS_FROM_MONDAY) % HOURS_A_WEEK
    days = np.unique(local // MICROSECONDS_PER_DAY)
    days_of_each = np.bincount((days + HOURS_FROM_MONDAY // 24) % 7, minlength=7)
    count = np.bincount(hour, minlength=HOURS_A_WEEK)
    rates: Floats = count / np.maximum(np.repeat(days_of_each, 24), 1)
    return rates


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


def find_gaps(local: Integers) -> list[Gap]:
    """The gaps of a stream in order of time.

    Parameters
    ----------
    local : (n,)
        Wall-clock microseconds of the results, at least two, in order of time.
    """
    first = int(local.min()) // MICROSECONDS_PER_HOUR
    hours = np.arange(first, int(local.max()) // MICROSECONDS_PER_HOUR + 2)
    rates = hourly_rates(local)
    so_far = np.concatenate([[0.0], np.cumsum(rates[(hours[:-1] + HOURS_FROM_MONDAY) % HOURS_A_WEEK])])
    expected = np.diff(np.interp(local, hours * MICROSECONDS_PER_HOUR, so_far))
    length = np.diff(local) / MICROSECONDS_PER_HOUR
    unlikely = math.log(max(len(local) - 1, 1) / BY_CHANCE)
    found = np.flatnonzero((expected > unlikely) & (length >= SHORTEST_HOURS))
    return [Gap(int(i), float(length[i]), float(expected[i])) for i in found]
