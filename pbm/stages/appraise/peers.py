"""Other monitors within the same alarm budget, on the same errors and onsets: does the plan's monitor see them sooner?

All read the results as they are, without truncation, transform or patient mix. Each gets the plan's budget: those of statistical process
control from the training days as `pbm tune` does it, or by the textbook; a general drift detector by the keenest sensitivity that alarms no
more often than the budget on its last training results. A few onsets and the errors nearest to 1 TEa have to do, since the general
detectors are slow.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial

import numpy as np

from pbm.methods.alarm import REARM, Limits
from pbm.methods.chain import Preparation, Tracker, tracker_for
from pbm.methods.day_bootstrap import DayBootstrap, Estimate, average
from pbm.methods.detection import Detection, by_both, by_monitor
from pbm.methods.ewma_limits import textbook_factor
from pbm.methods.expected import Onsets
from pbm.methods.jit import Floats, Integers
from pbm.methods.limits import quick_limits
from pbm.methods.peers import PEERS, PeerMonitor, calibrated
from pbm.methods.trials import Trial, alarm_and_stop, trial
from pbm.records.appraisal import PeersTried
from pbm.records.judged import FalseAlarms, PeerAppraisal, Peers
from pbm.records.plan import MonitorPlan
from pbm.stages.appraise.false_alarms import alarms_of, told_alarms
from pbm.stages.appraise.fault import FaultFound
from pbm.stages.appraise.ground import Ground
from pbm.stages.appraise.watch import Running, Watch
from pbm.stages.appraise.written import figure, percentile

ONSETS = 32
CALIBRATED_ON = 10_000  # last training results, for a general detector
WARM_UP = 3_000  # results before the held-out days
USUAL_WINDOW = 50
PLAIN = Preparation()
QUICK = ("adwin", "page-hinkley")
WORDS = (
    "All take the results as they are. Moving mean and EWMA: limits learned on the training days for the same alarm budget, but for the "
    "textbook EWMA, whose limits take results for independent and normal. ADWIN, Page-Hinkley and KSWIN are general detectors of "
    f"change: the keenest setting that alarms no more often than the budget on the last {CALIBRATED_ON} training results, the rest left "
    "as the library has it. One whose alarms on held-out days exceed the budget finds errors sooner at that price."
)
Alarms = Callable[[Trial], Integers]


@dataclass(frozen=True, slots=True)
class _Rival:
    """Another way to watch: what it is, when it alarms in a trial, and its alarms on held-out days."""

    name: str
    title: str
    settings: str
    results_to_alarm: Alarms
    false_alarms: FalseAlarms


def peers_of(
    ground: Ground, plans: tuple[MonitorPlan, ...], watch: Watch, found: list[FaultFound], tried: PeersTried
) -> Peers | None:
    """The table; None where none is asked for or the stream has no monitor."""
    if tried == "none" or not plans:
        return None
    return _Comparing.of(ground, plans, watch, found).table(tried)


@dataclass(frozen=True, slots=True)
class _Comparing:
    """The errors at a few onsets, and the budget that each rival gets."""

    ground: Ground
    plan: MonitorPlan
    budget: float
    watch: Watch
    chosen: list[FaultFound]
    few: Onsets
    days: DayBootstrap
    trials: list[tuple[Trial, Floats]]

    @classmethod
    def of(cls, ground: Ground, plans: tuple[MonitorPlan, ...], watch: Watch, found: list[FaultFound]) -> "_Comparing":
        which = np.unique(np.linspace(0, len(ground.onsets.at) - 1, ONSETS).astype(np.int64))
        few, days = ground.onsets.chosen(which), DayBootstrap(ground.days.taken, ground.days.day[which])
        chosen = _nearest_to_tea(found)
        trials = [_tried_at(ground, one, few, which) for one in chosen]
        budget = sum(plan.budget_per_day for plan in plans)
        return cls(ground, plans[0], budget, _standing_at(ground, watch, few), chosen, few, days, trials)

    def table(self, tried: PeersTried) -> Peers:
        """The plan's monitors, then the others."""
        told, left_out = [], []
        for title, make in self._rivals(tried):
            try:
                told.append(self._told(make()))
            except ValueError as error:
                left_out.append(f"{title}: {error}")
        if tried == "quick":
            left_out.append("KSWIN: takes a minute a stream; `pbm appraise --peers all` tries it too")
        alone = self._average([self.days.mean(one.exposure.unreliable(self.few.length)) for one, _ in self.trials])
        return Peers(
            faults=tuple(one.record.label for one in self.chosen),
            onsets=len(self.few.at),
            alone=figure(alone),
            compared=tuple(told),
            words=WORDS,
            left_out=tuple(left_out),
        )

    def _rivals(self, tried: PeersTried) -> Iterator[tuple[str, Callable[[], _Rival]]]:
        yield "the plan", self._of_the_plan
        yield "moving mean", self._moving_mean
        yield "EWMA, calibrated", self._calibrated_ewma
        yield "EWMA, textbook limits", self._textbook_ewma
        for name, peer in PEERS.items():
            if tried == "all" or name in QUICK:
                yield peer.title, partial(self._detector, name)

    @property
    def _per_day(self) -> float:
        return len(self.ground.stretch) / float(self.ground.split.days[-1] - self.ground.split.days[0] + 1)

    @property
    def _window(self) -> int:
        """As many results as the plan's statistic looks back, in the sense of equal variance."""
        weight = self.plan.weight
        return self.plan.window or (max(round(2 / weight - 1), 2) if weight else USUAL_WINDOW)

    @property
    def _weight(self) -> float:
        return self.plan.weight or 2 / (self._window + 1)

    @property
    def _training(self) -> Floats:
        return self.ground.stretch.prepared(PLAIN)[: self.ground.split.at]

    def _of_the_plan(self) -> _Rival:
        alarms = alarms_of(self.ground, self.watch.monitors, self.budget)
        return _Rival("plan", "the monitors of plan.toml", "as planned", self.watch.results_to_alarm, alarms)

    def _moving_mean(self) -> _Rival:
        tracker = tracker_for(self._training, "mean", self._window)
        settings = f"of {self._window} results; limits learned on the training days"
        return self._monitor("moving mean", "moving mean without truncation", settings, tracker, self._learned(tracker))

    def _calibrated_ewma(self) -> _Rival:
        tracker = tracker_for(self._training, "ewma", self._weight)
        settings = f"weight {self._weight:.3g}; limits learned on the training days"
        return self._monitor("EWMA", "EWMA without truncation", settings, tracker, self._learned(tracker))

    def _textbook_ewma(self) -> _Rival:
        weight, run = self._weight, self._per_day / self.budget
        factor = textbook_factor(round(weight, 6), round(run))
        tracker = tracker_for(self._training, "ewma", weight)
        half = factor * float(np.nanstd(self._training)) * (weight / (2 - weight)) ** 0.5
        limits = Limits(tracker.centre - half, tracker.centre + half, tracker.centre, REARM)
        settings = f"weight {weight:.3g}; limits {factor:.3g} SD of the statistic, for independent normal results one alarm in {run:.0f}"
        return self._monitor("EWMA textbook", "EWMA with textbook limits", settings, tracker, limits)

    def _learned(self, tracker: Tracker) -> Limits:
        limits = quick_limits(
            tracker.path(self._training), tracker.centre, self.budget * self.ground.split.training_days
        )
        if limits is None:
            raise ValueError("no tail from which limits could be learned")
        return limits

    def _monitor(self, name: str, title: str, settings: str, tracker: Tracker, limits: Limits) -> _Rival:
        running = Running.with_limits(PLAIN, tracker, limits, self.ground.stretch, self.few)
        return _Rival(name, title, settings, running.results_to_alarm, alarms_of(self.ground, [running], self.budget))

    def _detector(self, name: str) -> _Rival:
        training = self._training[-CALIBRATED_ON:]
        monitor = calibrated(name, training, self.budget * len(training) / self._per_day)
        first = max(self.ground.split.at - WARM_UP, 0)
        z = self.ground.stretch.prepared(PLAIN)[first:]
        held_out = int((monitor.alarms(z) + first >= self.ground.split.at).sum())
        peer, states = PEERS[name], monitor.states_at(z, self.few.at - first)
        settings = f"{peer.sensitivity} {monitor.sensitivity:.3g}"
        return _Rival(
            peer.title,
            f"{peer.title}, a general drift detector",
            settings,
            partial(_first_detections, monitor, states),
            told_alarms(self.ground, held_out, self.budget, None),
        )

    def _told(self, rival: _Rival) -> PeerAppraisal:
        around, firsts, costs, untils, alone = self.ground.around, [], [], [], []
        for tried, passed in self.trials:
            to_alarm = rival.results_to_alarm(tried)
            _, stop = alarm_and_stop(
                to_alarm, self.few, around.lag_results, around.lag_microseconds, self.ground.stretch.time
            )
            both = by_both(self.few, passed, to_alarm)
            firsts.append(self.days.mean(both.by(self.few.to_first_event)))
            costs.append(self.days.mean(tried.exposure.unreliable(stop)))
            alone.append(self.days.mean(tried.exposure.unreliable(self.few.length)))
            untils.append(by_monitor(self.few, to_alarm))
        cost, without = self._average(costs), self._average(alone)
        return PeerAppraisal(
            name=rival.name,
            title=rival.title,
            settings=rival.settings,
            false_alarms=rival.false_alarms,
            by_first_event=figure(self._average(firsts)),
            until_median=percentile(self._together(untils)),
            unreliable=figure(cost),
            share_fewer=figure((without - cost).share_of(without)),
        )

    def _average(self, estimates: list[Estimate]) -> Estimate:
        return average(estimates, [one.weight for one in self.chosen])

    def _together(self, untils: list[Detection]) -> tuple[float | None, ...]:
        """Median over all errors tried."""
        pooled = Detection(
            np.concatenate([one.delay for one in untils]),
            np.concatenate([one.chance for one in untils]),
            np.concatenate([one.horizon for one in untils]),
        )
        days = DayBootstrap(self.days.taken, np.tile(self.days.day, len(untils)))
        return days.percentiles(pooled, (0.5,))[0]


def _first_detections(monitor: PeerMonitor, states: list, tried: Trial) -> Integers:  # type: ignore[type-arg]
    found = monitor.first_alarms(tried.prepared(PLAIN), states, tried.starts, tried.ends)
    return np.where(found >= 0, found - tried.starts + 1, 0)


def _nearest_to_tea(found: list[FaultFound]) -> list[FaultFound]:
    """Both signs of the shift nearest to 1 TEa; without shifts in TEa, of the middle one of the errors."""
    shifts = [one for one in found if (one.fault.kind, one.fault.unit) == ("shift", "TEa")]
    size = min((one.fault.size for one in shifts), key=lambda given: abs(given - 1), default=None)
    return [one for one in shifts if one.fault.size == size] or [found[len(found) // 2]]


def _tried_at(ground: Ground, found: FaultFound, few: Onsets, which: Integers) -> tuple[Trial, Floats]:
    passed = found.runs[0].tried.exposure.passed[which]
    return trial(ground.stretch, found.fault, few, passed), passed


def _standing_at(ground: Ground, watch: Watch, few: Onsets) -> Watch:
    return Watch(
        tuple(
            Running.with_limits(one.preparation, one.tracker, one.limits, ground.stretch, few) for one in watch.monitors
        )
    )
