"""Appraise: figures recomputed by naive twins, edited plans judged as they stand, and what does not fit refused in words."""

import math
from datetime import date, timedelta
from functools import cache
from typing import Any

import numpy as np
import pytest

from pbm.errors import PlanError
from pbm.methods.clock_time import local_days
from pbm.methods.controls import Rules, survival
from pbm.methods.unreliable import chance_unreliable
from pbm.records.appraisal import FaultAppraisal, StreamAppraisal
from pbm.records.plan import MonitorPlan, StreamPlan
from pbm.stages.appraise import appraise_stream
from pbm.stages.surroundings import Surroundings
from tests import naive
from tests.methods.test_trials import stop_by_counting
from tests.stages.offline import SODIUM, history, laboratory, sodium

EWMA: dict[str, Any] = {
    "statistic": "ewma",
    "weight": 0.1,
    "centre": 139.0,
    "limits": {"low": 136.8, "high": 141.2},
    "budget_per_day": 1 / 30,
    "spread": 3.0,
}
HISTORY = sodium(30, 60)
DAYS = local_days(HISTORY.time, laboratory().laboratory.zone)


def plan(held_out_from: date | None = None, unit: str = "mmol/L", **edited: Any) -> StreamPlan:
    return StreamPlan(
        unit=unit,
        verdict="useful",
        reason="edited by hand",
        results_per_day=60.0,
        held_out_from=held_out_from,
        monitors=(MonitorPlan(**(EWMA | edited)),),
    )


@cache
def appraised() -> StreamAppraisal:
    return appraise_stream(HISTORY, plan(), laboratory(), 1)


def faults_of(found: StreamAppraisal) -> dict[str, FaultAppraisal]:
    (monitor,) = found.monitors
    return {fault.label: fault for fault in monitor.faults}


def test_the_same_seed_gives_the_same_figures_and_another_seed_others() -> None:
    assert appraise_stream(HISTORY, plan(), laboratory(), 1) == appraised()
    assert appraise_stream(HISTORY, plan(), laboratory(), 2) != appraised()


@pytest.mark.parametrize("lag", ["10 results", "45 min"])
def test_every_figure_of_a_shift_is_the_one_recomputed_onset_by_onset(lag: str) -> None:
    """EWMA written out from the first result on, formulas bracket by bracket, for the schedule alone and with the monitor."""
    lab = laboratory(lag=lag)
    found = faults_of(appraise_stream(HISTORY, plan(), lab, 1))["shift +1 TEa"]
    around, n = Surroundings.of(SODIUM, lab, 1), len(HISTORY)
    split = int(np.searchsorted(DAYS, DAYS[0] + 20))
    onsets, stretch = around.onsets(HISTORY.time, split, n, 400), around.stretch(HISTORY)
    events = around.event_positions(HISTORY.time).tolist()
    bias = np.tile([4.0 / 1.0, 4.0 / 1.2], (30, 1))
    passed = survival(Rules.parse(("1-3s", "2-2s", "R-4s")), bias, 1.0, np.array([1, 1])).passed.tolist()
    p = float(chance_unreliable(np.array(4.0), np.array(4.0), np.array(0.9)))
    shifted = np.rint(HISTORY.value + stretch.chance.cell + 4.0)
    sums: dict[str, list[float]] = {key: [] for key in ("alone", "with", "final", "final with", "until", "first")}
    for at, end in zip(onsets.at.tolist(), onsets.end.tolist(), strict=True):
        alarm = first_alarm(np.concatenate([HISTORY.value[:at], shifted[at:end]]).tolist(), at)
        stop = stop_by_counting(
            alarm,
            at,
            end,
            10 if lag.endswith("results") else 45,
            "results" if "res" in lag else "minutes",
            HISTORY.time,
        )
        chances = [p] * (end - at)
        alone = naive.unreliable_results(at, end - at, end, events, chances, passed)
        sums["alone"].append(alone[0])
        sums["final"].append(alone[1])
        sums["with"].append(naive.unreliable_results(at, stop, end, events, chances, passed)[0])
        sums["final with"].append(naive.unreliable_results(at, alarm or end - at, end, events, chances, passed)[1])
        known = naive.detections(at, end, events, passed, alarm or None)
        sums["until"].append(math.fsum(c * (end - at if k is None else k) for k, c in known.items()))
        to_first = min([e for e in events if e > at] + [end]) - at
        sums["first"].append(math.fsum(c for k, c in known.items() if k is not None and k <= to_first))
    means = {key: float(np.mean(each)) for key, each in sums.items()}
    assert found.unreliable.alone.value == pytest.approx(means["alone"])
    assert found.unreliable.with_monitor.value == pytest.approx(means["with"])
    assert found.unreliable_final.alone.value == pytest.approx(means["final"])
    assert found.unreliable_final.with_monitor.value == pytest.approx(means["final with"])
    assert found.until.both.mean == pytest.approx(means["until"])
    assert found.by_first_event.both.value == pytest.approx(means["first"])


