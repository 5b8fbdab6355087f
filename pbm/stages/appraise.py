"""Appraise: judge a plan on held-out days, for each fault the control schedule alone and with the monitor.

The monitor runs over the whole history, as it would have been running; onsets are drawn on held-out days only. Every interval is a 90 %
interval of a bootstrap over the days of the onsets, except the exact Poisson interval of the false alarms.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass
from datetime import date, timedelta
from functools import partial

import numpy as np

from pbm.errors import PlanError
from pbm.methods.alarm import Limits
from pbm.methods.chain import Preparation, Standing, Tracker
from pbm.methods.clock_time import local_days
from pbm.methods.detection import Detection, by_both, by_monitor, by_schedule
from pbm.methods.expected import Onsets
from pbm.methods.faults import Fault
from pbm.methods.held_out import held_out_alarms
from pbm.methods.intervals import day_weights
from pbm.methods.jit import Floats, Integers
from pbm.methods.split import Split, first_held_out_day, split_at
from pbm.methods.trials import Stretch, Trial, alarm_and_stop, trial
from pbm.records.appraisal import (
    AloneAndWith,
    FalseAlarms,
    FaultAppraisal,
    Figure,
    MonitorAppraisal,
    ResultsUntil,
    StreamAppraisal,
    Trace,
    UntilWays,
    Ways,
    WorstCase,
)
from pbm.records.laboratory import Lab
from pbm.records.plan import MonitorPlan, StreamPlan
from pbm.records.stream import StreamHistory
from pbm.stages.from_plan import faults_of, limits, preparation, tracker
from pbm.stages.surroundings import Surroundings
from pbm.stages.words import controls_in_words, monitor_in_brief, monitor_in_words

ONSETS = 400
EPOCH = date(1970, 1, 1)
DRAWS = 400
TRACE_POINTS = 400


def appraise_stream(history: StreamHistory, plan: StreamPlan, lab: Lab, seed: int) -> StreamAppraisal:
    """Judge the monitors of one stream on its held-out days.

    Parameters
    ----------
    history
        All results of the stream; the days from the plan's `held_out_from` on are held out.
    plan
        What was decided for the stream, possibly edited by a person.
    lab
        The laboratory: TEa, schedule, faults, response lag.
    seed
        Master seed; the same seed gives the same figures.

    Raises
    ------
    PlanError
        If the plan's unit is not that of `lab.toml`, or no day is held out.
    """
    around = Surroundings.of(history.name, lab, seed)
    if plan.unit != around.analyte.unit:
        raise PlanError(
            f"plan.toml gives {history.name} in {plan.unit}, lab.toml in {around.analyte.unit}. Correct one of them, or tune again."
        )
    days = local_days(history.time, lab.laboratory.zone)
    split = split_at(days, (plan.held_out_from - EPOCH).days if plan.held_out_from else first_held_out_day(days))
    if split.at in (0, len(history)):
        raise PlanError(
            f"plan.toml holds out the days from {plan.held_out_from} of {history.name}, and the history runs from "
            f"{EPOCH + timedelta(int(days[0]))} to {EPOCH + timedelta(int(days[-1]))}. Take in later results, or tune again."
        )
    return _Appraising(around, history, split).judged(plan)


@dataclass(frozen=True)
class _Appraising:
    """The work on one stream."""

    around: Surroundings
    history: StreamHistory
    split: Split

    def judged(self, plan: StreamPlan) -> StreamAppraisal:
        around, split = self.around, self.split
        stretch = around.stretch(self.history)
        onsets = around.onsets(self.history.time, split.at, len(self.history), ONSETS)
        trials = (
            [_FaultTrial.of(stretch, fault, onsets, around) for fault, _ in faults_of(around.analyte)]
            if plan.monitors
            else []
        )
        weights = day_weights(split.days[onsets.at], DRAWS, around.random("bootstrap"))
        days = np.array([split.days[split.at], split.days[-1]], dtype="datetime64[D]")
        return StreamAppraisal(
            stream=str(self.history.name),
            unit=plan.unit,
            verdict=plan.verdict,
            reason=plan.reason,
            results_per_day=plan.results_per_day,
            first_day=str(days[0]),
            last_day=str(days[1]),
            held_out_results=len(self.history) - split.at,
            onsets=len(onsets.at),
            horizon_days=round(around.horizon_days(self.history.time, split.at, len(self.history)), 3),
            allowable_error=around.analyte.allowable_error.in_words(plan.unit),
            schedule=controls_in_words(around.controls),
            response_lag=str(around.lab.alarms.response_lag),
            monitors=tuple(self._monitor(m, stretch, trials, _Averages(weights)) for m in plan.monitors),
        )

    def _monitor(
        self, monitor: MonitorPlan, stretch: Stretch, trials: "list[_FaultTrial]", averages: "_Averages"
    ) -> MonitorAppraisal:
        running = _Running.of(monitor, stretch, trials[0].trial.onsets)
        faults = tuple(_appraise_fault(t, running, self.around, stretch, averages) for t in trials)
        held_out = running.path[self.split.at :]
        back = partial(_in_unit, running, float(stretch.value.max()))
        return MonitorAppraisal(
            words=monitor_in_words(monitor, self.around.analyte.unit),
            brief=monitor_in_brief(monitor),
            admitted=float(np.isfinite(running.z[self.split.at :]).mean()),
            centre=back(monitor.centre),
            low=back(monitor.limits.ends[0]),
            high=back(monitor.limits.ends[1]),
            limits=monitor.limits.ends,
            scale_centre=monitor.centre,
            trace=_trace(held_out, (stretch.time[self.split.at :] - stretch.time[self.split.at]) / 86_400e6),
            false_alarms=self._false_alarms(running, monitor.budget_per_day),
            faults=faults,
            worst_unreliable=_worst(faults, lambda f: f.unreliable),
            worst_final=_worst(faults, lambda f: f.unreliable_final),
        )

    def _false_alarms(self, running: "_Running", budget: float) -> FalseAlarms:
        found = held_out_alarms(running.path, running.limits, self.split, budget)
        return FalseAlarms(
            days=found.days,
            episodes=found.episodes,
            allowed=found.allowed,
            interval=found.interval,
            kept=found.kept,
        )


@dataclass(frozen=True, slots=True)
class _FaultTrial:
    """A fault tried at every onset, with the schedule's chances against it."""

    fault: Fault
    trial: Trial
    passed: Floats
    error: Floats

    @classmethod
    def of(cls, stretch: Stretch, fault: Fault, onsets: Onsets, around: Surroundings) -> "_FaultTrial":
        survival = around.chance_of_passing(fault, onsets)
        return cls(fault, trial(stretch, fault, onsets, survival.passed), survival.passed, survival.error)


