"""A watch on trial: how many alarms it has raised against how many the plan expected, for as long as it has been on trial.

Expected is the sum over monitors of the false alarms a day for which their limits were chosen, times the days that the trial's results of
their stream span. Whether the two agree says the exact Poisson interval of the expectation of what was seen.
"""

import json
from collections.abc import Iterable
from dataclasses import dataclass

from pbm.methods.clock_time import MICROSECONDS_PER_DAY
from pbm.methods.intervals import poisson_interval
from pbm.records.plan import Plan
from pbm.records.snapshot import Batch
from pbm.records.stream import StreamName

LEVEL = 0.9


@dataclass(frozen=True, slots=True)
class Trial:
    """Alarms of one stream, or of all.

    Attributes
    ----------
    name
        The stream.
    days
        That its results span.
    predicted, seen
        Alarms expected by the plan, and raised.
    """

    name: str
    days: float
    predicted: float
    seen: int

    @property
    def interval(self) -> tuple[float, float]:
        """Exact interval of the expectation of what was seen."""
        return poisson_interval(self.seen, LEVEL)

    @property
    def agrees(self) -> bool:
        """Whether the prediction lies inside the interval, or more was predicted than seen."""
        return self.predicted >= self.interval[0]


class ShadowAccount:
    """What a trial has met.

    Parameters
    ----------
    plan
        The monitors and their budgets.
    state
        As an earlier run of the trial kept it; "" to begin.
    """

    def __init__(self, plan: Plan, state: str) -> None:
        self._budgets = {
            name: sum(one.budget_per_day for one in stream.monitors)
            for name, stream in plan.streams.items()
            if stream.monitors
        }
        self._spans: dict[str, list[int]] = json.loads(state) if state else {}  # first and last time, alarms

    def add(self, batch: Batch) -> str:
        """Count a batch; the state after it."""
        for one in batch.results:
            if not one.left_out and (name := str(one.result.stream)) in self._budgets:
                span = self._spans.setdefault(name, [one.result.time, one.result.time, 0])
                span[0], span[1] = min(span[0], one.result.time), max(span[1], one.result.time)
        for _, alarm in batch.alarms:
            self._spans[str(alarm.stream)][2] += 1
        return json.dumps(self._spans, separators=(",", ":"))

    def streams(self) -> list[Trial]:
        """Every stream that brought results."""
        return [
            Trial(name, days := (last - first) / MICROSECONDS_PER_DAY, self._budgets.get(name, 0.0) * days, seen)
            for name, (first, last, seen) in sorted(self._spans.items(), key=lambda one: StreamName.parse(one[0]))
        ]


def together(trials: Iterable[Trial]) -> Trial:
    """All streams as one: the longest span, sums of alarms."""
    every = list(trials)
    days = max((one.days for one in every), default=0.0)
    return Trial("all streams", days, sum(one.predicted for one in every), sum(one.seen for one in every))
