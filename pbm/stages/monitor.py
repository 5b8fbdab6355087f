"""One monitor of one stream on the live feed: the same admit, transform, step and alarm machine as over history, one result at a time.

x --admit--> x' --transform--> y --baseline--> z --statistic--> s --alarm machine--> an alarm when an episode opens

The laws are called as plain Python on a list, so that a live result meets the very code that calibrated the limits. The state goes to
bytes and back without losing a bit; the last results, from which an onset is estimated, are those of the store and are read back from it.

A laboratory event takes effect before the first result that was measured at its time or later, and that comes after it: where the two
arrive in another order within this, nothing changes.
"""

import hashlib
import json
import struct
from collections import deque
from collections.abc import Iterable
from math import isnan, nan

import numpy as np

from pbm.errors import FeedError
from pbm.methods.alarm import judge
from pbm.methods.clock_time import MICROSECONDS_PER_DAY, control_events, hour_of_week
from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.event import EventKind
from pbm.records.laboratory import Lab
from pbm.records.notice import Notice
from pbm.records.plan import MonitorPlan
from pbm.records.result import Result
from pbm.records.snapshot import Snapshot
from pbm.records.stream import StreamName
from pbm.stages.estimate import TELL_THE_SIDE, WINDOW, Estimator, Offered
from pbm.stages.events import ALWAYS_RESTART
from pbm.stages.from_plan import error_model, in_control, limits, preparation, tracker
from pbm.stages.recentring import SIZE, Centre