def first_alarm(values: list[float], onset: int) -> int:
    """Affected results until the EWMA opens an episode after the onset, 0 if it does not."""
    s, opened = 139.0, False
    for i, x in enumerate(values):
        s += 0.1 * (x - s)
        if not opened and not 136.8 <= s <= 141.2:
            opened = True
            if i >= onset:
                return i - onset + 1
        elif opened and 137.9 <= s <= 140.1:
            opened = False
    return 0


def test_false_alarms_are_the_episodes_that_open_on_held_out_days() -> None:
    tight = plan(limits={"low": 137.6, "high": 140.4})
    (monitor,) = appraise_stream(HISTORY, tight, laboratory(), 1).monitors
    path = naive.ewma(HISTORY.value.tolist(), 0.1, 139.0)
    split = int(np.searchsorted(DAYS, DAYS[0] + 20))
    expected = sum(at >= split for at, _, _ in naive.alarms(path, 137.6, 140.4, 139.0, 0.5))
    assert monitor.false_alarms.episodes == expected > 3
    assert (monitor.false_alarms.days, monitor.false_alarms.allowed) == (10, pytest.approx(1 / 3))
    assert not monitor.false_alarms.kept


def test_figures_lie_inside_their_intervals_and_in_their_order() -> None:
    for fault in faults_of(appraised()).values():
        ways = fault.by_first_event
        figures = [ways.schedule, ways.monitor, ways.both, fault.unreliable.alone, fault.unreliable.with_monitor]
        assert all(f.low - 1e-12 <= f.value <= f.high + 1e-12 for f in figures)
        assert max(ways.schedule.value, ways.monitor.value) <= ways.both.value <= 1
        assert fault.unreliable.with_monitor.value <= fault.unreliable.alone.value
        assert fault.unreliable_final.with_monitor.value <= fault.unreliable.with_monitor.value
        assert fault.until.both.never <= min(fault.until.schedule.never, fault.until.monitor.never) + 1e-12


def test_the_worst_case_is_the_largest_over_all_faults() -> None:
    (monitor,) = appraised().monitors
    worst = max(monitor.faults, key=lambda f: f.unreliable.with_monitor.value)
    assert monitor.worst_unreliable.with_monitor == worst.unreliable.with_monitor
    assert monitor.worst_unreliable.with_monitor_at == worst.label


@pytest.mark.parametrize(
    "edited",
    [
        {"limits": {"low": 138.999, "high": 139.001}},
        {"centre": 100.0, "limits": {"low": 99.0, "high": 101.0}},
        {"admit": {"low": 300, "high": 400}},
        {"admit": {"low": 138, "high": 140, "mode": "winsorize"}},
        {"statistic": "mean", "weight": None, "window": 5000},
        {"statistic": "median", "weight": None, "window": 21},
        {
            "statistic": "cusum",
            "weight": None,
            "reference": 0.5,
            "level": 139.0,
            "centre": 0.0,
            "limits": {"low": -5, "high": 5},
        },
        {"transform": "log", "centre": 4.934, "limits": {"low": 4.91, "high": 4.96}, "spread": 0.02},
        {"transform": "log", "centre": 4.934, "limits": {"low": 4.91, "high": 1e4}, "spread": 0.02},
        {
            "transform": "boxcox",
            "transform_lambda": -1.0,
            "centre": 0.9928,
            "limits": {"low": 0.99, "high": 1.2},
            "spread": 0.001,
        },
        {
            "transform": "boxcox",
            "transform_lambda": 0.5,
            "centre": 21.58,
            "limits": {"low": -5.0, "high": 40.0},
            "spread": 0.3,
        },
        {
            "transform": "boxcox",
            "transform_lambda": 0.0,
            "centre": 4.934,
            "limits": {"low": 4.91, "high": 4.96},
            "spread": 0.02,
        },
    ],
    ids=lambda e: " ".join(f"{k}={v}" for k, v in e.items() if k in ("transform", "limits", "admit", "statistic")),
)
def test_an_edited_plan_is_judged_as_it_stands(edited: dict[str, Any]) -> None:
    """Every figure is finite (the record takes no other), whatever a person wrote."""
    (monitor,) = appraise_stream(HISTORY, plan(**edited), laboratory(), 1).monitors
    assert 0 <= monitor.admitted <= 1
    if monitor.admitted == 0:
        assert all(f.until.monitor.never == 1 for f in monitor.faults), "a monitor that takes nothing finds nothing"
        assert all(f.unreliable.with_monitor == f.unreliable.alone for f in monitor.faults)


def test_the_logarithm_of_negative_results_takes_none_of_them() -> None:
    negative = history(-HISTORY.value, HISTORY.time)
    logged = plan(transform="log", centre=4.934, limits={"low": 4.91, "high": 4.96}, spread=0.02)
    (monitor,) = appraise_stream(negative, logged, laboratory(), 1).monitors
    assert monitor.admitted == 0 and monitor.false_alarms.episodes == 0
    assert monitor.trace.day == ()


