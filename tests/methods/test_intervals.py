"""Intervals of counts and shares, and the bootstrap over days: coverage, the general libraries, and days kept whole."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import binom, binomtest, poisson
from statsmodels.stats.proportion import proportion_confint
from statsmodels.stats.rates import confint_poisson

from pbm.methods.intervals import (
    binomial_interval,
    bootstrap_interval,
    day_weights,
    poisson_interval,
    rate_ratio,
    rates_differ,
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


@given(st.lists(st.integers(0, 9), min_size=1, max_size=40))
def test_a_bootstrap_draw_takes_whole_days_as_many_as_there_are(days: list[int]) -> None:
    weights = day_weights(np.array(days), 20, np.random.default_rng(1))
    labels = sorted(set(days))
    for draw in weights:
        of_day = {day: {w for w, d in zip(draw.tolist(), days, strict=True) if d == day} for day in labels}
        assert all(len(found) == 1 for found in of_day.values()), "every result of a day counts as often"
        assert sum(next(iter(found)) for found in of_day.values()) == len(labels)


def test_the_bootstrap_over_days_covers_a_mean_of_results_that_hang_together_within_days() -> None:
    """Results of a day share half of their variance: an interval that took them for independent would cover far too seldom."""
    days, per_day, runs, covered, naive = 40, 25, 200, 0, 0
    place = np.repeat(np.arange(days), per_day)
    for run in range(runs):
        random = child(run, "bootstrap")
        x = random.standard_normal(days)[place] + random.standard_normal(days * per_day)
        low, high = bootstrap_interval(lambda w, x=x: float(np.average(x, weights=w)), day_weights(place, 200, random))  # type: ignore[misc]
        covered += low <= 0 <= high
        naive += abs(x.mean()) <= 1.645 * x.std() / math.sqrt(len(x))
    assert 0.84 < covered / runs < 0.94
    assert naive / runs < 0.5
