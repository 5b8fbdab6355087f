"""What surrounds a stream when a fault is tried on its history: days, control events, chance of passing them, response lag.

Tune and appraise both stand on this, so that what was chosen and what is judged met the same schedule.
"""

from dataclasses import dataclass

import numpy as np

from pbm.methods.baseline import Mix
from pbm.methods.clock_time import MICROSECONDS_PER_DAY, MICROSECONDS_PER_MINUTE, control_events, hours_of_week
from pbm.methods.controls import Rules, Survival, survival
from pbm.methods.expected import Onsets, follow
from pbm.methods.faults import Chance, Fault
from pbm.methods.jit import Floats, Integers
from pbm.methods.seeds import child
from pbm.methods.trials import Stretch, draw_onsets
from pbm.records.laboratory import Analyte, Controls, Lab
from pbm.records.stream import StreamHistory, StreamName
from pbm.stages.from_plan import error_model, reporting

HORIZON_DAYS = 7.0
DRIFT_GROUPS = 10


@dataclass(frozen=True, slots=True)
class Surroundings:
    """A stream's analyte, control schedule, response lag and seed."""

    name: StreamName
    analyte: Analyte
    controls: Controls
    lag_results: int
    lag_microseconds: int
    lab: Lab
    seed: int

    @classmethod
    def of(cls, name: StreamName, lab: Lab, seed: int) -> "Surroundings":
        """As `lab.toml` describes them."""
        lag = lab.alarms.response_lag
        return cls(
            name,
            lab.analytes[name.analyte],
            lab.controls_of(name.analyte),
            lag.results,
            round(lag.minutes * MICROSECONDS_PER_MINUTE),
            lab,
            seed,
        )

    def random(self, *purpose: object) -> np.random.Generator:
        """A generator of its own for a purpose within this stream."""
        return child(self.seed, self.name, *purpose)

    def stretch(self, history: StreamHistory) -> Stretch:
        """The history as faults are tried on it."""
        return Stretch(
            history.time,
            history.value,
            history.censor.astype(float),
            Mix.of(history.ward, hours_of_week(history.time, self.lab.laboratory.zone), history.sex, history.age),
            error_model(self.analyte),
            reporting(self.analyte),
            Chance.draw(len(history), self.random("chance")),
        )

    def event_times(self, time: Integers) -> Integers:
        """Instants of the control events of a history with results at `time` (n,)."""
        if self.controls.every is not None:
            return time[self.controls.every - 1 :: self.controls.every]
        if not self.controls.times:
            return np.zeros(0, dtype=np.int64)
        zone = self.lab.laboratory.zone
        return control_events(int(time[0]), int(time[-1]), self.controls.times, zone, self.controls.on_weekdays())

    def event_positions(self, time: Integers) -> Integers:
        """Index of the first result after each control event of a history with results at `time` (n,)."""
        if self.controls.every is not None:
            return np.arange(self.controls.every, len(time) + 1, self.controls.every)
        return np.searchsorted(time, self.event_times(time), side="left").astype(np.int64)

    def onsets(self, time: Integers, first: int, last: int, count: int, horizon_days: float = HORIZON_DAYS) -> Onsets:
        """Onsets among results first ... last - 1, each followed to the horizon (at most half of the stretch) or to `last`."""
        horizon = min(horizon_days, self.horizon_days(time, first, last)) * MICROSECONDS_PER_DAY
        latest = int(np.searchsorted(time, time[last - 1] - horizon, side="right"))
        at = draw_onsets(first, max(latest, first + 1), count, self.random("onsets", count))
        end = np.minimum(np.searchsorted(time, time[at] + horizon, side="right"), last)
        positions = self.event_positions(time)
        return follow(at, end, positions, self._events_within(at, end, positions))

    def horizon_days(self, time: Integers, first: int, last: int) -> float:
        """How long an undetected error is followed."""
        return min(HORIZON_DAYS, float(time[last - 1] - time[first]) / MICROSECONDS_PER_DAY / 2)

    @staticmethod
    def _events_within(at: Integers, end: Integers, positions: Integers) -> int:
        inside = np.searchsorted(positions, end, side="left") - np.searchsorted(positions, at, side="right")
        return int(inside.max(initial=0)) + 1

    def chance_of_passing(self, fault: Fault, onsets: Onsets) -> Survival:
        """Chance that the first i control events after the onset of a fault all pass, i = 0 ... k.

        A drift has grown the further by the first event, the earlier in its bracket it began, and costs the less after it. So it is
        followed by groups of onsets that began alike, and the chances have shape (r, k + 1).
        """
        if not self.controls.levels or not self.controls.rules:
            return Survival(np.ones(onsets.edges.shape[1] + 1), np.zeros(onsets.edges.shape[1] + 1))
        if fault.kind != "drift":
            return self._survival(fault, np.ones(onsets.edges.shape[1]))
        passed = np.ones((len(onsets.at), onsets.edges.shape[1] + 1))
        error = np.zeros_like(passed)
        for alike in np.array_split(
            np.argsort(onsets.to_first_event, kind="stable"), min(DRIFT_GROUPS, len(onsets.at))
        ):
            ages = (onsets.edges[alike] - onsets.at[alike, None]).mean(axis=0)
            found = self._survival(fault, fault.growth(ages))
            passed[alike], error[alike] = found.passed, found.error
        return Survival(passed, error)

    def _survival(self, fault: Fault, growth: Floats) -> Survival:
        """Chance of passing the first events, at each of which the fault has grown to such a share of its size, shape (k,)."""
        levels = self.controls.levels
        means, spread = np.array([level.mean for level in levels]), np.array([level.sd for level in levels])
        bias = fault.bias(means, error_model(self.analyte)) / spread
        return survival(
            Rules.parse(self.controls.rules or ()),
            growth[:, None] * bias[None, :],
            fault.multiple,
            np.array([level.repeats for level in levels]),
            self.random("controls"),
            share=fault.share_hit,
        )
