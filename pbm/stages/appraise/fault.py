"""One fault at every onset: what finds it, when, and what it costs until then, with the schedule alone and with the monitors beside it."""

from dataclasses import dataclass

import numpy as np

from pbm.methods.day_bootstrap import DayBootstrap, Estimate, Mask, average
from pbm.methods.detection import Detection, by_both, by_monitor, by_schedule
from pbm.methods.faults import Fault
from pbm.methods.jit import Floats, Integers
from pbm.methods.trials import Trial, alarm_and_stop, trial
from pbm.records.figures import Until, UntilWays, Ways
from pbm.records.judged import FaultAppraisal, OnsetTime, OnsetWhen
from pbm.stages.appraise.ground import Ground
from pbm.stages.appraise.watch import Watch
from pbm.stages.appraise.written import alone_and_with, figure, percentile, rounded

SHARES = (0.05, 0.5, 0.95)
PARTS: tuple[OnsetWhen, ...] = ("day", "night", "weekend")
Three = tuple[Estimate, Estimate, Estimate]  # the schedule alone, the monitors alone, both


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
class FaultFound:
    """A fault tried, with the estimates from which averages over the faults are made.

    Attributes
    ----------
    fault, weight
        The fault, and its weight in averages.
    tried
        At every onset.
    alarm, stop : (r,)
        With which affected result the alarm comes, and how many are reported until the stop; the horizon where there is none.
    costs, parts
        The estimates.
    beyond_false_alarms
        Unreliable results saved beyond those that false alarms save.
    record
        What is written of it.
    """

    fault: Fault
    weight: float
    tried: Trial
    to_alarm: Integers
    alarm: Integers
    stop: Integers
    costs: Costs
    parts: dict[OnsetWhen, PartCosts]
    beyond_false_alarms: Estimate
    record: FaultAppraisal


@dataclass(frozen=True, slots=True)
class _Ways:
    """Results and hours until detection: by the schedule alone, by the monitors alone, by both."""

    results: tuple[Detection, Detection, Detection]
    hours: tuple[Detection, Detection, Detection]

    @classmethod
    def of(cls, ground: Ground, passed: Floats, to_alarm: Integers) -> "_Ways":
        onsets = ground.onsets
        results = by_schedule(onsets, passed), by_monitor(onsets, to_alarm), by_both(onsets, passed, to_alarm)
        events, alarm = ground.event_hours, ground.hours_until(to_alarm)[:, None]
        horizon = ground.hours_until(onsets.length)
        points = events, alarm, np.column_stack([events, alarm])
        timed = [way.timed(each, horizon) for way, each in zip(results, points, strict=True)]
        return cls(results, (timed[0], timed[1], timed[2]))


def appraise_fault(ground: Ground, watch: Watch, fault: Fault, weight: float, without_fault: Integers) -> FaultFound:
    """Try a fault; `without_fault` (r,) is when the alarm comes at the same onsets where nothing is wrong, 0 for never."""
    around, onsets, days = ground.around, ground.onsets, ground.days
    survival = around.chance_of_passing(fault, onsets)
    tried = trial(ground.stretch, fault, onsets, survival.passed)
    to_alarm = watch.results_to_alarm(tried)
    alarm, stop = _stopped(ground, to_alarm)
    ways = _Ways.of(ground, survival.passed, to_alarm)
    exposure = tried.exposure
    alone, beside = exposure.unreliable(onsets.length), exposure.unreliable(stop)
    final_alone, final_beside = exposure.unreliable_final(onsets.length), exposure.unreliable_final(alarm)
    blind = exposure.unreliable(_stopped(ground, without_fault)[1])
    costs = Costs(days.mean(alone), days.mean(beside), days.mean(final_alone), days.mean(final_beside))
    beyond = days.mean(np.where(np.isclose(blind, beside, rtol=1e-9, atol=0.0), 0.0, blind - beside))
    parts = {part: _part(ground, part, ways, alone, beside) for part in PARTS if part in ground.parts}
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
        by_first_event=_three_figures(_by_first(ground, ways)),
        never=_three_figures(_means(days, [way.never for way in ways.results])),
        until=_until_ways(days, ways.results),
        until_hours=_until_ways(days, ways.hours),
        unreliable=alone_and_with(costs.alone, costs.beside),
        unreliable_final=alone_and_with(costs.final_alone, costs.final_beside),
        unreliable_correctable=alone_and_with(days.mean(alone - final_alone), days.mean(beside - final_beside)),
        beyond_false_alarms=figure(beyond),
        no_more_than_false_alarms=_no_more_than(ground, to_alarm, without_fault),
        by_onset=tuple(onset_time(ground, part, found) for part, found in parts.items()),
        schedule_error=rounded(float(survival.error.max())),
    )
    return FaultFound(fault, weight, tried, to_alarm, alarm, stop, costs, parts, beyond, record)


def _stopped(ground: Ground, to_alarm: Integers) -> tuple[Integers, Integers]:
    around = ground.around
    return alarm_and_stop(to_alarm, ground.onsets, around.lag_results, around.lag_microseconds, ground.stretch.time)


def _typical_shift(ground: Ground, fault: Fault) -> float | None:
    if fault.kind == "noise":
        return None
    return rounded(float(fault.bias(np.median(ground.stretch.value, keepdims=True), ground.stretch.error)[0]))


def _means(days: DayBootstrap, each: list[Floats], within: Mask | None = None) -> Three:
    schedule, monitor, both = (days.mean(one, within) for one in each)
    return schedule, monitor, both


def _by_first(ground: Ground, ways: _Ways, within: Mask | None = None) -> Three:
    return _means(ground.days, [way.by(ground.onsets.to_first_event) for way in ways.results], within)


def _three_figures(found: Three) -> Ways:
    return Ways(schedule=figure(found[0]), monitor=figure(found[1]), both=figure(found[2]))


def _until_ways(days: DayBootstrap, found: tuple[Detection, Detection, Detection]) -> UntilWays:
    schedule, monitor, both = (_until(days, way) for way in found)
    return UntilWays(schedule=schedule, monitor=monitor, both=both)


def _until(days: DayBootstrap, found: Detection) -> Until:
    p5, median, p95 = (percentile(one) for one in days.percentiles(found, SHARES))
    return Until(mean=figure(days.mean(found.mean_each())), p5=p5, median=median, p95=p95)


def _no_more_than(ground: Ground, to_alarm: Integers, without_fault: Integers) -> bool:
    """Neither by the first event nor within the horizon is the chance of an alarm above that without a fault, over its interval."""
    first = ground.onsets.to_first_event
    more = [
        ground.days.mean(_alarms_by(to_alarm, by) - _alarms_by(without_fault, by))
        for by in (first, ground.onsets.length)
    ]
    return all(one.interval[0] <= 0 for one in more)


def _alarms_by(to_alarm: Integers, results: Integers) -> Floats:
    return ((to_alarm > 0) & (to_alarm <= results)).astype(np.float64)


def _part(ground: Ground, part: OnsetWhen, ways: _Ways, alone: Floats, beside: Floats) -> PartCosts:
    which, days = ground.parts[part].onsets, ground.days
    return PartCosts(
        by_first=_by_first(ground, ways, which),
        until=_means(days, [way.mean_each() for way in ways.results], which),
        hours=_means(days, [way.mean_each() for way in ways.hours], which),
        alone=days.mean(alone, which),
        beside=days.mean(beside, which),
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
