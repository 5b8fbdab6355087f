"""One monitor on the live feed: warm-up, the estimate behind an alarm, its settings and its state."""

import math
from datetime import datetime

import pytest

from pbm.errors import FeedError
from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.plan import MonitorPlan
from pbm.records.result import Result
from pbm.stages.estimate import WINDOW
from pbm.stages.monitor import StreamMonitor, settings_hash
from tests.live_laboratory import LAB_TOML, MINUTE, SODIUM, START, TSH, ewma, laboratory, results, shifted_values

LAB = laboratory()


def monitor(plan: MonitorPlan) -> StreamMonitor:
    return StreamMonitor(SODIUM, 0, plan, LAB, "sha")


def alarms(given: StreamMonitor, some: list[Result]) -> list[Alarm]:
    return [alarm for one in some if (alarm := given.take(one))]


def estimate(alarm: Alarm) -> OnsetEstimate:
    assert alarm.estimate is not None
    return alarm.estimate


def test_a_moving_mean_is_not_judged_until_its_window_is_full() -> None:
    given = monitor(ewma(statistic="mean", weight=None, window=20))
    assert not alarms(given, results([170] * 19))
    assert math.isnan(given.value) and given.admitted == 19 and given.needed == 20
    [alarm] = alarms(given, results([170], first=20))
    assert alarm.value == 170.0 and alarm.side == "HIGH"


def test_results_outside_the_truncation_limits_are_counted_and_move_nothing() -> None:
    given = monitor(ewma(admit={"low": 125, "high": 155}))
    alarms(given, results([140, 190, 100, 140]))
    assert (given.taken, given.admitted, given.dropped) == (4, 2, 2)
    assert given.value == 140.0


def test_an_alarm_tells_when_a_shift_began_and_how_large_it_is() -> None:
    values = shifted_values(3, 400, {300: 4.0})
    alarm = next(
        one for one in alarms(monitor(ewma(half_width=2.0)), results(values)) if one.time > START + 300 * MINUTE
    )
    found = estimate(alarm)
    began = START + 300 * MINUTE
    assert found.onset_low <= began <= found.onset_high
    assert abs(found.onset - began) < 15 * MINUTE
    assert 1.0 < found.size < 6.5
    assert found.size_in_tea == pytest.approx(found.size / 4.0)
    assert found.results == (alarm.time - found.onset) // MINUTE + 1
    assert 0 < found.expected_unreliable < found.results
    assert alarm.plan_sha256 == "sha"


def test_offered_results_count_since_the_onset_whether_admitted_or_not() -> None:
    values = [140.0] * 50 + [146.0, 199.0] * 10
    [alarm] = alarms(monitor(ewma(admit={"low": 125, "high": 155}, spread=1.0)), results(values))
    assert estimate(alarm).onset == START + 50 * MINUTE
    assert estimate(alarm).results == (alarm.time - START) // MINUTE - 50 + 1
    assert estimate(alarm).results > 1


def test_the_slope_turns_the_movement_of_admitted_results_into_the_size_of_the_error() -> None:
    values = results([140.0] * 50 + [142.0] * 30)
    sizes = [estimate(alarms(monitor(ewma(slope=slope, spread=1.0)), values)[0]).size for slope in (1.0, 0.8)]
    assert sizes == pytest.approx([1.94, 2.0], abs=0.01), "no size goes beyond the results seen"
    wide = results([140.0, 150.0] * 25 + [142.0] * 30)
    sizes = [
        estimate(alarms(monitor(ewma(centre=145.0, slope=slope, spread=5.0)), wide)[0]).size for slope in (1.0, 0.8)
    ]
    assert sizes[0] < 0 and sizes[1] == pytest.approx(sizes[0] / 0.8)


