"""Rates by hour of the week, and gaps that the hour's own history makes unlikely."""

import numpy as np

from pbm.methods.clock_time import MICROSECONDS_PER_DAY, MICROSECONDS_PER_HOUR
from pbm.methods.survey_volume import rates_and_gaps

MONDAY = 4 * MICROSECONDS_PER_DAY  # 1970-01-05


def arrivals(weeks: int, by_day: float, by_night: float, seed: int = 1) -> np.ndarray:
    """Independent arrivals, more from 8 to 20 than at night, none on Sundays."""
    random = np.random.default_rng(seed)
    times = []
    for hour in range(weeks * 168):
        rate = 0.0 if hour % 168 >= 144 else by_day if 8 <= hour % 24 < 20 else by_night
        times.append(MONDAY + (hour + np.sort(random.random(random.poisson(rate)))) * MICROSECONDS_PER_HOUR)
    return np.concatenate(times).astype(np.int64)


def test_rates_are_those_of_the_hours_of_the_week():
    rates = rates_and_gaps(arrivals(40, 20, 2))[0].reshape(7, 24)
    assert abs(rates[0, 8:20].mean() - 20) < 0.5
    assert abs(rates[2, :8].mean() - 2) < 0.3
    assert rates[6].sum() == 0


def test_quiet_nights_and_sundays_are_no_gaps():
    assert rates_and_gaps(arrivals(40, 20, 1))[1] == []


def test_hours_of_the_day_and_weeks_without_results_are_gaps_with_what_was_likely_in_them():
    local = arrivals(20, 20, 1)
    hour = (local - MONDAY) // MICROSECONDS_PER_HOUR
    lost = ((hour >= 170 + 24 + 8) & (hour < 170 + 24 + 12)) | ((hour >= 10 * 168) & (hour < 12 * 168))
    rates, (short, long) = rates_and_gaps(local[~lost])
    assert abs(rates.reshape(7, 24)[0, 8:20].mean() - 20) < 0.7
    assert 3 < short.hours < 6
    assert 60 < short.expected < 100
    assert 2 * 168 <= long.hours < 3 * 168
    assert abs(long.expected - 2 * 6 * 252) < 150


def test_two_results_make_no_gap():
    assert rates_and_gaps(np.array([MONDAY, MONDAY + 30 * MICROSECONDS_PER_DAY]))[1] == []
    assert rates_and_gaps(np.array([MONDAY]))[1] == []


def test_a_stream_with_a_result_every_other_day_has_no_gaps():
    random = np.random.default_rng(2)
    local = MONDAY + np.sort(random.integers(0, 600 * MICROSECONDS_PER_DAY, 300))
    assert rates_and_gaps(local)[1] == []