STATE_VERSION = 2
# Version, episode, number of floats in the statistic's state, taken, dropped, offered and admitted since the start of the statistic, its
# value, the last control event and its outcome; then those floats, the centre, and the events that wait.
_HEAD = struct.Struct("<HbIQQQQdqb")
_NO_CONTROL = -(2**63)
_OUTCOME: dict[str, bool] = {"control accepted": True, "control rejected": False}
RELEARNED = "centre learned again"
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
    taken, dropped
        Results offered, and those of them that truncation left out.
    admitted
        Results that the statistic has taken since it began, or began afresh after an event.
    value
        The statistic when it was last judged; not a number before.
    episode
        +1 in an open alarm above the limit, -1 below, 0 armed.
    said
        Notices of what the monitor did because of an event; the caller takes them out.
    """

    def __init__(self, stream: StreamName, index: int, plan: MonitorPlan, lab: Lab, plan_sha256: str = "") -> None:
        self.stream, self.index, self.plan = stream, index, plan
        self.settings = settings_hash(plan)
        self.taken = self.dropped = self.admitted = self.episode = 0
        self.value = nan
        self.said: list[Notice] = []
        self._lab, self._zone, self._plan_sha256 = lab, lab.laboratory.zone, plan_sha256
        self._preparation, self._limits, statistic = preparation(plan), limits(plan), tracker(plan)
        self._law, self._start = statistic.law, statistic.start
        self._state, self._step, self._par = statistic.start(), statistic.law.step, statistic.par
        self.needed = 0 if statistic.law.starts_at_centre else int(statistic.parameter)
        self._recent: deque[Offered] = deque(maxlen=WINDOW)
        self._offered = 0
        self._control: tuple[int, bool] | None = None
        self._waiting: list[tuple[int, EventKind]] = []
        self._error = error_model(lab.analytes[stream.analyte])
        self._centre = Centre(in_control(plan), self._preparation, self._error, lab.events.relearn_at_most)

    def note(self, time: int, kind: EventKind) -> None:
        """A laboratory event that concerns the stream; it waits for the first result measured at its time or later."""
        self._waiting = sorted([*self._waiting, (time, kind)])

    def take(self, result: Result) -> Alarm | None:
        """Take the next result of the stream; the alarm if it opens an episode."""
        while self._waiting and self._waiting[0][0] <= result.time:
            self._apply(*self._waiting.pop(0))
        z = self._prepared(result)
        self._recent.append(Offered(result, z))
        self.taken += 1
        self._offered += 1
        if isnan(z):
            self.dropped += 1
            return None
        self.admitted += 1
        learning = self._centre.learning
        value = self._step(self._state, self._centre.relative(z), self._par)
        if learning and not self._centre.learning:
            self._tell_centre(result.time)
        if isnan(value):
            return None
        self.value = value
        before, self.episode = self.episode, judge(self.episode, value, *self._limits)
        return self._alarm(result) if self.episode and not before else None

    def _apply(self, time: int, kind: EventKind) -> None:
        """What an event does."""
        rules = self._lab.events
        if kind in _OUTCOME:
            self._control = max(self._control or (time, False), (time, _OUTCOME[kind]))
        if kind == "keep the old centre":
            self._centre.keep_old()
        if kind in rules.relearn:
            self._centre.learn(rules.relearn_over)
        if kind in rules.restart or kind in ALWAYS_RESTART:
            self._state, self.value, self.episode = self._start(), nan, 0
            self.admitted = self._offered = 0
            self._recent.clear()

    def _tell_centre(self, time: int) -> None:
        moved, results, capped = self._centre.learned()
        tea = moved / float(self._error.tea(np.array(self._preparation.back(in_control(self.plan).centre))))
        text = (
            f"{self.stream}: centre learned again from {results} results: {moved:+.3g} "
            f"{self._lab.analytes[self.stream.analyte].unit} ({abs(tea):.2f} TEa) from that of the plan"
        )
        capped_at = "; the results moved further, which relearn_at_most in lab.toml does not allow" * capped
        kind = RELEARNED if self.index == 0 else f"{RELEARNED}, monitor {self.index}"
        self.said.append(Notice(time, kind, self.stream.analyte, self.stream.analyser, text + capped_at, time))

    def _prepared(self, result: Result) -> float:
        hour = hour_of_week(result.time, self._zone) if self._preparation.baseline else 0
        return self._preparation.one(result.value, result.censor, result.ward, hour, result.sex, result.age)

    def _alarm(self, result: Result) -> Alarm:
        limit = self._limits.high if self.episode > 0 else self._limits.low
        return Alarm(
            stream=self.stream,
            monitor=self.index,
            time=result.time,
            specimen=result.specimen,
            side="HIGH" if self.episode > 0 else "LOW",
            statistic=self.plan.statistic,
            value=self.value,
            limit=limit,
            shown=self._shown(self.value),
            shown_limit=self._shown(limit),
            estimate=self._estimate(),
            last_control=self._last_control(result.time) if self._control is None else self._control[0],
            last_control_passed=None if self._control is None else self._control[1],
            plan_sha256=self._plan_sha256,
        )

    def _shown(self, value: float) -> float:
        """A value of the statistic for people: in the result's unit, about the present centre, where it is a level of results."""
        return self._preparation.back(value + self._centre.offset) if self._law.begins == "level" else value

    def _estimate(self) -> OnsetEstimate | None:
        if self.plan.statistic not in TELL_THE_SIDE:
            return None
        return Estimator(self._centre.in_control, self._preparation, self._error).estimate(
            list(self._recent), self.episode
        )

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
        control, passed = self._control or (_NO_CONTROL, False)
        counts = (self.taken, self.dropped, self._offered, self.admitted)
        head = _HEAD.pack(STATE_VERSION, self.episode, n, *counts, self.value, control, passed)
        waiting = json.dumps(self._waiting).encode() if self._waiting else b""
        return head + struct.pack(f"<{n}d", *self._state) + self._centre.to_bytes() + waiting

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
        try:
            self._read(state)
        except (struct.error, ValueError, TypeError):
            raise FeedError(
                f"The state of {self.stream} in the store is damaged ({len(state)} bytes). Move the store away to start afresh, or "
                "restore it from a copy."
            ) from None
        offered = deque(recent, maxlen=min(self._offered, WINDOW))
        self._recent = deque((Offered(one, self._prepared(one)) for one in offered), maxlen=WINDOW)

    def _read(self, state: bytes) -> None:
        version, episode, n, *counts, value, control, passed = _HEAD.unpack_from(state)
        if (version, n) != (STATE_VERSION, len(self._state)):
            raise ValueError("not a state of this monitor")
        centre = _HEAD.size + 8 * n
        self._waiting = [(time, kind) for time, kind in json.loads(state[centre + SIZE :] or b"[]")]
        self._centre.go_on(state[centre : centre + SIZE])
        self._state = list(struct.unpack_from(f"<{n}d", state, _HEAD.size))
        self.episode, self.value = episode, value
        self.taken, self.dropped, self._offered, self.admitted = counts
        self._control = None if control == _NO_CONTROL else (control, bool(passed))


def settings_hash(plan: MonitorPlan) -> str:
    """SHA-256 of those settings of a monitor that decide its course, and of the layout of its state."""
    decides = plan.model_dump(mode="json", exclude=_ONLY_TOLD) | {"layout": STATE_VERSION}
    return hashlib.sha256(json.dumps(decides, sort_keys=True).encode()).hexdigest()
