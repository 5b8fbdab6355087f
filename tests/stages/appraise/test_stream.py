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
from pbm.records.appraisal import StreamAppraisal
from pbm.records.judged import FaultAppraisal, Judged
from pbm.records.laboratory import FaultRate, Lab
from pbm.records.plan import MonitorPlan, StreamPlan
from pbm.records.stream import StreamHistory
from pbm.stages import appraise as stage
from pbm.stages.surroundings import Surroundings
from tests import naive
from tests.methods.test_trials import stop_by_counting
from tests.stages.offline import HOUR, SCHEDULE, SODIUM, START, history, laboratory, sodium

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


def appraise_stream(given: StreamHistory, decided: StreamPlan, lab: Lab, seed: int) -> StreamAppraisal:
    """Without the comparison with other monitors, which takes its time."""
    return stage.appraise_stream(given, decided, lab, seed, "none")


def plan(held_out_from: date | None = None, unit: str = "mmol/L", **edited: Any) -> StreamPlan:
    return StreamPlan(
        unit=unit,
        verdict="useful",
        reason="edited by hand",
        results_per_day=60.0,
        held_out_from=held_out_from,
        monitors=(MonitorPlan(**(EWMA | edited)),),
    )


NO_MONITOR = StreamPlan(unit="mmol/L", verdict="not useful here", reason="too few", results_per_day=3.0)


@cache
def appraised() -> StreamAppraisal:
    return appraise_stream(HISTORY, plan(), laboratory(), 1)


def faults_of(found: StreamAppraisal) -> dict[str, FaultAppraisal]:
    return {fault.label: fault for fault in judged(found).faults}


def judged(found: StreamAppraisal) -> Judged:
    assert found.judged is not None
    return found.judged


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
    assert found.until.both.mean.value == pytest.approx(means["until"])
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
        assert fault.never.both.value <= min(fault.never.schedule.value, fault.never.monitor.value) + 1e-7


def test_the_worst_case_is_the_largest_over_all_faults() -> None:
    found = judged(appraised())
    worst = max(found.faults, key=lambda f: f.unreliable.with_monitor.value)
    assert found.worst_unreliable.with_monitor.value == worst.unreliable.with_monitor.value
    assert found.worst_unreliable.with_monitor.low >= worst.unreliable.with_monitor.low
    assert found.worst_unreliable.with_monitor_at == worst.label


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
    found = appraise_stream(HISTORY, plan(**edited), laboratory(), 1)
    (monitor,) = found.monitors
    assert 0 <= monitor.admitted <= 1
    if monitor.admitted == 0:
        faults = judged(found).faults
        assert all(f.never.monitor.value == 1 for f in faults), "a monitor that takes nothing finds nothing"
        assert all(f.unreliable.with_monitor == f.unreliable.alone for f in faults)
        assert found.verdict == "not useful here"


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
        "shift -5 percent", "shift +5 percent", "drift -1 TEa over 100 results", "drift +1 TEa over 100 results",
        "drift -2 TEa over 100 results", "drift +2 TEa over 100 results", "noise x2", "noise x3", "sporadic -3 SD in 0.2 of results",
        "sporadic +3 SD in 0.2 of results", "shift -2 unit",
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
    assert found.never.schedule.value == 1 and found.until.schedule.median.value is None
    assert found.until.both == found.until.monitor
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
    found = appraise_stream(HISTORY, NO_MONITOR, laboratory(), 1)
    assert found.monitors == () and found.reason == "too few" and found.verdict == "not useful here"
    assert judged(found).false_alarms is None and judged(found).peers is None and judged(found).objections == ()
    with_one = faults_of(appraised())
    for label, fault in faults_of(found).items():
        assert fault.unreliable.alone == fault.unreliable.with_monitor
        assert fault.unreliable.alone.value == with_one[label].unreliable.alone.value
        assert fault.by_first_event.both == fault.by_first_event.schedule and fault.never.monitor.value == 1


def test_a_stream_without_a_monitor_and_with_too_few_days_is_told_and_not_judged() -> None:
    found = appraise_stream(HISTORY.rows(slice(0, 30)), NO_MONITOR, laboratory(), 1)
    assert found.judged is None and found.reason == "too few" and found.held_out_results == 0


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


