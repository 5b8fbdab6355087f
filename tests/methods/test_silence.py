"""A silence measured in expected results: by hour of the week, over changes of the clocks, with a tail that is measured."""

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.clock_time import MICROSECONDS_PER_DAY, MICROSECONDS_PER_HOUR, hours_of_week
from pbm.methods.intervals import poisson_interval
from pbm.methods.jit import Floats, Integers
from pbm.methods.silence import (
    LONGEST,
    allowed_silence,
    expected_between,
    expected_by_other_weeks,
    expected_in_gaps,
    results_by_hour,
    silence_ends,
)

ZONES = ["UTC", "Atlantic/Azores", "Asia/Kathmandu", "Australia/Lord_Howe"]
MINUTE = 60_000_000
MONDAY = round(datetime(2031, 3, 3, tzinfo=UTC).timestamp()) * 1_000_000


def week_of(day: float, night: float, weekend: float) -> Floats:
    """Rates of a laboratory with days, nights and weekends."""
    hour = np.arange(168)
    rates: Floats = np.where((hour % 24 >= 7) & (hour % 24 < 19), day, night) * np.where(hour >= 120, weekend, 1.0)
    return rates


def arrivals(rates: Floats, days: int, zone: ZoneInfo, seed: int, clump: float = 0.0) -> Integers:
    """Results at those rates; with `clump` the rate of each six hours is multiplied by a gamma factor of that variance."""
    random = np.random.default_rng(seed)
    quarters = MONDAY + np.arange(days * 96) * (MICROSECONDS_PER_HOUR // 4)
    expected = rates[hours_of_week(quarters, zone)] / 4
    if clump:
        expected = expected * np.repeat(random.gamma(1 / clump, clump, days * 4), 24)
    counts = random.poisson(expected)
    time = np.repeat(quarters, counts) + random.integers(0, MICROSECONDS_PER_HOUR // 4, counts.sum())
    return np.sort(time)


def naive_expected(begin: int, end: int, rates: tuple[float, ...], zone: ZoneInfo) -> float:
    """Minute by minute."""
    minutes = np.arange(begin, end, MINUTE)
    return float(np.array(rates)[hours_of_week(minutes, zone)].sum() / 60)


@pytest.mark.parametrize("name", ZONES)
@given(st.integers(0, 400 * 24 * 60), st.integers(0, 3 * 24 * 60))
def test_what_is_expected_between_two_instants_is_the_sum_over_its_minutes(name: str, first: int, minutes: int) -> None:
    rates, zone = tuple(np.arange(168.0)), ZoneInfo(name)
    begin, end = MONDAY + first * MINUTE, MONDAY + (first + minutes) * MINUTE
    assert expected_between(begin, end, rates, zone) == pytest.approx(naive_expected(begin, end, rates, zone))


@pytest.mark.parametrize("name", ZONES)
@given(st.integers(0, 400 * 24 * 3600), st.floats(0.1, 90))
def test_a_silence_ends_where_as_much_was_expected_as_is_allowed(name: str, second: int, allowed: float) -> None:
    zone, rates = ZoneInfo(name), tuple(week_of(12.0, 1.5, 0.4))
    begin = MONDAY + second * 1_000_000
    end = silence_ends(begin, allowed, rates, zone)
    assert end is not None
    assert expected_between(begin, end, rates, zone) == pytest.approx(allowed, abs=1e-6)


def test_where_nothing_is_ever_expected_a_silence_has_no_end() -> None:
    assert silence_ends(MONDAY, 5.0, (0.0,) * 168, ZoneInfo("UTC")) is None
    once = (0.0,) * 167 + (1.0,)
    assert silence_ends(MONDAY, 3.0, once, ZoneInfo("UTC")) is None, f"two weeks ({LONGEST} hours) hold two"


@pytest.mark.parametrize(("month", "day", "expected"), [(3, 30, 5.0), (10, 26, 7.0)])
def test_over_a_change_of_the_clocks_the_hours_of_the_wall_count(month: int, day: int, expected: float) -> None:
    """Sunday 00:00 to 06:00 on the wall has 5 hours in spring and 7 in autumn; the rate is 1 an hour throughout."""
    zone = ZoneInfo("Atlantic/Azores")
    begin, end = (round(datetime(2031, month, day, hour, tzinfo=zone).timestamp()) * 1_000_000 for hour in (0, 6))
    assert expected_between(begin, end, (1.0,) * 168, zone) == pytest.approx(expected)


@pytest.mark.parametrize("name", ZONES)
def test_rates_are_results_over_hours_of_each_hour_of_the_week(name: str) -> None:
    zone, rates = ZoneInfo(name), week_of(40.0, 6.0, 0.5)
    learned = results_by_hour(arrivals(rates, 700, zone, seed=1), zone)
    assert learned.shape == (168,)
    # 100 weeks: each count is Poisson with mean 100 rate; none of 168 strays by five of its SD.
    assert np.all(np.abs(learned - rates) < 5 * np.sqrt(rates / 100))


def test_gaps_of_results_at_those_rates_have_mean_one_and_an_exponential_tail() -> None:
    zone, rates = ZoneInfo("Atlantic/Azores"), week_of(20.0, 2.0, 0.3)
    gaps = expected_in_gaps(arrivals(rates, 300, zone, seed=2), rates, zone)
    assert gaps.mean() == pytest.approx(1.0, abs=0.02)
    assert np.mean(gaps > 3) == pytest.approx(np.exp(-3), rel=0.05)


def test_a_gap_is_measured_by_the_rates_of_the_other_weeks() -> None:
    """The last week brings nothing for five days: by its own rates the gap would look half as long."""
    zone, rates = ZoneInfo("UTC"), week_of(20.0, 20.0, 1.0)
    time = arrivals(rates, 14, zone, seed=5)
    time = time[(time < MONDAY + 8 * MICROSECONDS_PER_DAY) | (time > MONDAY + 13 * MICROSECONDS_PER_DAY)]
    by_all = expected_in_gaps(time, results_by_hour(time, zone), zone)
    by_others = expected_by_other_weeks(time, zone)
    assert by_others.max() == pytest.approx(20 * 120, rel=0.1)
    assert by_all.max() == pytest.approx(20 * 120 / 2, rel=0.1)


@pytest.mark.parametrize("clump", [0.0, 0.5])
def test_in_later_days_silences_longer_than_allowed_come_about_as_often_as_stated(clump: float) -> None:
    """Of 20 streams, some thousand days: the stated rate lies inside the exact 99.9 % interval of the count."""
    zone, rates, per_day, seen, exposure = ZoneInfo("Atlantic/Azores"), week_of(20.0, 2.0, 0.3), 1 / 20, 0, 0.0
    for seed in range(20):
        time = arrivals(rates, 180, zone, seed, clump)
        early, late = (
            time[time < MONDAY + 120 * MICROSECONDS_PER_DAY],
            time[time >= MONDAY + 120 * MICROSECONDS_PER_DAY],
        )
        learned = results_by_hour(early, zone)
        allowed = allowed_silence(expected_by_other_weeks(early, zone), 120.0, per_day)
        seen += int((expected_in_gaps(late, learned, zone) > allowed).sum())
        exposure += 60.0
    low, high = poisson_interval(seen, 0.999)
    assert low <= per_day * exposure <= high, (seen, per_day * exposure)


def test_clumped_results_are_allowed_longer_silences() -> None:
    zone, rates = ZoneInfo("UTC"), week_of(20.0, 2.0, 0.3)
    allowed = []
    for clump in (0.0, 0.8):
        time = arrivals(rates, 180, zone, 3, clump)
        allowed.append(allowed_silence(expected_by_other_weeks(time, zone), 180.0, 1 / 60))
    assert allowed[1] > 1.3 * allowed[0]


def test_a_rarer_false_notice_allows_a_longer_silence() -> None:
    gaps = np.random.default_rng(4).exponential(1.0, 5000)
    found = [allowed_silence(gaps, 100.0, rate) for rate in (2.0, 1.0, 0.1, 0.01)]
    assert found == sorted(found)
    assert np.sum(gaps > found[0]) == pytest.approx(200, rel=0.02)


def test_results_as_even_as_clockwork_allow_a_silence_of_three_of_them() -> None:
    """Without it each gap of clockwork would be as long as the longest ever seen, and told."""
    assert allowed_silence(np.ones(10_000), 100, 1 / 90) == 3.0
    assert allowed_silence(np.ones(10_000), 100, 1.0) == 3.0
