"""Specimens come when and where each ward's routine says, and from patients who stay themselves."""

import numpy as np
import numpy.typing as npt
import pytest

from synthetic_streams import Laboratory
from synthetic_streams.analytes import BY_KEY
from synthetic_streams.draws import collect
from synthetic_streams.wards import WARDS

CODE = {ward.code: index for index, ward in enumerate(WARDS)}
Counts = npt.NDArray[np.int64]


def counts(laboratory: Laboratory, code: str) -> Counts:
    """Specimens of a ward; shape (weekdays, hours)."""
    table, draws = laboratory.hours, laboratory.draws
    hour = table.of(draws.time[draws.ward == CODE[code]])
    found = np.zeros((7, 24), dtype=np.int64)
    np.add.at(found, (table.weekday[hour], table.hour[hour]), 1)
    return found


def test_general_practice_comes_in_afternoon_waves_and_never_on_sundays(laboratory: Laboratory) -> None:
    found = counts(laboratory, "GP")
    by_hour = found.sum(axis=0)
    assert found[6].sum() == 0
    assert by_hour[13:20].sum() > 0.85 * by_hour.sum()
    assert by_hour[13] > 2 * by_hour[14] and by_hour[16] > 2 * by_hour[17] and by_hour[18] > 1.5 * by_hour[17]


def test_clinics_come_on_weekday_mornings(laboratory: Laboratory) -> None:
    found = counts(laboratory, "CLINIC")
    assert found[5:].sum() == 0
    assert found[:, 8:13].sum() > 0.8 * found.sum()


def test_emergency_never_stops(laboratory: Laboratory) -> None:
    assert (counts(laboratory, "ED") > 0).all()


def test_dialysis_comes_on_monday_wednesday_and_friday_mornings(laboratory: Laboratory) -> None:
    found = counts(laboratory, "DIAL")
    assert found[[0, 2, 4], 7:12].sum() == found.sum() > 0


@pytest.mark.parametrize("index", range(len(WARDS)), ids=CODE)
def test_each_ward_sends_what_its_table_says_within_four_poisson_sd(laboratory: Laboratory, index: int) -> None:
    weeks, rest = divmod(laboratory.days, 7)
    expected = weeks * WARDS[index].per_day * sum(WARDS[index].weekdays)
    assert rest == 0
    assert abs((laboratory.draws.ward == index).sum() - expected) < 4 * np.sqrt(expected)


def test_twice_the_volume_is_twice_the_specimens(laboratory: Laboratory) -> None:
    once, twice = len(laboratory.draws.time), len(collect(laboratory.hours, 2.0, 3).time)
    assert abs(twice - 2 * once) < 4 * np.sqrt(6 * once)


def test_specimens_are_numbered_in_order_of_arrival(laboratory: Laboratory) -> None:
    draws = laboratory.draws
    assert (np.diff(draws.time) >= 0).all()
    assert sorted(set(draws.specimen.tolist())) == draws.specimen.tolist()


def test_inpatients_are_measured_on_several_days_around_their_own_set_point(laboratory: Laboratory) -> None:
    draws, analyte = laboratory.draws, BY_KEY["haemoglobin"]
    rows = np.flatnonzero(draws.ward == CODE["MED"])
    value, who = draws.true_values(analyte, rows), draws.patient[rows]
    day = laboratory.hours.day[laboratory.hours.of(draws.time[rows])]
    _, place, times = np.unique(who, return_inverse=True, return_counts=True)
    days_measured = np.array([len(set(day[who == patient])) for patient in np.unique(who)[:200]])
    assert days_measured.mean() > 2.5
    mean = np.bincount(place, value) / times
    within = np.sqrt(((value - mean[place]) ** 2).sum() / (len(value) - len(times)))
    assert within < 0.4 * value.std()


def test_an_emergency_patient_is_gone_the_next_day(laboratory: Laboratory) -> None:
    draws = laboratory.draws
    rows = np.flatnonzero(draws.ward == CODE["ED"])
    day = laboratory.hours.day[laboratory.hours.of(draws.time[rows])]
    pairs = set(zip(draws.patient[rows].tolist(), day.tolist(), strict=True))
    assert len({patient for patient, _ in pairs}) == len(pairs)


def test_each_chemistry_specimen_goes_to_one_line_and_the_lines_share_alike(laboratory: Laboratory) -> None:
    sodium = BY_KEY["sodium"]
    one, two = (laboratory.draws.measured(sodium, line) for line in sodium.lines)
    assert not set(one.tolist()) & set(two.tolist())
    assert abs(len(one) - len(two)) < 4 * np.sqrt(len(one) + len(two))


def test_all_tests_of_a_specimen_meet_the_same_line(laboratory: Laboratory) -> None:
    draws = laboratory.draws
    sodium = set(draws.measured(BY_KEY["sodium"], "line-1").tolist())
    assert not sodium & set(draws.measured(BY_KEY["calcium"], "line-2").tolist())


def test_tokens_are_distinct_and_say_nothing(laboratory: Laboratory) -> None:
    token = laboratory.draws.patients.token
    assert len(set(token.tolist())) == len(token)
    assert {len(text) for text in token[:50]} == {10}