def test_monitors_together_alarm_when_the_first_of_them_does_and_their_alarms_add_up() -> None:
    """An upper limit on one monitor and a lower limit on another are one monitor with both limits."""
    up = MonitorPlan(**(EWMA | {"limits": {"high": 141.2}, "budget_per_day": 1 / 60}))
    down = MonitorPlan(**(EWMA | {"limits": {"low": 136.8}, "budget_per_day": 1 / 60}))
    two = appraise_stream(HISTORY, plan().model_copy(update={"monitors": (up, down)}), laboratory(), 1)
    for label, fault in faults_of(two).items():
        one = faults_of(appraised())[label]
        assert fault.until.monitor.median.value <= one.until.monitor.median.value
        assert fault.unreliable.alone == one.unreliable.alone
    alarms = [monitor.false_alarms.episodes for monitor in two.monitors]
    together = judged(two).false_alarms
    assert together is not None and together.episodes == sum(alarms)
    assert together.allowed == pytest.approx(10 / 30, rel=1e-6)
    assert [(one.low, one.high is None) for one in two.monitors] == [(None, False), (136.8, True)]


def test_a_second_monitor_that_never_alarms_changes_nothing() -> None:
    deaf = MonitorPlan(**(EWMA | {"limits": {"low": 0.0, "high": 300.0}}))
    both = plan().model_copy(update={"monitors": (*plan().monitors, deaf)})
    assert faults_of(appraise_stream(HISTORY, both, laboratory(), 1)) == faults_of(appraised())


def test_the_parts_of_the_week_make_up_the_whole() -> None:
    for fault in faults_of(appraised()).values():
        parts = fault.by_onset
        count = sum(part.onsets for part in parts)
        assert count == appraised().onsets
        for whole, each in (
            (fault.unreliable.with_monitor, [part.unreliable.with_monitor for part in parts]),
            (fault.until.both.mean, [part.until.both for part in parts]),
            (fault.until_hours.monitor.mean, [part.until_hours.monitor for part in parts]),
            (fault.by_first_event.monitor, [part.by_first_event.monitor for part in parts]),
        ):
            together = sum(part.onsets * one.value for part, one in zip(parts, each, strict=True)) / count
            assert whole.value == pytest.approx(together, rel=1e-5)


def test_an_error_that_begins_at_night_lies_longer_where_patients_come_by_day() -> None:
    found = {part.when: part for part in judged(appraised()).by_onset}
    assert found["night"].results_per_hour < found["day"].results_per_hour
    assert found["night"].until_hours.monitor.value > found["day"].until_hours.monitor.value
    assert "at night" in judged(appraised()).by_onset_words


