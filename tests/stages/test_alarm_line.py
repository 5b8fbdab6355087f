"""An alarm as a line of text."""

from dataclasses import replace
from datetime import date, datetime

import pytest

from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.laboratory import Analyte
from pbm.stages.alarm_line import alarm_line
from pbm.stages.estimate import WINDOW
from tests.live_laboratory import SODIUM_2, laboratory

LAB = laboratory()
ZONE = LAB.laboratory.zone


def at(clock: str, day: int = 2) -> int:
    local = datetime.fromisoformat(f"2031-03-{day:02d} {clock}").replace(tzinfo=ZONE)
    return round(local.timestamp()) * 1_000_000


ALARM = Alarm(
    stream=SODIUM_2,
    monitor=0,
    time=at("07:41:12"),
    specimen="31-1",
    side="HIGH",
    statistic="ewma",
    value=141.6,
    limit=141.3,
    shown=141.6,
    shown_limit=141.3,
    estimate=OnsetEstimate(at("07:05"), at("06:50"), at("07:12"), 41, 2.1, 0.525, 3.2),
    last_control=at("06:00"),
)


def line(alarm: Alarm, analyte: Analyte = LAB.analytes["sodium"]) -> str:
    return alarm_line(alarm, analyte, ZONE, date(2031, 3, 2))


def test_the_line_says_what_the_bench_needs_in_its_order() -> None:
    assert line(ALARM) == (
        "07:41:12  sodium line-2  HIGH  EWMA 141.6 > 141.3  about +2.1 mmol/L (0.5 TEa)  since ~07:05 (41 results)  "
        "expect 3 unreliable  last control 06:00"
    )


def test_a_line_read_on_another_day_or_in_a_log_says_its_day() -> None:
    for today in (None, date(2031, 3, 3)):
        assert alarm_line(ALARM, LAB.analytes["sodium"], ZONE, today).startswith("2031-03-02 07:41:12  sodium line-2")


@pytest.mark.parametrize(("passed", "told"), [(True, "06:00 passed"), (False, "06:00 failed"), (None, "06:00")])
def test_the_outcome_of_the_last_control_is_told_where_it_was_recorded(passed: bool | None, told: str) -> None:
    assert line(replace(ALARM, last_control_passed=passed)).endswith(f"last control {told}")


def test_a_low_alarm_is_below_its_limit() -> None:
    assert "LOW  EWMA 138.1 < 138.5" in line(replace(ALARM, side="LOW", shown=138.1, shown_limit=138.5))


def test_a_statistic_close_to_its_limit_is_told_apart_from_it() -> None:
    assert "EWMA 141.302 > 141.300" in line(replace(ALARM, shown=141.302, shown_limit=141.3))


def test_another_day_is_written_out() -> None:
    given = replace(ALARM.estimate, onset=at("23:50", day=1))  # type: ignore[type-var]
    assert "since ~2031-03-01 23:50 (41 results)" in line(replace(ALARM, estimate=given))
    assert line(replace(ALARM, last_control=at("22:00", day=1))).endswith("last control 2031-03-01 22:00")


@pytest.mark.parametrize(("expected", "told"), [(0.2, "<1"), (0.5, "<1"), (0.7, "1"), (12.4, "12")])
def test_expected_unreliable_results_are_told_in_whole_numbers(expected: float, told: str) -> None:
    given = replace(ALARM.estimate, expected_unreliable=expected)  # type: ignore[type-var]
    assert f"expect {told} unreliable" in line(replace(ALARM, estimate=given))


def test_one_result_is_one_result() -> None:
    assert "(1 result)" in line(replace(ALARM, estimate=replace(ALARM.estimate, results=1)))  # type: ignore[type-var]


def test_beyond_the_results_that_are_looked_at_there_may_be_more() -> None:
    given = replace(ALARM.estimate, results=WINDOW)  # type: ignore[type-var]
    assert f"({WINDOW} results or more)" in line(replace(ALARM, estimate=given))


def test_digits_follow_the_step_in_which_results_are_reported() -> None:
    assert "about +2.100 mIU/L" in line(ALARM, LAB.analytes["tsh"])
    tens = LAB.analytes["sodium"].model_copy(update={"step": 10.0})
    assert "about +2.1 mmol/L" in line(ALARM, tens)


def test_what_is_not_known_is_left_out() -> None:
    assert line(replace(ALARM, estimate=None, last_control=None)) == "07:41:12  sodium line-2  HIGH  EWMA 141.6 > 141.3"
