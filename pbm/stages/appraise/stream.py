"""One stream judged on its held-out days.

The monitors run over the whole history, as they would have been running; onsets are drawn on held-out days only. Every interval is a 90 %
interval of a bootstrap over the days of the onsets, except the exact Poisson interval of the false alarms.
"""

import math
from datetime import date, timedelta

import numpy as np

from pbm.errors import PlanError
from pbm.methods.clock_time import local_days
from pbm.methods.day_bootstrap import average
from pbm.methods.split import first_held_out_day, split_at
from pbm.methods.verdict import Gain
from pbm.records.appraisal import MonitorAppraisal, PeersTried, StreamAppraisal
from pbm.records.judged import Judged, OnsetTime, Yearly
from pbm.records.laboratory import Lab
from pbm.records.plan import HeldOut, MonitorPlan, StreamPlan
from pbm.records.stream import StreamHistory
from pbm.stages.appraise.false_alarms import alarms_of, no_fault, trace_of
from pbm.stages.appraise.fault import PARTS, FaultFound, appraise_fault, average_part, onset_time
from pbm.stages.appraise.ground import Ground
from pbm.stages.appraise.peers import peers_of
from pbm.stages.appraise.sentences import SPACING_CAUTION, objections, onset_times_in_words, reason_in_words
from pbm.stages.appraise.spacing import spacing_table
from pbm.stages.appraise.watch import Level, Running, levels_of
from pbm.stages.appraise.written import alone_and_with, rounded, worst_case
from pbm.stages.from_plan import faults_of
from pbm.stages.surroundings import Surroundings
from pbm.stages.words import controls_in_words, measured_in, monitor_in_brief, monitor_in_words

EPOCH = date(1970, 1, 1)


def appraise_stream(
    history: StreamHistory, plan: StreamPlan, lab: Lab, seed: int, peers: PeersTried = "quick"
) -> StreamAppraisal:
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
    peers
        Which other monitors to try beside those of the plan.

    Raises
    ------
    PlanError
        If the plan's unit is not that of `lab.toml`, or monitors are to be judged and no day is held out.
    """
    around = Surroundings.of(history.name, lab, seed)
    if plan.unit != around.analyte.unit:
        raise PlanError(
            f"plan.toml gives {history.name} in {plan.unit}, lab.toml in {around.analyte.unit}. Correct one of them, or tune again."
        )
    days = local_days(history.time, lab.laboratory.zone)
    split = split_at(days, (plan.held_out_from - EPOCH).days if plan.held_out_from else first_held_out_day(days))
    if 0 < split.at < len(history):
        return _judged(Ground.of(around, history, split), plan, peers)
    if plan.monitors:
        raise PlanError(
            f"plan.toml holds out the days from {plan.held_out_from} of {history.name}, and the history runs from "
            f"{_day(int(days[0]))} to {_day(int(days[-1]))}. Take in later results, or tune again."
        )
    return _described(around, plan, (int(days[0]), int(days[-1])))


def _day(number: int) -> date:
    return EPOCH + timedelta(number)


def _described(around: Surroundings, plan: StreamPlan, days: tuple[int, int]) -> StreamAppraisal:
    """What is known of a stream before anything is judged."""
    return StreamAppraisal(
        stream=str(around.name),
        unit=plan.unit,
        verdict=plan.verdict,
        reason=plan.reason,
        planned_verdict=plan.verdict,
        planned_reason=plan.reason,
        results_per_day=plan.results_per_day,
        first_day=str(_day(days[0])),
        last_day=str(_day(days[1])),
        held_out_results=0,
        onsets=0,
        horizon_days=0.0,
        allowable_error=around.analyte.allowable_error.in_words(plan.unit),
        schedule=controls_in_words(around.controls),
        response_lag=str(around.lab.alarms.response_lag),
    )


def _judged(ground: Ground, plan: StreamPlan, peers: PeersTried) -> StreamAppraisal:
    around, split, time = ground.around, ground.split, ground.stretch.time
    levels = levels_of(ground, plan.monitors)
    watch = levels[0].watch
    monitors = tuple(_monitor(ground, one, running) for one, running in zip(plan.monitors, watch.monitors, strict=True))
    judged, gain = _figures(ground, plan, levels, monitors, peers)
    found = _described(around, plan, (int(split.days[split.at]), int(split.days[-1]))).model_copy(
        update={
            "held_out_results": len(time) - split.at,
            "onsets": len(ground.onsets.at),
            "horizon_days": round(around.horizon_days(time, split.at, len(time)), 3),
            "monitors": monitors,
            "judged": judged,
        }
    )
    if judged.false_alarms is None:
        return found
    reason = reason_in_words(gain, judged.unreliable, judged.worst_unreliable, judged.false_alarms)
    return found.model_copy(update={"verdict": gain.verdict, "reason": reason})


def _monitor(ground: Ground, monitor: MonitorPlan, running: Running) -> MonitorAppraisal:
    low, high = monitor.limits.low, monitor.limits.high
    return MonitorAppraisal(
        words=monitor_in_words(monitor, ground.around.analyte.unit),
        brief=monitor_in_brief(monitor),
        watches=monitor.watches,
        admitted=rounded(float(np.isfinite(running.z[ground.held_out]).mean())),
        measured_in=measured_in(monitor, ground.around.analyte.unit),
        centre=_in_unit(ground, running, monitor.centre),
        low=None if low is None else _in_unit(ground, running, low),
        high=None if high is None else _in_unit(ground, running, high),
        limits=(low, high),
        scale_centre=monitor.centre,
        trace=trace_of(ground, running.path),
        false_alarms=alarms_of(ground, [running], monitor.budget_per_day),
        predicted=_predicted(monitor.held_out, ground.split.held_out_days),
    )


def _predicted(found: HeldOut | None, days: int) -> tuple[int, int] | None:
    """What the plan expected of as many days."""
    return found.predicted if found is not None and found.days == days else None


def _in_unit(ground: Ground, running: Running, s: float) -> float:
    """A value of the statistic in the result's unit; the largest result seen where no finite one is transformed to it."""
    level = running.preparation.back(s) if running.tracker.law.begins == "level" else s
    return level if math.isfinite(level) else float(ground.stretch.value.max())


