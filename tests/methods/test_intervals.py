"""Intervals of counts, shares and sums: coverage, and the general libraries."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import binom, binomtest, poisson
from statsmodels.stats.proportion import proportion_confint
from statsmodels.stats.rates import confint_poisson

from pbm.methods.intervals import (
    binomial_interval,
    poisson_interval,
    rate_ratio,
    rates_differ,
    sum_interval,
    weighted_poisson_interval,
)
from pbm.methods.seeds import child

LEVELS = st.sampled_from([0.5, 0.8, 0.9, 0.95, 0.99])


@given(st.integers(0, 3000), LEVELS)
def test_poisson_intervals_are_those_of_statsmodels(count: int, level: float) -> None:
    ours, theirs = poisson_interval(count, level), confint_poisson(count, 1, method="exact-c", alpha=1 - level)
    assert ours == pytest.approx(np.nan_to_num(theirs), rel=1e-9)


@given(st.integers(0, 200), st.integers(0, 200), LEVELS)
def test_binomial_intervals_are_those_of_scipy_and_statsmodels(successes: int, others: int, level: float) -> None:
    if (trials := successes + others) == 0:
        return
    ours = binomial_interval(successes, trials, level)
    theirs = binomtest(successes, trials).proportion_ci(level, method="exact")
    assert ours == pytest.approx(tuple(theirs), rel=1e-9, abs=1e-12)
    assert ours == pytest.approx(proportion_confint(successes, trials, 1 - level, method="beta"), rel=1e-9, abs=1e-12)


@pytest.mark.parametrize("expected", [0.05, 0.7, 1.33, 2.67, 5.0, 11.2, 40.0])
@pytest.mark.parametrize("level", [0.9, 0.95])
def test_an_exact_poisson_interval_covers_at_least_as_often_as_it_says(expected: float, level: float) -> None:
    counts = np.arange(0, 200)
    covers = [low <= expected <= high for low, high in (poisson_interval(int(c), level) for c in counts)]
    assert float(poisson.pmf(counts, expected)[covers].sum()) >= level


@pytest.mark.parametrize("share", [0.01, 0.2, 0.5, 0.93])
@pytest.mark.parametrize("trials", [7, 40])
def test_an_exact_binomial_interval_covers_at_least_as_often_as_it_says(share: float, trials: int) -> None:
    counts = np.arange(trials + 1)
    covers = [low <= share <= high for low, high in (binomial_interval(int(c), trials) for c in counts)]
    assert float(binom.pmf(counts, trials, share)[covers].sum()) >= 0.9


@given(st.integers(0, 40), st.integers(0, 40), st.floats(1, 500), st.floats(1, 500))
def test_the_interval_of_a_ratio_of_rates_turns_over_with_the_rates(a: int, b: int, ta: float, tb: float) -> None:
    ratio, low, high = rate_ratio(a, ta, b, tb)
    turned = rate_ratio(b, tb, a, ta)
    if a and b:
        assert low < ratio < high
        assert (1 / turned[0], 1 / turned[2], 1 / turned[1]) == pytest.approx((ratio, low, high), rel=1e-9)


@given(st.integers(1, 40), st.integers(1, 40), st.floats(1, 500), st.floats(1, 500))
def test_rates_differ_is_the_binomial_test_of_the_share(a: int, b: int, ta: float, tb: float) -> None:
    assert rates_differ(a, ta, b, tb) == pytest.approx(binomtest(a, a + b, ta / (ta + tb)).pvalue)


@given(st.lists(st.integers(0, 30), min_size=1, max_size=12), LEVELS)
def test_a_sum_of_counts_of_one_weight_has_the_exact_interval(counts: list[int], level: float) -> None:
    low, high = weighted_poisson_interval(counts, [2.5] * len(counts), level)
    assert (low, high) == pytest.approx(tuple(2.5 * end for end in poisson_interval(sum(counts), level)), rel=1e-9)


def test_a_weighted_sum_of_counts_is_covered_at_least_as_often_as_said() -> None:
    random, expected, weights = child(8, "sum"), np.array([0.4, 3.0, 1.2]), [0.75, 0.5, 1.5]
    counts = random.poisson(expected, (4000, 3))
    true = float(expected @ weights)
    held = [low <= true <= high for low, high in (weighted_poisson_interval(c.tolist(), weights) for c in counts)]
    assert np.mean(held) >= 0.88
    assert weighted_poisson_interval([], []) == (0.0, 0.0)


def test_the_interval_of_a_sum_of_normal_figures_is_that_of_their_sum() -> None:
    spreads = [1.0, 2.0, 2.0]
    figures = [(x, x - 1.645 * s, x + 1.645 * s) for x, s in zip([5.0, 1.0, -2.0], spreads, strict=True)]
    assert sum_interval(figures) == pytest.approx((4.0, 4.0 - 1.645 * 3, 4.0 + 1.645 * 3))
    assert sum_interval([]) == (0.0, 0.0, 0.0)
