"""Our statistics and monitor as estimators of river, for people who build their own pipeline.

`StreamStatistic` is one of the table of statistics behind `update` and `get`; `StreamMonitor` is the whole way of a result (truncation,
transform, statistic, limits, episodes) behind `update` and `drift_detected`. Both step the same laws as the live watch, so that they give
the same values and alarms to the last bit. A pickle keeps their state; a clone starts afresh.
"""

import math
from collections.abc import Iterator
from typing import Any

from river import base, stats

from pbm.methods.alarm import Limits, judge
from pbm.methods.chain import Preparation, Tracker
from pbm.records.plan import MonitorPlan
from pbm.stages import from_plan

_EXAMPLE = Tracker("ewma", 0.05, 0.0)


class StreamStatistic(stats.base.Univariate[float]):
    """A statistic of the table, one value at a time.

    Parameters
    ----------
    tracker
        The statistic with its parameters and centre.

    Examples
    --------
    >>> from pbm.methods.chain import Tracker
    >>> mean = StreamStatistic(Tracker("mean", 3, 140.0))
    >>> for x in (139.0, 140.0, 144.0):
    ...     mean.update(x)
    ...     print(mean.get())
    None
    None
    141.0
    """

    def __init__(self, tracker: Tracker) -> None:
        self.tracker = tracker
        self._state = tracker.start()
        self._step, self._par = tracker.law.step, tracker.par
        self._value = math.nan

    def update(self, x: float) -> None:
        """Take a value; one that is not a number stands for a dropped result and moves nothing."""
        if not math.isnan(x):
            self._value = self._step(self._state, x, self._par)

    def get(self) -> float | None:
        """The statistic after the last value, or None while it is not judged."""
        return None if math.isnan(self._value) else self._value

    @property
    def name(self) -> str:
        """Name of the statistic in the table, with its chosen parameter."""
        return f"{self.tracker.statistic}_{self.tracker.parameter:g}"

    @classmethod
    def _unit_test_params(cls) -> Iterator[dict[str, Any]]:
        yield {"tracker": _EXAMPLE}


class StreamMonitor(base.DriftDetector):
    """A monitor, one result at a time: a drift is detected with the result that opens an episode.

    Unlike river's own detectors it does not begin again after a detection: the episode stays open, and nothing more is detected, until
    the statistic comes back inside the re-arm band.

    Parameters
    ----------
    tracker
        The statistic with its parameters and centre.
    limits
        Control limits and re-arm share.
    preparation
        Truncation and transform; none if left out.

    Examples
    --------
    >>> from pbm.methods.alarm import Limits
    >>> from pbm.methods.chain import Tracker
    >>> monitor = StreamMonitor(Tracker("ewma", 0.5, 140.0), Limits(136.0, 144.0, 140.0, 0.5))
    >>> for x in (141.0, 150.0, 150.0, 140.0):
    ...     monitor.update(x)
    ...     print(monitor.drift_detected, monitor.episode)
    False 0
    True 1
    False 1
    False 1
    """

    def __init__(self, tracker: Tracker, limits: Limits, preparation: Preparation | None = None) -> None:
        super().__init__()
        self.tracker = tracker
        self.limits = limits
        self.preparation = preparation
        self._reset()

    def _reset(self) -> None:
        super()._reset()
        self._state = self.tracker.start()
        self._step, self._par = self.tracker.law.step, self.tracker.par
        self._value, self._episode = math.nan, 0

    @classmethod
    def from_plan(cls, plan: MonitorPlan) -> "StreamMonitor":
        """The monitor that a plan describes."""
        return cls(from_plan.tracker(plan), from_plan.limits(plan), from_plan.preparation(plan))

    def update(self, x: float, censor: int = 0, ward: str = "", hour: int = 0, sex: str = "", age: str = "") -> None:
        """Take a result.

        Parameters
        ----------
        x
            The result in its own unit; not a number moves nothing.
        censor
            -1 for "<x", +1 for ">x".
        ward, hour, sex, age
            Where it came from, in which local hour of the week, and the patient's sex ("F", "M") and age band; matter with a patient-mix
            baseline only.
        """
        z = x if self.preparation is None else self.preparation.one(x, censor, ward, hour, sex, age)
        self._drift_detected = False
        if math.isnan(z):
            return
        self._value = self._step(self._state, z, self._par)
        before, self._episode = self._episode, judge(self._episode, self._value, *self.limits)
        self._drift_detected = before == 0 != self._episode

    @property
    def value(self) -> float | None:
        """The statistic after the last admitted result, or None while it is not judged."""
        return None if math.isnan(self._value) else self._value

    @property
    def episode(self) -> int:
        """The open episode: +1 above the upper limit, -1 below the lower one, 0 for none."""
        return self._episode

    @classmethod
    def _unit_test_params(cls) -> Iterator[dict[str, Any]]:
        yield {"tracker": _EXAMPLE, "limits": Limits(-1.0, 1.0, 0.0, 0.5)}
