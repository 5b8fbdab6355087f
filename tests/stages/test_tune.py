"""Tune: the same plan for the same seed, every kind of history decided in words, and what the plan says is so."""

import math
import re
from dataclasses import replace
from datetime import date, timedelta
from functools import cache
from typing import Any

import numpy as np
import pytest

from pbm.errors import InputError
from pbm.methods.alarm import episodes
from pbm.methods.candidates import QUICK_GRID
from pbm.methods.clock_time import local_days
from pbm.methods.intervals import poisson_interval
from pbm.records.laboratory import Lab
from pbm.records.plan import MonitorPlan, StreamPlan
from pbm.records.stream import StreamHistory, StreamName
from pbm.records.tuning import StreamTuning
from pbm.stages import tune
from pbm.stages.by_hand import NOTHING_BY_HAND, ByHand
from pbm.stages.from_plan import limits, preparation, tracker
from pbm.stages.surroundings import Surroundings
from tests.stages.offline import DAY, SODIUM, START, history, laboratory, sodium, times

DAYS, PER_DAY = 24, 45
N = DAYS * PER_DAY
TIME = times(DAYS, PER_DAY)
RANDOM = np.random.default_rng(5)
SODIUM_HISTORY = sodium(DAYS, PER_DAY)
NORMAL = np.rint(RANDOM.normal(139, 3, N))
LOGNORMAL = np.round(np.exp(RANDOM.normal(0.3, 0.6, N)), 2).clip(0.01)


def tune_stream(given: StreamHistory, lab: Lab, seed: int, by_hand: ByHand = NOTHING_BY_HAND) -> StreamPlan:
    """The plan, from the quick search."""
    return tune.tune_stream(given, lab, seed, by_hand, grid=QUICK_GRID).plan


@cache
def gain_told(reason: str) -> int:
    """The gain in the words of a verdict, in percent."""
    found = re.search(r"(\d+)% fewer", reason)
    assert found is not None
    return int(found[1])


def plan_of_sodium(seed: int = 1) -> StreamPlan:
    return tune_stream(SODIUM_HISTORY, laboratory(), seed)


def monitor_of(plan: StreamPlan) -> MonitorPlan:
    (monitor,) = plan.monitors
    return monitor


def test_the_same_seed_gives_the_same_plan() -> None:
    assert tune_stream(SODIUM_HISTORY, laboratory(), 1) == plan_of_sodium()


def test_another_seed_draws_other_onsets_and_other_days() -> None:
    assert plan_of_sodium(2) != plan_of_sodium()


def test_a_plan_does_not_depend_on_what_was_tuned_before() -> None:
    other = sodium(DAYS, PER_DAY, 9, name=StreamName("sodium", "line-2"))
    before = tune_stream(other, laboratory(), 1)
    assert tune_stream(SODIUM_HISTORY, laboratory(), 1) == plan_of_sodium()
    assert tune_stream(other, laboratory(), 1) == before


def test_a_stream_of_the_same_results_has_draws_of_its_own() -> None:
    plan = tune_stream(sodium(DAYS, PER_DAY, name=StreamName("sodium", "line-2")), laboratory(), 1)
    assert monitor_of(plan).limits_interval != monitor_of(plan_of_sodium()).limits_interval


def test_held_out_days_do_not_touch_the_monitor() -> None:
    given = SODIUM_HISTORY
    first = plan_of_sodium().held_out_from
    assert first is not None
    later = local_days(given.time, laboratory().laboratory.zone) >= (first - date(1970, 1, 1)).days
    worse = replace(given, value=np.where(later, given.value + 20, given.value))
    changed = tune_stream(worse, laboratory(), 1)
    assert monitor_of(changed).model_copy(update={"held_out": None}) == monitor_of(plan_of_sodium()).model_copy(
        update={"held_out": None}
    )
    assert changed.reason == plan_of_sodium().reason
    assert monitor_of(changed).held_out != monitor_of(plan_of_sodium()).held_out


