"""Local days of 23 and 25 hours, and local texts that the standard library agrees with."""

from collections import Counter
from datetime import date, datetime

import numpy as np
import pytest

from synthetic_streams.clock import HOUR, SECOND, ZONE, hours, local_text, utc_text


@pytest.mark.parametrize(
    ("day", "length"), [(date(2031, 3, 30), 23), (date(2031, 3, 29), 24), (date(2031, 10, 26), 25)]
)
def test_a_day_has_as_many_hours_as_the_clock_change_leaves(day: date, length: int) -> None:
    assert len(hours(day, 1).start) == length


def test_the_repeated_autumn_hour_is_one_local_hour_twice() -> None:
    table = hours(date(2031, 10, 26), 1)
    assert Counter(table.hour.tolist())[0] == 2
    assert len(set(table.start.tolist())) == 25


def test_local_text_is_what_the_standard_library_prints() -> None:
    table = hours(date(2031, 3, 29), 3)
    time = table.start + np.arange(len(table.start)) * 61 * SECOND
    assert local_text(table, time) == [datetime.fromtimestamp(t / SECOND, ZONE).isoformat() for t in time.tolist()]


def test_a_time_beyond_the_last_hour_keeps_the_last_offset() -> None:
    table = hours(date(2031, 6, 1), 1)
    assert local_text(table, table.start[-1:] + 5 * HOUR) == ["2031-06-02T04:00:00+00:00"]


def test_utc_text_ends_in_z() -> None:
    assert utc_text(np.array([0], dtype=np.int64)) == ["1970-01-01T00:00:00Z"]
