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
from pbm.methods.chain import Preparation, Standing, Tracker
from pbm.methods.expected import Onsets
from pbm.methods.jit import Floats, Integers
from pbm.methods.limits import quick_limits
from pbm.methods.trials import Stretch, Trial

Stopper = Callable[[Integers, Onsets], tuple[Integers, Integers]]
Team = tuple[int, ...]


def onsets_for(faults: int) -> int:
    """Onsets of the last round: the fewer the faults, the more onsets each needs (3,000 runs in all, 250 to 1,000 onsets)."""
    return min(max(3_000 // faults, 250), 1_000)


@dataclass(frozen=True, slots=True)
class Runner:
    """A candidate with its statistic centred and limited on the training results."""

    candidate: Candidate
    tracker: Tracker
    limits: Limits


def limited(stretch: Stretch, given: Sequence[Candidate], expected: float, upper: float = 0.5) -> list[Runner]:
    """The candidates that can be limited for an expected number of episodes in the stretch; `upper` is the upper side's share."""
    runners = []
    for preparation, group in _by_preparation(given).items():
        z = stretch.prepared(preparation)
        for candidate in group if np.isfinite(z).sum() > 1 else []:
            tracker, path = candidate.centred(z)
            if (limits := quick_limits(path, tracker.centre, expected, upper)) is not None:
                runners.append(Runner(candidate, tracker, tracker.admissible(limits)))
    return runners


def _by_preparation(given: Sequence[Candidate]) -> dict[Preparation, list[Candidate]]:
    groups: dict[Preparation, list[Candidate]] = {}
    for candidate in given:
        groups.setdefault(candidate.preparation, []).append(candidate)
    return groups


def scores(
    stretch: Stretch,
    runners: Sequence[Runner],
    trials: Iterable[tuple[Trial, float]],
    stop: Stopper,
    teams: Sequence[Team] | None = None,
) -> Floats:
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
    teams
        Places of candidates that watch together, of which the first alarm counts; each candidate by itself if left out.

    Returns
    -------
    (c, r)
        One row for each team.
    """
    groups = _grouped(runners)
    teams = [(i,) for i in range(len(runners))] if teams is None else teams
    standing: list[Standing] = []
    weights, sums = 0.0, np.zeros((len(teams), 0))
    for tried, weight in trials:
        if not standing:
            standing = _standing(stretch, runners, groups, tried.onsets.at)
            sums = np.zeros((len(teams), len(tried.onsets.at)))
        weights += weight
        found: dict[int, Integers] = {}
        for preparation, group in groups.items():
            faulted = tried.prepared(preparation)
            for i in group:
                found[i] = tried.results_to_alarm(faulted, runners[i].tracker, runners[i].limits, standing[i])
        for row, team in enumerate(teams):
            first = first_of([found[i] for i in team])
            sums[row] += weight * tried.exposure.unreliable(stop(first, tried.onsets)[1])
    return sums / weights


def first_of(found: Sequence[Integers]) -> Integers:
    """Results until the first alarm of several monitors, each (r,), 0 where a monitor raises none."""
    if len(found) == 1:
        return found[0]
    never = np.iinfo(np.int64).max
    first = np.minimum.reduce([np.where(one > 0, one, never) for one in found])
    return np.where(first == never, 0, first)


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
    """The `count` candidates with the lowest mean score (c, r), and the best of every family of statistics that is not among them."""
    order = np.argsort(score.mean(axis=1), kind="stable").tolist()
    kept = order[:count]
    for i in order[count:]:
        if all(runners[i].candidate.statistic != runners[k].candidate.statistic for k in kept):
            kept.append(i)
    return [runners[i] for i in kept]


def difference_from(score: Floats, place: int) -> tuple[Floats, Floats]:
    """Mean difference of each row of a score (c, r) from one of them, and its standard error; both shape (c,)."""
    difference = score - score[place]
    n = score.shape[1]
    error = difference.std(axis=1, ddof=1) / np.sqrt(n) if n > 1 else np.zeros(len(score))
    return difference.mean(axis=1), error


def simplest_near_best(runners: Sequence[Runner], score: Floats) -> int:
    """Place of the simplest candidate within one standard error of the best; score is (c, r)."""
    difference, error = difference_from(score, int(np.argmin(score.mean(axis=1))))
    near: list[int] = np.flatnonzero(difference <= error).tolist()
    return int(min(near, key=lambda i: (runners[i].candidate.complexity, score[i].mean())))
