"""When no results are too few: a silence is measured in the results that were to be expected in it, by the hour of the week.

    u(from, to) = sum over the hours between of (results an hour at that hour of the week) x (part of the hour)

Where results came one by one at known rates, u of the gaps between them would be exponential with mean 1. Real results come in clumps (the
tests of one specimen, a courier's box), on holidays hardly at all, and rates are learned; so the tail is measured, not assumed. Each gap is
measured by the rates of the other weeks. Beyond the longest gap but r, u_r, the r excesses have the mean m, and to be expected later are

    gaps longer than u = r (1 + (u - u_r) / (r m))^-r in as many days,

the predictive tail of exponential excesses whose mean was estimated from r. The silence allowed is the u at which that count is the number
of false notices that one is ready to bear. However evenly results came, a silence in which fewer than three were to be expected is none.

Sources. Excesses over a high level: "Statistical inference using extreme order statistics", Annals of Statistics 1975;3:119-131.
Predictive tail: "Statistical prediction analysis", Cambridge University Press 1975 (from memory).
"""

import math
from datetime import datetime
from zoneinfo import ZoneInfo

import numpy as np

from pbm.methods.clock_time import HOURS_A_WEEK, MICROSECONDS_PER_HOUR, hour_of_week, hours_of_week
from pbm.methods.jit import Floats, Integers

LONGEST = 14 * 24  # hours that a silence is looked ahead: with no result expected in so many it has no end
TAIL_GAPS = 40
LEAST = 3.0  # expected results in a silence worth telling
_WEEK = HOURS_A_WEEK * MICROSECONDS_PER_HOUR
_QUARTER = MICROSECONDS_PER_HOUR // 4  # every time zone is off by whole quarters of an hour


def results_by_hour(time: Integers, zone: ZoneInfo) -> Floats:
    """Results an hour at each hour of the week, shape (168,).

    Parameters
    ----------
    time : (n,)
        Results, UTC microseconds, not decreasing; the span from the first to the last is what is counted over.
    zone
        Of the laboratory's clocks.
    """
    counts = np.bincount(hours_of_week(time, zone), minlength=HOURS_A_WEEK)
    hours = np.bincount(hours_of_week(_quarters(time), zone), minlength=HOURS_A_WEEK) / 4
    rates: Floats = counts / np.maximum(hours, 0.25)
    return rates


def expected_in_gaps(time: Integers, rates: Floats, zone: ZoneInfo) -> Floats:
    """Results expected between each two that follow each other, shape (n - 1,)."""
    return _in_gaps(time, rates[hours_of_week(_quarters(time), zone)])


def expected_by_other_weeks(time: Integers, zone: ZoneInfo) -> Floats:
    """The same at rates learned from the other weeks, shape (n - 1,); at least two weeks of results are needed."""
    quarters = _quarters(time)
    week, hour = (quarters - quarters[0]) // _WEEK, hours_of_week(quarters, zone)
    shape = (int(week[-1]) + 1, HOURS_A_WEEK)
    place = np.ravel_multi_index((week, hour), shape)
    hours = np.bincount(place, minlength=shape[0] * shape[1]).reshape(shape) / 4
    own = np.ravel_multi_index(((time - quarters[0]) // _WEEK, hours_of_week(time, zone)), shape)
    counts = np.bincount(own, minlength=shape[0] * shape[1]).reshape(shape)
    rates = (counts.sum(axis=0) - counts) / np.maximum(hours.sum(axis=0) - hours, 0.25)
    return _in_gaps(time, rates[week, hour])


def _quarters(time: Integers) -> Integers:
    """Every quarter of an hour from the first to the last result."""
    first = time[0] // _QUARTER
    return np.asarray((first + np.arange(time[-1] // _QUARTER - first + 1)) * _QUARTER)


def _in_gaps(time: Integers, rates: Floats) -> Floats:
    """Expected between results, from the rate in each quarter of an hour."""
    upto = np.concatenate([[0.0], np.cumsum(rates / 4)])
    begin = time[0] // _QUARTER * _QUARTER
    passed: Floats = np.diff(np.interp(time - begin, np.arange(len(upto)) * _QUARTER, upto))
    return passed


def allowed_silence(gaps: Floats, days: float, per_day: float) -> float:
    """Expected results in a silence that comes about `per_day` times a day although all is well.

    Parameters
    ----------
    gaps : (n,)
        Expected results in each gap of the history.
    days
        That the history covers.
    per_day
        False notices a day that one is ready to bear.
    """
    longest = np.sort(gaps)[::-1][: max(2, min(TAIL_GAPS, len(gaps) // 4)) + 1]
    level, excesses = float(longest[-1]), longest[:-1] - longest[-1]
    wanted = per_day * days
    if wanted >= len(excesses):
        return max(LEAST, float(np.quantile(gaps, max(0.0, 1 - wanted / len(gaps)))))
    beyond = len(excesses) * (math.pow(len(excesses) / wanted, 1 / len(excesses)) - 1)
    return max(LEAST, level + float(excesses.mean()) * beyond)


def expected_between(begin: int, end: int, rates: tuple[float, ...], zone: ZoneInfo) -> float:
    """Results expected from one instant to a later one (UTC microseconds), with the standard library alone."""
    total, at = 0.0, begin
    while at < end:
        until = min(_next_hour(at, zone), end)
        total += rates[hour_of_week(at, zone)] * (until - at) / MICROSECONDS_PER_HOUR
        at = until
    return total


def silence_ends(begin: int, allowed: float, rates: tuple[float, ...], zone: ZoneInfo) -> int | None:
    """The instant at which a silence that began at `begin` has lasted for `allowed` expected results; None if not within `LONGEST` hours.

    Examples
    --------
    >>> silence_ends(0, 5.0, (10.0,) * 168, ZoneInfo("UTC")) // 60_000_000
    30
    """
    left, at = allowed, begin
    while at < begin + LONGEST * MICROSECONDS_PER_HOUR:
        until, rate = _next_hour(at, zone), rates[hour_of_week(at, zone)]
        within = rate * (until - at) / MICROSECONDS_PER_HOUR
        if within >= left:
            return at + math.ceil(left / rate * MICROSECONDS_PER_HOUR)
        left, at = left - within, until
    return None


def _next_hour(at: int, zone: ZoneInfo) -> int:
    """When the hour of the laboratory's clocks is over, or at most one hour later where they are changed."""
    local = datetime.fromtimestamp(at // 1_000_000, zone)
    into = (local.minute * 60 + local.second) * 1_000_000 + at % 1_000_000
    return at + MICROSECONDS_PER_HOUR - into