@dataclass(frozen=True, slots=True)
class _Running:
    """A plan's monitor over the whole history, and its standing at each onset."""

    preparation: Preparation
    tracker: Tracker
    limits: Limits
    z: Floats
    path: Floats
    standing: Standing

    @classmethod
    def of(cls, monitor: MonitorPlan, stretch: Stretch, onsets: Onsets) -> "_Running":
        prepared, tracked = preparation(monitor), tracker(monitor)
        z = stretch.prepared(prepared)
        within = limits(monitor)
        return cls(prepared, tracked, within, z, tracked.path(z), tracked.standing(z, within, onsets.at))

    def results_to_alarm(self, tried: Trial) -> Integers:
        return tried.results_to_alarm(tried.prepared(self.preparation), self.tracker, self.limits, self.standing)


def _in_unit(running: _Running, largest: float, s: float) -> float:
    """A value of the statistic in the result's unit; the largest result seen where no finite one is transformed to it."""
    level = running.preparation.back(s) if running.tracker.law.begins == "level" else s
    return level if math.isfinite(level) else largest


@dataclass(frozen=True, slots=True)
class _Averages:
    """Averages over onsets with the bootstrap over their days."""

    weights: Floats

    def figure(self, each: Floats) -> Figure:
        """Mean of a figure known at each onset, shape (r,), with its 90 % interval."""
        drawn = self.weights @ each / self.weights.sum(axis=1)
        low, high = np.quantile(drawn, [0.05, 0.95])
        return Figure(value=float(each.mean()), low=float(low), high=float(high))


