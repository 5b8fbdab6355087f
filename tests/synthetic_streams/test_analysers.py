"""Analytic noise has the stated SD; calibrations and lots move the level by far less than TEa."""

import numpy as np
import pytest

from synthetic_streams import Laboratory
from synthetic_streams.analysers import LEVEL_BOUND, measure
from synthetic_streams.analytes import ANALYTES, BY_KEY, STREAMS, Analyte


@pytest.mark.parametrize("analyte", ANALYTES, ids=lambda analyte: analyte.key)
def test_a_level_step_stays_under_a_tenth_of_tea_wherever_results_lie(analyte: Analyte) -> None:
    value = np.linspace(min(analyte.levels), max(analyte.levels), 50)
    assert (LEVEL_BOUND * analyte.sd(value) < analyte.tea(value) / 10).all()


def test_levels_change_at_calibrations_and_the_noise_has_the_analytic_sd(laboratory: Laboratory) -> None:
    analyte = BY_KEY["calcium"]
    steps = laboratory.levels(analyte, "line-1")
    assert len(set(steps.level.tolist())) > laboratory.days / 8
    assert 0 < steps.new_lot.sum() < len(steps.time) / 3
    assert np.abs(steps.level).max() <= LEVEL_BOUND
    sample = laboratory.sample(analyte, "line-1")
    z = (sample.raw - sample.true_value) / analyte.sd(sample.true_value) - steps.at(sample.time)
    assert abs(z.mean()) < 4 / np.sqrt(len(z))
    assert abs(z.std() - 1) < 4 / np.sqrt(2 * len(z))


def test_a_lot_lasts_from_one_new_lot_to_the_next(laboratory: Laboratory) -> None:
    steps = laboratory.levels(BY_KEY["sodium"], "line-1")
    assert steps.new_lot[0], "the first calibration is with a lot of its own"
    assert steps.lot_at(steps.time).tolist() == np.cumsum(steps.new_lot).tolist()
    sample = laboratory.sample(BY_KEY["sodium"], "line-1")
    assert (np.diff(sample.lot) >= 0).all() and sample.lot.min() >= 1


def test_the_two_chemistry_lines_have_levels_of_their_own(laboratory: Laboratory) -> None:
    one, two = (laboratory.levels(BY_KEY["sodium"], line) for line in ("line-1", "line-2"))
    assert not set(one.level.tolist()) & set(two.level.tolist())


def test_the_level_in_force_is_that_of_the_last_step(laboratory: Laboratory) -> None:
    steps = laboratory.levels(BY_KEY["tsh"], "immuno-1")
    at = steps.time[3]
    assert steps.at(np.array([at - 1, at, at + 1])).tolist() == [steps.level[2], steps.level[3], steps.level[3]]


def test_a_level_moves_every_result_by_that_many_analytic_sd() -> None:
    analyte, value = BY_KEY["glucose"], np.full(3, 9.0)
    low, high = (measure(analyte, value, np.full(3, level), np.random.default_rng(5)) for level in (0.0, 0.25))
    np.testing.assert_allclose(high - low, 0.25 * analyte.sd(value), rtol=1e-9)


def test_tea_is_the_greater_of_both_parts_and_sd_the_root_of_squares() -> None:
    creatinine = BY_KEY["creatinine"]
    assert creatinine.tea(np.array([100.0, 300.0])).tolist() == [18.0, 30.0]
    assert creatinine.sd(np.array([500.0]))[0] == pytest.approx((1.2**2 + 9.0**2) ** 0.5)


def test_streams_are_the_analytes_on_their_lines() -> None:
    assert len(STREAMS) == 22
    assert {line for _, line in STREAMS} == {"line-1", "line-2", "haem-1", "immuno-1"}
