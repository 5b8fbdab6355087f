"""Alarms on held-out days on which nothing is known to be wrong: how many, against the budget, and how long they stay open."""

from collections.abc import Sequence

import numpy as np

from pbm.methods.clock_time import MICROSECONDS_PER_DAY
from pbm.methods.day_bootstrap import DayBootstrap, Mask
from pbm.methods.held_out import HeldOutAlarms
from pbm.methods.intervals import poisson_interval
from pbm.methods.jit import Floats
from pbm.records.appraisal import Trace
from pbm.records.figures import Figure
from pbm.records.judged import FalseAlarms, NoFault
from pbm.stages.appraise.ground import DRAWS, Ground
from pbm.stages.appraise.watch import Level, Running, alarms_by
from pbm.stages.appraise.written import figure, rounded

MONTH = 30
TRACE_POINTS = 400


def alarms_of(ground: Ground, monitors: Sequence[Running], budget: float) -> FalseAlarms:
    """Alarms of one monitor or of several together, against a budget of so many a day."""
    count = sum(one.alarms_since(ground.split.at) for one in monitors)
    in_alarm = np.any([one.in_alarm()[ground.held_out] for one in monitors], axis=0)
    return told_alarms(ground, count, budget, _share_of_time(ground, in_alarm))


def told_alarms(ground: Ground, count: int, budget: float, in_alarm: Figure | None) -> FalseAlarms:
    """So many alarms on the held-out days, against a budget of so many a day."""
    days = ground.split.held_out_days
    found = HeldOutAlarms(days, count, budget * days, poisson_interval(count))
    low, high = found.interval
    return FalseAlarms(
        days=days,
        episodes=count,
        allowed=rounded(found.allowed),
        interval=(rounded(low), rounded(high)),
        kept=found.kept,
        a_month=Figure(
            value=rounded(count * MONTH / days), low=rounded(low * MONTH / days), high=rounded(high * MONTH / days)
        ),
        in_alarm=in_alarm,
    )


def _share_of_time(ground: Ground, in_alarm: Mask) -> Figure:
    """Share of the held-out time during which an alarm is open; a day that begins in an alarm counts from its first result on."""
    time = ground.stretch.time[ground.held_out]
    lasting = np.diff(time, append=time[-1]).astype(np.float64)
    if not lasting.sum():
        return Figure(value=0.0, low=0.0, high=0.0)
    days = DayBootstrap.of(ground.split.days[ground.held_out], DRAWS, ground.around.random("time in alarm"))
    return figure(days.ratio(lasting * in_alarm, lasting))


def no_fault(ground: Ground, levels: Sequence[Level]) -> NoFault:
    """The chance of an alarm at the same onsets where nothing is wrong."""
    first, horizon = (
        ground.mean([alarms_by(level.without_fault, by) for level in levels], highest=1.0)
        for by in (ground.onsets.to_first_event, ground.onsets.length)
    )
    return NoFault(by_first_event=figure(first), within_horizon=figure(horizon))


def trace_of(ground: Ground, path: Floats) -> Trace:
    """Lowest and highest value of a statistic in each of up to `TRACE_POINTS` equal parts of the held-out time."""
    time = ground.stretch.time[ground.held_out]
    path, day = path[ground.held_out], (time - time[0]) / MICROSECONDS_PER_DAY
    judged = ~np.isnan(path)
    path, day = path[judged], day[judged]
    if not len(path):
        return Trace(day=(), lowest=(), highest=())
    part = np.minimum((day / max(day[-1], 1e-9) * TRACE_POINTS).astype(int), TRACE_POINTS - 1)
    firsts = np.flatnonzero(np.diff(part, prepend=-1))
    return Trace(
        day=tuple(map(rounded, day[firsts].tolist())),
        lowest=tuple(map(rounded, np.minimum.reduceat(path, firsts).tolist())),
        highest=tuple(map(rounded, np.maximum.reduceat(path, firsts).tolist())),
    )
