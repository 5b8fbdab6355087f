"""A fault tried at many onsets: the same as one onset at a time, and as a monitor stepped in plain Python from the start."""

import math
from typing import Literal

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.alarm import Limits, judge
from pbm.methods.chain import Preparation, Tracker
from pbm.methods.expected import Onsets, follow
from pbm.methods.faults import Fault, inflict
from pbm.methods.jit import Integers
from pbm.methods.seeds import child
from pbm.methods.trials import Stretch, alarm_and_stop, draw_onsets, trial
from pbm.methods.unreliable import chance_unreliable
from tests.methods import exposed
from tests.methods.stretches import MINUTE, onsets, stretch

FAULTS = [
    Fault("shift", 1.0, "TEa"),
    Fault("shift", 0.5, "percent", -1),
    Fault("drift", 2.0, "TEa", -1, over=150),
    Fault("noise", 3.0, ""),
    Fault("sporadic", 3.0, "TEa", 1, share=0.2),
]
TRACKERS = [Tracker("ewma", 0.1, 4.2), Tracker("mean", 20, 4.2), Tracker("median", 9, 4.2)]
PREPARATION = Preparation(low=3.0, high=5.5)
LIMITS = Limits(3.98, 4.42, 4.2, 0.5)
AT = [0, 1, 130, 131, 500, 777, 1500, 2600, 2999]
PASSED = np.array([1.0, 0.7, 0.5, 0.4, 0.1])

each_fault = pytest.mark.parametrize("fault", FAULTS, ids=str)


@each_fault
def test_many_onsets_give_what_each_gives_alone(fault: Fault) -> None:
    history = stretch()
    together = onsets(history, AT)
    whole = trial(history, fault, together, PASSED)
    tracker = TRACKERS[0]
    z = history.prepared(PREPARATION)
    alarms = whole.results_to_alarm(
        whole.prepared(PREPARATION), tracker, LIMITS, tracker.standing(z, LIMITS, together.at)
    )
    for r in range(len(AT)):
        one = together.chosen(np.array([r]))
        alone = trial(history, fault, one, PASSED)
        mine = slice(whole.starts[r], whole.ends[r])
        own = slice(alone.starts[0], alone.ends[0])
        np.testing.assert_array_equal(whole.values[mine], alone.values[own])
        np.testing.assert_array_equal(whole.censor[mine], alone.censor[own])
        np.testing.assert_array_equal(whole.mix.ward[mine], alone.mix.ward[own])
        length = int(one.length[0]) + 1
        for table in (exposed.reported, exposed.final):
            ours, its = table(whole.exposure)[r, :length], table(alone.exposure)[0, :length]
            np.testing.assert_allclose(ours, its, rtol=1e-9, atol=1e-12)
        standing = tracker.standing(z, LIMITS, one.at)
        assert alone.results_to_alarm(alone.prepared(PREPARATION), tracker, LIMITS, standing)[0] == alarms[r]


def stepped(history: Stretch, fault: Fault, at: int, end: int, tracker: Tracker) -> int:
    """Results until the alarm, by one monitor run in plain Python from the first result on, the fault beginning at the onset."""
    state, episode = tracker.start(), 0
    ages = np.maximum(np.arange(len(history)) - at + 1.0, 0.0)
    growth = np.where(ages > 0, fault.growth(np.maximum(ages, 1.0)), 0.0)
    values, censor = inflict(
        history.value, history.censor, fault, history.error, history.reporting, history.chance, growth
    )
    for i in range(end):
        faulty = i >= at
        x, mark = (values[i], censor[i]) if faulty else (history.value[i], history.censor[i])
        z = PREPARATION.one(float(x), int(mark))
        if math.isnan(z):
            continue
        after = judge(episode, tracker.law.step(state, z, tracker.par), *LIMITS)
        if faulty and episode == 0 and after != 0:
            return i - at + 1
        episode = after
    return 0


@each_fault
@pytest.mark.parametrize("tracker", TRACKERS, ids=lambda t: t.statistic)
def test_the_alarm_comes_where_a_monitor_stepped_from_the_start_gives_it(fault: Fault, tracker: Tracker) -> None:
    history = stretch(1200)
    followed = onsets(history, [0, 3, 40, 333, 334, 700, 1000, 1199])
    tried = trial(history, fault, followed, PASSED)
    standing = tracker.standing(history.prepared(PREPARATION), LIMITS, followed.at)
    ours = tried.results_to_alarm(tried.prepared(PREPARATION), tracker, LIMITS, standing)
    places = zip(followed.at.tolist(), followed.end.tolist(), strict=True)
    assert ours.tolist() == [stepped(history, fault, at, end, tracker) for at, end in places]
    assert (ours > 0).any()


@pytest.mark.parametrize("tracker", TRACKERS, ids=lambda t: t.statistic)
def test_the_state_before_an_onset_is_that_of_a_monitor_that_ran_from_the_start(tracker: Tracker) -> None:
    history = stretch(1500)
    z = history.prepared(PREPARATION)
    at = [0, 1, 2, 50, 51, 800, 1499]
    tight = Limits(4.15, 4.25, 4.2, 0.5)
    standing = tracker.standing(z, tight, np.array(at))
    state, episode, seen = tracker.start(), 0, 0
    for row, place in enumerate(at):
        for x in z[seen:place].tolist():
            if not math.isnan(x):
                episode = judge(episode, tracker.law.step(state, x, tracker.par), *tight)
        seen = place
        assert standing.states[row].tolist() == state
        assert standing.episodes[row] == episode
    assert set(standing.episodes.tolist()) > {0}, "some onsets fall into an open episode"


