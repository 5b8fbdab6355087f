"""How the words of lab.toml and plan.toml become the numbers that methods work with."""

import math
from typing import Any

from pbm.methods.alarm import Limits
from pbm.methods.baseline import Baseline
from pbm.methods.chain import Preparation, Tracker
from pbm.methods.faults import Fault, Reporting
from pbm.methods.onset import InControl
from pbm.methods.statistics import STATISTICS
from pbm.methods.unreliable import ErrorModel
from pbm.records.laboratory import Analyte, FaultList
from pbm.records.plan import BaselinePlan, MonitorPlan, Outside


def error_model(analyte: Analyte) -> ErrorModel:
    """TEa and analytic SD of an analyte."""
    tea, sd = analyte.allowable_error, analyte.analytic_sd
    return ErrorModel(tea.absolute or 0.0, tea.percent or 0.0, sd.absolute, sd.cv_percent)


def reporting(analyte: Analyte) -> Reporting:
    """How the analyte's results are rounded and censored."""
    low, high = analyte.reportable.low, analyte.reportable.high
    return Reporting(analyte.step, -math.inf if low is None else low, math.inf if high is None else high)


def faults_of(analyte: Analyte) -> list[tuple[Fault, float]]:
    """Every error condition that the laboratory wants to guard against, each size and sign, with its weight."""
    return [(fault, given.weight) for given in analyte.faults for fault in _each_size(given)]


def _each_size(given: FaultList) -> list[Fault]:
    if given.kind == "noise":
        return [Fault("noise", size, "") for size in given.sizes]
    signs = {"both": (-1, 1), "up": (1,), "down": (-1,)}[given.signs]
    return [
        Fault(given.kind, size, given.unit, sign, over=given.over or 1, share=given.share or 1.0)
        for size in given.sizes
        for sign in signs
    ]


def preparation(monitor: MonitorPlan) -> Preparation:
    """Truncation, transform and patient-mix baseline of a monitor."""
    low, high = monitor.admit.low, monitor.admit.high
    return Preparation(
        -math.inf if low is None else low,
        math.inf if high is None else high,
        monitor.admit.mode == "winsorize",
        monitor.transform,
        1.0 if monitor.transform_lambda is None else monitor.transform_lambda,
        None if monitor.baseline is None else _baseline(monitor.baseline),
    )


def _baseline(plan: BaselinePlan) -> Baseline:
    sexes, ages = (tuple((effects or {}).items()) for effects in (plan.sexes, plan.ages))
    return Baseline(tuple(plan.wards.items()), plan.hours, sexes, ages)


def tracker(monitor: MonitorPlan) -> Tracker:
    """Statistic, parameters and centre of a monitor."""
    chosen, *more = (_parameter(monitor, name) for name in STATISTICS[monitor.statistic].parameters)
    return Tracker(monitor.statistic, chosen, monitor.centre, tuple(more))


def _parameter(monitor: MonitorPlan, name: str) -> float:
    if name in ("low", "high"):
        side = getattr(monitor.outside, name)
        return float({"low": -math.inf, "high": math.inf}[name] if side is None else side)
    return float(getattr(monitor, name))  # the plan's own check has it there


def planned_parameters(tracker: Tracker, level: float) -> dict[str, Any]:
    """The parameters of a tracker by the keys of the plan; the in-control level of the values where the centre does not tell it."""
    numbers = ({} if tracker.law.begins == "level" else {"level": level}) | tracker.named
    keys: dict[str, Any] = {name: x for name, x in numbers.items() if name not in ("low", "high", "spread")}
    if "window" in keys:
        keys["window"] = int(keys["window"])
    if "low" in numbers:
        sides = {side: numbers[side] for side in ("low", "high") if math.isfinite(numbers[side])}
        keys["outside"] = Outside(**sides)
    return keys


def limits(monitor: MonitorPlan) -> Limits:
    """Control limits and re-arm share of a monitor."""
    return Limits(*monitor.limits.ends, monitor.centre, monitor.rearm)


def in_control(monitor: MonitorPlan) -> InControl:
    """In-control behaviour of a monitor's admitted values, for the estimate of an onset."""
    level = monitor.centre if monitor.level is None else monitor.level
    return InControl(level, monitor.spread, monitor.inflation, monitor.slope, monitor.wander)