def _figures(
    ground: Ground,
    plan: StreamPlan,
    levels: list[Level],
    monitors: tuple[MonitorAppraisal, ...],
    peers: PeersTried,
) -> tuple[Judged, Gain]:
    watch = levels[0].watch
    found = [appraise_fault(ground, levels, fault, weight) for fault, weight in faults_of(ground.around.analyte)]
    labels, weights = [one.record.label for one in found], [one.weight for one in found]
    alone, beside = [one.costs.alone for one in found], [one.costs.beside for one in found]
    final_alone, final_beside = [one.costs.final_alone for one in found], [one.costs.final_beside for one in found]
    unreliable = alone_and_with(average(alone, weights), average(beside, weights))
    worst = worst_case(labels, alone, beside)
    budget = sum(one.budget_per_day for one in plan.monitors)
    together = alarms_of(ground, watch.monitors, budget) if monitors else None
    beyond = average([one.beyond_false_alarms for one in found], weights).interval[0]
    kept = together is not None and together.kept and all(one.false_alarms.kept for one in monitors)
    gain = Gain(unreliable.share_fewer.value, worst.share_fewer.value, beyond, kept)
    parts = _parts(ground, found)
    return Judged(
        false_alarms=together,
        no_fault=no_fault(ground, levels) if monitors else None,
        faults=tuple(one.record for one in found),
        unreliable=unreliable,
        unreliable_final=alone_and_with(average(final_alone, weights), average(final_beside, weights)),
        worst_unreliable=worst,
        worst_final=worst_case(labels, final_alone, final_beside),
        by_onset=parts,
        by_onset_words=onset_times_in_words(parts),
        yearly=_yearly(ground, found),
        spacing=spacing_table(ground, found),
        spacing_caution=SPACING_CAUTION,
        peers=peers_of(ground, plan.monitors, watch, found, peers),
        objections=tuple(objections(gain, unreliable, [(one.brief, one.false_alarms) for one in monitors]))
        if monitors
        else (),
    ), gain


def _parts(ground: Ground, found: list[FaultFound]) -> tuple[OnsetTime, ...]:
    weights = [one.weight for one in found]
    return tuple(
        onset_time(ground, part, average_part([one.parts[part] for one in found], weights))
        for part in PARTS
        if part in ground.parts
    )


def _yearly(ground: Ground, found: list[FaultFound]) -> Yearly:
    rate, weights = ground.around.lab.faults.per_year, [one.weight for one in found]
    alone, beside, final_alone, final_beside = (
        average(each, weights).times(rate)
        for each in zip(
            *((one.costs.alone, one.costs.beside, one.costs.final_alone, one.costs.final_beside) for one in found),
            strict=True,
        )
    )
    return Yearly(
        per_year=rate,
        unreliable=alone_and_with(alone, beside),
        unreliable_final=alone_and_with(final_alone, final_beside),
    )
