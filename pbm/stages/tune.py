"""Tune: choose each stream's monitors on training days, confirm their limits on held-out days, and say where a monitor is not useful.

The first two thirds of the days train, the last third is held out. Candidates are scored by expected unreliable results with the control
schedule present (monitor_search.py); where `lab.toml` lists added noise beside other errors, a second monitor watches for imprecision if
it pays with its share of the budget (second_monitor.py). The limits of what is chosen come from the day-block bootstrap over all training
days (methods/limits.py).
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date, timedelta

import numpy as np

from pbm.errors import InputError, PlanError
from pbm.methods.candidates import WHOLE_GRID, Candidate, Grid
from pbm.methods.chain import tracker_for
from pbm.methods.clock_time import local_days
from pbm.methods.fleet import TradeOff
from pbm.methods.jit import Integers
from pbm.methods.limits import quick_limits
from pbm.methods.search import Runner
from pbm.methods.split import first_held_out_day, split_at
from pbm.records.laboratory import Lab
from pbm.records.plan import MonitorPlan, StreamPlan
from pbm.records.stream import StreamHistory
from pbm.records.tuning import Tuned
from pbm.stages.by_hand import NOTHING_BY_HAND, ByHand
from pbm.stages.from_plan import preparation, tracker
from pbm.stages.monitor_in_plan import monitor_in_plan
from pbm.stages.monitor_search import Found, MonitorSearch, Watch
from pbm.stages.proving_ground import ProvingGround
from pbm.stages.reasons import reasons_of
from pbm.stages.second_monitor import Member, members, team_scores, the_best_team
from pbm.stages.surroundings import Surroundings
from pbm.stages.usefulness import judge

FEWEST_DAYS = 20
FEWEST_RESULTS = 1_000
TRADED_BUDGETS = tuple(1 / days for days in (240, 120, 60, 30, 15, 7, 3, 1))  # false alarms a day
NO_TAIL = "no statistic of these results has a tail from which limits could be learned"


def tune_stream(
    history: StreamHistory,
    lab: Lab,
    seed: int,
    by_hand: ByHand = NOTHING_BY_HAND,
    kept: Mapping[str, StreamPlan] | None = None,
    budgets: Mapping[str, float] | None = None,
    grid: Grid = WHOLE_GRID,
) -> Tuned:
    """Choose the monitors of one stream, or say why it has none.

    Parameters
    ----------
    history
        All results of the stream.
    lab
        The laboratory: analyte, budget, schedule, faults.
    seed
        Master seed; the same seed gives the same plan.
    by_hand
        What a person sets; the rest is chosen.
    kept
        Plans of streams by name: the stream's monitors are kept as they are there, and only centres and limits are learned anew.
    budgets
        False alarms a day by stream, where they are not those of `lab.toml`.
    grid
        What is tried.

    Raises
    ------
    InputError
        If what is set by hand does not fit the results.
    PlanError
        If the monitors to be kept are not in the plan.
    """
    around = Surroundings.of(history.name, lab, seed)
    days = local_days(history.time, lab.laboratory.zone)
    refusal = _too_little(days)
    if refusal:
        return Tuned(plan=_no_monitor(around, days, refusal))
    budget = (budgets or {}).get(str(history.name), lab.budget_of(history.name.analyte).per_day)
    work = _Tuning(_proving_ground(around, history, days), history, budget)
    if kept is None:
        return work.searched(by_hand, grid)
    return Tuned(plan=work.relimited(_monitors(kept, str(history.name), around.analyte.unit)))


def trade_off(history: StreamHistory, lab: Lab, seed: int, plans: Mapping[str, StreamPlan]) -> TradeOff:
    """What budgets of false alarms buy on a stream with the monitors that it has in a plan.

    Raises
    ------
    PlanError
        If the plan holds no monitor of the stream.
    """
    around = Surroundings.of(history.name, lab, seed)
    ground = _proving_ground(around, history, local_days(history.time, lab.laboratory.zone))
    monitors = _monitors(plans, str(history.name), around.analyte.unit)
    curve = []
    for budget in TRADED_BUDGETS:
        team = _Tuning(ground, history, budget).kept(monitors)
        if team is not None:
            curve.append((budget, float(team_scores(ground, [team]).mean())))
    return TradeOff(np.array([budget for budget, _ in curve]), np.array([cost for _, cost in curve]))


def _proving_ground(around: Surroundings, history: StreamHistory, days: Integers) -> ProvingGround:
    split = split_at(days, first_held_out_day(days))
    return ProvingGround(around, around.stretch(history.rows(slice(0, split.at))), split)


def _monitors(kept: Mapping[str, StreamPlan], name: str, unit: str) -> Sequence[MonitorPlan]:
    if name in kept and kept[name].unit != unit:
        raise PlanError(
            f"plan.toml gives {name} in {kept[name].unit}, lab.toml in {unit}. Correct one of them, or tune again."
        )
    if name not in kept or not kept[name].monitors:
        raise PlanError(
            f"plan.toml has no monitor for {name} that --keep could give new limits. Run `pbm tune {name}`."
        )
    return kept[name].monitors


def _too_little(days: Integers) -> str | None:
    have = len(np.unique(days))
    if have < FEWEST_DAYS or len(days) < FEWEST_RESULTS:
        return (
            f"{len(days)} results on {have} days are too few to choose and confirm limits "
            f"(at least {FEWEST_RESULTS} results on {FEWEST_DAYS} days)"
        )
    return None


def _no_monitor(around: Surroundings, days: Integers, reason: str) -> StreamPlan:
    per_day = len(days) / float(days[-1] - days[0] + 1) if len(days) else 0.0
    return StreamPlan(
        unit=around.analyte.unit, verdict="not useful here", reason=reason, results_per_day=round(per_day, 1)
    )


@dataclass(frozen=True)
class _Tuning:
    """The work on one stream, with a budget of false alarms a day."""

    ground: ProvingGround
    history: StreamHistory
    budget: float

    def searched(self, by_hand: ByHand, grid: Grid) -> Tuned:
        """Search, limit, judge and confirm."""
        found = [one for watch in self._watches(by_hand, grid) if (one := self._search(watch, by_hand, grid))]
        if not found:
            return Tuned(plan=self._without(NO_TAIL))
        team, together = the_best_team(self.ground, found, self.budget)
        return Tuned(plan=self._decided(team), reasons=reasons_of(self.ground, found, together))

    def _watches(self, by_hand: ByHand, grid: Grid) -> list[Watch]:
        """For shifts, for imprecision, or for both, as the errors of `lab.toml` ask for."""
        faults = self.ground.faults
        watches = [watch for watch in (Watch.shifts(faults), Watch.imprecision(faults)) if watch.faults]
        tried = {family.statistic for watch in watches for family in grid.watching(watch.watches)}
        if by_hand.statistic is not None and by_hand.statistic not in tried:
            analyte = self.history.name.analyte
            raise InputError(
                f"{by_hand.statistic} is not tried for {analyte}: it looks for another kind of error than [analytes.{analyte}] "
                f"lists under faults, or is not in the quick search. Tried are {', '.join(sorted(tried))}."
            )
        return watches

    def _search(self, watch: Watch, by_hand: ByHand, grid: Grid) -> Found | None:
        wanted = by_hand.among(grid.watching(watch.watches))
        return MonitorSearch(self.ground, watch, wanted, grid, self.budget * self.ground.split.training_days).run()

    def relimited(self, monitors: Sequence[MonitorPlan]) -> StreamPlan:
        """The same for monitors that are kept: no search, and their baselines stay as they are."""
        team = self.kept(monitors)
        return self._without(NO_TAIL) if team is None else self._decided(team)

    def kept(self, monitors: Sequence[MonitorPlan]) -> tuple[Member, ...] | None:
        """Monitors of a plan with new limits, each with the share of the budget that it had; None if one cannot be limited."""
        whole = sum(one.budget_per_day for one in monitors)
        team = tuple(self._kept(one, self.budget * one.budget_per_day / whole) for one in monitors)
        return members(team)

    def _kept(self, monitor: MonitorPlan, budget: float) -> Member | None:
        z = self.ground.training.prepared(preparation(monitor))
        planned = tracker(monitor)
        fixed = {name: x for name, x in planned.named.items() if name in ("low", "high", "exponent")}
        learned = tracker_for(z, monitor.statistic, planned.parameter, **fixed)
        upper = 1.0 if monitor.limits.low is None else 0.0 if monitor.limits.high is None else 0.5
        limits = quick_limits(learned.path(z), learned.centre, budget * self.ground.split.training_days, upper)
        if limits is None:
            return None
        chosen = Candidate(preparation(monitor), monitor.statistic, learned.parameter)
        return Member(Runner(chosen, learned, learned.admissible(limits)), monitor.watches, upper, budget)

    def _decided(self, team: Sequence[Member]) -> StreamPlan:
        calibrated = [one.calibrated(self.ground) for one in team]
        limits = [one for one in calibrated if one is not None]
        if len(limits) < len(team):
            return self._without(NO_TAIL)
        team = [one.within(found.limits) for one, found in zip(team, limits, strict=True)]
        verdict = judge(self.ground, team)
        whole = self.ground.around.stretch(self.history)
        return StreamPlan(
            unit=self.ground.around.analyte.unit,
            verdict=verdict.word,
            reason=verdict.reason,
            results_per_day=round(self.ground.per_day, 1),
            held_out_from=date(1970, 1, 1) + timedelta(int(self.ground.split.days[self.ground.split.at])),
            monitors=()
            if verdict.word == "not useful here"
            else tuple(
                monitor_in_plan(self.ground, whole, one, found) for one, found in zip(team, limits, strict=True)
            ),
        )

    def _without(self, reason: str) -> StreamPlan:
        return _no_monitor(self.ground.around, self.ground.split.days, reason)
