"""The closed form of CUSUM run lengths against printed run lengths, and of the results needed against simulation."""

import numpy as np
import pytest

from pbm.methods.chain import tracker_for
from pbm.methods.run_length import Cusum, one_sided_run_length, results_needed
from tests.published.values.cusum import DESIGN, ONE_SIDED_ANCHORS, SHIFTS, TWO_SIDED


@pytest.mark.parametrize("anchor", ONE_SIDED_ANCHORS)
def test_one_sided_run_lengths_lie_near_the_exact_ones(anchor: tuple[float, float, float, str, str, float]):
    reference, limit, shift, *_, exact = anchor
    assert one_sided_run_length(shift - reference, limit) == pytest.approx(exact, rel=0.06)


def test_two_sided_run_lengths_lie_near_the_exact_ones_for_shifts_that_take_some_results_to_see():
    for limit, head_start, _, _, exact in TWO_SIDED:
        if head_start == 0:
            pairs = zip(SHIFTS, map(float, exact.split()), strict=True)
            for shift, length in [(s, n) for s, n in pairs if n > 5]:
                assert Cusum(0.5, limit).run_length(shift) == pytest.approx(length, rel=0.05)


@pytest.mark.parametrize("in_control, limit_half, limit_quarter", DESIGN)
def test_the_best_cusum_has_the_limit_of_the_integral_equation(
    in_control: float, limit_half: float, limit_quarter: float
):
    assert Cusum.best_for(1.0, in_control).limit == pytest.approx(limit_half, rel=0.02)
    assert Cusum.best_for(0.5, in_control).limit == pytest.approx(limit_quarter, rel=0.02)


def test_results_needed_are_those_of_a_simulated_cusum_of_values_that_hang_together():
    """An autoregressive stream, r = 0.4: its means vary (1 + r) / (1 - r) times as much."""
    random, r, shift, in_control = np.random.default_rng(5), 0.4, 0.3, 3000.0
    inflation = (1 + r) / (1 - r)
    best = Cusum.best_for(shift / np.sqrt(inflation), in_control)
    noise = random.standard_normal(1_500_000) * np.sqrt(1 - r * r)
    z = np.empty_like(noise)
    z[0] = noise[0]
    for i in range(1, len(z)):
        z[i] = r * z[i - 1] + noise[i]
    tracker = tracker_for(z, "cusum", best.reference, level=0.0, spread=float(np.sqrt(inflation)))
    moved = tracker.run_ends(z + shift, -best.limit, best.limit)
    quiet = tracker.run_ends(z, -best.limit, best.limit)
    needed = float(np.diff(moved, prepend=-1).mean())
    assert needed == pytest.approx(results_needed(shift, in_control, inflation), rel=0.1)
    # What hangs together also overshoots the limit by more: false alarms are rarer than the closed form says.
    assert 0.9 < float(np.diff(quiet, prepend=-1).mean()) / in_control < 1.5


def test_more_results_are_needed_for_less_shift_fewer_false_alarms_and_more_inflation():
    base = results_needed(0.3, 2000)
    assert results_needed(0.2, 2000) > base
    assert results_needed(0.3, 4000) > base
    assert results_needed(0.3, 2000, 2.0) > base
    assert results_needed(50.0, 2000) == pytest.approx(1.0, abs=0.2)


def test_a_budget_that_even_a_limit_of_0_does_not_reach_is_no_error():
    assert Cusum.best_for(1.0, 0.5).limit == 0.0
    assert results_needed(1e-6, 30.0) <= 31