def test_hours_until_detection_are_those_of_the_clock() -> None:
    """Every result a tenth of an hour after the one before: hours are a tenth of the results but one."""
    n = 30 * 240
    steady = history(np.rint(np.random.default_rng(3).normal(139, 3, n)), START + np.arange(n) * HOUR // 10)
    found = faults_of(appraise_stream(steady, plan(), laboratory({}), 1))["shift +1 TEa"]
    assert found.until_hours.monitor.mean.value == pytest.approx((found.until.monitor.mean.value - 1) / 10, rel=1e-5)
    assert found.until_hours.monitor.median.value == pytest.approx((found.until.monitor.median.value - 1) / 10)


def test_a_year_is_the_average_error_as_often_as_assumed() -> None:
    lab = laboratory().model_copy(update={"faults": FaultRate(per_year=12.0)})
    found = judged(appraise_stream(HISTORY, plan(), lab, 1))
    assert found.yearly.per_year == 12.0
    assert found.yearly.unreliable.alone.value == pytest.approx(12 * found.unreliable.alone.value, rel=1e-5)
    assert found.yearly.unreliable_final.fewer.high == pytest.approx(12 * found.unreliable_final.fewer.high, rel=1e-5)
    mean = np.mean([fault.unreliable.with_monitor.value for fault in found.faults])
    assert found.unreliable.with_monitor.value == pytest.approx(mean, rel=1e-5)


def test_heavier_faults_count_for_more_in_averages() -> None:
    faults = [{"sizes": [0.5], "signs": "up", "weight": 3}, {"sizes": [1.0], "signs": "up", "weight": 1}]
    found = judged(appraise_stream(HISTORY, plan(), laboratory(faults=faults), 1))
    small, large = (fault.unreliable.alone.value for fault in found.faults)
    assert found.unreliable.alone.value == pytest.approx((3 * small + large) / 4, rel=1e-5)


@pytest.mark.parametrize("controls", [SCHEDULE, {"every": "40 results", "rules": ["1-3s"]}], ids=["clock", "count"])
def test_a_row_of_the_spacing_table_is_the_appraisal_under_that_schedule(controls: dict[str, Any]) -> None:
    faults = [
        {"sizes": [0.5, 1.0]},
        {"kind": "drift", "sizes": [1.0], "over": "60 results"},
        {"kind": "noise", "sizes": [2]},
    ]
    found = judged(appraise_stream(HISTORY, plan(), laboratory(controls, faults=faults), 1))
    assert [row.present for row in found.spacing].count(True) == 1
    assert len(found.spacing) >= 5 and len({row.controls for row in found.spacing}) == len(found.spacing)
    for row in found.spacing:
        when = row.controls.removeprefix("at ").removeprefix("every ")
        given = {"every": when} if row.controls.startswith("every") else {"times": when.split(", ")}
        there = judged(appraise_stream(HISTORY, plan(), laboratory(controls | NO_TIMES | given, faults=faults), 1))
        assert row.unreliable == there.unreliable and row.unreliable_final == there.unreliable_final
        assert row.worst_unreliable == there.worst_unreliable and row.worst_final == there.worst_final


NO_TIMES: dict[str, Any] = {"times": None, "every": None}


def test_without_controls_there_is_no_other_spacing_to_tell() -> None:
    assert judged(appraise_stream(HISTORY, plan(), laboratory({}), 1)).spacing == ()


def test_small_errors_found_no_more_often_than_nothing_at_all_are_said_to_be_so() -> None:
    faults = [{"sizes": [0.01, 1.0], "signs": "up"}]
    tight = plan(limits={"low": 137.6, "high": 140.4})
    small, large = judged(appraise_stream(HISTORY, tight, laboratory(faults=faults), 1)).faults
    assert small.no_more_than_false_alarms and small.beyond_false_alarms.low <= 0
    assert not large.no_more_than_false_alarms and large.beyond_false_alarms.low > 0


def test_a_monitor_that_alarms_at_random_is_not_useful_and_is_objected_to() -> None:
    """It takes no result of the shifted kind: what it saves, its false alarms save."""
    blind = plan(
        admit={"low": 0.0, "high": 139.0, "mode": "winsorize"}, centre=138.0, limits={"low": 130.0, "high": 138.4}
    )
    upwards = laboratory(faults=[{"kind": "shift", "sizes": [0.01], "signs": "up"}])
    found = appraise_stream(HISTORY, blind, upwards, 1)
    assert found.verdict == "not useful here" and "no more than its false alarms" in found.reason
    assert any("more harm than good" in one for one in judged(found).objections)


def test_a_budget_that_was_not_kept_is_objected_to_and_costs_the_verdict() -> None:
    tight = appraise_stream(HISTORY, plan(limits={"low": 137.6, "high": 140.4}), laboratory(), 1)
    assert tight.planned_verdict == "useful" and tight.verdict == "marginal" and "not kept" in tight.reason
    assert any("held-out days, the budget allows" in one for one in judged(tight).objections)
    wide = appraise_stream(HISTORY, plan(budget_per_day=5.0, limits={"low": 137.6, "high": 140.4}), laboratory(), 1)
    assert wide.verdict == "useful" and judged(wide).objections == ()


def test_time_in_alarm_is_the_share_of_the_clock_between_opening_and_closing() -> None:
    found = judged(appraise_stream(HISTORY, plan(limits={"low": 137.6, "high": 140.4}), laboratory(), 1)).false_alarms
    assert found is not None and found.in_alarm is not None
    path = naive.ewma(HISTORY.value.tolist(), 0.1, 139.0)
    split = int(np.searchsorted(DAYS, DAYS[0] + 20))
    opened, lasting = 0, 0
    for i, s in enumerate(path):
        if not opened and not 137.6 <= s <= 140.4:
            opened = 1
        elif opened and 138.3 <= s <= 139.7:
            opened = 0
        if i >= split and opened and i + 1 < len(path):
            lasting += int(HISTORY.time[i + 1] - HISTORY.time[i])
    assert found.in_alarm.value == pytest.approx(lasting / int(HISTORY.time[-1] - HISTORY.time[split]), rel=1e-6)
    assert found.a_month.value == pytest.approx(found.episodes * 3)
