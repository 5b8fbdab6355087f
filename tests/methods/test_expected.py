"""Expected unreliable results and detection against naive twins and against a simulation of the whole story."""

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pbm.methods.detection import Detection, by_both, by_monitor, by_schedule
from pbm.methods.expected import Exposure, Onsets, exposure, follow
from pbm.methods.jit import Floats
from pbm.methods.seeds import child
from pbm.methods.trials import alarm_and_stop
from tests import naive
from tests.methods import exposed


@dataclass
class Story:
    """Onsets in a history with control events at any places, and the monitor's alarm after each (0: none)."""

    positions: list[int]
    at: list[int]
    end: list[int]
    p: list[float]
    passed: list[float]
    alarm: list[int]

    @property
    def onsets(self) -> Onsets:
        return follow(
            np.array(self.at, dtype=np.int64),
            np.array(self.end, dtype=np.int64),
            np.array(self.positions, dtype=np.int64),
            len(self.passed) - 1,
        )

    def chances(self, r: int) -> list[float]:
        return self.p[self.at[r] : self.end[r]]


@st.composite
def stories(draw: st.DrawFn) -> Story:
    n = draw(st.integers(1, 24))
    positions = sorted(draw(st.lists(st.integers(0, n), max_size=10)))
    at = sorted(draw(st.lists(st.integers(0, n - 1), min_size=1, max_size=4)))
    end = [draw(st.integers(a + 1, n)) for a in at]
    p = draw(st.lists(st.integers(0, 8).map(lambda k: k / 8), min_size=n, max_size=n))
    kept = draw(st.lists(st.integers(0, 8).map(lambda k: k / 8), min_size=11, max_size=11))
    alarm = [draw(st.integers(0, e - a)) for a, e in zip(at, end, strict=True)]
    return Story(positions, at, end, p, [1.0, *np.cumprod(kept).tolist()], alarm)


@given(stories())
@settings(max_examples=80)
def test_exposure_gives_the_formulas_bracket_by_bracket(story: Story) -> None:
    found = exposure(story.onsets, np.array(story.p), np.array(story.passed))
    reported_by, final_by = exposed.reported(found), exposed.final(found)
    for r, (at, end) in enumerate(zip(story.at, story.end, strict=True)):
        for stop in range(1, end - at + 1):
            reported, final = naive.unreliable_results(at, stop, end, story.positions, story.chances(r), story.passed)
            assert reported_by[r, stop] == pytest.approx(reported, abs=1e-12)
            assert final_by[r, stop] == pytest.approx(final, abs=1e-12)
        assert reported_by[r, 0] == 0 == final_by[r, 0]


@given(stories())
def test_chances_given_onset_by_onset_count_as_those_of_the_history(story: Story) -> None:
    """The way a drift gives them; also where there is a single onset."""
    onsets = story.onsets
    each = np.zeros((len(story.at), int(onsets.length.max())))
    for r in range(len(story.at)):
        each[r, : len(story.chances(r))] = story.chances(r)
    of_history = exposure(onsets, np.array(story.p), np.array(story.passed))
    of_onsets = exposure(onsets, each, np.array(story.passed))
    np.testing.assert_allclose(exposed.reported(of_history), exposed.reported(of_onsets), atol=1e-12)
    np.testing.assert_allclose(exposed.final(of_history), exposed.final(of_onsets), atol=1e-12)


def of(detection: Detection, r: int) -> dict[int | None, float]:
    """Chance of each count at one onset; None for never."""
    chances: dict[int | None, float] = {}
    for count, chance in zip(detection.delay[r].tolist(), detection.chance[r].tolist(), strict=True):
        if chance > 0:
            chances[count] = chances.get(count, 0.0) + chance
    never = float(detection.never[r])
    return chances | ({None: never} if never > 1e-12 else {})


@given(stories())
@settings(max_examples=80)
def test_detection_comes_with_whichever_is_first(story: Story) -> None:
    onsets, passed, alarm = story.onsets, np.array(story.passed), np.array(story.alarm)
    nothing_passes_for_ever = [1.0] * len(story.passed)
    for detection, survival, alarms in (
        (by_schedule(onsets, passed), story.passed, [0] * len(alarm)),
        (by_monitor(onsets, alarm), nothing_passes_for_ever, story.alarm),
        (by_both(onsets, passed, alarm), story.passed, story.alarm),
    ):
        for r, (at, end) in enumerate(zip(story.at, story.end, strict=True)):
            expected = naive.detections(at, end, story.positions, survival, alarms[r] or None)
            expected = {count: chance for count, chance in expected.items() if chance > 1e-12}
            assert of(detection, r) == pytest.approx(expected, abs=1e-12)
            mean = math.fsum(chance * (end - at if count is None else count) for count, chance in expected.items())
            assert detection.mean_each()[r] == pytest.approx(mean, abs=1e-9)
            for most in range(end - at + 1):
                by_then = math.fsum(chance for count, chance in expected.items() if count is not None and count <= most)
                assert detection.by(np.full(len(alarms), most))[r] == pytest.approx(by_then, abs=1e-12)


@given(stories(), st.sampled_from([0.05, 0.25, 0.5, 0.95, 1.0]))
def test_a_quantile_of_detection_is_that_of_all_onsets_together(story: Story, share: float) -> None:
    detection = by_both(story.onsets, np.array(story.passed), np.array(story.alarm))
    together: dict[float, float] = {}
    for r in range(len(story.at)):
        for count, chance in of(detection, r).items():
            key = math.inf if count is None else count
            together[key] = together.get(key, 0.0) + chance / len(story.at)
    reached, expected = 0.0, math.inf
    for key in sorted(together):
        reached += together[key]
        if reached >= share - 1e-9:
            expected = key
            break
    assert detection.quantile(share) == (None if expected == math.inf else expected)