def test_what_the_plan_says_of_its_days_and_alarms_is_so() -> None:
    given, plan = SODIUM_HISTORY, plan_of_sodium()
    monitor = monitor_of(plan)
    days = local_days(given.time, laboratory().laboratory.zone)
    assert plan.held_out_from == date(1970, 1, 1) + timedelta(int(days[0]) + 16)
    assert plan.results_per_day == PER_DAY
    stretch = Surroundings.of(SODIUM, laboratory(), 1).stretch(given)
    z = stretch.prepared(preparation(monitor))
    split = int(np.searchsorted(days, days[0] + 16))
    alarms = episodes(tracker(monitor).path(z), limits(monitor)).at
    assert monitor.train is not None and monitor.held_out is not None
    assert (monitor.train.days, monitor.train.episodes) == (16, int((alarms < split).sum()))
    assert (monitor.held_out.days, monitor.held_out.episodes) == (8, int((alarms >= split).sum()))
    assert monitor.held_out.interval == poisson_interval(monitor.held_out.episodes)
    assert monitor.held_out.kept == (monitor.held_out.interval[0] <= 8 / 30)
    assert monitor.spread == pytest.approx(np.nanstd(z[:split]))
    assert plan.verdict in {"useful", "marginal"}
    assert "the line makes 45 a day" in plan.reason


def heavily_censored(share: float) -> dict[str, Any]:
    value = np.where(RANDOM.random(N) < share, 5.0, np.rint(RANDOM.normal(9, 2, N)).clip(5))
    return {"value": value, "censor": np.where(value <= 5, -1, 0)}


