"""Runs of near-identical values: found where they were put, and not where independent results lie close by chance."""

import numpy as np
import pytest

from pbm.methods.steady_runs import find_steady_runs


def patients(seed: int, n: int = 30_000) -> np.ndarray:
    return np.rint(np.random.default_rng(seed).normal(139, 3.5, n))


@pytest.mark.parametrize("seed", range(5))
def test_independent_results_in_coarse_steps_have_no_runs(seed: int):
    x = patients(seed)
    assert find_steady_runs(x, np.full(len(x), 0.9), 1.0) == []


def test_control_material_in_between_is_found_where_it_is():
    x = np.random.default_rng(1).lognormal(4.4, 0.5, 20_000).round()
    x[5000:5015] = np.random.default_rng(2).normal(110, 2.0, 15).round()
    (run,) = find_steady_runs(x, np.hypot(1.2, 0.018 * x), 1.0)
    assert abs(run.first - 5000) <= 1
    assert abs(run.last - 5014) <= 1
    assert 100 < run.lowest <= run.highest < 120
    assert run.expected < 0.001


def test_one_value_again_and_again_is_a_run():
    x = patients(3)
    x[100:125] = 146.0
    (run,) = find_steady_runs(x, np.full(len(x), 0.9), 1.0)
    assert (run.lowest, run.highest) <= (146.0, 146.0)
    assert run.first <= 100
    assert run.last >= 124


def test_a_round_of_patients_who_are_alike_but_vary_more_than_the_method_is_no_run():
    random = np.random.default_rng(4)
    x = random.lognormal(4.4, 0.4, 20_000).round()
    x[3000:3020] = random.lognormal(6.5, 0.3, 20).round()
    assert find_steady_runs(x, np.hypot(1.2, 0.018 * x), 1.0) == []


def test_few_results_and_results_that_are_all_the_same_have_none():
    assert find_steady_runs(np.array([1.0, 2.0]), np.ones(2), 1.0) == []
    assert find_steady_runs(np.full(500, 7.0), np.ones(500), 1.0) == []
    assert find_steady_runs(np.zeros(0), np.zeros(0), 1.0) == []
