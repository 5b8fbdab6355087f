"""One monitor of one stream on the live feed: the same admit, transform, step and alarm machine as over history, one result at a time.

x --admit--> x' --transform--> y --baseline--> z --statistic--> s --alarm machine--> an alarm when an episode opens

The laws are called as plain Python on a list, so that a live result meets the very code that calibrated the limits. The state goes to
bytes and back without losing a bit; the last results, from which an onset is estimated, are those of the store and are read back from it.
"""

import hashlib
import json
import struct
from collections import deque
from collections.abc import Iterable
from math import isnan, nan

from pbm.errors import FeedError
from pbm.methods.alarm import judge
from pbm.methods.clock_time import MICROSECONDS_PER_DAY, control_events, hour_of_week
from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.laboratory import Lab
from pbm.records.plan import MonitorPlan
from pbm.records.result import Result
from pbm.records.snapshot import Snapshot
from pbm.records.stream import StreamName
from pbm.stages.estimate import TELL_THE_SIDE, WINDOW, Estimator, Offered
from pbm.stages.from_plan import error_model, in_control, limits, preparation, tracker

STATE_VERSION = 1
# Version, episode, number of floats in the statistic's state, admitted, dropped, value of the statistic; then those floats.
_HEAD = struct.Struct("<HbIQQd")
# Settings that only tell where the others came from, or what an alarm is worth, do not interrupt a state.
_ONLY_TOLD = {"watches", "limits_interval", "budget_per_day", "slope", "inflation", "wander", "train", "held_out"}


class StreamMonitor:
    """A monitor and its state.

    Attributes
    ----------
    stream, index
        The stream and the place of the monitor in its plan.
    plan
        What the monitor is.
    settings
        SHA-256 of what decides its course: a state goes on only under the same settings.
    admitted, dropped
        Results that the statistic took, and results that truncation left out.
    value
        The statistic when it was last judged; not a number before.
    episode
        +1 in an open alarm above the limit, -1 below, 0 armed.
    """

    def __init__(self, stream: StreamName, index: int, plan: MonitorPlan, lab: Lab, plan_sha256: str = "") -> None:
        self.stream, self.index, self.plan = stream, index, plan
        self.settings = settings_hash(plan)
        self.admitted = self.dropped = self.episode = 0
        self.value = nan
        self._lab, self._zone, self._plan_sha256 = lab, lab.laboratory.zone, plan_sha256
        self._preparation, self._limits, statistic = preparation(plan), limits(plan), tracker(plan)
        self._law = statistic.law
        self._state, self._step, self._par = statistic.start(), statistic.law.step, statistic.par
        self.needed = 0 if statistic.law.starts_at_centre else int(statistic.parameter)
        self._recent: deque[Offered] = deque(maxlen=WINDOW)

    @property
    def taken(self) -> int:
        """Results offered to the monitor."""
        return self.admitted + self.dropped

    def take(self, result: Result) -> Alarm | None:
        """Take the next result of the stream; the alarm if it opens an episode."""
        z = self._prepared(result)
        self._recent.append(Offered(result, z))
        if isnan(z):
            self.dropped += 1
            return None
        self.admitted += 1
        value = self._step(self._state, z, self._par)
        if isnan(value):
            return None
        self.value = value
        before, self.episode = self.episode, judge(self.episode, value, *self._limits)
        return self._alarm(result) if self.episode and not before else None

    def _prepared(self, result: Result) -> float:
        hour = hour_of_week(result.time, self._zone) if self._preparation.baseline else 0
        return self._preparation.one(result.value, result.censor, result.ward, hour, result.sex, result.age)

    def _alarm(self, result: Result) -> Alarm:
        limit = self._limits.high if self.episode > 0 else self._limits.low
        shown = self._preparation.back if self._law.begins == "level" else float
        return Alarm(
            stream=self.stream,
            monitor=self.index,
            time=result.time,
            specimen=result.specimen,
            side="HIGH" if self.episode > 0 else "LOW",
            statistic=self.plan.statistic,
            value=self.value,
            limit=limit,
            shown=shown(self.value),
            shown_limit=shown(limit),
            estimate=self._estimate(),
            last_control=self._last_control(result.time),
            plan_sha256=self._plan_sha256,
        )

    def _estimate(self) -> OnsetEstimate | None:
        if self.plan.statistic not in TELL_THE_SIDE:
            return None
        error = error_model(self._lab.analytes[self.stream.analyte])
        return Estimator(in_control(self.plan), self._preparation, error).estimate(list(self._recent), self.episode)

    def _last_control(self, time: int) -> int | None:
        controls = self._lab.controls_of(self.stream.analyte)
        if not controls.times:
            return None
        # Eight days back: a schedule of one weekday, and a day longer by the hour that clocks are put back.
        since = time - 8 * MICROSECONDS_PER_DAY
        return int(control_events(since, time, controls.times, self._zone, controls.on_weekdays())[-1])

    def snapshot(self) -> Snapshot:
        """The monitor as it stands, for the store."""
        return Snapshot(
            stream=self.stream,
            monitor=self.index,
            settings=self.settings,
            state=self.to_bytes(),
            taken=self.taken,
            admitted=self.admitted,
            needed=self.needed,
            value=self.value,
            episode=self.episode,
        )

    def to_bytes(self) -> bytes:
        """The state; with the last results offered it is all that the monitor needs to go on."""
        n = len(self._state)
        head = _HEAD.pack(STATE_VERSION, self.episode, n, self.admitted, self.dropped, self.value)
        return head + struct.pack(f"<{n}d", *self._state)

    def go_on(self, state: bytes, recent: Iterable[Result]) -> None:
        """Go on from a state.

        Parameters
        ----------
        state
            From `to_bytes` of a monitor with the same settings.
        recent
            The last results offered to it, in order; at least the last `WINDOW`, or all.

        Raises
        ------
        FeedError
            If the bytes are not a state of this monitor.
        """
        n = len(self._state)
        if len(state) != _HEAD.size + 8 * n or _HEAD.unpack_from(state)[::2][:2] != (STATE_VERSION, n):
            raise FeedError(
                f"The state of {self.stream} in the store is damaged ({len(state)} bytes). Move the store away to start afresh, or "
                "restore it from a copy."
            )
        _, self.episode, _, self.admitted, self.dropped, self.value = _HEAD.unpack_from(state)
        self._state = list(struct.unpack_from(f"<{n}d", state, _HEAD.size))
        offered = deque(recent, maxlen=min(self.taken, WINDOW))
        self._recent = deque((Offered(one, self._prepared(one)) for one in offered), maxlen=WINDOW)


def settings_hash(plan: MonitorPlan) -> str:
    """SHA-256 of those settings of a monitor that decide its course, and of the layout of its state."""
    decides = plan.model_dump(mode="json", exclude=_ONLY_TOLD) | {"layout": STATE_VERSION}
    return hashlib.sha256(json.dumps(decides, sort_keys=True).encode()).hexdigest()
