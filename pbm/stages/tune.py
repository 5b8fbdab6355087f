"""Tune: choose each stream's monitor on training days, confirm its limits on held-out days, and say where a monitor is not useful.

The first two thirds of the days train, the last third is held out. Candidates are scored by expected unreliable results with the control
schedule present (methods/search.py), the finalists on the last third of the training days, which fitted no baseline; the winner's limits
come from the day-block bootstrap over all training days (methods/limits.py).
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import date, timedelta
from functools import partial

import numpy as np

from pbm.errors import PlanError
from pbm.methods.alarm import Limits
from pbm.methods.baseline import fit_baseline
from pbm.methods.candidates import Candidate, preparations
from pbm.methods.chain import Preparation, Tracker, tracker_for
from pbm.methods.clock_time import local_days
from pbm.methods.expected import Onsets, follow
from pbm.methods.faults import Fault
from pbm.methods.fleet import TradeOff
from pbm.methods.held_out import held_out_alarms
from pbm.methods.in_control import inflation, slope, wander
from pbm.methods.jit import Floats, Integers
from pbm.methods.limits import CalibratedLimits, calibrated_limits, quick_limits
from pbm.methods.search import Runner, best_of, limited, onsets_for, scores, simplest_near_best
from pbm.methods.split import Split, first_held_out_day, split_at
from pbm.methods.trials import Stretch, Trial, alarm_and_stop, draw_onsets, trial
from pbm.records.laboratory import Lab
from pbm.records.plan import (
    HeldOut,
    MonitorPlan,
    StreamPlan,
    Training,
)
from pbm.records.stream import StreamHistory
from pbm.stages.by_hand import NOTHING_BY_HAND, ByHand
from pbm.stages.from_plan import faults_of, preparation, tracker
from pbm.stages.surroundings import Surroundings
from pbm.stages.to_plan import chain_in_plan, limits_in_plan
from pbm.stages.usefulness import Judgement, judge_usefulness

FEWEST_DAYS = 20
FEWEST_RESULTS = 1_000
FIRST_ONSETS, FIRST_HORIZON_DAYS = 40, 2.0
FINALISTS = 12
NEEDED_ONSETS = 250
WINDOWS = 50  # a window is no longer than this part of the training results
NEEDED_AT_MOST = 5_000
TRADED_BUDGETS = tuple(1 / days for days in (240, 120, 60, 30, 15, 7, 3, 1))  # false alarms a day


def tune_stream(
    history: StreamHistory,
    lab: Lab,
    seed: int,
    by_hand: ByHand = NOTHING_BY_HAND,
    kept: Mapping[str, StreamPlan] | None = None,
    budgets: Mapping[str, float] | None = None,
) -> StreamPlan:
    """Choose the monitor of one stream, or say why it has none.

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
        Plans of streams by name: the stream's monitor is kept as it is there, and only centre and limits are learned anew.
    budgets
        False alarms a day by stream, where they are not those of `lab.toml`.

    Raises
    ------
    InputError
        If what is set by hand does not fit the results.
    PlanError
        If the monitor to be kept is not in the plan.
    """
    around = Surroundings.of(history.name, lab, seed)
    days = local_days(history.time, lab.laboratory.zone)
    refusal = _too_little(days)
    if refusal:
        return _no_monitor(around, days, refusal)
    budget = (budgets or {}).get(str(history.name), lab.budget_of(history.name.analyte).per_day)
    work = _Tuning(around, history, split_at(days, first_held_out_day(days)), budget, by_hand)
    return work.plan() if kept is None else work.relimited(_one_monitor(kept, str(history.name), around.analyte.unit))


def trade_off(history: StreamHistory, lab: Lab, seed: int, plans: Mapping[str, StreamPlan]) -> TradeOff:
    """What budgets of false alarms buy on a stream with the monitor that it has in a plan.

    Raises
    ------
    PlanError
        If the plan does not hold one monitor of the stream.
    """
    around = Surroundings.of(history.name, lab, seed)
    days = local_days(history.time, lab.laboratory.zone)
    work = _Tuning(around, history, split_at(days, first_held_out_day(days)), budget=TRADED_BUDGETS[0])
    return work.trade_off(_one_monitor(plans, str(history.name), around.analyte.unit))


def _one_monitor(kept: Mapping[str, StreamPlan], name: str, unit: str) -> MonitorPlan:
    if name in kept and kept[name].unit != unit:
        raise PlanError(
            f"plan.toml gives {name} in {kept[name].unit}, lab.toml in {unit}. Correct one of them, or tune again."
        )
    monitors = kept[name].monitors if name in kept else ()
    if len(monitors) != 1:
        raise PlanError(
            f"plan.toml has {len(monitors)} monitors for {name}, and --keep takes new limits for one. Run `pbm tune {name}`."
        )
    return monitors[0]


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
    """The work on one stream."""

    around: Surroundings
    history: StreamHistory
    split: Split
    budget: float
    by_hand: ByHand = NOTHING_BY_HAND
    _chances: dict[Fault, Floats] = field(default_factory=dict)

    def plan(self) -> StreamPlan:
        """Search, limit, judge and confirm."""
        training = self._training()
        return self._decided(training, self._search(training))

    def relimited(self, monitor: MonitorPlan) -> StreamPlan:
        """The same for a monitor that is kept: no search, and the baseline stays as it is."""
        training = self._training()
        return self._decided(training, self._kept(training, monitor, self.expected))

    def trade_off(self, monitor: MonitorPlan) -> TradeOff:
        """Expected unreliable results, averaged over the faults, at a range of budgets for a monitor that is kept."""
        training = self._training()
        runners = [self._kept(training, monitor, b * self.split.training_days) for b in TRADED_BUDGETS]
        usable = [(b, runner) for b, runner in zip(TRADED_BUDGETS, runners, strict=True) if runner]
        given = self.trials(training, self._last_onsets(training))
        cost = scores(training, [runner for _, runner in usable], given, self.stopper(training)).mean(axis=1)
        return TradeOff(np.array([b for b, _ in usable]), cost)

    def _kept(self, training: Stretch, monitor: MonitorPlan, expected: float) -> Runner | None:
        z = training.prepared(preparation(monitor))
        learned = tracker_for(z, monitor.statistic, tracker(monitor).parameter, **_fixed(tracker(monitor)))
        chosen = Candidate(preparation(monitor), monitor.statistic, learned.parameter)
        limits = quick_limits(learned.path(z), learned.centre, expected)
        return Runner(chosen, learned, limits) if limits else None

    def _training(self) -> Stretch:
        return self.around.stretch(self.history.rows(slice(0, self.split.at)))

    def _decided(self, training: Stretch, runner: Runner | None) -> StreamPlan:
        days = self.split.days
        limits = self._limits(training, runner) if runner else None
        if runner is None or limits is None:
            return _no_monitor(
                self.around, days, "no statistic of these results has a tail from which limits could be learned"
            )
        verdict = self._judge(training, Runner(runner.candidate, runner.tracker, limits.limits))
        monitors = () if verdict.word == "not useful here" else (self._monitor(training, runner, limits),)
        return StreamPlan(
            unit=self.around.analyte.unit,
            verdict=verdict.word,
            reason=verdict.reason,
            results_per_day=round(self.per_day, 1),
            held_out_from=date(1970, 1, 1) + timedelta(int(days[self.split.at])),
            monitors=monitors,
        )

    @property
    def per_day(self) -> float:
        days = self.split.days
        return len(days) / float(days[-1] - days[0] + 1)

    @property
    def expected(self) -> float:
        """Episodes that the budget allows in the training days."""
        return self.budget * self.split.training_days

    @property
    def choose_at(self) -> int:
        """Index of the first result of the last third of the training days: finalists are compared there, baselines fitted before."""
        training = self.split.days[: self.split.at]
        return split_at(training, first_held_out_day(training)).at

    def trials(self, training: Stretch, onsets: Onsets) -> Iterator[tuple[Trial, float]]:
        """Every fault at the same onsets, with its weight."""
        for fault, weight in faults_of(self.around.analyte):
            yield trial(training, fault, onsets, self._passed(fault, onsets)), weight

    def _passed(self, fault: Fault, onsets: Onsets) -> Floats:
        """Chance of passing the first control events; worked out once for each fault, for the longest horizon.

        Of a drift it depends on the onsets: how far it has grown at each event.
        """
        if fault.kind == "drift":
            return self.around.chance_of_passing(fault, onsets).passed
        events = onsets.edges.shape[1]
        if fault not in self._chances or len(self._chances[fault]) <= events:
            self._chances[fault] = self.around.chance_of_passing(fault, onsets).passed
        return self._chances[fault][: events + 1]

    def stopper(self, training: Stretch) -> partial[tuple[Integers, Integers]]:
        """From results until the alarm to (alarm, stop), with the laboratory's response lag."""
        around = self.around
        return partial(
            alarm_and_stop, lag_results=around.lag_results, lag_microseconds=around.lag_microseconds, time=training.time
        )

    def _search(self, training: Stretch) -> Runner | None:
        """Successive halving; the finalists are tried with and without a patient-mix baseline, on days that did not fit it."""
        choices = preparations(training.value, self.around.analyte.step, self.around.random("transform"))
        given = self.by_hand.candidates(self.by_hand.preparations(choices), longest=len(training) // WINDOWS)
        runners = limited(training, given, self.expected)
        if not runners:
            return None
        last = self._last_onsets(training)
        for fault, _ in faults_of(self.around.analyte):
            self._passed(fault, last)
        second_day = int(np.searchsorted(self.split.days, self.split.days[0], side="right"))
        first = self.around.onsets(training.time, second_day, len(training), FIRST_ONSETS, FIRST_HORIZON_DAYS)
        score = scores(training, runners, self.trials(training, first), self.stopper(training))
        finalists = best_of(runners, score, FINALISTS)
        finalists = self._with_and_without_baseline(training, finalists)
        if not finalists:
            return None
        score = scores(training, finalists, self.trials(training, last), self.stopper(training))
        return self._refitted(training, finalists[simplest_near_best(finalists, score)])

    def _last_onsets(self, training: Stretch) -> Onsets:
        count = onsets_for(len(faults_of(self.around.analyte)))
        return self.around.onsets(training.time, self.choose_at, len(training), count)

    def _with_and_without_baseline(self, training: Stretch, plain: list[Runner]) -> list[Runner]:
        """The finalists as they are, and adjusted for patient mix, unless one of the two is wanted."""
        if self.by_hand.baseline is False:
            return plain
        given = _with_baseline([runner.candidate for runner in plain], training, self.choose_at)
        adjusted = limited(training, given, self.expected)
        return adjusted if self.by_hand.baseline else plain + adjusted

    def _refitted(self, training: Stretch, chosen: Runner) -> Runner | None:
        """The chosen candidate with its baseline fitted on all training days."""
        plain = replace(chosen.candidate, preparation=replace(chosen.candidate.preparation, baseline=None))
        if chosen.candidate == plain:
            return chosen
        again = limited(training, _with_baseline([plain], training, len(training)), self.expected)
        return again[0] if again else None

    def _judge(self, training: Stretch, runner: Runner) -> Judgement:
        alone: list[tuple[float, float]] = []

        def trials() -> Iterator[tuple[Trial, float]]:
            for tried, weight in self.trials(training, self._last_onsets(training)):
                alone.append((float(tried.exposure.unreliable(tried.onsets.length).mean()), weight))
                yield tried, weight

        score = float(scores(training, [runner], trials(), self.stopper(training)).mean())
        schedule = sum(count * weight for count, weight in alone) / sum(weight for _, weight in alone)
        needed = self._results_needed(training, runner)
        return judge_usefulness(needed, self.per_day, 1 - score / schedule if schedule > 0 else 0.0)

    def _results_needed(self, training: Stretch, runner: Runner) -> float:
        """Median of the results until a shift of 1 TEa is found, to either side, followed for up to `NEEDED_AT_MOST` results."""
        last = max(len(training) - NEEDED_AT_MOST, len(training) // 2)
        at = draw_onsets(len(training) // WINDOWS, last, NEEDED_ONSETS, self.around.random("results needed"))
        far = follow(at, np.minimum(at + NEEDED_AT_MOST, len(training)), np.zeros(0, dtype=np.int64), 1)
        z = training.prepared(runner.candidate.preparation)
        standing = runner.tracker.standing(z, runner.limits, at)
        found = []
        for sign in (-1, 1):
            shifted = trial(training, Fault("shift", 1.0, "TEa", sign), far, np.ones(2))
            faulted = shifted.prepared(runner.candidate.preparation)
            count = shifted.results_to_alarm(faulted, runner.tracker, runner.limits, standing)
            found.append(np.where(count > 0, count, np.inf))
        return float(np.median(np.concatenate(found)))

    def _limits(self, training: Stretch, runner: Runner) -> CalibratedLimits | None:
        z = training.prepared(runner.candidate.preparation)
        starts = np.flatnonzero(np.diff(self.split.days[: self.split.at], prepend=-1))
        return calibrated_limits(
            runner.tracker,
            z,
            np.append(starts, len(z)),
            self.expected,
            self.around.random("limits", str(runner.candidate)),
        )

    def _monitor(self, training: Stretch, runner: Runner, limits: CalibratedLimits) -> MonitorPlan:
        prepared, tracked = runner.candidate.preparation, runner.tracker
        z = training.prepared(prepared)
        wandering = wander(z, round(self.per_day))
        return MonitorPlan(
            **chain_in_plan(prepared, tracked, z),
            **limits_in_plan(limits),
            budget_per_day=self.budget,
            slope=slope(training, prepared),
            inflation=inflation(z, wandering),
            wander=wandering,
            train=Training(days=self.split.training_days, episodes=limits.episodes),
            held_out=self._held_out(prepared, tracked, limits.limits),
        )

    def _held_out(self, prepared: Preparation, tracked: Tracker, limits: Limits) -> HeldOut:
        z = self.around.stretch(self.history).prepared(prepared)
        found = held_out_alarms(tracked.path(z), limits, self.split, self.budget)
        return HeldOut(days=found.days, episodes=found.episodes, interval=found.interval, kept=found.kept)


def _fixed(given: Tracker) -> dict[str, float]:
    """The parameters of a statistic that are not learned from in-control values."""
    return {name: x for name, x in given.named.items() if name in ("low", "high", "exponent")}


def _with_baseline(given: Sequence[Candidate], training: Stretch, until: int) -> list[Candidate]:
    """The same candidates with a patient-mix baseline, fitted once for each preparation, on the first `until` results."""
    mix = training.mix.rows(slice(0, until))
    fitted = {
        plain: fit_baseline(plain.transformed(training.value[:until], training.censor[:until]), mix)
        for plain in {candidate.preparation for candidate in given}
    }
    return [replace(c, preparation=replace(c.preparation, baseline=fitted[c.preparation])) for c in given]
