"""Repeats of one patient, against a slow, obvious count."""

import numpy as np

from pbm.methods.clock_time import MICROSECONDS_PER_DAY
from pbm.methods.repeats import count_repeats


def test_shares_are_those_of_a_slow_count():
    random = np.random.default_rng(1)
    time = np.sort(random.integers(0, 40 * MICROSECONDS_PER_DAY, 600))
    patient, x = random.integers(0, 150, 600), random.standard_normal(600)
    last: dict[int, int] = {}
    day = week = ever = 0
    for t, p in zip(time.tolist(), patient.tolist(), strict=True):
        if p in last:
            ever += 1
            day += t - last[p] <= MICROSECONDS_PER_DAY
            week += t - last[p] <= 7 * MICROSECONDS_PER_DAY
        last[p] = t
    found = count_repeats(time, patient, x)
    assert (found.within_day, found.within_week, found.ever) == (day / 600, week / 600, ever / 600)
    assert found.most == np.bincount(patient).max()
    assert found.known == 600


def test_a_single_result_repeats_nothing():
    found = count_repeats(np.array([5]), np.array([0]), np.array([1.0]))
    assert (found.ever, found.most, found.most_spread) == (0.0, 1, 0.0)