def with_gaps() -> dict[str, Any]:
    time = TIME.copy()
    time[N // 3 :] += 21 * DAY
    time[2 * N // 3 :] += 35 * DAY
    return {"value": NORMAL, "time": time}


def most_on_the_first_day() -> dict[str, Any]:
    later = times(23, 25) + DAY
    first = START + np.sort(RANDOM.integers(0, DAY, 2000))
    return {"value": np.rint(RANDOM.normal(139, 3, 2000 + len(later))), "time": np.concatenate([first, later])}


HISTORIES: dict[str, tuple[dict[str, Any], dict[str, Any]]] = {
    "constant": ({"value": np.full(N, 139.0)}, {}),
    "constant in tenths": ({"value": np.full(N, 0.3)}, {"step": 0.1}),
    "two values": ({"value": np.where(RANDOM.random(N) < 0.5, 139.0, 140.0)}, {}),
    "one value and a rare other": ({"value": np.where(RANDOM.random(N) < 0.001, 140.0, 139.0)}, {}),
    "all censored": ({"value": np.full(N, 5.0), "censor": np.full(N, -1)}, {"reportable": {"low": 5}}),
    "nine tenths censored": (heavily_censored(0.9), {"reportable": {"low": 5}}),
    "weeks without results": (with_gaps(), {}),
    "most on the first day": (most_on_the_first_day(), {}),
    "about zero, TEa in percent": (
        {"value": np.round(RANDOM.normal(0, 3, N), 1)},
        {"step": 0.1, "allowable_error": {"percent": 10}, "analytic_sd": {"cv_percent": 2}},
    ),
    "negative and skewed": ({"value": np.round(-np.exp(RANDOM.normal(0, 1, N)), 1)}, {"step": 0.1}),
    "far below TEa, skewed": (
        {"value": np.round(np.exp(RANDOM.normal(1, 1, N))).clip(1)},
        {"allowable_error": {"absolute": 100.0}},
    ),
    "without a mean": ({"value": np.round(RANDOM.standard_cauchy(N) * 10 + 100)}, {}),
    "up to billions": ({"value": np.round(np.exp(RANDOM.normal(20, 2, N)))}, {}),
    "TEa too small to see": ({"value": NORMAL}, {"allowable_error": {"absolute": 0.001}}),
    "a trend": ({"value": np.rint(NORMAL + np.linspace(0, 20, N))}, {}),
    "like thyrotropin": (
        {"value": LOGNORMAL},
        {"step": 0.01, "allowable_error": {"absolute": 0.2, "percent": 20}, "analytic_sd": {"cv_percent": 3}},
    ),
}


@cache
def decided(name: str) -> tuple[StreamHistory, StreamPlan]:
    columns, analyte = HISTORIES[name]
    given = history(
        columns["value"], columns.get("time", TIME), censor=columns.get("censor", np.zeros(len(columns["value"])))
    )
    return given, tune_stream(given, laboratory(**analyte), 1)


@pytest.mark.parametrize("name", HISTORIES)
def test_every_kind_of_history_is_decided_in_words_and_numbers(name: str) -> None:
    """A warning would be an error here, and so would any figure that is not finite: the records take none."""
    _, plan = decided(name)
    assert plan.reason
    assert (plan.verdict == "not useful here") == (plan.monitors == ())
    for monitor in plan.monitors:
        assert monitor.limits.low is None or monitor.limits.low < monitor.centre
        assert monitor.limits.high is None or monitor.centre < monitor.limits.high
        assert math.isfinite(monitor.slope) and monitor.slope > 0
        assert monitor.train is not None and monitor.train.episodes <= 4 * (1 + monitor.train.days / 30)


@pytest.mark.parametrize("name", ["constant", "constant in tenths", "all censored"])
def test_results_that_never_vary_have_no_tail_and_no_monitor(name: str) -> None:
    _, plan = decided(name)
    assert plan.verdict == "not useful here"
    assert "tail" in plan.reason
    assert plan.results_per_day == PER_DAY


@pytest.mark.parametrize("name", ["TEa too small to see", "without a mean", "a trend"])
def test_where_no_error_of_one_tea_is_seen_the_stream_is_not_useful(name: str) -> None:
    _, plan = decided(name)
    assert plan.verdict == "not useful here"
    assert "1 TEa" in plan.reason


@pytest.mark.parametrize(("days", "per_day"), [(19, 200), (40, 20), (1, 5000), (5, 1)])
def test_too_little_data_is_refused_with_what_there_is_and_what_is_needed(days: int, per_day: int) -> None:
    plan = tune_stream(sodium(days, per_day), laboratory(), 1)
    assert plan.verdict == "not useful here" and plan.monitors == ()
    assert f"{days * per_day} results on {days} days" in plan.reason
    assert "at least 1000 results on 20 days" in plan.reason


@pytest.mark.parametrize(
    "faults",
    [
        [{"kind": "drift", "sizes": [2], "unit": "TEa", "over": "100 results"}],
        [{"kind": "noise", "sizes": [2, 3]}],
        [{"kind": "sporadic", "sizes": [3], "unit": "SD", "share": 0.2}],
    ],
    ids=lambda f: f[0]["kind"],
)
def test_faults_of_every_kind_can_be_guarded_against(faults: list[dict[str, Any]]) -> None:
    assert tune_stream(sodium(DAYS, PER_DAY), laboratory(faults=faults), 1).reason


@pytest.mark.parametrize(
    "controls",
    [
        {"times": ["00:30"], "rules": ["1-3s", "2-2s", "R-4s", "4-1s", "10x"]},
        {"times": ["07:00"], "weekdays": ["Mon"], "rules": ["1-3s"]},
    ],
    ids=["every rule", "Mondays"],
)
def test_any_schedule_will_do(controls: dict[str, Any]) -> None:
    plan = tune_stream(sodium(DAYS, PER_DAY), laboratory(controls, zone="Atlantic/Azores"), 1)
    assert plan.verdict in {"useful", "marginal"}


def test_a_monitor_gains_more_where_controls_are_rarer() -> None:
    gains = [
        gain_told(tune_stream(sodium(DAYS, PER_DAY), laboratory(controls), 1).reason)
        for controls in ({"every": "10 results", "rules": ["1-3s"]}, {"every": "200 results", "rules": ["1-3s"]}, {})
    ]
    assert gains == sorted(gains) and gains[0] < gains[2]


def test_a_lag_in_minutes_is_taken() -> None:
    slow, quick = (
        tune_stream(sodium(DAYS, PER_DAY), laboratory({}, lag=lag), 1).reason for lag in ("600 min", "1 min")
    )
    assert gain_told(slow) < gain_told(quick)


SHIFTS = {"kind": "shift", "sizes": [0.5, 1, 2], "unit": "TEa"}
NOISE = {"kind": "noise", "sizes": [3, 4], "weight": 3}
BUSY = sodium(30, 200)


@cache
def both_looked_for() -> tuple[StreamPlan, StreamTuning]:
    found = tune.tune_stream(BUSY, laboratory(faults=[SHIFTS, NOISE]), 1, grid=QUICK_GRID)
    assert found.reasons is not None
    return found.plan, found.reasons


def test_where_noise_is_guarded_against_a_second_monitor_watches_for_it_with_its_part_of_the_budget() -> None:
    plan, reasons = both_looked_for()
    shift, imprecision = plan.monitors
    assert (shift.watches, imprecision.watches) == ("shift", "imprecision")
    assert imprecision.statistic in {"sd", "ewsd"}
    assert imprecision.limits.low is None and imprecision.limits.high is not None
    assert imprecision.limits_interval is not None and imprecision.limits_interval.low is None
    assert shift.budget_per_day + imprecision.budget_per_day == pytest.approx(1 / 30)
    assert "pays" in reasons.together and "does not" not in reasons.together
    assert [search.watches for search in reasons.searches] == ["shift", "imprecision"]


def test_a_second_monitor_that_hardly_gains_is_not_taken_and_that_is_told() -> None:
    hardly = {"kind": "noise", "sizes": [1.05], "weight": 0.01}
    found = tune.tune_stream(BUSY, laboratory(faults=[SHIFTS, hardly]), 1, grid=QUICK_GRID)
    assert [one.watches for one in found.plan.monitors] == ["shift"]
    assert found.plan.monitors[0].budget_per_day == pytest.approx(1 / 30)
    assert found.reasons is not None and "does not pay" in found.reasons.together


def test_where_only_noise_is_guarded_against_the_one_monitor_watches_for_imprecision() -> None:
    plan = tune_stream(BUSY, laboratory(faults=[NOISE]), 1)
    assert [one.watches for one in plan.monitors] == ["imprecision"]
    assert "4 times the analytic SD" in plan.reason


def test_two_monitors_that_are_kept_get_new_limits_and_keep_their_parts_of_the_budget() -> None:
    plan, _ = both_looked_for()
    lab = laboratory(faults=[SHIFTS, NOISE])
    name = str(SODIUM)
    again = tune.tune_stream(BUSY, lab, 1, kept={name: plan}, budgets={name: 1 / 15}).plan
    assert [one.statistic for one in again.monitors] == [one.statistic for one in plan.monitors]
    for before, after in zip(plan.monitors, again.monitors, strict=True):
        assert after.budget_per_day == pytest.approx(2 * before.budget_per_day)
        assert after.limits.ends[1] < before.limits.ends[1]


def test_more_alarms_buy_fewer_unreliable_results_with_two_monitors_too() -> None:
    plan, _ = both_looked_for()
    curve = tune.trade_off(BUSY, laboratory(faults=[SHIFTS, NOISE]), 1, {str(SODIUM): plan})
    assert (np.diff(curve.budget) > 0).all()
    assert curve.cost[-1] < curve.cost[0]


def test_a_statistic_for_imprecision_by_hand_needs_noise_among_the_errors() -> None:
    with pytest.raises(InputError, match=r"sd is not tried for sodium.*\[analytes.sodium\] lists under faults"):
        tune_stream(BUSY, laboratory(faults=[SHIFTS]), 1, ByHand(statistic="sd"))
    plan = tune_stream(BUSY, laboratory(faults=[SHIFTS, NOISE]), 1, ByHand(statistic="sd", parameter=40))
    assert [(one.statistic, one.window) for one in plan.monitors if one.watches == "imprecision"] == [("sd", 40)]


def test_the_reasons_hold_everything_that_was_tried_and_what_the_runners_up_would_have_cost() -> None:
    _, reasons = both_looked_for()
    shift, _ = reasons.searches
    scored = [score for surface in shift.surfaces for row in surface.scores for score in row if score is not None]
    assert len(scored) == shift.candidates == shift.rounds[0][0]
    assert shift.rounds[0][0] > shift.rounds[-1][0] and shift.rounds[0][1] < shift.rounds[-1][1]
    assert {surface.statistic for surface in shift.surfaces} == {"EWMA", "moving mean", "moving median"}
    assert len(shift.runners_up) == 2
    assert all(one.score == pytest.approx(shift.score * (1 + one.costs), rel=0.01) for one in shift.runners_up)
    assert [one.score for one in shift.runners_up] == sorted(one.score for one in shift.runners_up)
    assert shift.score < shift.schedule_alone
    assert {row for surface in shift.surfaces for row in surface.rows} <= set(range(len(reasons.truncations)))


def test_the_reasons_say_what_each_truncation_keeps_and_how_much_of_a_shift_it_lets_through() -> None:
    _, reasons = both_looked_for()
    stretch = Surroundings.of(SODIUM, laboratory(), 1).stretch(BUSY.rows(slice(0, 20 * 200)))
    for one in reasons.truncations:
        inside = np.ones(len(stretch.value), dtype=bool)
        if one.mode == "truncate":
            inside &= stretch.value >= (-math.inf if one.low is None else one.low)
            inside &= stretch.value <= (math.inf if one.high is None else one.high)
        assert one.keeps == pytest.approx(inside.mean(), abs=6e-4)
    none, *others = sorted(reasons.truncations, key=lambda one: -one.moves)
    assert none.low is None and none.moves == pytest.approx(1, abs=0.02)
    assert min(one.moves for one in others) < 0.8
