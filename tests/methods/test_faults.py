"""Faults: what is added, in which unit, and in which order it is rounded and censored."""

import math
from collections.abc import Callable
from typing import Literal

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.faults import Chance, Fault, Reporting, inflict
from pbm.methods.jit import Floats
from pbm.methods.reported_step import multiples
from pbm.methods.seeds import child
from pbm.methods.unreliable import ErrorModel
from tests import naive

ERROR = ErrorModel(tea_absolute=4.0, tea_percent=0.0, sd_absolute=0.9, cv_percent=0.0)
RELATIVE = ErrorModel(tea_absolute=6.0, tea_percent=15.0, sd_absolute=0.3, cv_percent=2.0)
FINE = Reporting(1e-6)
MANY = 200_000


def chance(count: int, name: str = "chance") -> Chance:
    return Chance.draw(count, child(1, "faults", name))


def under(fault: Fault, x: Floats, error: ErrorModel = ERROR, reporting: Reporting = FINE) -> Floats:
    """Reported values of uncensored results."""
    return inflict(x, np.zeros(len(x)), fault, error, reporting, chance(len(x)))[0]


@pytest.mark.parametrize("step", ["1", "0.1", "0.05", "0.25", "2", "0.01", "20", "0.3"])
def test_reported_values_are_the_decimal_numbers_people_write(step: str) -> None:
    raw = child(2, step).uniform(-3, 300, 2_000) * float(step)
    values, censor = Reporting(float(step), 4 * float(step), 200 * float(step)).report(raw)
    expected = [naive.reported(x, step, 4 * float(step), 200 * float(step)) for x in raw.tolist()]
    assert list(zip(values.tolist(), censor.tolist(), strict=True)) == expected


@given(st.integers(-100_000, 100_000), st.sampled_from(["1", "0.1", "0.01", "0.05", "0.2", "2.5", "0.0001", "50"]))
def test_a_multiple_of_the_step_is_the_number_its_text_stands_for(count: int, step: str) -> None:
    text = str(naive.Decimal(count) * naive.Decimal(step))
    assert multiples(np.array([float(count)]), float(step)).tolist() == [float(text)]


def test_a_result_is_rounded_before_it_is_censored() -> None:
    values, censor = Reporting(1.0, 5.0, 10.0).report(np.array([4.4, 4.6, 5.4, 10.4, 10.6]))
    assert values.tolist() == [5, 5, 5, 10, 10]
    assert censor.tolist() == [-1, 0, 0, 0, 1]


def test_the_fault_is_added_before_the_rounding() -> None:
    """Rounding first would leave every result a whole number plus 0.3."""
    x = np.rint(child(3, "x").normal(140, 3, MANY))
    values = under(Fault("shift", 0.3, "unit"), x, reporting=Reporting(1.0))
    assert (values == np.rint(values)).all()
    assert set(np.unique(values - x)) == {0.0, 1.0}


@pytest.mark.parametrize("sign", [-1, 1])
@pytest.mark.parametrize("step", [1.0, 0.1])
@pytest.mark.parametrize("part", [0.1, 0.25, 0.5, 1.5])
def test_a_shift_of_part_of_a_step_moves_the_mean_by_that_part(sign: int, step: float, part: float) -> None:
    x = multiples(np.rint(child(4, "x").normal(40, 4, MANY)), step)
    moved = under(Fault("shift", part * step, "unit", sign), x, reporting=Reporting(step)) - x
    assert moved.mean() == pytest.approx(sign * part * step, abs=4 * moved.std() / math.sqrt(MANY))


Kind = Literal["shift", "drift", "noise", "sporadic"]


@pytest.mark.parametrize("step", [1.0, 0.1, 0.05])
@pytest.mark.parametrize(
    "fault",
    [
        Fault("shift", 0.0, "TEa"),
        Fault("drift", 0.0, "percent", over=50),
        Fault("sporadic", 0.0, "SD", share=0.3),
        Fault("noise", 1.0, ""),
    ],
)
def test_a_fault_of_no_size_changes_nothing(fault: Fault, step: float) -> None:
    random = child(5, "identity")
    x = multiples(random.integers(10, 3000, 20_000).astype(float), step)
    censor = random.choice([-1.0, 0.0, 0.0, 0.0, 1.0], len(x))
    x = np.where(censor < 0, 10 * step, np.where(censor > 0, 3000 * step, x))
    values, marks = inflict(x, censor, fault, RELATIVE, Reporting(step, 10 * step, 3000 * step), chance(len(x)))
    assert values.tobytes() == x.tobytes()
    assert (marks == censor).all()


