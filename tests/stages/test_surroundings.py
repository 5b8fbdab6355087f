"""What surrounds a stream: events among its results, onsets with their horizon, chances of passing, whatever the schedule."""

import numpy as np
import pytest

from pbm.methods.controls import Rules, survival
from pbm.methods.detection import by_schedule
from pbm.methods.expected import Onsets, exposure
from pbm.methods.faults import Fault
from pbm.methods.jit import Floats
from pbm.methods.unreliable import chance_unreliable
from pbm.records.laboratory import Lab
from pbm.records.stream import StreamName
from pbm.stages.surroundings import HORIZON_DAYS, Surroundings
from tests.stages.offline import DAY, HOUR, SODIUM, laboratory, sodium, times

TEA, SD = 4.0, 0.9


def around(lab: Lab, seed: int = 1) -> Surroundings:
    return Surroundings.of(SODIUM, lab, seed)


def test_events_by_the_clock_stand_before_the_first_result_at_or_after_them() -> None:
    time = times(3, 40)
    positions = around(laboratory()).event_positions(time)
    midnight = int(time[0]) // DAY * DAY
    instants = [midnight + day * DAY + hour * HOUR for day in range(4) for hour in (6, 14, 22)]
    inside = [t for t in instants if time[0] <= t <= time[-1]]
    assert positions.tolist() == [sum(1 for result in time.tolist() if result < t) for t in inside]


def test_a_result_at_the_instant_of_an_event_comes_after_it() -> None:
    midnight = int(times(1, 1)[0]) // DAY * DAY
    time = midnight + np.array([1, 6, 6, 7, 14]) * HOUR
    assert around(laboratory()).event_positions(time).tolist() == [1, 4]


def test_an_event_every_so_many_results_stands_after_each_so_many() -> None:
    surrounded = around(laboratory({"every": "40 results", "rules": ["1-3s"]}))
    assert surrounded.event_positions(times(2, 100)).tolist() == [40, 80, 120, 160, 200]


@pytest.mark.parametrize("controls", [{}, {"rules": ["1-3s"]}], ids=["nothing said", "rules without events"])
def test_without_a_schedule_there_is_no_event_and_nothing_is_ever_found(controls: dict[str, object]) -> None:
    surrounded = around(laboratory(controls))
    time = times(20, 50)
    assert len(surrounded.event_positions(time)) == 0
    onsets = surrounded.onsets(time, 0, len(time), 10)
    passed = surrounded.chance_of_passing(Fault("shift", 9.0, "TEa"), onsets).passed
    assert (by_schedule(onsets, passed).never == 1).all()


def test_onsets_are_followed_for_seven_days_and_every_event_in_them_counts() -> None:
    time = times(40, 60)
    onsets = around(laboratory()).onsets(time, 60, len(time), 50)
    assert len(onsets.at) == 50 and onsets.at.min() >= 60
    for at, end in zip(onsets.at.tolist(), onsets.end.tolist(), strict=True):
        assert time[end - 1] <= time[at] + HORIZON_DAYS * DAY
        assert end == len(time) or time[end] > time[at] + HORIZON_DAYS * DAY
    positions = around(laboratory()).event_positions(time)
    for r in range(50):
        since = positions[(positions > onsets.at[r]) & (positions < onsets.end[r])]
        assert onsets.edges[r, : len(since)].tolist() == since.tolist()
        assert (onsets.edges[r, len(since) :] == onsets.end[r]).all()


@pytest.mark.parametrize("days", [1, 2, 5, 9])
def test_in_a_short_stretch_onsets_are_followed_for_half_of_it(days: int) -> None:
    time = times(days, 60)
    surrounded = around(laboratory())
    onsets = surrounded.onsets(time, 0, len(time), 20)
    horizon = surrounded.horizon_days(time, 0, len(time))
    assert horizon == pytest.approx((time[-1] - time[0]) / DAY / 2)
    assert (time[onsets.end - 1] - time[onsets.at] <= horizon * DAY).all()
    assert (onsets.length >= 1).all()


def test_results_all_at_one_instant_still_have_an_onset() -> None:
    time = np.full(30, times(1, 1)[0])
    onsets = around(laboratory()).onsets(time, 5, 30, 10)
    assert ((onsets.at >= 5) & (onsets.at < onsets.end) & (onsets.end <= 30)).all()


