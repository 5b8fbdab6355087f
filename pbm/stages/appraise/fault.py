"""One fault at every onset: what finds it, when, and what it costs until then, with the schedule alone and with the monitors beside it."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pbm.methods.day_bootstrap import Estimate, Mask, average
from pbm.methods.detection import Detection, by_both, by_monitor, by_schedule
from pbm.methods.faults import Fault
from pbm.methods.jit import Floats, Integers
from pbm.methods.trials import Trial, alarm_and_stop, trial
from pbm.records.figures import Until, UntilWays, Ways
from pbm.records.judged import FaultAppraisal, OnsetTime, OnsetWhen
from pbm.stages.appraise.ground import Ground
from pbm.stages.appraise.watch import Level, alarms_by
from pbm.stages.appraise.written import alone_and_with, figure, percentile, rounded

SHARES = (0.05, 0.5, 0.95)
PARTS: tuple[OnsetWhen, ...] = ("day", "night", "weekend")
Z = 1.6449  # of a 90 % interval
Three = tuple[Estimate, Estimate, Estimate]  # the schedule alone, the monitors alone, both
Detections = tuple[Detection, Detection, Detection]


@dataclass(frozen=True, slots=True)
class Costs:
    """Expected unreliable results, and those of them that are final, without and with the monitors."""

    alone: Estimate
    beside: Estimate
    final_alone: Estimate
    final_beside: Estimate


@dataclass(frozen=True, slots=True)
class PartCosts:
    """What the onsets of one part of the week show."""

    by_first: Three
    until: Three
    hours: Three
    alone: Estimate
    beside: Estimate


@dataclass(frozen=True, slots=True)
class Run:
    """A fault at every onset, at one level of the analyser; each array (r,).

    Attributes
    ----------
    tried
        The fault tried.
    to_alarm
        With which affected result the alarm comes; 0 where there is none.
    alarm, stop
        The same, the horizon where there is none; and how many are reported until the stop.
    results, hours
        Results and hours until detection by the schedule alone, by the monitors alone, by both.
    """

    tried: Trial
    to_alarm: Integers
    alarm: Integers
    stop: Integers
    results: Detections
    hours: Detections

    @property
    def costs(self) -> tuple[Floats, Floats, Floats, Floats]:
        """Unreliable results without and with the monitors, and those of them that are final, at each onset."""
        exposure, length = self.tried.exposure, self.tried.onsets.length
        return (
            exposure.unreliable(length),
            exposure.unreliable(self.stop),
            exposure.unreliable_final(length),
            exposure.unreliable_final(self.alarm),
        )


@dataclass(frozen=True, slots=True)
class FaultFound:
    """A fault tried, with the estimates from which averages over the faults are made.

    Attributes
    ----------
    fault, weight
        The fault, and its weight in averages.
    runs
        At the level of the held-out days, and where it wanders below and above it.
    costs, parts
        The estimates.
    beyond_false_alarms
        Unreliable results saved beyond those that false alarms save.
    record
        What is written of it.
    """

    fault: Fault
    weight: float
    runs: list[Run]
    costs: Costs
    parts: dict[OnsetWhen, PartCosts]
    beyond_false_alarms: Estimate
    record: FaultAppraisal


def appraise_fault(ground: Ground, levels: list[Level], fault: Fault, weight: float) -> FaultFound:
    """Try a fault at every onset and each level."""
    survival = ground.around.chance_of_passing(fault, ground.onsets)
    runs = [_run(ground, level, fault, survival.passed) for level in levels]
    costs = [run.costs for run in runs]
    alone, beside, final_alone, final_beside = (ground.mean([one[i] for one in costs]) for i in range(4))
    correctable = [ground.mean([one[i] - one[i + 2] for one in costs]) for i in range(2)]
    saved = [_saved(ground, run, level) for run, level in zip(runs, levels, strict=True)]
    beyond = ground.mean(saved, lowest=-math.inf)
    parts = {part: _part(ground, part, runs, costs) for part in PARTS if part in ground.parts}
    record = FaultAppraisal(
        label=str(fault),
        kind=fault.kind,
        size=fault.size,
        unit=fault.unit,
        sign=1 if fault.sign > 0 else -1,
        over=fault.over if fault.kind == "drift" else None,
        share=fault.share if fault.kind == "sporadic" else None,
        weight=weight,
        shift=_typical_shift(ground, fault),
        by_first_event=_three_figures(_by_first(ground, runs)),
        never=_three_figures(_three(ground, [[way.never for way in run.results] for run in runs], highest=1.0)),
        until=_until_ways(ground, [run.results for run in runs]),
        until_hours=_until_ways(ground, [run.hours for run in runs]),
        unreliable=alone_and_with(alone, beside),
        unreliable_final=alone_and_with(final_alone, final_beside),
        unreliable_correctable=alone_and_with(correctable[0], correctable[1]),
        beyond_false_alarms=figure(beyond),
        no_more_than_false_alarms=_no_more_than(ground, runs, levels),
        by_onset=tuple(onset_time(ground, part, found) for part, found in parts.items()),
        schedule_error=rounded(float(survival.error.max())),
    )
    return FaultFound(fault, weight, runs, Costs(alone, beside, final_alone, final_beside), parts, beyond, record)


def _run(ground: Ground, level: Level, fault: Fault, passed: Floats) -> Run:
    onsets = ground.onsets
    tried = trial(level.stretch, fault, onsets, passed)
    to_alarm = level.watch.results_to_alarm(tried)
    alarm, stop = _stopped(ground, to_alarm)
    results = by_schedule(onsets, passed), by_monitor(onsets, to_alarm), by_both(onsets, passed, to_alarm)
    events, at_alarm = ground.event_hours, ground.hours_until(to_alarm)[:, None]
    points, horizon = (events, at_alarm, np.column_stack([events, at_alarm])), ground.hours_until(onsets.length)
    schedule, monitor, both = (way.timed(each, horizon) for way, each in zip(results, points, strict=True))
    return Run(tried, to_alarm, alarm, stop, results, (schedule, monitor, both))


def _saved(ground: Ground, run: Run, level: Level) -> Floats:
    """Unreliable results saved at each onset beyond those that the alarms without a fault save."""
    blind = run.tried.exposure.unreliable(_stopped(ground, level.without_fault)[1])
    beside = run.tried.exposure.unreliable(run.stop)
    return np.where(np.isclose(blind, beside, rtol=1e-9, atol=0.0), 0.0, blind - beside)


def _stopped(ground: Ground, to_alarm: Integers) -> tuple[Integers, Integers]:
    around = ground.around
    return alarm_and_stop(to_alarm, ground.onsets, around.lag_results, around.lag_microseconds, ground.stretch.time)


def _typical_shift(ground: Ground, fault: Fault) -> float | None:
    if fault.kind == "noise":
        return None
    return rounded(float(fault.bias(np.median(ground.stretch.value, keepdims=True), ground.stretch.error)[0]))


def _three(
    ground: Ground, levels: Sequence[Sequence[Floats]], within: Mask | None = None, highest: float = math.inf
) -> Three:
    """Means of three figures, by the schedule alone, the monitors alone and both, given at each level."""
    schedule, monitor, both = (ground.mean([one[i] for one in levels], within, highest=highest) for i in range(3))
    return schedule, monitor, both


def _by_first(ground: Ground, runs: list[Run], within: Mask | None = None) -> Three:
    first = ground.onsets.to_first_event
    return _three(ground, [[way.by(first) for way in run.results] for run in runs], within, highest=1.0)


def _three_figures(found: Three) -> Ways:
    return Ways(schedule=figure(found[0]), monitor=figure(found[1]), both=figure(found[2]))


def _until_ways(ground: Ground, levels: list[Detections]) -> UntilWays:
    """The control schedule finds an error at the same events whatever the level of the patients' results."""
    schedule = _until(ground, [levels[0][0]])
    monitor, both = (_until(ground, [one[i] for one in levels]) for i in (1, 2))
    return UntilWays(schedule=schedule, monitor=monitor, both=both)


