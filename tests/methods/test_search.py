"""Choosing among candidates: scores recomputed fault by fault and onset by onset, and the simplest of the near best."""

import math
from functools import partial

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.alarm import Limits
from pbm.methods.candidates import Candidate
from pbm.methods.chain import Preparation, Tracker, tracker_for
from pbm.methods.faults import Fault
from pbm.methods.jit import Floats
from pbm.methods.limits import quick_limits
from pbm.methods.search import Runner, best_of, first_of, limited, scores, simplest_near_best
from pbm.methods.trials import alarm_and_stop, trial
from tests import naive
from tests.methods import exposed
from tests.methods.stretches import onsets, stretch
from tests.methods.test_trials import stepped

CANDIDATES = [
    Candidate(Preparation(), "ewma", 0.1),
    Candidate(Preparation(), "mean", 20),
    Candidate(Preparation(3.0, 5.5), "ewma", 0.05),
    Candidate(Preparation(3.0, 5.5, transform="log"), "median", 21),
    Candidate(Preparation(), "ewma", 0.3),
]


def test_limited_candidates_are_centred_and_limited_each_on_its_own_values() -> None:
    history = stretch(6000)
    runners = limited(history, CANDIDATES, expected=3.0)
    assert [r.candidate for r in runners] == [CANDIDATES[i] for i in (0, 1, 4, 2, 3)], "together where prepared alike"
    for runner in runners:
        z = history.prepared(runner.candidate.preparation)
        tracker = tracker_for(z, runner.candidate.statistic, runner.candidate.parameter)
        assert runner.tracker == tracker
        assert runner.limits == quick_limits(tracker.path(z), tracker.centre, 3.0)


def test_a_candidate_without_values_or_without_a_tail_is_left_out() -> None:
    history = stretch(2000)
    hopeless = [Candidate(Preparation(9.0, 10.0), "ewma", 0.1), Candidate(Preparation(4.2, 4.2000001), "mean", 5)]
    assert [r.candidate for r in limited(history, [*hopeless, CANDIDATES[0]], 2.0)] == [CANDIDATES[0]]


def test_scores_are_the_weighted_unreliable_results_of_each_fault_at_each_onset() -> None:
    """By a monitor stepped in plain Python and the formulas bracket by bracket, with a response lag of five results."""
    history = stretch(1500)
    followed = onsets(history, [200, 333, 600, 1000], length=300)
    passed = [1.0, 0.7, 0.5, 0.4]
    faults = [(Fault("shift", 1.0, "TEa"), 1.0), (Fault("shift", 1.0, "TEa", -1), 3.0), (Fault("noise", 3.0, ""), 0.5)]
    trials = [(trial(history, fault, followed, np.array(passed)), weight) for fault, weight in faults]
    preparation = Preparation(low=3.0, high=5.5)
    runner = Runner(Candidate(preparation, "ewma", 0.1), Tracker("ewma", 0.1, 4.2), Limits(3.98, 4.42, 4.2, 0.5))
    plain = Runner(Candidate(Preparation(), "mean", 30), Tracker("mean", 30, 4.2), Limits(4.0, 4.4, 4.2, 0.5))
    stop = partial(alarm_and_stop, lag_results=5, lag_microseconds=0, time=history.time)
    found = scores(history, [plain, runner], trials, stop)
    assert found.shape == (2, 4)
    for r, (at, end) in enumerate(zip(followed.at.tolist(), followed.end.tolist(), strict=True)):
        expected = 0.0
        for (fault, weight), (tried, _) in zip(faults, trials, strict=True):
            alarm = stepped(history, fault, at, end, runner.tracker)
            last = min(alarm + 5, end - at) if alarm else end - at
            chances = np.diff(exposed.reported(trial(history, fault, followed, np.ones(4)).exposure)[r]).tolist()
            events = list(range(120, 1500, 120))
            reported, _ = naive.unreliable_results(at, last, end, events, chances, passed)
            expected += weight * reported / 4.5
            assert tried.exposure.unreliable(np.full(4, last))[r] == pytest.approx(reported)
        assert found[1, r] == pytest.approx(expected)


