"""In-control behaviour of admitted values: slope under a true shift, and how much successive values hang together."""

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from scipy.signal import lfilter
from scipy.stats import norm

from pbm.methods.baseline import Mix
from pbm.methods.chain import Preparation
from pbm.methods.faults import Chance, Reporting
from pbm.methods.in_control import inflation, slope, wander
from pbm.methods.jit import Floats
from pbm.methods.seeds import child
from pbm.methods.trials import Stretch
from pbm.methods.unreliable import ErrorModel

MANY = 60_000


def stretch(value: Floats, tea: float, step: float = 1e-6, **given: Any) -> Stretch:
    n = len(value)
    none = np.zeros(n, dtype=np.int64)
    return Stretch(
        np.arange(n),
        value,
        given.get("censor", np.zeros(n)),
        Mix(("",), none, none),
        ErrorModel(tea, 0.0, tea / 5, 0.0),
        Reporting(step, given.get("low", -math.inf)),
        Chance.draw(n, child(1, "chance")),
    )


def normals(mean: float, sd: float) -> Floats:
    return mean + sd * child(2, "normals").standard_normal(MANY)


def test_without_truncation_the_slope_is_one() -> None:
    assert slope(stretch(normals(140, 3), 4.0), Preparation()) == pytest.approx(1.0, abs=1e-6)
    rounded = stretch(np.rint(normals(140, 3)), 4.0, step=1.0)
    assert slope(rounded, Preparation()) == pytest.approx(1.0, abs=0.01)


@pytest.mark.parametrize("k", [1.0, 1.5, 2.0, 3.0])
def test_the_slope_of_a_truncated_mean_is_the_ratio_of_the_variances(k: float) -> None:
    """For normal values and a small shift; check_values.md 5.1 has 0.2911, 0.7737 and 0.9733 for 1, 2 and 3 SD."""
    ratio = 1 - 2 * k * norm.pdf(k) / (2 * norm.cdf(k) - 1)
    found = slope(stretch(normals(140, 3), 0.6), Preparation(140 - 3 * k, 140 + 3 * k))
    assert found == pytest.approx(ratio, abs=0.02)


def test_a_winsorized_mean_moves_by_the_share_of_results_inside() -> None:
    found = slope(stretch(normals(140, 3), 0.6), Preparation(137, 143, winsorize=True))
    assert found == pytest.approx(0.6827, abs=0.02)


def test_the_slope_is_that_of_shifts_to_both_sides() -> None:
    """One limit, far from the shift on one side and near it on the other: shifts of 1 SD, by the moments of a truncated normal."""

    def mean_below(limit: float) -> float:
        return float(-norm.pdf(limit) / norm.cdf(limit))

    up, down = mean_below(0.0) + 1 - mean_below(1.0), mean_below(2.0) - 1 - mean_below(1.0)
    found = slope(stretch(normals(140, 3), 6.0), Preparation(high=143.0))
    assert abs(up - (-down)) > 0.2
    assert found == pytest.approx((up - down) / 2, abs=0.02)


def test_on_the_logarithm_a_shift_moves_lower_results_more_than_the_typical_one() -> None:
    x = np.exp(child(3, "log").normal(3, 0.5, MANY))
    expected = np.mean(1 / x) / (1 / np.median(x))  # d ln x = dx / x
    assert slope(stretch(x, 0.2), Preparation(transform="log")) == pytest.approx(expected, rel=0.02)


def test_a_shift_that_takes_the_typical_result_below_zero_is_read_off_the_other_side() -> None:
    """On the logarithm of results far below TEa half a TEa downwards leaves nothing; upwards it can be told."""
    found = slope(stretch(np.exp(child(4, "low").normal(-3, 0.5, MANY)), 1.0), Preparation(transform="log"))
    assert 0.01 <= found < 2


def test_where_a_shift_lets_nothing_be_admitted_the_slope_is_still_a_number() -> None:
    found = slope(stretch(normals(140, 0.1), 8.0), Preparation(139, 141))
    assert math.isfinite(found) and found > 0


def test_independent_values_are_not_inflated_and_correlated_ones_by_the_sum_of_their_correlations() -> None:
    z = child(5, "inflation").standard_normal(MANY)
    assert inflation(z) == pytest.approx(1.0, abs=0.1)
    phi, n = 0.6, 50
    lags = np.arange(1, n)
    expected = 1 + 2 * float(((1 - lags / n) * phi**lags).sum())
    assert inflation(lfilter([1], [1, -phi], z)) == pytest.approx(expected, rel=0.12)


def test_dropped_results_do_not_count_for_the_inflation() -> None:
    z = child(6, "gaps").standard_normal(5000)
    with_gaps = np.insert(z, np.arange(0, 5000, 7), np.nan)
    assert inflation(with_gaps) == inflation(z)


@pytest.mark.parametrize("z", [np.zeros(5000), np.full(500, np.nan), np.zeros(0), np.arange(60.0)])
def test_values_from_which_no_inflation_can_be_told_have_none(z: Floats) -> None:
    assert inflation(z) == 1.0


def test_a_tea_of_nothing_at_the_typical_result_leaves_the_slope_at_one() -> None:
    """TEa in percent, and results around zero such as a base excess."""
    around_zero = stretch(np.round(normals(0, 3)), 4.0)
    assert slope(replace(around_zero, error=ErrorModel(0.0, 10.0, 0.3, 0.0)), Preparation()) == 1.0


@pytest.mark.parametrize("sd", [0.0, 0.1, 0.4])
def test_the_wandering_of_the_level_is_found_beyond_what_chance_gives_a_days_mean(sd: float) -> None:
    days, a_day = 300, 200
    random = child(7, "wander", sd)
    z = random.standard_normal(days * a_day) + np.repeat(sd * random.standard_normal(days), a_day)
    assert wander(z, a_day) == pytest.approx(sd, abs=0.035)
    assert inflation(z, wander(z, a_day)) == pytest.approx(1.0, abs=0.15), "what wanders is not counted twice"


def test_values_that_hang_together_briefly_do_not_wander() -> None:
    z = lfilter([1], [1, -0.6], child(8, "wander").standard_normal(MANY))
    assert wander(z, 300) < 0.1 * z.std()


@pytest.mark.parametrize("z", [np.zeros(5000), np.full(500, np.nan), np.zeros(0), np.arange(60.0)])
def test_values_from_which_no_wandering_can_be_told_have_none(z: Floats) -> None:
    assert wander(z, 100) == 0.0