def _until(ground: Ground, levels: list[Detection]) -> Until:
    others = zip(*(one.quantiles(SHARES) for one in levels[1:]), strict=True) if len(levels) > 1 else [()] * len(SHARES)
    told = zip(ground.days.percentiles(levels[0], SHARES), others, strict=True)
    p5, median, p95 = (percentile(_swayed(found, list(at_levels))) for found, at_levels in told)
    return Until(mean=figure(ground.mean([one.mean_each() for one in levels])), p5=p5, median=median, p95=p95)


def _swayed(found: tuple[float | None, ...], others: list[float | None]) -> tuple[float | None, ...]:
    """A percentile whose interval counts the wandering of the level as well, as far as it lies within the horizon at each level."""
    value, *ends = found
    known = [one for one in others if one is not None]
    if value is None or len(known) < 2:
        return found
    half = Z * abs(known[1] - known[0]) / 2
    low, high = (None if end is None else math.hypot(end - value, half) for end in ends)
    return value, None if low is None else max(value - low, 0.0), None if high is None else value + high


def _no_more_than(ground: Ground, runs: list[Run], levels: list[Level]) -> bool:
    """Neither by the first event nor within the horizon is the chance of an alarm above that without a fault, over its interval."""
    more = [
        ground.mean(
            [
                alarms_by(run.to_alarm, by) - alarms_by(one.without_fault, by)
                for run, one in zip(runs, levels, strict=True)
            ],
            lowest=-1.0,
            highest=1.0,
        )
        for by in (ground.onsets.to_first_event, ground.onsets.length)
    ]
    return all(one.interval[0] <= 0 for one in more)


def _part(
    ground: Ground, part: OnsetWhen, runs: list[Run], costs: list[tuple[Floats, Floats, Floats, Floats]]
) -> PartCosts:
    which = ground.parts[part].onsets
    return PartCosts(
        by_first=_by_first(ground, runs, which),
        until=_three(ground, [[way.mean_each() for way in run.results] for run in runs], which),
        hours=_three(ground, [[way.mean_each() for way in run.hours] for run in runs], which),
        alone=ground.mean([one[0] for one in costs], which),
        beside=ground.mean([one[1] for one in costs], which),
    )


def onset_time(ground: Ground, part: OnsetWhen, found: PartCosts) -> OnsetTime:
    """A part of the week as it is written."""
    return OnsetTime(
        when=part,
        onsets=int(ground.parts[part].onsets.sum()),
        results_per_hour=rounded(ground.parts[part].results_per_hour),
        by_first_event=_three_figures(found.by_first),
        until=_three_figures(found.until),
        until_hours=_three_figures(found.hours),
        unreliable=alone_and_with(found.alone, found.beside),
    )


def average_part(found: list[PartCosts], weights: list[float]) -> PartCosts:
    """A part of the week averaged over the faults."""

    def three(which: list[Three]) -> Three:
        return (
            average([one[0] for one in which], weights),
            average([one[1] for one in which], weights),
            average([one[2] for one in which], weights),
        )

    return PartCosts(
        by_first=three([one.by_first for one in found]),
        until=three([one.until for one in found]),
        hours=three([one.hours for one in found]),
        alone=average([one.alone for one in found], weights),
        beside=average([one.beside for one in found], weights),
    )
