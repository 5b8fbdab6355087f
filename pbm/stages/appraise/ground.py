"""The held-out days of a stream as every figure meets them: onsets, the days and hours they fall on, control events, draws of days."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from pbm.methods.clock_time import MICROSECONDS_PER_DAY, MICROSECONDS_PER_HOUR, local_microseconds
from pbm.methods.day_bootstrap import DayBootstrap, Estimate, Mask
from pbm.methods.expected import Onsets, follow, instants_of_events
from pbm.methods.jit import Floats, Integers
from pbm.methods.part_of_week import hours_of_parts, parts_of_week
from pbm.methods.split import Split
from pbm.methods.trials import Stretch
from pbm.records.laboratory import Controls
from pbm.records.stream import StreamHistory
from pbm.stages.surroundings import Surroundings

ONSETS, DRAWS = 400, 400


@dataclass(frozen=True, slots=True)
class Part:
    """A part of the week: which onsets begin in it, and how many results of the stream an hour of it has on held-out days."""

    onsets: Mask
    results_per_hour: float


@dataclass(frozen=True, slots=True)
class Ground:
    """A stream and its held-out days.

    Attributes
    ----------
    around, stretch, split
        The stream's surroundings, its whole history, and where the held-out days begin.
    onsets
        Where each fault is tried.
    days
        Draws of days for figures known at each onset.
    event_hours : (r, k)
        Hours from each onset to the control events after it.
    parts
        The parts of the week that have onsets.
    sway : (b,)
        A normal deviate for each draw: how far the level lies from that of the held-out days, in SD of its wandering.
    """

    around: Surroundings
    stretch: Stretch
    split: Split
    onsets: Onsets
    days: DayBootstrap
    event_hours: Floats
    parts: dict[str, Part]
    sway: Floats

    @classmethod
    def of(cls, around: Surroundings, history: StreamHistory, split: Split) -> "Ground":
        """Draw the onsets and the days."""
        stretch = around.stretch(history)
        onsets = around.onsets(history.time, split.at, len(history), ONSETS)
        days = DayBootstrap.of(split.days[onsets.at], DRAWS, around.random("bootstrap"))
        events = instants_of_events(onsets, around.event_positions(history.time), around.event_times(history.time))
        hours = (events - history.time[onsets.at][:, None]) / MICROSECONDS_PER_HOUR
        parts = _parts(around, history.time, split, onsets)
        sway = around.random("level").standard_normal(DRAWS)
        return cls(around, stretch, split, onsets, days, hours, parts, sway)

    @property
    def held_out(self) -> slice:
        """The held-out results."""
        return slice(self.split.at, len(self.stretch))

    def mean(
        self, levels: Sequence[Floats], within: Mask | None = None, lowest: float = 0.0, highest: float = math.inf
    ) -> Estimate:
        """Mean of a figure known at each onset (r,): at the level of the held-out days, and where given one SD of it below and above."""
        found = self.days.mean(levels[0], within)
        if len(levels) == 1:
            return found
        below, above = (float(each[... if within is None else within].mean()) for each in levels[1:])
        return found.swayed((above - below) / 2, self.sway, lowest, highest)

    def hours_until(self, count: Integers) -> Floats:
        """Hours from each onset to its affected result `count` (r,), shape (r,)."""
        at, time = self.onsets.at, self.stretch.time
        hours: Floats = (time[at + np.maximum(count, 1) - 1] - time[at]) / MICROSECONDS_PER_HOUR
        return hours

    def under(self, controls: Controls) -> "tuple[Surroundings, Onsets]":
        """The surroundings and the same onsets under another control schedule."""
        other = replace(self.around, controls=controls)
        positions = other.event_positions(self.stretch.time)
        at, end = self.onsets.at, self.onsets.end
        inside = np.searchsorted(positions, end, side="left") - np.searchsorted(positions, at, side="right")
        return other, follow(at, end, positions, int(inside.max(initial=0)) + 1)

    def events_per_day(self, around: Surroundings) -> float:
        """Control events in a held-out day."""
        times = around.event_times(self.stretch.time)
        return float((times >= self.stretch.time[self.split.at]).sum()) / self.split.held_out_days


def _parts(around: Surroundings, time: Integers, split: Split, onsets: Onsets) -> dict[str, Part]:
    local = local_microseconds(time[split.at :], around.lab.laboratory.zone)
    hours = hours_of_parts(int(local[0]) // MICROSECONDS_PER_DAY, int(local[-1]) // MICROSECONDS_PER_DAY)
    parts = {
        name: Part(which[onsets.at - split.at], float(which.sum()) / hours[name] if hours[name] else 0.0)
        for name, which in parts_of_week(local).items()
    }
    return {name: part for name, part in parts.items() if part.onsets.any()}
