"""The monitors of a stream as they would have been running over its whole history; with several the alarm is the first of any."""

from dataclasses import dataclass

import numpy as np

from pbm.methods.alarm import Limits, episodes, episodes_before
from pbm.methods.chain import Preparation, Standing, Tracker
from pbm.methods.day_bootstrap import Mask
from pbm.methods.expected import Onsets
from pbm.methods.jit import Floats, Integers
from pbm.methods.trials import Stretch, Trial
from pbm.records.plan import MonitorPlan
from pbm.stages.from_plan import limits, preparation, tracker

NEVER = np.iinfo(np.int64).max


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


def _first_of(each: list[Integers], count: int) -> Integers:
    first = np.full(count, NEVER)
    for alarms in each:
        first = np.minimum(first, np.where(alarms > 0, alarms, NEVER))
    return np.where(first < NEVER, first, 0)
