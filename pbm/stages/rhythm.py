"""The rhythm of a stream or an analyser learned from when its results came; the arithmetic is that of methods/silence.py."""

from zoneinfo import ZoneInfo

import numpy as np

from pbm.methods.clock_time import MICROSECONDS_PER_DAY
from pbm.methods.jit import Integers
from pbm.methods.significant import significant
from pbm.methods.silence import allowed_silence, expected_by_other_weeks, results_by_hour
from pbm.records.rhythm import Rhythm

FEWEST_DAYS = 14  # two of every hour of the week
FEWEST_RESULTS = 200
SIGNIFICANT = 4


def learn_rhythm(time: Integers, zone: ZoneInfo, false_per_day: float) -> Rhythm | None:
    """The rhythm of results.

    Parameters
    ----------
    time : (n,)
        When they were measured, UTC microseconds, not decreasing.
    zone
        Of the laboratory's clocks.
    false_per_day
        False notices a day that the laboratory is ready to bear.

    Returns
    -------
    Rhythm or None
        None where there are too few results or days to tell.
    """
    days = float(time[-1] - time[0]) / MICROSECONDS_PER_DAY if len(time) else 0.0
    if len(time) < FEWEST_RESULTS or days < FEWEST_DAYS:
        return None
    rates = results_by_hour(time, zone)
    allowed = allowed_silence(expected_by_other_weeks(time, zone), days, false_per_day)
    return Rhythm(
        quiet_at=_rounded(allowed), false_per_day=_rounded(false_per_day), by_hour=tuple(map(_rounded, rates.tolist()))
    )


def merged(times: list[Integers]) -> Integers:
    """The times of several streams as one, in order, shape (n,)."""
    return np.sort(np.concatenate(times), kind="stable")


def _rounded(number: float) -> float:
    return significant(number, SIGNIFICANT)
