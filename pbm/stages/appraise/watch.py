"""The monitors of a stream as they would have been running over its whole history; with several the alarm is the first of any."""

import math
from dataclasses import dataclass

import numpy as np

from pbm.methods.alarm import Limits, episodes, episodes_before
from pbm.methods.chain import Preparation, Standing, Tracker
from pbm.methods.day_bootstrap import Mask
from pbm.methods.expected import Onsets
from pbm.methods.in_control import slope
from pbm.methods.jit import Floats, Integers
from pbm.methods.level import level_wandering
from pbm.methods.trials import Stretch, Trial
from pbm.records.plan import MonitorPlan
from pbm.stages.appraise.ground import Ground
from pbm.stages.from_plan import in_control, limits, preparation, tracker

NEVER = np.iinfo(np.int64).max
MIDDLE = (0.05, 0.5, 0.95)
MOST_WANDERING = 1.0  # in TEa; a history that wanders by more holds errors, and cannot tell what is usual


@dataclass(frozen=True, slots=True)
class Running:
    """A monitor over the whole history, and its standing at each onset.

    Attributes
    ----------
    preparation, tracker, limits
        The monitor.
    z, path : (n,)
        The prepared results and the statistic.
    standing
        Before each onset.
    """

    preparation: Preparation
    tracker: Tracker
    limits: Limits
    z: Floats
    path: Floats
    standing: Standing

    @classmethod
    def of(cls, monitor: MonitorPlan, stretch: Stretch, onsets: Onsets) -> "Running":
        """Run a monitor of the plan."""
        return cls.with_limits(preparation(monitor), tracker(monitor), limits(monitor), stretch, onsets)

    @classmethod
    def with_limits(
        cls, prepared: Preparation, tracked: Tracker, within: Limits, stretch: Stretch, onsets: Onsets
    ) -> "Running":
        """Run any monitor."""
        z = stretch.prepared(prepared)
        return cls(prepared, tracked, within, z, tracked.path(z), tracked.standing(z, within, onsets.at))

    def results_to_alarm(self, tried: Trial) -> Integers:
        """Affected results until the alarm at each onset of a trial, shape (r,); 0 where there is none."""
        return tried.results_to_alarm(tried.prepared(self.preparation), self.tracker, self.limits, self.standing)

    def without_fault(self, onsets: Onsets) -> Integers:
        """The same where nothing is wrong: results until the next false alarm."""
        found = self.tracker.first_alarms(self.z, self.standing, onsets.at, onsets.end, self.limits)
        return np.where(found >= 0, found - onsets.at + 1, 0)

    def alarms_since(self, first: int) -> int:
        """Alarms that opened at result `first` or later."""
        return int((episodes(self.path, self.limits).at >= first).sum())

    def in_alarm(self) -> Mask:
        """Whether an alarm is open after each result, shape (n,)."""
        is_open: Mask = episodes_before(self.path, self.limits, np.arange(1, len(self.path) + 1)) != 0
        return is_open


@dataclass(frozen=True, slots=True)
class Watch:
    """All monitors of a stream; none, if the plan has none."""

    monitors: tuple[Running, ...]

    def results_to_alarm(self, tried: Trial) -> Integers:
        """Affected results until the first alarm of any, shape (r,); 0 where there is none."""
        return _first_of([one.results_to_alarm(tried) for one in self.monitors], len(tried.onsets.at))

    def without_fault(self, onsets: Onsets) -> Integers:
        """The same where nothing is wrong."""
        return _first_of([one.without_fault(onsets) for one in self.monitors], len(onsets.at))


@dataclass(frozen=True, slots=True)
class Level:
    """The history at a level of the analyser, and the monitors as they would have been running over it.

    Attributes
    ----------
    stretch, watch
        The history and the monitors.
    without_fault : (r,)
        Results until the alarm at each onset where nothing is wrong; 0 where there is none.
    """

    stretch: Stretch
    watch: Watch
    without_fault: Integers


def levels_of(ground: Ground, plans: tuple[MonitorPlan, ...]) -> list[Level]:
    """The history as it is, and with one SD of the level's wandering less and more; the first alone where no wandering is seen."""
    given = _level(ground, ground.stretch, plans)
    wandering = _wandering(ground, plans)
    others = (-wandering, wandering) if wandering else ()
    return [given, *(_level(ground, ground.stretch.at_level(one), plans) for one in others)]


def _level(ground: Ground, stretch: Stretch, plans: tuple[MonitorPlan, ...]) -> Level:
    watch = Watch(tuple(Running.of(one, stretch, ground.onsets) for one in plans))
    return Level(stretch, watch, watch.without_fault(ground.onsets))


def _wandering(ground: Ground, plans: tuple[MonitorPlan, ...]) -> float:
    """Wandering of the level as a shift of all results, in TEa: admitted values move by less than the results themselves."""
    prepared, usual, movement = _admitted(ground.stretch, plans)
    moved = level_wandering(ground.stretch.prepared(prepared), ground.split.days) / movement
    here, there = prepared.back(usual), prepared.back(usual + moved)
    tea = float(ground.stretch.error.tea(np.array(here))) if math.isfinite(here) else 0.0
    size = abs(there - here) / tea if tea > 0 else 0.0
    return min(size, MOST_WANDERING) if math.isfinite(size) else 0.0


def _admitted(stretch: Stretch, plans: tuple[MonitorPlan, ...]) -> tuple[Preparation, float, float]:
    """Results of which the level is well seen: how they are prepared, their usual value, and how far they move for a unit of shift.

    Those of the first monitor; without one, the middle nine tenths.
    """
    if plans:
        return preparation(plans[0]), in_control(plans[0]).centre, plans[0].slope
    low, usual, high = (float(one) for one in np.quantile(stretch.value, MIDDLE))
    middle = Preparation(low, high)
    return middle, usual, slope(stretch, middle)


def alarms_by(to_alarm: Integers, results: Integers) -> Floats:
    """1 at the onsets whose alarm comes with at most so many affected results, else 0, shape (r,); `to_alarm` is 0 for never."""
    return ((to_alarm > 0) & (to_alarm <= results)).astype(np.float64)


def _first_of(each: list[Integers], count: int) -> Integers:
    first = np.full(count, NEVER)
    for alarms in each:
        first = np.minimum(first, np.where(alarms > 0, alarms, NEVER))
    return np.where(first < NEVER, first, 0)
