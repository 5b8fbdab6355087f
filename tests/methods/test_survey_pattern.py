"""Share of the variance that groups explain: none by chance, the true one where there is one."""

import numpy as np
import pytest

from pbm.methods.survey_pattern import group_means, share_of_variance


def test_groups_of_pure_noise_explain_nothing_on_average():
    random = np.random.default_rng(1)
    shares = [share_of_variance(random.standard_normal(2000), random.integers(0, 168, 2000)) for _ in range(50)]
    assert np.mean(shares) < 0.01


def test_the_share_is_the_true_one():
    random = np.random.default_rng(2)
    group = random.integers(0, 24, 50_000)
    effect = random.standard_normal(24)
    y = effect[group] + 2 * random.standard_normal(50_000)
    true = float(effect.var() / (effect.var() + 4))
    assert share_of_variance(y, group) == pytest.approx(true, abs=0.01)


def test_one_group_or_values_that_do_not_vary_explain_nothing():
    assert share_of_variance(np.arange(10.0), np.zeros(10, dtype=int)) == 0
    assert share_of_variance(np.full(10, 3.0), np.arange(10) % 2) == 0


def test_a_group_without_values_has_no_mean():
    means = group_means(np.array([1.0, 3.0, 5.0]), np.array([0, 0, 2]), 3)
    assert means[[0, 2]].tolist() == [2.0, 5.0]
    assert np.isnan(means[1])
