"""The same figures if control events came at another spacing: information for the laboratory, never advice to run fewer controls.

When the monitors alarm does not depend on the controls, so each fault is tried once and only the events after each onset are laid anew.
"""

from collections.abc import Iterator
from dataclasses import dataclass

from pbm.methods.day_bootstrap import average
from pbm.methods.expected import Onsets
from pbm.methods.faults import Fault
from pbm.methods.jit import Floats
from pbm.records.judged import Spacing
from pbm.records.laboratory import Controls
from pbm.stages.appraise.fault import Costs, FaultFound
from pbm.stages.appraise.ground import Ground
from pbm.stages.appraise.written import alone_and_with, rounded, worst_case
from pbm.stages.surroundings import Surroundings
from pbm.stages.words import events_in_words

A_DAY = (1, 2, 3, 4, 6, 8, 12, 24)  # control events a day that divide it evenly
FIRST_TIME = "07:00"
DECADE = (1, 2, 5, 10)


@dataclass(frozen=True, slots=True)
class _Schedule:
    """A control schedule at the onsets of the ground."""

    controls: Controls
    around: Surroundings
    onsets: Onsets

    @property
    def events(self) -> int:
        """Events looked at after each onset."""
        return int(self.onsets.edges.shape[1])


def spacing_table(ground: Ground, found: list[FaultFound]) -> tuple[Spacing, ...]:
    """The present schedule and others, from the fewest control events to the most; empty where there are no controls."""
    present = ground.around.controls
    if not present.levels or not present.rules or not (present.times or present.every):
        return ()
    given = [present, *_others(present, len(ground.stretch.time[ground.held_out]) / ground.split.held_out_days)]
    schedules = [_Schedule(one, *ground.under(one)) for one in given]
    costs = list(zip(*(_costs(ground, one, schedules) for one in found), strict=True))
    rows = [_row(ground, one, list(each), found) for one, each in zip(schedules, costs, strict=True)]
    return tuple(sorted(rows, key=lambda row: (row.events_per_day, row.controls)))


def _others(present: Controls, per_day: float) -> Iterator[Controls]:
    """Fewer and more events a day at clock times, and after other counts of results."""
    a_day = len(present.times) if present.times else per_day / (present.every or 1)
    nearest = min(range(len(A_DAY)), key=lambda i: abs(A_DAY[i] - a_day))
    first = min(present.times) if present.times else FIRST_TIME
    for place in (nearest - 1, nearest, nearest + 1):
        if 0 <= place < len(A_DAY) and (not present.times or A_DAY[place] != a_day):
            yield present.model_copy(update={"times": _evenly(first, A_DAY[place]), "weekdays": None, "every": None})
    middle = present.every or max(round(per_day / a_day), 1)
    for every in dict.fromkeys(_nice(middle * factor) for factor in (0.5, 1.0, 2.0)):
        if every != present.every:
            yield present.model_copy(update={"times": None, "weekdays": None, "every": every})


def _evenly(first: str, count: int) -> tuple[str, ...]:
    minutes = int(first[:2]) * 60 + int(first[3:])
    times = [(minutes + k * 1440 // count) % 1440 for k in range(count)]
    return tuple(f"{minute // 60:02}:{minute % 60:02}" for minute in sorted(times))


def _nice(count: float) -> int:
    """The nearest of 1, 2, 5 times a power of ten."""
    power = 1
    while power * 10 <= count:
        power *= 10
    return min((digit * power for digit in DECADE), key=lambda nice: abs(nice - count))


def _costs(ground: Ground, found: FaultFound, schedules: list[_Schedule]) -> list[Costs]:
    """A fault under each schedule; the chances of the schedule with most events hold those of the others, but for a drift."""
    longest = max(schedules, key=lambda one: one.events)
    passed = (
        None if found.fault.kind == "drift" else longest.around.chance_of_passing(found.fault, longest.onsets).passed
    )
    return [_under(ground, found, one, _passed(found.fault, one, passed)) for one in schedules]


def _passed(fault: Fault, schedule: _Schedule, longest: Floats | None) -> Floats:
    if longest is None:
        return schedule.around.chance_of_passing(fault, schedule.onsets).passed
    return longest[: schedule.events + 1]


def _under(ground: Ground, found: FaultFound, schedule: _Schedule, passed: Floats) -> Costs:
    length = schedule.onsets.length
    exposed = [(run, run.tried.exposure.under(schedule.onsets, passed)) for run in found.runs]
    return Costs(
        ground.mean([one.unreliable(length) for _, one in exposed]),
        ground.mean([one.unreliable(run.stop) for run, one in exposed]),
        ground.mean([one.unreliable_final(length) for _, one in exposed]),
        ground.mean([one.unreliable_final(run.alarm) for run, one in exposed]),
    )


def _row(ground: Ground, schedule: _Schedule, costs: list[Costs], found: list[FaultFound]) -> Spacing:
    labels, weights = [one.record.label for one in found], [one.weight for one in found]
    alone, beside = [one.alone for one in costs], [one.beside for one in costs]
    final_alone, final_beside = [one.final_alone for one in costs], [one.final_beside for one in costs]
    return Spacing(
        controls=events_in_words(schedule.controls),
        present=schedule.controls == ground.around.controls,
        events_per_day=rounded(ground.events_per_day(schedule.around)),
        unreliable=alone_and_with(average(alone, weights), average(beside, weights)),
        unreliable_final=alone_and_with(average(final_alone, weights), average(final_beside, weights)),
        worst_unreliable=worst_case(labels, alone, beside),
        worst_final=worst_case(labels, final_alone, final_beside),
    )