def test_an_episode_open_at_the_onset_is_not_what_finds_the_fault() -> None:
    tracker, limits = Tracker("ewma", 1.0, 0.0), Limits(-3.0, 3.0, 0.0, 0.5)
    z = np.array([4.0, 4.0, 5.0, 1.0, 4.0])
    standing = tracker.standing(z, limits, np.array([0, 1, 3]))
    found = tracker.first_alarms(z, standing, np.array([0, 1, 3]), np.array([5, 5, 5]), limits)
    assert found.tolist() == [0, 4, 4]


def test_the_chance_of_an_unreliable_result_is_that_of_the_result_in_control() -> None:
    history = stretch(600)
    followed = onsets(history, [100], length=200)
    for fault in FAULTS:
        tried = trial(history, fault, followed, np.ones(followed.edges.shape[1] + 1))
        x = history.value[100:300]
        growth = fault.growth(np.arange(1.0, 201.0))
        bias = growth * fault.bias(x, history.error)
        p = chance_unreliable(history.error.tea(x), bias, history.error.sd(x), fault.multiple)
        share = 0.2 if fault.kind == "sporadic" else 1.0
        assert tried.exposure.unreliable(np.array([200]))[0] == pytest.approx(share * p.sum())


@given(st.integers(0, 500), st.integers(0, 500), st.integers(1, 60), st.integers(0, 99))
def test_onsets_are_spread_evenly_one_in_each_part(first: int, length: int, count: int, seed: int) -> None:
    at = draw_onsets(first, first + length, count, np.random.default_rng(seed))
    assert len(at) == min(count, length)
    assert (np.diff(at) >= 0).all()
    part = length / max(len(at), 1)
    for i, place in enumerate(at.tolist()):
        assert first + math.floor(i * part) <= place < first + (i + 1) * part + 1e-9


def test_every_result_is_equally_likely_to_be_an_onset() -> None:
    drawn = np.concatenate([draw_onsets(10, 35, 10, child(i, "even")) for i in range(4000)])
    counts = np.bincount(drawn, minlength=35)[10:]
    assert counts.sum() == 40_000
    assert np.abs(counts - 1600).max() < 4.5 * math.sqrt(1600)


def stop_by_counting(
    to_alarm: int, at: int, end: int, lag: int | float, unit: Literal["results", "minutes"], time: Integers
) -> int:
    """Affected results reported: those up to the alarm, and then so many more or for so long."""
    if to_alarm == 0:
        return end - at
    if unit == "results":
        return min(to_alarm + int(lag), end - at)
    last = time[at + to_alarm - 1] + lag * MINUTE
    return sum(1 for i in range(at, end) if i < at + to_alarm or time[i] <= last)


@given(
    st.lists(st.integers(0, 3), min_size=20, max_size=40),
    st.lists(st.tuples(st.integers(0, 15), st.integers(1, 12), st.integers(0, 12)), min_size=1, max_size=5),
    st.sampled_from([("results", 0), ("results", 4), ("minutes", 1), ("minutes", 2.5), ("minutes", 500)]),
)
def test_the_stop_comes_after_the_response_lag(
    gaps: list[int], placed: list[tuple[int, int, int]], lag: tuple[Literal["results", "minutes"], float]
) -> None:
    """Several results may carry the same instant."""
    time = np.cumsum(gaps) * MINUTE
    unit, size = lag
    at = np.array([a for a, _, _ in placed])
    end = np.minimum(at + [length for _, length, _ in placed], len(time))
    to_alarm = np.minimum([t for _, _, t in placed], end - at)
    followed: Onsets = follow(at, end, np.zeros(0, dtype=np.int64), 1)
    by_results, by_time = (int(size), 0) if unit == "results" else (0, round(size * MINUTE))
    alarm, stop = alarm_and_stop(to_alarm, followed, by_results, by_time, time)
    for r in range(len(at)):
        assert stop[r] == stop_by_counting(int(to_alarm[r]), int(at[r]), int(end[r]), size, unit, time)
        assert alarm[r] == (to_alarm[r] or end[r] - at[r])


@pytest.mark.parametrize("fault", FAULTS, ids=str)
def test_at_another_level_results_are_shifted_in_control_already(fault: Fault) -> None:
    """Under a shift of 1 TEa at a level of 0.3 TEa they are what they are under a shift of 1.3 TEa, and unreliable less what they were."""
    history = stretch(600)
    higher, followed = history.at_level(0.3), onsets(history, [100], length=200)
    passed = np.ones(followed.edges.shape[1] + 1)
    uncensored = history.censor == 0
    np.testing.assert_allclose(
        higher.measured[uncensored], (history.value + 0.3 * history.error.tea(history.value))[uncensored]
    )
    np.testing.assert_array_equal(higher.measured[~uncensored], history.value[~uncensored])
    one, other = (
        trial(given, Fault("shift", size, "TEa"), followed, passed) for given, size in ((higher, 1.0), (history, 1.3))
    )
    np.testing.assert_allclose(one.values, other.values, atol=0.1 + 1e-9)
    in_control = trial(history, Fault("shift", 0.3, "TEa"), followed, passed)
    stop = followed.length
    expected = other.exposure.unreliable(stop) - in_control.exposure.unreliable(stop)
    assert one.exposure.unreliable(stop) == pytest.approx(expected)
    assert trial(history.at_level(0.0), fault, followed, passed).exposure.unreliable(stop) == pytest.approx(
        trial(history, fault, followed, passed).exposure.unreliable(stop)
    )
