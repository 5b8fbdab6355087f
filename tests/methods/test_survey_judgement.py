"""The first judgement: measured movement and spread on streams whose truth is known, and the later third against simulation."""

import math

import numpy as np
import pytest

from pbm.methods.baseline import Mix
from pbm.methods.chain import Preparation
from pbm.methods.faults import Chance, Reporting
from pbm.methods.run_length import Cusum, results_needed
from pbm.methods.survey_judgement import Choice, best_choice, choices, later_alarms, with_baseline
from pbm.methods.trials import Stretch
from pbm.methods.unreliable import ErrorModel

ALL = Preparation()


def stretch(
    x: np.ndarray, ward: np.ndarray | None = None, tea: float = 4.0, censor: np.ndarray | None = None
) -> Stretch:
    n, random = len(x), np.random.default_rng(9)
    wards = np.zeros(n, dtype=np.int64) if ward is None else ward
    mix = Mix(tuple(str(name) for name in range(int(wards.max()) + 1)), wards, np.arange(n) % 168)
    seen = np.zeros(n) if censor is None else censor
    chance = Chance.draw(n, random)
    return Stretch(np.arange(n), x, seen, mix, ErrorModel(tea, 0, 0.9, 0), Reporting(0.01), chance)


def only(found: list[Choice]) -> Choice:
    (choice,) = found
    return choice


def test_an_untruncated_normal_stream_moves_by_the_shift_and_needs_what_the_closed_form_says():
    x = np.random.default_rng(1).normal(140, 8, 40_000)
    choice = only(choices(stretch(x), [ALL], 9000.0))
    assert choice.moved == pytest.approx(4.0, abs=0.01)
    assert choice.spread == pytest.approx(8.0, rel=0.02)
    assert choice.inflation == pytest.approx(1.0, abs=0.1)
    assert choice.needed() == pytest.approx(results_needed(0.5, 9000.0), rel=0.1)


def test_truncation_slows_the_mean_by_the_share_of_variance_that_it_leaves():
    """For limits fixed on normal values the slope at 0 is Var(admitted) / Var(all); a shift of an eighth of the SD is small enough."""
    x = np.random.default_rng(2).normal(140, 8, 200_000)
    choice = only(choices(stretch(x, tea=1.0), [Preparation(132, 148)], 9000.0))
    assert choice.admitted == pytest.approx(0.6827, abs=0.005)
    assert choice.moved == pytest.approx(choice.spread**2 / 64, rel=0.03)
    assert choice.in_control == pytest.approx(9000 * choice.admitted)


def test_what_admits_too_little_or_does_not_vary_is_no_choice():
    x = np.random.default_rng(3).normal(140, 8, 2000)
    assert choices(stretch(x), [Preparation(139.99, 140.0)], 9000.0) == []
    assert choices(stretch(np.full(2000, 5.0)), [ALL], 9000.0) == []
    assert best_choice([]) is None


def test_censored_results_move_nothing_and_need_for_ever():
    x = np.where(np.arange(2000) % 2 == 0, 5.0, 6.0)
    found = choices(stretch(x, censor=np.full(2000, -1.0)), [ALL], 9000.0)
    assert math.isinf(only(found).needed())
    assert best_choice(found) is None


def test_the_simpler_of_two_that_need_nearly_the_same_is_suggested():
    x = np.random.default_rng(4).normal(140, 8, 40_000)
    found = choices(stretch(x), [Preparation(110, 170), ALL, Preparation(132, 148)], 9000.0)
    best = best_choice(found)
    assert best is not None
    assert best.preparation == ALL


def test_wards_that_come_in_rounds_inflate_the_means_and_a_baseline_takes_that_away():
    ward = (np.arange(60_000) // 40 % 2).astype(np.int64)
    x = np.random.default_rng(5).normal(138.0, 3, 60_000) + 6 * ward
    choice = only(choices(stretch(x, ward), [ALL], 9000.0))
    better = with_baseline(stretch(x, ward), choice)
    assert choice.inflation > 3
    assert better.inflation < 1.2
    assert better.spread == pytest.approx(3.0, rel=0.03)
    assert better.needed() < choice.needed() / 2


@pytest.mark.parametrize("ratio, moved", [(1.15, 0.0), (1.0, 0.15)])
def test_alarms_in_the_later_third_are_those_of_a_simulated_cusum(ratio: float, moved: float):
    random = np.random.default_rng(6)
    before, after = random.normal(0, 1, 60_000), random.normal(moved, ratio, 30_000)
    choice = Choice(ALL, 1.0, 1.0, 1.0, 0.5, 2000.0)
    found = later_alarms(before, after, choice)
    cusum = Cusum.best_for(0.5, 2000.0)
    simulated = alarms(cusum, random.normal(moved, ratio, 400_000)) / alarms(cusum, random.normal(0, 1, 400_000))
    assert found is not None
    assert found.alarms == pytest.approx(simulated, rel=0.3)
    assert 1.5 < found.alarms_at_least < found.alarms


def alarms(cusum: Cusum, z: np.ndarray) -> int:
    up = down = count = 0.0
    for value in z.tolist():
        up, down = max(0.0, up + value - cusum.reference), max(0.0, down - value - cusum.reference)
        if max(up, down) > cusum.limit:
            up, down, count = 0.0, 0.0, count + 1
    return int(count)


@pytest.mark.parametrize("seed", range(5))
def test_a_later_third_like_the_rest_is_not_said_to_alarm_more_often(seed: int):
    z = np.random.default_rng(seed).normal(0, 1, 9000)
    found = later_alarms(z[:6000], z[6000:], Choice(ALL, 1.0, 1.0, 1.0, 0.5, 3000.0))
    assert found is not None
    assert found.alarms_at_least < 1.5


def test_parts_with_too_few_values_are_not_compared():
    choice = Choice(ALL, 1.0, 1.0, 1.0, 0.5, 3000.0)
    assert later_alarms(np.zeros(500), np.zeros(500), choice) is None
    assert later_alarms(np.arange(50.0), np.arange(500.0), choice) is None