FAULTS: list[dict[str, Any]] = [
    {"kind": "shift", "sizes": [5], "unit": "percent"},
    {"kind": "drift", "sizes": [1, 2], "unit": "TEa", "over": "100 results"},
    {"kind": "noise", "sizes": [2, 3]},
    {"kind": "sporadic", "sizes": [3], "unit": "SD", "share": 0.2},
    {"kind": "shift", "sizes": [2], "unit": "unit", "signs": "down"},
]


def test_every_kind_of_fault_is_judged_and_costs_something() -> None:
    found = faults_of(appraise_stream(HISTORY, plan(), laboratory(faults=FAULTS), 1))
    assert list(found) == [
        "shift -5 percent", "shift +5 percent", "drift -1 TEa", "drift +1 TEa", "drift -2 TEa", "drift +2 TEa",
        "noise x2", "noise x3", "sporadic -3 SD", "sporadic +3 SD", "shift -2 unit",
    ]  # fmt: skip
    assert all(fault.unreliable.alone.value > 0 for fault in found.values())
    assert all(fault.unreliable.with_monitor.value <= fault.unreliable.alone.value for fault in found.values())
    assert found["noise x2"].shift is None
    assert found["shift -5 percent"].shift == pytest.approx(-0.05 * float(np.median(HISTORY.value)))


def test_both_signs_cost_the_schedule_the_same() -> None:
    found = faults_of(appraised())
    for size in ("0.5", "1"):
        up, down = found[f"shift +{size} TEa"], found[f"shift -{size} TEa"]
        assert up.unreliable.alone.value == pytest.approx(down.unreliable.alone.value)


def test_without_controls_the_schedule_finds_nothing_and_the_monitor_what_it_finds() -> None:
    found = faults_of(appraise_stream(HISTORY, plan(), laboratory({}), 1))["shift +1 TEa"]
    assert found.until.schedule.never == 1 and found.until.schedule.median is None
    assert found.until.both.mean == pytest.approx(found.until.monitor.mean)
    assert found.unreliable_final.alone.value == 0


@pytest.mark.parametrize(
    "controls",
    [
        {"every": "25 results", "rules": ["1-3s"]},
        {"times": ["00:30"], "rules": ["1-3s", "2-2s", "R-4s", "4-1s", "10x"]},
    ],
    ids=["by count", "every rule"],
)
def test_any_schedule_is_judged(controls: dict[str, Any]) -> None:
    found = faults_of(appraise_stream(HISTORY, plan(), laboratory(controls, zone="Atlantic/Azores"), 1))
    assert 0 < found["shift +1 TEa"].by_first_event.schedule.value < 1.0000001


def test_more_frequent_controls_let_fewer_unreliable_results_out() -> None:
    often, seldom = (
        faults_of(appraise_stream(HISTORY, plan(), laboratory({"every": every, "rules": ["1-3s"]}), 1))[
            "shift +0.5 TEa"
        ]
        for every in ("15 results", "90 results")
    )
    assert often.unreliable.alone.value < seldom.unreliable.alone.value
    assert often.unreliable.with_monitor.value < seldom.unreliable.with_monitor.value


def test_a_stream_without_a_monitor_is_told_with_its_reason() -> None:
    none = StreamPlan(unit="mmol/L", verdict="not useful here", reason="too few", results_per_day=3.0)
    found = appraise_stream(HISTORY, none, laboratory(), 1)
    assert found.monitors == () and found.reason == "too few" and found.verdict == "not useful here"


def test_a_plan_in_another_unit_is_refused_with_both_units() -> None:
    with pytest.raises(PlanError, match=r"sodium@line-1 in mg/dL, lab\.toml in mmol/L"):
        appraise_stream(HISTORY, plan(unit="mg/dL"), laboratory(), 1)


@pytest.mark.parametrize("away", [-1, 0, 30, 400])
def test_a_history_without_training_or_held_out_days_is_refused_with_its_dates(away: int) -> None:
    first = date(1970, 1, 1) + timedelta(int(DAYS[0]))
    with pytest.raises(PlanError, match=f"runs from {first} to {first + timedelta(29)}"):
        appraise_stream(HISTORY, plan(held_out_from=first + timedelta(away)), laboratory(), 1)


@pytest.mark.parametrize("results", [1, 2, 60])
def test_a_single_held_out_day_or_result_is_enough_to_judge(results: int) -> None:
    given = HISTORY.rows(slice(0, 29 * 60 + results))
    last = date(1970, 1, 1) + timedelta(int(DAYS[-1]))
    found = appraise_stream(given, plan(held_out_from=last), laboratory(), 1)
    assert found.held_out_results == results and found.onsets >= 1
    assert found.monitors[0].false_alarms.days == 1
