"""Invented appraisals that look like real ones: smooth curves over error size with noise of a fixed seed."""

import math
from collections.abc import Iterable

import numpy as np

from pbm.records.appraisal import (
    AloneAndWith,
    Appraisal,
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
from pbm.records.plan import Verdict

HORIZON = 7.0
SIZES = {
    "shift": (0.25, 0.5, 0.75, 1.0, 1.5, 2.0),
    "drift": (0.5, 1.0, 2.0),
    "noise": (1.5, 2.0, 3.0),
    "sporadic": (1.0, 2.0),
}


def figure(value: float, wide: float = 0.12, top: float = math.inf) -> Figure:
    """A figure with an interval of the given relative half-width."""
    return Figure(value=min(value, top), low=min(value * (1 - wide), top), high=min(value * (1 + wide), top))


def results_until(mean: float, per_day: float) -> ResultsUntil:
    """Results until detection as if geometric with the given mean, cut at the horizon."""
    horizon = HORIZON * per_day
    never = math.exp(-horizon / mean)
    median, p95 = mean * math.log(2), mean * math.log(20)
    return ResultsUntil(
        mean=mean * (1 - never),
        median=round(median) + 1 if median < horizon else None,
        p95=round(p95) + 1 if p95 < horizon else None,
        never=0.0 if never < 1e-4 else never,
    )


def fault(kind: str, size: float, sign: int, per_day: float, tea: float, speed: float) -> FaultAppraisal:
    """One error: the larger, the sooner found and the more results unreliable."""
    bracket = per_day / 3
    reach = size * {"shift": 1.0, "drift": 0.7, "noise": 0.5, "sporadic": 0.8}[kind]
    p = 1 / (1 + math.exp(-5 * (reach - 1)))
    power = 1 / (1 + math.exp(-6 * (reach - 1.1)))
    by_controls = bracket / 2 + bracket * (1 - power) / max(power, 1e-6)
    by_monitor = speed / max(reach, 0.05) ** 1.6 * (1.15 if sign < 0 else 1.0)
    both = 1 / (1 / by_controls + 1 / by_monitor)
    found_before = 1 - math.exp(-bracket / 2 / by_monitor)
    alone, beside = p * min(by_controls, HORIZON * per_day), p * both
    label = f"noise x{size:g}" if kind == "noise" else f"{kind} {sign * size:+g} TEa"
    return FaultAppraisal(
        label=label,
        kind=kind,
        size=size,
        unit="" if kind == "noise" else "TEa",
        sign=1 if sign > 0 else -1,
        shift=None if kind == "noise" else sign * size * tea,
        by_first_event=Ways(
            schedule=figure(power, 0.01, 1.0),
            monitor=figure(found_before, 0.06, 1.0),
            both=figure(1 - (1 - power) * (1 - found_before), 0.04, 1.0),
        ),
        before_first_event=figure(found_before * 0.97, 0.07, 1.0),
        until=UntilWays(
            schedule=results_until(by_controls, per_day),
            monitor=results_until(by_monitor, per_day),
            both=results_until(both, per_day),
        ),
        unreliable=AloneAndWith(alone=figure(alone, 0.08), with_monitor=figure(beside, 0.15)),
        unreliable_final=AloneAndWith(alone=figure(alone * (1 - power), 0.09), with_monitor=figure(beside * 0.2, 0.2)),
        schedule_error=0.0016,
    )


def worst(faults: Iterable[FaultAppraisal], which: str) -> WorstCase:
    """The greatest count, alone and with the monitor."""
    given = list(faults)
    alone = max(given, key=lambda one: getattr(one, which).alone.value)
    beside = max(given, key=lambda one: getattr(one, which).with_monitor.value)
    return WorstCase(
        alone=getattr(alone, which).alone,
        alone_at=alone.label,
        with_monitor=getattr(beside, which).with_monitor,
        with_monitor_at=beside.label,
    )


def monitor(
    per_day: float,
    tea: float,
    centre: float,
    speed: float,
    kinds: Iterable[str] = ("shift",),
    seed: int = 1,
    parts: int = 400,
) -> MonitorAppraisal:
    """A monitor that needs about `speed` results for an error of 1 TEa."""
    random = np.random.default_rng(seed)
    faults = tuple(
        fault(kind, size, sign, per_day, tea, speed)
        for kind in kinds
        for size in SIZES[kind]
        for sign in ((1,) if kind == "noise" else (-1, 1))
    )
    half = 0.55 * tea
    level = centre + half * 0.3 * np.convolve(random.standard_normal(parts + 7), np.ones(8) / 8**0.5, "valid")
    spread = half * 0.25 * (0.4 + random.random(parts))
    episodes = int(random.integers(0, 5))
    return MonitorAppraisal(
        brief=f"EWMA 0.03, {centre - 3 * tea:.4g} to {centre + 3 * tea:.4g}",
        words=f"Exponentially weighted mean (weight 0.03) of results from {centre - 3 * tea:.4g} to {centre + 3 * tea:.4g}",
        admitted=0.943,
        centre=centre,
        low=centre - half,
        high=centre + 1.1 * half,
        limits=(centre - half, centre + 1.1 * half),
        scale_centre=centre,
        trace=Trace(
            day=tuple(np.linspace(0, 40, parts).tolist()),
            lowest=tuple((level - spread).tolist()),
            highest=tuple((level + spread).tolist()),
        ),
        false_alarms=FalseAlarms(
            days=40,
            episodes=episodes,
            allowed=40 / 30,
            interval=(0.3 * episodes, 3.0 + 1.6 * episodes),
            kept=episodes < 4,
        ),
        faults=faults,
        worst_unreliable=worst(faults, "unreliable"),
        worst_final=worst(faults, "unreliable_final"),
    )


def stream(
    name: str, unit: str, per_day: float, *monitors: MonitorAppraisal, verdict: Verdict = "useful", reason: str = ""
) -> StreamAppraisal:
    """A stream of the invented laboratory."""
    return StreamAppraisal(
        stream=name,
        unit=unit,
        verdict=verdict,
        reason=reason,
        results_per_day=per_day,
        first_day="2031-02-10",
        last_day="2031-03-21",
        held_out_results=round(per_day * 40),
        onsets=2000,
        horizon_days=HORIZON,
        allowable_error="4 mmol/L",
        schedule="at 06:00, 14:00, 22:00; rules 1-3s, 2-2s, R-4s (range) on 2 levels",
        response_lag="10 results",
        monitors=monitors,
    )


def appraisal(*streams: StreamAppraisal, laboratory: str = "Tern Bay District Laboratory") -> Appraisal:
    """An appraisal of the invented laboratory."""
    return Appraisal(
        made_by="pbm 0.1.0",
        laboratory=laboratory,
        seed=20310302,
        history_sha256="ab" * 32,
        plan_sha256="cd" * 32,
        lab_sha256="ef" * 32,
        streams=streams,
    )


SODIUM = stream(
    "sodium@line-2",
    "mmol/L",
    812.5,
    monitor(812.5, 4.0, 139.1, 30, seed=3),
    reason="Worst case 71 % lower within the alarm budget.",
)
CALCIUM = stream(
    "calcium@line-1",
    "mmol/L",
    431.2,
    monitor(431.2, 0.25, 2.31, 55, ("shift", "drift", "noise", "sporadic"), seed=4),
    reason="Worst case 44 % lower within the alarm budget.",
)
ALBUMIN = stream(
    "albumin@line-1",
    "g/L",
    160.0,
    monitor(160.0, 3.0, 38.2, 400, seed=9),
    verdict="marginal",
    reason="The gain is small against the interval of the figures.",
)
TSH = stream(
    "tsh@immuno",
    "mU/L",
    24.7,
    verdict="not useful here",
    reason="25 results a day are too few: an error of 1 TEa would be found after 9 days, long after the next control event.",
)
THREE = appraisal(SODIUM, CALCIUM, ALBUMIN, TSH)


def many(count: int, kinds: Iterable[str] = ("shift",)) -> Appraisal:
    """An appraisal of many streams with a monitor each."""
    names = [
        "sodium",
        "potassium",
        "chloride",
        "calcium",
        "albumin",
        "creatinine",
        "glucose",
        "alt",
        "haemoglobin",
        "mcv",
    ]
    return appraisal(
        *(
            stream(
                f"{names[i % 10]}@line-{i // 10 + 1}",
                "mmol/L",
                300.0 + 17 * i,
                monitor(300.0 + 17 * i, 4, 139, 25 + 3 * i, kinds, i),
            )
            for i in range(count)
        )
    )


HOSTILE = "<script>alert('x')</script> & \"Søns\" $\\alpha$ \x07 検査室 " + "long" * 40


def hostile() -> Appraisal:
    """Every text that people write is an attack, or at least very long."""
    judged = monitor(812.5, 4.0, 139.1, 30, ("shift", "noise"))
    faults = tuple(one.model_copy(update={"unit": "unit"}) if one.kind == "shift" else one for one in judged.faults)
    attacked = stream(
        HOSTILE,
        HOSTILE,
        1.0,
        judged.model_copy(update={"words": HOSTILE, "brief": HOSTILE, "faults": faults}),
        reason=HOSTILE,
    )
    texts = {"allowable_error": HOSTILE, "schedule": HOSTILE, "response_lag": HOSTILE}
    return appraisal(
        attacked.model_copy(update=texts), stream(HOSTILE, HOSTILE, 1.0, verdict="not useful here"), laboratory=HOSTILE
    )
