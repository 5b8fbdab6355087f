"""A stream's monitors together: one for shifts, and one for imprecision if it pays with its share of the alarm budget.

Both watch the same results, and the first alarm of either counts. The shift monitor alone has the whole budget; beside a second one it has
what that one leaves. The pair is taken if it lowers the expected unreliable results over all errors of `lab.toml` by more than one standard
error, else the simpler single monitor stays.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from pbm.methods.alarm import Limits
from pbm.methods.jit import Floats
from pbm.methods.limits import CalibratedLimits, calibrated_limits
from pbm.methods.search import Runner, difference_from, limited
from pbm.stages.monitor_search import Found
from pbm.stages.proving_ground import ProvingGround

SHARES = (0.25, 0.5)  # of the budget, for the monitor of imprecision


@dataclass(frozen=True, slots=True)
class Member:
    """A limited monitor, what it watches for, the upper side's share of its alarms, and its budget of false alarms a day."""

    runner: Runner
    watches: Literal["shift", "imprecision"]
    upper: float
    budget: float

    def calibrated(self, ground: ProvingGround) -> CalibratedLimits | None:
        """Its limits by the day-block bootstrap; None if a side has no tail to learn from."""
        z = ground.not_fitted_to(self.runner.candidate.preparation)
        starts = np.flatnonzero(np.diff(ground.split.days[: ground.split.at], prepend=-1))
        return calibrated_limits(
            self.runner.tracker,
            z,
            np.append(starts, len(z)),
            self.budget * ground.split.training_days,
            ground.around.random("limits", str(self.runner.candidate)),
            upper=self.upper,
        )

    def within(self, limits: Limits) -> "Member":
        """The same with other limits."""
        return replace(self, runner=replace(self.runner, limits=limits))


Members = tuple[Member, ...]


def members(given: Sequence[Member | None]) -> Members | None:
    """The monitors, if all of them are there."""
    there = tuple(one for one in given if one is not None)
    return there if len(there) == len(given) else None


def team_scores(ground: ProvingGround, teams: Sequence[Sequence[Member]]) -> Floats:
    """Expected unreliable results with each team at each onset, averaged over all errors of the analyte, shape (teams, r)."""
    runners = [one.runner for team in teams for one in team]
    ends = np.cumsum([len(team) for team in teams]).tolist()
    places = [tuple(range(end - len(team), end)) for team, end in zip(teams, ends, strict=True)]
    return ground.scores(runners, ground.faults, ground.last_onsets(ground.faults), places)


def the_best_team(ground: ProvingGround, found: Sequence[Found], budget: float) -> tuple[Members, str]:
    """The monitors that a stream gets, and in words why there is a second one or none ("" where only one was looked for)."""
    if len(found) == 1:
        return (_member(found[0], found[0].chosen, budget),), ""
    alone = (_member(found[0], found[0].chosen, budget),)
    pairs = [pair for share in SHARES if (pair := _pair(ground, found, budget, share))]
    score = team_scores(ground, [alone, *pairs])
    best = int(np.argmin(score.mean(axis=1)))
    difference, error = difference_from(score, best)
    taken = 0 if difference[0] <= error[0] else best
    return (alone, *pairs)[taken], _in_words(score.mean(axis=1), (alone, *pairs), taken)


def _member(found: Found, runner: Runner, budget: float) -> Member:
    return Member(runner, found.watch.watches, found.watch.upper, budget)


def _pair(ground: ProvingGround, found: Sequence[Found], budget: float, share: float) -> Members | None:
    parts = (1 - share, share)
    return members([_again(ground, one, budget * part) for one, part in zip(found, parts, strict=True)])


def _again(ground: ProvingGround, found: Found, budget: float) -> Member | None:
    """A search's winner, limited for another budget."""
    expected = budget * ground.split.training_days
    again = limited(ground.training, [found.chosen.candidate], expected, found.watch.upper)
    return _member(found, again[0], budget) if again else None


def _in_words(mean: Floats, teams: Sequence[Sequence[Member]], taken: int) -> str:
    best_pair = 1 + int(np.argmin(mean[1:])) if len(mean) > 1 else None
    if best_pair is None:
        return "No second monitor for imprecision could be limited."
    share = teams[best_pair][1].budget / sum(one.budget for one in teams[best_pair])
    compared = f"{mean[best_pair]:.3g} unreliable results expected of an error, averaged over all errors tried, in place of {mean[0]:.3g}"
    if taken:
        return f"A second monitor for imprecision, with {share:.0%} of the alarm budget, pays: {compared}."
    return f"A second monitor for imprecision, with {share:.0%} of the alarm budget, does not pay: {compared}."