def runner_of(candidate: Candidate) -> Runner:
    return Runner(candidate, Tracker(candidate.statistic, candidate.parameter, 0.0), Limits(-1, 1, 0, 0.5))


RUNNERS = [runner_of(c) for c in CANDIDATES]
SCORES = st.lists(st.lists(st.floats(0, 100), min_size=6, max_size=6), min_size=5, max_size=5).map(np.array)


@given(SCORES)
def test_the_chosen_one_is_the_simplest_within_a_standard_error_of_the_best(score: Floats) -> None:
    best = min(range(5), key=lambda i: (score[i].mean(), i))
    beyond = []  # how far each lies beyond one standard error of its difference from the best
    for i in range(5):
        apart = [a - b for a, b in zip(score[i].tolist(), score[best].tolist(), strict=True)]
        mean = math.fsum(apart) / 6
        beyond.append(mean - math.sqrt(math.fsum((x - mean) ** 2 for x in apart) / 5 / 6))
    chosen = simplest_near_best(RUNNERS, score)
    assert beyond[chosen] <= 1e-9
    surely_near = [i for i in range(5) if beyond[i] <= -1e-9 or i == best]
    assert all(CANDIDATES[chosen].complexity <= CANDIDATES[i].complexity for i in surely_near)


def test_a_complicated_candidate_must_be_clearly_better() -> None:
    noise = np.random.default_rng(1).normal(0, 1, 50)
    simple, elaborate = np.full(50, 10.0), 10 - 0.05 + noise - noise.mean()
    assert simplest_near_best([RUNNERS[0], RUNNERS[3]], np.array([simple, elaborate])) == 0
    assert simplest_near_best([RUNNERS[0], RUNNERS[3]], np.array([simple, elaborate - 1])) == 1
    assert simplest_near_best([RUNNERS[3], RUNNERS[0]], np.array([simple, simple])) == 1


def test_with_a_single_onset_only_an_equal_score_is_near() -> None:
    assert simplest_near_best([RUNNERS[0], RUNNERS[3]], np.array([[3.0], [2.9]])) == 1
    assert simplest_near_best([RUNNERS[3], RUNNERS[0]], np.array([[3.0], [3.0]])) == 1


@given(SCORES, st.integers(1, 7))
def test_the_best_are_those_with_the_lowest_mean(score: Floats, count: int) -> None:
    kept = best_of(RUNNERS, score, count)
    means = dict(zip(RUNNERS, score.mean(axis=1).tolist(), strict=True))
    assert sorted(means[r] for r in kept[:count]) == sorted(means.values())[:count]


@given(SCORES, st.integers(1, 7))
def test_the_best_of_every_family_is_kept_with_them(score: Floats, count: int) -> None:
    kept = best_of(RUNNERS, score, count)
    means = dict(zip(RUNNERS, score.mean(axis=1).tolist(), strict=True))
    assert len(set(kept)) == len(kept)
    for family in ("ewma", "mean", "median"):
        best = min(means[r] for r in RUNNERS if r.candidate.statistic == family)
        assert best in [means[r] for r in kept if r.candidate.statistic == family]
    assert all(
        [r.candidate.statistic for r in kept].count(late.candidate.statistic) == 1 for late in kept[min(count, 5) :]
    )


def test_of_monitors_that_watch_together_the_first_alarm_counts() -> None:
    one, other = np.array([5, 0, 9, 0]), np.array([7, 3, 2, 0])
    assert first_of([one, other]).tolist() == [5, 3, 2, 0]
    assert first_of([one]).tolist() == one.tolist()


def test_a_team_is_scored_by_its_first_alarm() -> None:
    history = stretch(3000)
    followed = onsets(history, [500, 900, 1400, 2000], length=400)
    runners = limited(history, CANDIDATES[:2], 3.0)
    tried = trial(history, Fault("shift", 1.0, "TEa"), followed, np.ones(5))
    stop = partial(alarm_and_stop, lag_results=0, lag_microseconds=0, time=history.time)
    first, second, both = scores(history, runners, [(tried, 1.0)], stop, teams=[(0,), (1,), (0, 1)])
    assert both.tolist() == np.minimum(first, second).tolist()