def _appraise_fault(
    tried: _FaultTrial, running: _Running, around: Surroundings, stretch: Stretch, averages: _Averages
) -> FaultAppraisal:
    onsets, exposure = tried.trial.onsets, tried.trial.exposure
    to_alarm = running.results_to_alarm(tried.trial)
    alarm, stop = alarm_and_stop(to_alarm, onsets, around.lag_results, around.lag_microseconds, stretch.time)
    ways = (by_schedule(onsets, tried.passed), by_monitor(onsets, to_alarm), by_both(onsets, tried.passed, to_alarm))
    first = [averages.figure(way.by(onsets.to_first_event)) for way in ways]
    return FaultAppraisal(
        label=str(tried.fault),
        kind=tried.fault.kind,
        size=tried.fault.size,
        unit=tried.fault.unit,
        sign=1 if tried.fault.sign > 0 else -1,
        shift=_typical_shift(tried.fault, stretch),
        by_first_event=Ways(schedule=first[0], monitor=first[1], both=first[2]),
        before_first_event=first[1],
        until=UntilWays(schedule=_until(ways[0]), monitor=_until(ways[1]), both=_until(ways[2])),
        unreliable=AloneAndWith(
            alone=averages.figure(exposure.unreliable(onsets.length)),
            with_monitor=averages.figure(exposure.unreliable(stop)),
        ),
        unreliable_final=AloneAndWith(
            alone=averages.figure(exposure.unreliable_final(onsets.length)),
            with_monitor=averages.figure(exposure.unreliable_final(alarm)),
        ),
        schedule_error=float(tried.error.max()),
    )


def _typical_shift(fault: Fault, stretch: Stretch) -> float | None:
    if fault.kind == "noise":
        return None
    return float(fault.bias(np.median(stretch.value, keepdims=True), stretch.error)[0])


def _until(way: Detection) -> ResultsUntil:
    return ResultsUntil(
        mean=float(way.mean_each().mean()),
        median=way.quantile(0.5),
        p95=way.quantile(0.95),
        never=float(way.never.mean()),
    )


def _worst(faults: tuple[FaultAppraisal, ...], of: Callable[[FaultAppraisal], AloneAndWith]) -> WorstCase:
    alone = max(faults, key=lambda f: of(f).alone.value)
    with_monitor = max(faults, key=lambda f: of(f).with_monitor.value)
    return WorstCase(
        alone=of(alone).alone,
        alone_at=alone.label,
        with_monitor=of(with_monitor).with_monitor,
        with_monitor_at=with_monitor.label,
    )


def _trace(path: Floats, day: Floats) -> Trace:
    """Lowest and highest value of the statistic in each of up to `TRACE_POINTS` equal parts of the held-out time."""
    judged = ~np.isnan(path)
    path, day = path[judged], day[judged]
    if not len(path):
        return Trace(day=(), lowest=(), highest=())
    part = np.minimum((day / max(day[-1], 1e-9) * TRACE_POINTS).astype(int), TRACE_POINTS - 1)
    firsts = np.flatnonzero(np.diff(part, prepend=-1))
    return Trace(
        day=tuple(day[firsts].tolist()),
        lowest=tuple(np.minimum.reduceat(path, firsts).tolist()),
        highest=tuple(np.maximum.reduceat(path, firsts).tolist()),
    )
