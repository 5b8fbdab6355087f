"""Unit slips: found on their day with their factor, back again too, and not in streams that merely wander."""

import numpy as np
import pytest

from pbm.methods.unit_slips import CONVERSIONS, find_unit_slips


def medians(days: int, spread: float, seed: int = 1) -> np.ndarray:
    return 5.5 * np.exp(np.random.default_rng(seed).normal(0, spread, days))


@pytest.mark.parametrize("factor", [1 / 18.016, 18.016, 88.42, 10.0, 0.1, 38.67, 88.57, 17.1, 1 / 2.801, 4.008])
def test_a_slip_is_found_on_its_day_with_its_factor(factor: float):
    level = medians(90, 0.03)
    level[40:] *= factor
    (slip,) = find_unit_slips(level)
    known = max(factor, 1 / factor)
    # 88.42 (creatinine) and 88.57 (triglycerides) are one factor to any eye.
    assert slip.day == 40
    assert slip.factor == pytest.approx(known, rel=0.01)
    assert slip.after / slip.before == pytest.approx(factor, rel=0.1)


def test_a_slip_of_one_day_is_found_with_its_way_back():
    level = medians(60, 0.02)
    level[30] *= 18.016
    assert [slip.day for slip in find_unit_slips(level)] == [30, 31]


def test_days_without_a_median_are_passed_over():
    level = medians(60, 0.02)
    level[20:] *= 10
    level[15:25] = np.nan
    assert [slip.day for slip in find_unit_slips(level)] == [25]


@pytest.mark.parametrize("seed", range(5))
def test_streams_whose_medians_vary_much_have_none(seed: int):
    assert find_unit_slips(medians(300, 0.3, seed)) == []


def test_a_step_that_converts_nothing_is_no_slip():
    level = medians(60, 0.02)
    level[30:] *= 1.3
    assert find_unit_slips(level) == []


def test_no_medians_and_medians_at_or_below_0_have_none():
    assert find_unit_slips(np.full(30, np.nan)) == []
    assert find_unit_slips(-medians(30, 0.1)) == []
    assert find_unit_slips(np.zeros(0)) == []
    assert all(factor > 1 for factor in CONVERSIONS)


@pytest.mark.parametrize("seed", range(5))
def test_medians_of_six_coarsely_rounded_results_have_none(seed: int):
    x = np.random.default_rng(seed).lognormal(0.05, 0.3, (360, 6)).round(1)
    assert find_unit_slips(np.median(x, axis=1)) == []
