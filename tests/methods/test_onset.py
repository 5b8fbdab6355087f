"""Onset and size of a step: found on seeded streams, covered as often as said, and what must hold whatever the numbers."""

import math
from dataclasses import dataclass, replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.signal import lfilter

from pbm.methods.chain import Tracker
from pbm.methods.jit import Floats
from pbm.methods.onset import InControl, Onset, find_onset
from pbm.methods.seeds import child

STANDARD = InControl(0.0, 1.0)


@dataclass
class Found:
    """What was said of a step that an EWMA found, and where it truly was; places within the values that were given."""

    true: int
    onset: Onset


def found_by_an_ewma(shift: float, phi: float = 0.0, inflation: float = 1.0, runs: int = 150) -> list[Found]:
    """Steps found by an EWMA of weight 0.05 after a first stretch without an alarm, judged on the last 500 values."""
    tracker, limit = Tracker("ewma", 0.05, 0.0), 0.55 * math.sqrt((1 + phi) / (1 - phi))
    found = []
    for run in range(runs):
        random = child(run, "onset", shift, phi)
        first = int(random.integers(300, 900))
        z = lfilter([math.sqrt(1 - phi**2)], [1.0, -phi], random.standard_normal(first + 2000))
        z[first:] += shift
        out = np.flatnonzero(np.abs(tracker.path(z)) > limit)
        if len(out) and out[0] >= first:
            begin = max(0, int(out[0]) + 1 - 500)
            onset = find_onset(z[begin : out[0] + 1], replace(STANDARD, inflation=inflation), 1 if shift > 0 else -1)
            found.append(Found(first - begin, onset))
    assert len(found) > 0.7 * runs
    return found


def covered(found: list[Found]) -> float:
    return float(np.mean([f.onset.earliest <= f.true <= f.onset.latest for f in found]))


@pytest.mark.parametrize("shift", [0.5, -1.0, 2.0])
def test_the_ninety_percent_set_holds_the_onset_at_least_so_often(shift: float) -> None:
    """More often, since it is told by its ends and what lies between them counts too."""
    assert 0.9 <= covered(found_by_an_ewma(shift)) <= 0.995


@pytest.mark.parametrize(("shift", "away"), [(0.5, 12), (1.0, 4), (2.0, 1)])
def test_the_onset_is_found_to_within_a_few_values(shift: float, away: int) -> None:
    assert np.median([abs(f.onset.start - f.true) for f in found_by_an_ewma(shift)]) <= away


@pytest.mark.parametrize(("shift", "low", "high"), [(0.5, 0.45, 0.65), (1.0, 0.9, 1.1), (-2.0, -2.15, -1.85)])
def test_the_size_is_found_nearly_without_bias(shift: float, low: float, high: float) -> None:
    """The heaviest step alone would give 0.77, 1.18 and 2.12 on average: an alarm is a moment at which chance has helped."""
    assert low < np.mean([f.onset.shift for f in found_by_an_ewma(shift)]) < high


def test_values_that_hang_together_need_their_inflation_to_be_covered() -> None:
    taken_for_independent = covered(found_by_an_ewma(1.0, phi=0.5))
    with_inflation = covered(found_by_an_ewma(1.0, phi=0.5, inflation=3.0))
    assert taken_for_independent < 0.8
    assert with_inflation >= 0.9


VALUES = st.lists(st.floats(-50, 50), min_size=1, max_size=60).map(np.array)
SIDE = st.sampled_from([-1, 1])


@given(VALUES, SIDE, st.floats(1, 9))
def test_what_must_hold_whatever_the_values(z: Floats, side: int, inflation: float) -> None:
    found = find_onset(z, InControl(0.0, 2.0, inflation), side)
    assert 0 <= found.earliest <= found.start <= found.latest < len(z)
    assert found.weight.sum() == pytest.approx(1.0) and (found.weight >= 0).all()
    assert found.weight[found.earliest : found.latest + 1].sum() >= 0.9 - 1e-9
    assert side * found.shift >= 0
    mirrored = find_onset(-z, InControl(0.0, 2.0, inflation), -side)
    assert mirrored.shift == -found.shift and (mirrored.weight == found.weight).all()


@given(VALUES, SIDE, st.sampled_from([0.0, 0.7, 5.0]))
def test_the_weights_are_the_likelihoods_written_out(z: Floats, side: int, wander: float) -> None:
    in_control = InControl(0.0, 2.0, 1.5, wander=wander)
    gains = []
    for k in range(len(z)):
        mean = math.fsum(z[k:]) / (len(z) - k)
        gains.append(max(side * mean, 0) ** 2 / (2 * (2.0**2 * 1.5 / (len(z) - k) + wander**2)))
    weight = np.exp(np.array(gains) - max(gains))
    np.testing.assert_allclose(find_onset(z, in_control, side).weight, weight / weight.sum(), rtol=1e-6, atol=1e-12)


def test_a_level_that_wanders_is_not_taken_for_a_long_small_error() -> None:
    """300 values a little high, as a day's patients may be, then 10 far off."""
    z = np.concatenate([np.zeros(200), np.full(300, 0.45), np.full(10, 2.5)]) + 0.1 * child(
        9, "wander"
    ).standard_normal(510)
    assert find_onset(z, STANDARD, 1).start == pytest.approx(200, abs=5)
    wary = find_onset(z, replace(STANDARD, wander=0.3), 1)
    assert wary.start == pytest.approx(500, abs=3)
    assert wary.shift > 1.5


@given(VALUES, SIDE, st.floats(0.05, 1.0))
def test_the_slope_divides_the_size_and_moves_no_weight(z: Floats, side: int, slope: float) -> None:
    plain, tight = find_onset(z, STANDARD, side), find_onset(z, replace(STANDARD, slope=slope), side)
    assert tight.shift == pytest.approx(plain.shift / slope)
    assert (tight.weight == plain.weight).all()


@given(VALUES, SIDE, st.floats(1, 4), st.floats(1, 4))
def test_more_inflation_spreads_the_weight(z: Floats, side: int, inflation: float, more: float) -> None:
    less, greater = (find_onset(z, InControl(0.0, 2.0, f), side) for f in (inflation, inflation * more))
    assert greater.weight.max() <= less.weight.max() + 1e-12


def test_control_events_that_passed_move_the_onset_behind_them() -> None:
    """Two places as likely by the results; an event between them would hardly have passed."""
    z = np.concatenate([np.zeros(40), np.full(20, 1.0)])
    free = find_onset(z, STANDARD, 1)
    assert free.start == 40
    passed = np.where(np.arange(60) < 45, math.log(1e-6), 0.0)
    behind = find_onset(z, STANDARD, 1, passed)
    assert behind.start == 45
    assert behind.weight[:45].sum() < 1e-3 < free.weight[:45].sum()


def test_a_single_value_is_its_own_onset() -> None:
    found = find_onset(np.array([3.0]), STANDARD, 1)
    assert (found.start, found.earliest, found.latest, found.shift) == (0, 0, 0, 3.0)


def test_no_value_is_refused() -> None:
    with pytest.raises(ValueError, match="at least one"):
        find_onset(np.zeros(0), STANDARD, 1)