@pytest.mark.parametrize("kind", ["shift", "sporadic", "noise"])
def test_a_censored_result_stays_as_it_was_reported(kind: Kind) -> None:
    """Its raw value is not known; shown at its limit it would tell the monitor more than the laboratory saw."""
    x, censor = np.full(1000, 5.0), np.full(1000, -1.0)
    fault = Fault(kind, 3.0, "" if kind == "noise" else "TEa", share=0.5)
    values, marks = inflict(x, censor, fault, ERROR, Reporting(1.0, 5.0), chance(1000))
    assert (values == 5.0).all() and (marks == -1.0).all()


def test_a_result_that_a_fault_takes_beyond_the_methods_limits_is_censored_there() -> None:
    x = np.array([6.0, 7.0, 198.0, 150.0])
    values, marks = inflict(
        x, np.zeros(4), Fault("shift", 1.0, "TEa", -1), ERROR, Reporting(1.0, 5.0, 200.0), chance(4)
    )
    assert values.tolist()[:2] == [5.0, 5.0] and marks.tolist() == [-1, -1, 0, 0]
    values, marks = inflict(x, np.zeros(4), Fault("shift", 1.0, "TEa", 1), ERROR, Reporting(1.0, 5.0, 200.0), chance(4))
    assert values[2] == 200.0 and marks.tolist() == [0, 0, 1, 0]


@pytest.mark.parametrize(
    ("unit", "expected"),
    [
        ("unit", lambda x: np.full_like(x, 0.5)),
        ("percent", lambda x: 0.005 * x),
        ("TEa", lambda x: 0.5 * np.maximum(6.0, 0.15 * x)),
        ("SD", lambda x: 0.5 * np.sqrt(0.3**2 + (0.02 * x) ** 2)),
    ],
)
@pytest.mark.parametrize("sign", [-1, 1])
def test_sizes_are_in_the_unit_that_is_named(unit: str, expected: Callable[[Floats], Floats], sign: int) -> None:
    x = np.linspace(1, 300, 1000)
    bias = Fault("shift", 0.5, unit, sign).bias(x, RELATIVE)
    np.testing.assert_allclose(bias, sign * expected(x), rtol=1e-14)
    np.testing.assert_allclose(under(Fault("shift", 0.5, unit, sign), x, RELATIVE) - x, bias, atol=2e-6)


@pytest.mark.parametrize("multiple", [1.5, 2.0, 3.0])
def test_noise_multiplies_the_analytic_sd_as_said(multiple: float) -> None:
    """On results that already hold the analytic SD once."""
    random = child(6, "noise")
    true = 100.0
    x = true + RELATIVE.sd(np.array([true])) * random.standard_normal(MANY)
    noisy = under(Fault("noise", multiple, ""), x, RELATIVE)
    assert noisy.mean() == pytest.approx(true, abs=5 * noisy.std() / math.sqrt(MANY))
    assert noisy.std() == pytest.approx(multiple * RELATIVE.sd(np.array([true]))[0], rel=5 / math.sqrt(2 * MANY))


@pytest.mark.parametrize("share", [0.05, 0.5, 1.0])
def test_a_sporadic_fault_meets_the_share_of_results_that_is_said(share: float) -> None:
    moved = under(Fault("sporadic", 2.0, "unit", share=share), np.full(MANY, 100.0)) - 100.0
    hit = moved > 1.0
    assert hit.mean() == pytest.approx(share, abs=4 * math.sqrt(share * (1 - share) / MANY) + 1e-12)
    np.testing.assert_allclose(moved[hit], 2.0, atol=2e-6)
    np.testing.assert_allclose(moved[~hit], 0.0, atol=2e-6)


def test_a_drift_grows_evenly_to_its_full_size_and_stays_there() -> None:
    drift = Fault("drift", 2.0, "TEa", -1, over=5)
    ages = np.arange(1.0, 9.0)
    assert drift.growth(ages) == pytest.approx([0.2, 0.4, 0.6, 0.8, 1, 1, 1, 1])
    values, _ = inflict(np.full(8, 100.0), np.zeros(8), drift, ERROR, FINE, chance(8), drift.growth(ages))
    assert values - 100 == pytest.approx(-8.0 * drift.growth(ages), abs=1e-5)
    assert (Fault("shift", 2.0, "TEa", over=5).growth(ages) == 1).all()


def test_both_signs_meet_the_same_chance() -> None:
    x = np.full(1000, 100.0)
    up, down = (under(Fault("shift", 0.25, "unit", sign), x) - x for sign in (1, -1))
    assert up.mean() == pytest.approx(0.25, abs=1e-5) and down.mean() == pytest.approx(-0.25, abs=1e-5)


def test_a_fault_is_labelled_as_people_write_it() -> None:
    assert str(Fault("shift", 0.5, "TEa", -1)) == "shift -0.5 TEa"
    assert str(Fault("drift", 2.0, "SD", 1, over=9)) == "drift +2 SD over 9 results"
    assert str(Fault("sporadic", 3.0, "SD", -1, share=0.2)) == "sporadic -3 SD in 0.2 of results"
    assert str(Fault("noise", 2.0, "")) == "noise x2"
