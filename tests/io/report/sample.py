"""Invented appraisals that look like real ones: smooth curves over error size with noise of a fixed seed."""

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np

from pbm.records.appraisal import Appraisal, Bench, MonitorAppraisal, StreamAppraisal, Trace
from pbm.records.figures import AloneAndWith, Figure, Percentile, Until, UntilWays, Ways, WorstCase
from pbm.records.judged import (
    FalseAlarms,
    FaultAppraisal,
    Judged,
    NoFault,
    OnsetTime,
    OnsetWhen,
    PeerAppraisal,
    Peers,
    Spacing,
    Yearly,
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
    low, high = sorted((value * (1 - wide), value * (1 + wide)))
    return Figure(value=min(value, top), low=min(low, top), high=min(high, top))


def both_ways(alone: float, beside: float, wide: float = 0.12) -> AloneAndWith:
    """A count without and with the monitor."""
    fewer = alone - beside
    return AloneAndWith(
        alone=figure(alone, wide),
        with_monitor=figure(beside, wide),
        fewer=figure(fewer, wide),
        share_fewer=figure(fewer / alone if alone else 0.0, wide, 1.0),
    )


def percentile(count: float, horizon: float) -> Percentile:
    """A percentile with its interval, never beyond the horizon."""
    value, low, high = (round(count * by) + 1 if count * by < horizon else None for by in (1.0, 0.85, 1.2))
    return Percentile(value=value, low=low, high=high)


def until(mean: float, horizon: float) -> Until:
    """Results or hours until detection as if geometric with the given mean, cut at the horizon."""
    p5, median, p95 = (percentile(mean * math.log(1 / (1 - share)), horizon) for share in (0.05, 0.5, 0.95))
    return Until(mean=figure(mean * (1 - missed(mean, horizon))), p5=p5, median=median, p95=p95)


def missed(mean: float, horizon: float) -> float:
    """Share never found."""
    never = math.exp(-horizon / mean)
    return 0.0 if never < 1e-4 else never


def until_ways(means: tuple[float, float, float], horizon: float) -> UntilWays:
    """By the schedule, the monitor and both."""
    schedule, monitor, both = (until(mean, horizon) for mean in means)
    return UntilWays(schedule=schedule, monitor=monitor, both=both)


def ways(schedule: float, monitor: float, both: float, top: float = math.inf) -> Ways:
    """A figure in three ways."""
    return Ways(schedule=figure(schedule, 0.02, top), monitor=figure(monitor, 0.06, top), both=figure(both, 0.04, top))


def onset_times(
    means: tuple[float, float, float], per_day: float, alone: float, beside: float
) -> tuple[OnsetTime, ...]:
    """By day as ever; at night and at the weekend later."""
    hours: tuple[tuple[OnsetWhen, float, int], ...] = (("day", 0.9, 260), ("night", 1.4, 60), ("weekend", 1.7, 80))
    return tuple(
        OnsetTime(
            when=when,
            onsets=count,
            results_per_hour=per_day / 24 / slower**3,
            by_first_event=ways(0.4, 0.6 / slower, 0.7, 1.0),
            until=ways(*means),
            until_hours=ways(*(mean * slower * 24 / per_day for mean in means)),
            unreliable=both_ways(alone / slower, beside),
        )
        for when, slower, count in hours
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
    means, horizon, hours = (by_controls, by_monitor, both), HORIZON * per_day, 24 / per_day
    details = {"drift": " over 200 results", "sporadic": " in 0.1 of results"}.get(kind, "")
    label = f"noise x{size:g}" if kind == "noise" else f"{kind} {sign * size:+g} TEa{details}"
    return FaultAppraisal(
        label=label,
        kind=kind,
        size=size,
        unit="" if kind == "noise" else "TEa",
        sign=1 if sign > 0 else -1,
        shift=None if kind == "noise" else sign * size * tea,
        over=200 if kind == "drift" else None,
        share=0.1 if kind == "sporadic" else None,
        weight=1.0,
        by_first_event=ways(power, found_before, 1 - (1 - power) * (1 - found_before), 1.0),
        never=ways(missed(by_controls, horizon), missed(by_monitor, horizon), missed(both, horizon), 1.0),
        until=until_ways(means, horizon),
        until_hours=until_ways((by_controls * hours, by_monitor * hours, both * hours), HORIZON * 24),
        unreliable=both_ways(alone, beside),
        unreliable_final=both_ways(alone * (1 - power), beside * 0.2),
        unreliable_correctable=both_ways(alone * power, beside * 0.8),
        beyond_false_alarms=figure((alone - beside) * 0.95),
        no_more_than_false_alarms=size < 0.3,
        by_onset=onset_times(means, per_day, alone, beside),
        schedule_error=0.0016,
    )


def worst(faults: Iterable[FaultAppraisal], which: str) -> WorstCase:
    """The greatest count, alone and with the monitor."""
    given = list(faults)
    alone = max(given, key=lambda one: getattr(one, which).alone.value)
    beside = max(given, key=lambda one: getattr(one, which).with_monitor.value)
    both = both_ways(getattr(alone, which).alone.value, getattr(beside, which).with_monitor.value)
    return WorstCase(
        alone=both.alone,
        with_monitor=both.with_monitor,
        fewer=both.fewer,
        share_fewer=both.share_fewer,
        alone_at=alone.label,
        alone_sure=0.97,
        with_monitor_at=beside.label,
        with_monitor_sure=0.81,
    )


def mean_of(faults: Iterable[FaultAppraisal], which: str, times: float = 1.0) -> AloneAndWith:
    """Average over the faults, times a factor."""
    given = list(faults)
    alone, beside = (
        times * sum(getattr(getattr(one, which), part).value for one in given) / len(given)
        for part in ("alone", "with_monitor")
    )
    return both_ways(alone, beside)


def false_alarms(episodes: int) -> FalseAlarms:
    """So many alarms in 40 days."""
    low, high = 0.3 * episodes, 3.0 + 1.6 * episodes
    return FalseAlarms(
        days=40,
        episodes=episodes,
        allowed=40 / 30,
        interval=(low, high),
        kept=episodes < 4,
        a_month=Figure(value=episodes * 0.75, low=low * 0.75, high=high * 0.75),
        in_alarm=figure(0.002 * episodes, 0.5),
    )


def spacing(faults: tuple[FaultAppraisal, ...]) -> tuple[Spacing, ...]:
    """Fewer and more control events a day."""
    rows = (("at 06:00", 1.0, 2.6), ("at 06:00, 14:00, 22:00", 3.0, 1.0), ("every 50 results", 16.2, 0.4))
    return tuple(
        Spacing(
            controls=controls,
            present=times == 1.0,
            events_per_day=a_day,
            unreliable=mean_of(faults, "unreliable", times),
            unreliable_final=mean_of(faults, "unreliable_final", times),
            worst_unreliable=worst(faults, "unreliable"),
            worst_final=worst(faults, "unreliable_final"),
        )
        for controls, a_day, times in rows
    )


def peers(alone: float) -> Peers:
    """The plan beside two others."""
    told = (("plan", "the monitors of plan.toml", 1, 0.3), ("moving mean", "moving mean without truncation", 2, 0.5),
            ("ADWIN", "ADWIN, a general drift detector", 5, 0.9))  # fmt: skip
    return Peers(
        faults=("shift -1 TEa", "shift +1 TEa"),
        onsets=32,
        alone=figure(alone),
        compared=tuple(
            PeerAppraisal(
                name=name,
                title=title,
                settings="limits learned on the training days",
                false_alarms=false_alarms(episodes),
                by_first_event=figure(0.6, 0.05, 1.0),
                until_median=percentile(40 + 100 * left, 5000),
                unreliable=figure(alone * left),
                share_fewer=figure(1 - left, 0.1, 1.0),
            )
            for name, title, episodes, left in told
        ),
        words="All take the results as they are and have the same alarm budget.",
        left_out=("KSWIN: takes a minute a stream",),
    )


def judged(per_day: float, faults: tuple[FaultAppraisal, ...], episodes: int) -> Judged:
    """Everything that was found of a stream."""
    first = faults[0].unreliable
    means = (per_day / 2, per_day / 5, per_day / 8)
    return Judged(
        false_alarms=false_alarms(episodes),
        no_fault=NoFault(by_first_event=figure(0.004), within_horizon=figure(0.18)),
        faults=faults,
        unreliable=mean_of(faults, "unreliable"),
        unreliable_final=mean_of(faults, "unreliable_final"),
        worst_unreliable=worst(faults, "unreliable"),
        worst_final=worst(faults, "unreliable_final"),
        by_onset=onset_times(means, per_day, first.alone.value, first.with_monitor.value),
        by_onset_words="An error that begins at night is found later.",
        yearly=Yearly(
            per_year=5.0,
            unreliable=mean_of(faults, "unreliable", 5.0),
            unreliable_final=mean_of(faults, "unreliable_final", 5.0),
        ),
        spacing=spacing(faults),
        spacing_caution="Information, not advice.",
        peers=peers(first.alone.value),
        objections=("4 alarms in 40 days",) if episodes >= 4 else (),
    )


@dataclass(frozen=True)
class Invented:
    """A monitor and what was judged with it."""

    monitor: MonitorAppraisal
    judged: Judged

    def with_(self, faults: tuple[FaultAppraisal, ...] | None = None, **changed: Any) -> "Invented":
        """The same with other texts or faults."""
        judged = self.judged if faults is None else self.judged.model_copy(update={"faults": faults})
        return Invented(self.monitor.model_copy(update=changed), judged)


def monitor(
    per_day: float,
    tea: float,
    centre: float,
    speed: float,
    kinds: Iterable[str] = ("shift",),
    seed: int = 1,
    parts: int = 400,
) -> Invented:
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
    made = MonitorAppraisal(
        brief=f"EWMA 0.03, {centre - 3 * tea:.4g} to {centre + 3 * tea:.4g}",
        words=f"Exponentially weighted mean (weight 0.03) of results from {centre - 3 * tea:.4g} to {centre + 3 * tea:.4g}",
        watches="shift",
        admitted=0.943,
        measured_in="mmol/L",
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
        false_alarms=false_alarms(episodes),
        predicted=(0, 4),
    )
    return Invented(made, judged(per_day, faults, episodes))


def stream(
    name: str, unit: str, per_day: float, *monitors: Invented, verdict: Verdict = "useful", reason: str = ""
) -> StreamAppraisal:
    """A stream of the invented laboratory."""
    return StreamAppraisal(
        stream=name,
        unit=unit,
        verdict=verdict,
        reason=reason,
        planned_verdict=verdict,
        planned_reason=reason,
        results_per_day=per_day,
        first_day="2031-02-10",
        last_day="2031-03-21",
        held_out_results=round(per_day * 40),
        onsets=2000,
        horizon_days=HORIZON,
        allowable_error="4 mmol/L",
        schedule="at 06:00, 14:00, 22:00; rules 1-3s, 2-2s, R-4s (range) on 2 levels",
        response_lag="10 results",
        monitors=tuple(one.monitor for one in monitors),
        judged=monitors[0].judged if monitors else None,
    )


def appraisal(*streams: StreamAppraisal, laboratory: str = "Tern Bay District Laboratory") -> Appraisal:
    """An appraisal of the invented laboratory."""
    return Appraisal(
        made_by="pbm 0.1.0",
        versions={"python": "3.11.9", "numpy": "2.2.1"},
        laboratory=laboratory,
        time_zone="Atlantic/Azores",
        seed=20310302,
        peers_tried="quick",
        history_sha256="ab" * 32,
        plan_sha256="cd" * 32,
        lab_sha256="ef" * 32,
        onset_times={
            "day": "Monday to Friday, 07:00 to 19:00",
            "night": "the other hours",
            "weekend": "Saturday and Sunday",
        },
        bench=Bench(
            streams=len(streams),
            monitors=len(streams),
            a_month=figure(0.9 * len(streams), 0.3),
            allowed_a_month=float(len(streams)),
            kept=True,
            unreliable=both_ways(120.0 * len(streams), 40.0 * len(streams)),
            unreliable_final=both_ways(9.0 * len(streams), 3.0 * len(streams)),
        ),
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
    made = monitor(812.5, 4.0, 139.1, 30, ("shift", "noise"))
    faults = tuple(
        one.model_copy(update={"unit": "unit"}) if one.kind == "shift" else one for one in made.judged.faults
    )
    attacked = stream(
        HOSTILE,
        HOSTILE,
        1.0,
        made.with_(faults, words=HOSTILE, brief=HOSTILE),
        reason=HOSTILE,
    )
    texts = {"allowable_error": HOSTILE, "schedule": HOSTILE, "response_lag": HOSTILE}
    return appraisal(
        attacked.model_copy(update=texts), stream(HOSTILE, HOSTILE, 1.0, verdict="not useful here"), laboratory=HOSTILE
    )
