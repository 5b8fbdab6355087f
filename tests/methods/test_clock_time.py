"""Clock time: days, hours of the week and control events where clocks change, against the wall clock minute by minute."""

from collections.abc import Iterator
from datetime import UTC, date, datetime, timedelta
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.clock_time import control_events, hour_of_week, hours_of_week, local_days, local_microseconds

# Clocks that change by an hour at midnight, by half an hour, not at all at half and three quarters of an hour, and in the other half-year.
ZONES = [
    "Atlantic/Azores",
    "Australia/Lord_Howe",
    "Asia/Kolkata",
    "Asia/Kathmandu",
    "America/St_Johns",
    "Europe/London",
    "UTC",
]
TIMES = ("00:30", "01:30", "02:15", "06:00", "23:59", "00:00")
MICROSECONDS = 1_000_000
MINUTE = timedelta(minutes=1)

each_zone = pytest.mark.parametrize("zone", [ZoneInfo(name) for name in ZONES], ids=str)


def instant(*parts: int) -> int:
    """UTC microseconds of a date and time in UTC."""
    return int(datetime(*parts, tzinfo=UTC).timestamp()) * MICROSECONDS  # type: ignore[misc]


def minutes_around_changes(zone: ZoneInfo, year: int = 2031) -> Iterator[tuple[int, int]]:
    """First and last instant of three days around each change of the clocks; of one January where there is none."""
    hours = [instant(year, 1, 1) + n * 3600 * MICROSECONDS for n in range(365 * 24)]
    offsets = [datetime.fromtimestamp(t / 1e6, zone).utcoffset() for t in hours]
    changes = [hours[i] for i in range(1, len(hours)) if offsets[i] != offsets[i - 1]] or [instant(year, 1, 15)]
    yield from ((t - 36 * 3600 * MICROSECONDS, t + 36 * 3600 * MICROSECONDS) for t in changes)


@each_zone
@given(st.lists(st.integers(0, 2**51), max_size=30))
def test_hours_of_the_week_and_days_are_those_of_the_standard_library(zone: ZoneInfo, times: list[int]) -> None:
    instants = np.array(times, dtype=np.int64)
    assert hours_of_week(instants, zone).tolist() == [hour_of_week(t, zone) for t in times]
    local = [datetime.fromtimestamp(t // MICROSECONDS, zone) for t in times]
    assert local_days(instants, zone).tolist() == [(when.date() - date(1970, 1, 1)).days for when in local]


@each_zone
def test_every_minute_around_a_change_of_the_clocks_has_the_hour_on_the_wall(zone: ZoneInfo) -> None:
    for first, last in minutes_around_changes(zone):
        instants = np.arange(first, last, 60 * MICROSECONDS)
        walls = [datetime.fromtimestamp(int(t) // MICROSECONDS, zone) for t in instants]
        assert hours_of_week(instants, zone).tolist() == [w.weekday() * 24 + w.hour for w in walls]
        assert hours_of_week(instants, zone).tolist() == [hour_of_week(int(t), zone) for t in instants]
        shown = [(w.replace(tzinfo=None) - datetime(1970, 1, 1)) // timedelta(microseconds=1) for w in walls]
        assert local_microseconds(instants, zone).tolist() == shown


def on_the_wall(first: int, last: int, zone: ZoneInfo, weekdays: frozenset[int]) -> list[int]:
    """Control events by looking at the wall clock every minute of some days more than asked for."""
    day = 86_400 * MICROSECONDS
    minutes = range(first - first % day - 2 * day, last + 2 * day, 60 * MICROSECONDS)
    walls = {t: datetime.fromtimestamp(t // MICROSECONDS, zone).replace(tzinfo=None) for t in minutes}
    by_wall: dict[datetime, int] = {}
    for t, wall in walls.items():
        by_wall.setdefault(wall, t)  # of an hour shown twice the first passage
    found = []
    for today in sorted({wall.date() for wall in by_wall})[1:-1]:
        for clock in TIMES if today.weekday() in weekdays else ():
            wanted = datetime.combine(today, datetime.strptime(clock, "%H:%M").time())
            before = max(wall for wall in by_wall if wall <= wanted)
            after = min(wall for wall in by_wall if wall >= wanted)
            jump = after - before - MINUTE if after > before else timedelta()
            found.append(by_wall[wanted + jump])
    return sorted(t for t in found if first <= t <= last)


@each_zone
@pytest.mark.parametrize("weekdays", [frozenset(range(7)), frozenset({6, 0})], ids=["every day", "Sunday and Monday"])
def test_control_events_are_where_the_wall_clock_shows_them(zone: ZoneInfo, weekdays: frozenset[int]) -> None:
    """A time that the clocks leave out is taken as much later as they jump; of one shown twice the first passage counts."""
    for first, last in minutes_around_changes(zone):
        events = control_events(first, last, TIMES, zone, weekdays)
        assert events.tolist() == on_the_wall(first, last, zone, weekdays)


def test_a_control_time_that_the_clocks_leave_out_takes_place_an_hour_later_on_the_wall() -> None:
    azores = ZoneInfo("Atlantic/Azores")
    night = control_events(instant(2031, 3, 30), instant(2031, 3, 30, 12), ("00:30",), azores)
    assert [datetime.fromtimestamp(t / 1e6, azores).strftime("%H:%M") for t in night] == ["01:30"]


def test_a_control_time_shown_twice_takes_place_once() -> None:
    azores = ZoneInfo("Atlantic/Azores")
    night = control_events(instant(2031, 10, 25, 22), instant(2031, 10, 26, 12), ("00:30",), azores)
    assert night.tolist() == [instant(2031, 10, 26, 0, 30)]


def test_events_at_the_ends_of_the_stretch_are_taken_and_none_beyond() -> None:
    first, last = instant(2031, 5, 1, 6), instant(2031, 5, 3, 6)
    utc = ZoneInfo("UTC")
    assert control_events(first, last, ("06:00",), utc).tolist() == [first, instant(2031, 5, 2, 6), last]
    assert control_events(first + 1, last - 1, ("06:00",), utc).tolist() == [instant(2031, 5, 2, 6)]
    assert control_events(first, last, (), utc).tolist() == []
