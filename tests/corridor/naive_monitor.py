"""A monitor written anew from its line in plan.toml, slow and obvious, sharing no code with pbm but its records;
the statistics are those of pandas."""

import math
from collections.abc import Sequence
from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import pandas as pd

from pbm.records.plan import MonitorPlan


def values(plan: MonitorPlan, rows: Sequence[tuple[int, float, str]], zone: str) -> list[float]:
    """Admitted, transformed values less the patient-mix baseline; NaN where dropped. Rows: UTC microseconds, value (uncensored), ward."""
    return [_value(plan, time, x, ward, ZoneInfo(zone)) for time, x, ward in rows]


def _value(plan: MonitorPlan, time: int, x: float, ward: str, zone: ZoneInfo) -> float:
    low, high = plan.admit.low, plan.admit.high
    outside = (low is not None and x < low) or (high is not None and x > high)
    if outside and plan.admit.mode == "truncate":
        return math.nan
    if outside:
        x = low if low is not None and x < low else high  # type: ignore[assignment]
    if plan.transform != "none" and x <= 0:
        return math.nan
    power = plan.transform_lambda
    y = {"none": lambda: x, "log": lambda: math.log(x), "boxcox": lambda: (x**power - 1) / power}[plan.transform]()
    if plan.baseline is None:
        return y
    clock = datetime.fromtimestamp(time / 1e6, UTC).astimezone(zone)
    return y - (plan.baseline.wards.get(ward, 0.0) + plan.baseline.hours[24 * clock.weekday() + clock.hour])


def path(plan: MonitorPlan, z: Sequence[float]) -> list[float]:
    """The statistic after each value; NaN where the value was dropped."""
    kept = pd.Series([v for v in z if not math.isnan(v)], dtype=float)
    if plan.statistic == "ewma":
        started = pd.concat([pd.Series([plan.centre]), kept])
        judged = iter(started.ewm(alpha=plan.weight, adjust=False).mean().iloc[1:])
    else:
        window = kept.rolling(plan.window or 0)
        judged = iter({"mean": window.mean, "median": window.median}[plan.statistic]())
    return [math.nan if math.isnan(v) else next(judged) for v in z]


def alarms(plan: MonitorPlan, statistic: Sequence[float]) -> list[int]:
    """Place of each result that opened an episode."""
    found, is_open = [], False
    low = -math.inf if plan.limits.low is None else plan.limits.low
    high = math.inf if plan.limits.high is None else plan.limits.high
    for i, s in enumerate(statistic):
        if math.isnan(s):
            continue
        if not is_open and (s > high or s < low):
            found.append(i)
            is_open = True
        elif is_open:
            above = plan.centre + plan.rearm * (high - plan.centre)
            below = plan.centre + plan.rearm * (low - plan.centre)
            is_open = not below <= s <= above
    return found
