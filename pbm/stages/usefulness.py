"""Whether monitors pay on a stream: useful, marginal, or not useful here, with the reason in words."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pbm.methods.expected import follow
from pbm.methods.faults import Fault
from pbm.methods.trials import draw_onsets, trial
from pbm.methods.verdict import WORTHWHILE
from pbm.records.plan import Verdict
from pbm.stages.monitor_search import WINDOWS
from pbm.stages.proving_ground import ProvingGround
from pbm.stages.second_monitor import Member, team_scores

SOME_GAIN = 0.02
NEEDED_ONSETS = 250
NEEDED_AT_MOST = 5_000


@dataclass(frozen=True, slots=True)
class Judgement:
    """The verdict on a stream and the reason in words."""

    word: Verdict
    reason: str


def judge(ground: ProvingGround, team: Sequence[Member]) -> Judgement:
    """Judge a stream's monitors on the training days.

    The first of them decides whether an error is found within a day: a shift of 1 TEa, or for a stream that is watched for imprecision
    alone the largest added noise tried.
    """
    score = float(team_scores(ground, [team]).mean())
    faults = ground.faults
    alone = ground.schedule_alone(faults, ground.last_onsets(faults))
    if team[0].watches == "shift":
        sought, tried = "a shift of 1 TEa", [Fault("shift", 1.0, "TEa", sign) for sign in (-1, 1)]
    else:
        largest = max((fault for fault, _ in faults if fault.kind == "noise"), key=lambda fault: fault.size)
        sought, tried = f"{largest.size:g} times the analytic SD", [largest]
    gain = 1 - score / alone if alone > 0 else 0.0
    return judge_usefulness(_results_needed(ground, team[0], tried), ground.per_day, gain, sought)


def judge_usefulness(needed: float, per_day: float, gain: float, sought: str = "a shift of 1 TEa") -> Judgement:
    """Whether monitors pay on a stream.

    Parameters
    ----------
    needed
        Median number of results until the error that is sought is found; infinite where more than half are not.
    per_day
        Results a day.
    gain
        Share by which the monitors lower the expected unreliable results of the schedule alone, averaged over the faults.
    sought
        The error, in words.

    Notes
    -----
    Useful: found within an average day's run (common practice) and a gain of at least a tenth. Marginal: one of the two, and
    at least some gain.
    """
    sees = f"needs about {needed:.0f} results to see" if np.isfinite(needed) else "does not see"
    gained = f"averaged over the errors tried, {max(gain, 0):.0%} fewer unreliable results expected than with the controls alone"
    reason = f"{sees} {sought}; the line makes {per_day:.0f} a day; {gained}"
    same_day, gains = needed <= per_day, gain >= WORTHWHILE
    word: Verdict = (
        "useful"
        if same_day and gains
        else "marginal"
        if gain >= SOME_GAIN and (same_day or gains)
        else "not useful here"
    )
    return Judgement(word, reason)


def _results_needed(ground: ProvingGround, member: Member, faults: Sequence[Fault]) -> float:
    """Median of the results until one of the faults is found, followed for up to `NEEDED_AT_MOST` results."""
    training, runner = ground.training, member.runner
    last = max(len(training) - NEEDED_AT_MOST, len(training) // 2)
    at = draw_onsets(len(training) // WINDOWS, last, NEEDED_ONSETS, ground.around.random("results needed"))
    far = follow(at, np.minimum(at + NEEDED_AT_MOST, len(training)), np.zeros(0, dtype=np.int64), 1)
    z = training.prepared(runner.candidate.preparation)
    standing = runner.tracker.standing(z, runner.limits, at)
    found = []
    for fault in faults:
        tried = trial(training, fault, far, np.ones(2))
        count = tried.results_to_alarm(
            tried.prepared(runner.candidate.preparation), runner.tracker, runner.limits, standing
        )
        found.append(np.where(count > 0, count, np.inf))
    return float(np.median(np.concatenate(found)))