@given(stories())
def test_what_must_hold_whatever_the_numbers(story: Story) -> None:
    onsets, passed = story.onsets, np.array(story.passed)
    found = exposure(onsets, np.array(story.p), passed)
    alone, alone_final = found.unreliable(onsets.length), found.unreliable_final(onsets.length)
    stop = np.where(np.array(story.alarm) > 0, np.array(story.alarm), onsets.length)
    reported, final = exposed.reported(found), exposed.final(found)
    assert (final <= reported + 1e-12).all(), "final results are among those reported"
    assert (np.diff(reported, axis=1) >= -1e-12).all() and (np.diff(final, axis=1) >= 0).all()
    assert (found.unreliable(stop) <= alone + 1e-12).all() and (found.unreliable_final(stop) <= alone_final).all()
    both, schedule = by_both(onsets, passed, np.array(story.alarm)), by_schedule(onsets, passed)
    assert (both.mean_each() <= schedule.mean_each() + 1e-9).all()
    assert (both.never <= schedule.never + 1e-12).all()


def test_an_event_just_before_the_onset_does_not_count_and_one_just_after_does() -> None:
    onsets = follow(np.array([5, 5]), np.array([9, 6]), np.array([5, 6, 6, 9]), 4)
    assert onsets.edges.tolist() == [[6, 6, 9, 9], [6, 6, 6, 6]]
    assert onsets.to_first_event.tolist() == [1, 1]
    found = exposure(onsets, np.ones(10), np.array([1, 0.5, 0.25, 0.1, 0.05]))
    reported, final = exposed.reported(found), exposed.final(found)
    assert reported[0].tolist() == [0, 1, 1.25, 1.5, 1.75]
    assert final[0].tolist() == [0, 0, 0.5, 0.5, 0.5]
    assert reported[1, :2].tolist() == [0, 1] and final[1, 1] == 0, "an event at the horizon is beyond it"


def test_without_control_events_every_unreliable_result_is_reported_and_none_is_final() -> None:
    onsets = follow(np.array([0, 3]), np.array([8, 8]), np.zeros(0, dtype=np.int64), 1)
    found = exposure(onsets, np.full(8, 0.5), np.ones(2))
    assert found.unreliable(onsets.length).tolist() == [4.0, 2.5]
    assert (exposed.final(found) == 0).all()
    assert (by_schedule(onsets, np.ones(2)).never == 1).all()


def told_by_chance(story: Story, lag: int, runs: int, random: np.random.Generator) -> Floats:
    """The story of its one onset run many times: unreliable results reported, of these final, and results until somebody knows.

    Once the alarm is there the laboratory knows: an event that passes while the last results go out makes none of them final.
    """
    at, followed, alarm = story.at[0], story.end[0] - story.at[0], story.alarm[0]
    events = [e - at for e in story.positions if at < e < story.end[0]]
    passes = [b / a if a else 0.0 for a, b in pairwise(story.passed)]
    told = np.zeros((3, runs))
    for run in range(runs):
        bad = random.random(followed) < story.chances(0)
        known, final = alarm or followed, 0
        stop = min(known + lag, followed)
        for event, chance in zip(events, passes, strict=False):
            if event >= stop:
                break
            if random.random() >= chance:
                stop, known = event, min(event, known)
                break
            final = event if event < known else final
        told[:, run] = bad[:stop].sum(), bad[:final].sum(), known
    return told


@pytest.mark.parametrize("lag", [0, 7])
@pytest.mark.parametrize("alarm", [0, 1, 9, 25, 33, 60])
def test_a_simulation_of_the_whole_story_agrees(alarm: int, lag: int) -> None:
    """Results drawn reliable or not, control events drawn passed or rejected, the monitor's alarm where it comes."""
    random, runs = child(11, "story", alarm, lag), 20_000
    p = np.round(random.uniform(0, 0.6, 80), 3).tolist()
    passed = [1.0, 0.8, 0.55, 0.5, 0.2, 0.1, 0.0]
    story = Story([2, 10, 19, 35, 35, 50, 62, 78], [10], [75], p, passed, [alarm])
    onsets = story.onsets
    found = exposure(onsets, np.array(p), np.array(passed))
    at_alarm, stop = alarm_and_stop(np.array([alarm]), onsets, lag, 0, np.arange(80))
    detection = by_both(onsets, np.array(passed), np.array([alarm]))
    reported, final, until = told_by_chance(story, lag, runs, random)
    for ours, told in (
        (found.unreliable(stop)[0], reported),
        (found.unreliable_final(at_alarm)[0], final),
        (detection.mean_each()[0], until),
    ):
        assert ours == pytest.approx(float(told.mean()), abs=3.5 * float(told.std()) / math.sqrt(runs) + 1e-9)


def test_a_horizon_inside_a_bracket_cuts_it() -> None:
    story = Story([4, 12], [2], [9], [1.0] * 14, [1.0, 0.5, 0.25], [0])
    found: Exposure = exposure(story.onsets, np.array(story.p), np.array(story.passed))
    assert found.unreliable(np.array([7]))[0] == 2 + 0.5 * 5
    assert found.unreliable_final(np.array([7]))[0] == 0.5 * 2