def test_on_the_logarithm_the_statistic_and_its_limit_are_shown_in_the_unit_of_the_results() -> None:
    plan = ewma(0.0, 0.1, transform="log", spread=0.2)
    given = StreamMonitor(TSH, 0, plan, LAB)
    [alarm] = alarms(given, results([1.0] * 20 + [2.0] * 20, TSH))
    assert alarm.limit == 0.1 and alarm.shown_limit == pytest.approx(math.exp(0.1))
    assert alarm.shown == pytest.approx(math.exp(alarm.value))
    assert estimate(alarm).size == pytest.approx(1.0, abs=0.02)
    assert estimate(alarm).size_in_tea == pytest.approx(estimate(alarm).size / 0.2)


def test_an_alarm_of_an_sd_does_not_claim_a_shift() -> None:
    plan = ewma(3.0, 2.0, statistic="sd", weight=None, window=10, level=140.0, watches="imprecision")
    [alarm] = alarms(monitor(plan), results([140.0, 142.0] * 10 + [150.0, 130.0] * 10))
    assert alarm.estimate is None
    assert alarm.shown == alarm.value


def test_an_sd_without_a_lower_limit_alarms_above_and_never_below() -> None:
    limits = {"high": 5.0}
    plan = ewma(3.0, statistic="sd", weight=None, window=10, level=140.0, watches="imprecision", limits=limits)
    [alarm] = alarms(monitor(plan), results([140.0] * 20 + [140.0, 142.0] * 10 + [150.0, 130.0] * 10 + [140.0] * 20))
    assert (alarm.side, alarm.limit) == ("HIGH", 5.0)


def test_the_last_control_is_the_last_one_scheduled_by_the_clocks_of_the_laboratory() -> None:
    noon = datetime(2031, 3, 2, 12, 0, tzinfo=LAB.laboratory.zone)
    [alarm] = alarms(monitor(ewma()), results([160], start=round(noon.timestamp()) * 1_000_000))
    assert alarm.last_control == round(noon.replace(hour=6).timestamp()) * 1_000_000


def test_where_controls_go_by_counts_the_last_one_is_not_known() -> None:
    import tomllib

    from pbm.records.laboratory import Lab

    by_count = Lab.model_validate(
        tomllib.loads(LAB_TOML.replace('times = ["06:00", "14:00", "22:00"]', 'every = "200 results"'))
    )
    [alarm] = [one for one in [StreamMonitor(SODIUM, 0, ewma(), by_count).take(results([160])[0])] if one]
    assert alarm.last_control is None


def test_only_what_decides_the_course_of_a_monitor_makes_its_settings() -> None:
    base = settings_hash(ewma())
    for told in ({"slope": 0.7}, {"inflation": 2.0}, {"budget_per_day": 1.0}, {"watches": "imprecision"}):
        assert settings_hash(ewma(**told)) == base
    for decides in (
        {"weight": 0.2},
        {"rearm": 0.4},
        {"admit": {"low": 100}},
        {"transform": "log"},
        {"limits": {"low": 139, "high": 141.1}},
        {"baseline": {"wards": {"ED": 0.1}, "hours": [0.0] * 168}},
    ):
        assert settings_hash(ewma(**decides)) != base


@pytest.mark.parametrize("damage", [lambda b: b[:-1], lambda b: b + b"\0", lambda b: b"", lambda b: b"\xff" + b[1:]])
def test_a_damaged_state_is_refused(damage: object) -> None:
    given = monitor(ewma())
    given.take(results([140])[0])
    with pytest.raises(FeedError, match="state of sodium@line-1 in the store is damaged"):
        monitor(ewma()).go_on(damage(given.to_bytes()), [])  # type: ignore[operator]


def test_an_onset_is_looked_for_in_so_many_results_and_no_more() -> None:
    given = monitor(ewma(half_width=5.0))
    some = results([140.5] * (WINDOW + 500) + [160.0] * 20)
    [alarm] = alarms(given, some)
    again = monitor(ewma(half_width=5.0))
    cut = WINDOW + 400
    for one in some[:cut]:
        again.take(one)
    restarted = monitor(ewma(half_width=5.0))
    restarted.go_on(again.to_bytes(), some[cut - WINDOW : cut])
    assert alarms(restarted, some[cut:]) == [alarm]
