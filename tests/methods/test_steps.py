"""The step found in results is the one in which they were rounded."""

import numpy as np
import pytest

from pbm.methods.steps import quantiles_within_steps, reported_step


@pytest.mark.parametrize("step", [0.001, 0.01, 0.02, 0.05, 0.1, 0.5, 1.0, 2.0, 5.0, 10.0])
@pytest.mark.parametrize("sign", [1, -1])
def test_the_step_is_found(step: float, sign: int):
    x = sign * np.random.default_rng(1).normal(140, 20, 4000)
    assert reported_step(np.round(np.rint(x / step) * step, 6)) == step


def test_a_few_results_off_the_step_do_not_hide_it():
    x = np.rint(np.random.default_rng(1).normal(140, 4, 4000))
    x[7] += 0.5
    assert reported_step(x) == 1.0


def test_too_few_different_values_tell_no_step():
    assert reported_step(np.full(100, 140.0)) is None
    assert reported_step(np.array([1.0, 2.0, 3.0, 4.0] * 50)) is None
    assert reported_step(np.zeros(0)) is None


def test_results_that_are_not_rounded_have_no_step():
    assert reported_step(np.random.default_rng(1).normal(140, 4, 4000)) is None


def test_quartiles_of_coarsely_rounded_results_are_those_before_rounding():
    x = np.random.default_rng(1).normal(139.3, 1.2, 100_000)
    q = np.array([0.25, 0.5, 0.75])
    assert quantiles_within_steps(np.rint(x), 1.0, q) == pytest.approx(
        np.quantile(x, q), abs=0.1
    )  # a tenth of the step