def test_the_draws_of_a_stream_depend_on_its_name_and_the_seed_alone() -> None:
    time = times(20, 50)
    one = around(laboratory()).onsets(time, 0, 1000, 30).at
    assert (around(laboratory()).onsets(time, 0, 1000, 30).at == one).all()
    assert (around(laboratory(), seed=2).onsets(time, 0, 1000, 30).at != one).any()
    other = Surroundings.of(StreamName("sodium", "line-2"), laboratory(), 1).onsets(time, 0, 1000, 30).at
    assert (other != one).any()


def test_a_shift_meets_each_level_in_its_own_sd() -> None:
    onsets = around(laboratory()).onsets(times(20, 50), 0, 1000, 5)
    found = around(laboratory()).chance_of_passing(Fault("shift", 0.5, "TEa", -1), onsets)
    bias = np.tile([-2.0 / 1.0, -2.0 / 1.2], (onsets.edges.shape[1], 1))
    rules = Rules.parse(("1-3s", "2-2s", "R-4s"))
    assert (found.passed == survival(rules, bias, 1.0, np.array([1, 1])).passed).all()


def test_a_sporadic_fault_meets_controls_as_often_as_patients() -> None:
    onsets = around(laboratory()).onsets(times(20, 50), 0, 1000, 5)
    always, seldom, never = (
        around(laboratory()).chance_of_passing(Fault("sporadic", 1.0, "TEa", 1, share=q), onsets).passed[1]
        for q in (1.0, 0.1, 1e-9)
    )
    assert always < 0.1
    assert 0.6 < seldom < never
    in_control = survival(Rules.parse(("1-3s", "2-2s", "R-4s")), np.zeros((1, 2)), 1.0, np.array([1, 1])).passed[1]
    assert never == pytest.approx(in_control, abs=1e-6)


def drift_onset_by_onset(drift: Fault, onsets: Onsets) -> Floats:
    """Unreliable results of each onset with the chances of passing at its own events."""
    found = []
    for r in range(len(onsets.at)):
        one = onsets.chosen(np.array([r]))
        ages = (one.edges[0] - one.at[0]).astype(float)
        bias = drift.growth(ages)[:, None] * drift.sign * drift.size * TEA / np.array([1.0, 1.2])
        passed = survival(Rules.parse(("1-3s", "2-2s", "R-4s")), bias, 1.0, np.array([1, 1])).passed
        found.append(exposure(one, chances(drift, int(one.length[0])), passed).unreliable(one.length)[0])
    return np.array(found)


def chances(drift: Fault, length: int) -> Floats:
    growth = drift.growth(np.arange(1.0, length + 1))[None, :]
    return np.asarray(chance_unreliable(np.array(TEA), growth * drift.size * TEA, np.array(SD)))


@pytest.mark.parametrize("over", [60, 300])
@pytest.mark.parametrize("size", [1.0, 2.0])
def test_a_drift_meets_the_events_of_each_onset_as_far_as_it_has_grown_by_then(over: int, size: float) -> None:
    """With the ages averaged over all onsets the count was wrong by up to a factor of 2."""
    surrounded = around(laboratory({"every": "100 results", "rules": ["1-3s", "2-2s", "R-4s"]}))
    drift = Fault("drift", size, "TEa", over=over)
    onsets = surrounded.onsets(times(30, 100), 0, 3000, 80)
    passed = surrounded.chance_of_passing(drift, onsets).passed
    each = np.array([np.resize(chances(drift, int(n)), int(onsets.length.max())) for n in onsets.length])
    ours = exposure(onsets, each, passed).unreliable(onsets.length)
    assert ours.mean() == pytest.approx(drift_onset_by_onset(drift, onsets).mean(), rel=0.02)


def test_the_stretch_holds_the_history_as_it_is() -> None:
    given = sodium(3, 30)
    made = around(laboratory(reportable={"low": 100})).stretch(given)
    assert (made.value == given.value).all() and (made.time == given.time).all()
    assert made.reporting.low == 100 and made.reporting.high == np.inf and made.reporting.step == 1
    assert (made.error.tea_absolute, made.error.sd_absolute) == (4.0, 0.9)
