"""Chance of an unreliable result: against integration, against drawing errors, and what must hold whatever the numbers."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

from pbm.methods.seeds import child
from pbm.methods.unreliable import ErrorModel, chance_beyond, chance_unreliable

TEA = st.floats(0.5, 20)
BIAS = st.floats(-30, 30)
SD = st.floats(0.05, 5)


def beyond(tea: float, bias: float, sd: float) -> float:
    return float(chance_beyond(np.array(tea), np.array(bias), np.array(sd)))


@given(TEA, BIAS, SD)
def test_the_chance_beyond_tea_is_the_integral_of_the_normal_density(tea: float, bias: float, sd: float) -> None:
    low, high = (min(max(end / sd, -40.0), 40.0) for end in (-tea - bias, tea - bias))
    inside, _ = quad(norm.pdf, low, high, limit=400, points=[0.0, -5.0, 5.0])
    assert beyond(tea, bias, sd) == pytest.approx(1 - inside, abs=1e-9)


@pytest.mark.parametrize(("bias", "multiple"), [(0.0, 2.0), (2.0, 1.0), (-3.0, 1.0), (1.0, 1.7)])
def test_errors_drawn_at_random_are_as_often_beyond_tea(bias: float, multiple: float) -> None:
    random, runs = child(1, "errors", bias, multiple), 400_000
    model = ErrorModel(tea_absolute=2.5, tea_percent=5.0, sd_absolute=0.5, cv_percent=1.5)
    for x in (10.0, 50.0, 120.0):
        at = np.array([x])
        tea, sd = model.tea(at)[0], model.sd(at)[0]
        faulty = np.abs(bias + multiple * sd * random.standard_normal(runs)) > tea
        in_control = np.abs(sd * random.standard_normal(runs)) > tea
        ours = chance_unreliable(model.tea(at), np.array([bias]), model.sd(at), multiple)[0]
        error = math.hypot(faulty.std(), in_control.std()) / math.sqrt(runs)
        assert ours == pytest.approx(faulty.mean() - in_control.mean(), abs=3.5 * error + 1e-9)


@given(TEA, BIAS, SD)
def test_both_signs_of_a_bias_are_alike(tea: float, bias: float, sd: float) -> None:
    assert beyond(tea, bias, sd) == pytest.approx(beyond(tea, -bias, sd), abs=1e-15)


@given(TEA, st.floats(0, 30), st.floats(0, 5), SD)
def test_a_larger_bias_makes_more_results_unreliable(tea: float, bias: float, more: float, sd: float) -> None:
    assert beyond(tea, bias + more, sd) >= beyond(tea, bias, sd) - 1e-15


@given(TEA, SD, st.floats(1, 4), st.floats(0, 2))
def test_more_imprecision_makes_more_results_unreliable(tea: float, sd: float, multiple: float, more: float) -> None:
    less, greater = (
        chance_unreliable(np.array(tea), np.array(0.0), np.array(sd), m) for m in (multiple, multiple + more)
    )
    assert 0 <= less <= greater + 1e-15 <= 1 + 1e-15


@given(TEA, SD)
def test_without_a_fault_no_result_counts_as_unreliable(tea: float, sd: float) -> None:
    assert chance_unreliable(np.array(tea), np.array(0.0), np.array(sd)) == 0


def test_without_analytic_error_a_result_is_unreliable_if_the_bias_exceeds_tea() -> None:
    bias = np.array([-4.1, -4.0, -3.9, 0.0, 3.9, 4.0, 4.1])
    zero = np.zeros(7)
    assert chance_beyond(zero + 4.0, bias, zero).tolist() == [1, 0, 0, 0, 0, 0, 1]
    assert chance_unreliable(zero + 4.0, bias, zero).tolist() == [1, 0, 0, 0, 0, 0, 1]


def test_a_result_of_zero_whose_limits_are_percentages_is_reliable_as_it_is() -> None:
    """Neither TEa nor SD nor a proportional bias: nothing divided by nothing would spoil every sum it enters."""
    percentages = ErrorModel(0.0, 10.0, 0.0, 2.0)
    x = np.array([0.0, 5.0])
    chances = chance_unreliable(percentages.tea(x), 0.2 * x, percentages.sd(x))
    assert chances.tolist() == [0.0, pytest.approx(1.0, abs=1e-6)]


@given(st.floats(0.01, 50), st.floats(0.1, 40), st.floats(0, 1000))
def test_the_greater_of_both_limits_counts_and_they_cross_where_they_are_equal(
    absolute: float, percent: float, x: float
) -> None:
    model = ErrorModel(absolute, percent, 1.0, 0.0)
    crossing = 100 * absolute / percent
    tea = float(model.tea(np.array(x)))
    assert tea == pytest.approx(absolute if x <= crossing else percent * x / 100)
    assert tea == float(model.tea(np.array(-x)))


@given(st.floats(0, 5), st.floats(0, 20), st.floats(-500, 500))
def test_the_parts_of_the_analytic_sd_add_as_squares(absolute: float, cv: float, x: float) -> None:
    sd = float(ErrorModel(1.0, 0.0, absolute, cv).sd(np.array(x)))
    assert sd == pytest.approx(math.sqrt(absolute**2 + (cv / 100 * x) ** 2), abs=1e-12)
