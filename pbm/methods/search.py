"""Choosing among candidates by successive halving: many candidates on few onsets, the best on many.

The score of a candidate is the weighted mean over faults of the expected unreliable results with the control schedule present. All
candidates meet the same faults at the same onsets. Among those within one standard error (of the paired difference) of the best, the
simplest wins.
"""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from pbm.methods.alarm import Limits
from pbm.methods.candidates import Candidate
from pbm.methods.chain import Preparation, Standing, Tracker, tracker_for
from pbm.methods.expected import Onsets
from pbm.methods.jit import Floats, Integers
from pbm.methods.limits import quick_limits
from pbm.methods.trials import Stretch, Trial

Stopper = Callable[[Integers, Onsets], tuple[Integers, Integers]]


def onsets_for(faults: int) -> int:
    """Onsets of the last round: the fewer the faults, the more onsets each needs (3,000 runs in all, 250 to 1,000 onsets)."""
    return min(max(3_000 // faults, 250), 1_000)


@dataclass(frozen=True, slots=True)
class Runner:
    """A candidate with its statistic centred and limited on the training results."""

    candidate: Candidate
    tracker: Tracker
    limits: Limits


def limited(stretch: Stretch, given: Sequence[Candidate], expected: float) -> list[Runner]:
    """The candidates that can be limited for an expected number of episodes in the stretch."""
    runners = []
    for preparation, group in _by_preparation(given).items():
        z = stretch.prepared(preparation)
        for candidate in group if np.isfinite(z).sum() > 1 else []:
            tracker = tracker_for(z, candidate.statistic, candidate.parameter)
            if (limits := quick_limits(tracker.path(z), tracker.centre, expected)) is not None:
                runners.append(Runner(candidate, tracker, limits))
    return runners


def _by_preparation(given: Sequence[Candidate]) -> dict[Preparation, list[Candidate]]:
    groups: dict[Preparation, list[Candidate]] = {}
    for candidate in given:
        groups.setdefault(candidate.preparation, []).append(candidate)
    return groups


def scores(stretch: Stretch, runners: Sequence[Runner], trials: Iterable[tuple[Trial, float]], stop: Stopper) -> Floats:
    """Expected unreliable results of each candidate at each onset, averaged over faults.

    Parameters
    ----------
    stretch
        The training results.
    runners
        The candidates, c of them.
    trials
        Faults at the same r onsets, each with its weight; one at a time is held in memory.
    stop
        From results until the alarm to (alarm, stop), as `trials.alarm_and_stop` does.

    Returns
    -------
    (c, r)
    """
    groups = _grouped(runners)
    standing: list[Standing] = []
    weights, sums = 0.0, np.zeros((len(runners), 0))
    for tried, weight in trials:
        if not standing:
            standing = _standing(stretch, runners, groups, tried.onsets.at)
            sums = np.zeros((len(runners), len(tried.onsets.at)))
        weights += weight
        for preparation, group in groups.items():
            faulted = tried.prepared(preparation)
            for i in group:
                found = tried.results_to_alarm(faulted, runners[i].tracker, runners[i].limits, standing[i])
                sums[i] += weight * tried.exposure.unreliable(stop(found, tried.onsets)[1])
    return sums / weights


def _standing(
    stretch: Stretch, runners: Sequence[Runner], groups: dict[Preparation, list[int]], at: Integers
) -> list[Standing]:
    """Each candidate's monitor before each onset."""
    found: dict[int, Standing] = {}
    for preparation, group in groups.items():
        z = stretch.prepared(preparation)
        found |= {i: runners[i].tracker.standing(z, runners[i].limits, at) for i in group}
    return [found[i] for i in range(len(runners))]


def _grouped(runners: Sequence[Runner]) -> dict[Preparation, list[int]]:
    groups: dict[Preparation, list[int]] = {}
    for i, runner in enumerate(runners):
        groups.setdefault(runner.candidate.preparation, []).append(i)
    return groups


def best_of(runners: Sequence[Runner], score: Floats, count: int) -> list[Runner]:
    """The `count` candidates with the lowest mean score (c, r)."""
    order = np.argsort(score.mean(axis=1), kind="stable").tolist()
    return [runners[i] for i in order[:count]]


def simplest_near_best(runners: Sequence[Runner], score: Floats) -> int:
    """Place of the simplest candidate within one standard error of the best; score is (c, r)."""
    best = int(np.argmin(score.mean(axis=1)))
    difference = score - score[best]
    error = difference.std(axis=1, ddof=1) / np.sqrt(score.shape[1]) if score.shape[1] > 1 else np.zeros(len(score))
    near: list[int] = np.flatnonzero(difference.mean(axis=1) <= error).tolist()
    return int(min(near, key=lambda i: (runners[i].candidate.complexity, score[i].mean())))
