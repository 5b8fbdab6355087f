"""Day, night and weekend as Python's own calendar tells them."""

from datetime import UTC, datetime, timedelta

import numpy as np

from pbm.methods.part_of_week import hours_of_parts, parts_of_week

START = datetime(2031, 2, 10, tzinfo=UTC)


def test_every_quarter_of_an_hour_of_three_weeks_is_where_the_calendar_puts_it() -> None:
    times = [START + timedelta(minutes=15 * k) for k in range(4 * 24 * 21)]
    local = np.array([round(t.timestamp() * 1e6) for t in times])
    parts = parts_of_week(local)
    for i, t in enumerate(times):
        expected = "weekend" if t.weekday() >= 5 else "day" if 7 <= t.hour < 19 else "night"
        assert [name for name, which in parts.items() if which[i]] == [expected]


def test_the_hours_of_a_week_are_all_told() -> None:
    first = (START - datetime(1970, 1, 1, tzinfo=UTC)).days
    assert hours_of_parts(first, first + 6) == {"day": 60.0, "night": 60.0, "weekend": 48.0}
    assert hours_of_parts(first + 5, first + 5) == {"day": 0.0, "night": 0.0, "weekend": 24.0}
