"""An appraisal's figures beside what the replays of fresh streams show: results until the alarm, and unreliable results until the stop."""

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from pbm.io.appraisal_file import read_appraisal
from pbm.io.plan_file import read_plan
from pbm.methods.day_bootstrap import DayBootstrap
from pbm.methods.jit import Floats, Integers
from pbm.methods.seeds import child
from pbm.records.figures import Figure
from pbm.records.judged import FaultAppraisal
from pbm.records.plan import MonitorPlan
from synthetic_streams import Laboratory
from synthetic_streams.analytes import known
from synthetic_streams.faults import Fault
from tests.truth.replay import DAY, Replay

Z = 1.6449  # of a 90 % interval
LEAST_WARM_UP = 300


@dataclass(frozen=True)
class Compared:
    """One figure of one stream and its truth.

    Attributes
    ----------
    stream, fault, what
        Of which stream, which fault, and which figure.
    said
        The appraisal's figure with its interval.
    true, error
        Mean over the replays, and its standard error from the days of the onsets.
    """

    stream: str
    fault: str
    what: str
    said: Figure
    true: float
    error: float

    @property
    def inside(self) -> bool:
        """The replays' mean lies inside the interval."""
        return self.said.low <= self.true <= self.said.high

    @property
    def agrees(self) -> bool:
        """It does so once the replays' own error is counted as well."""
        half = (self.said.high - self.said.low) / (2 * Z)
        return abs(self.true - self.said.value) <= Z * float(np.hypot(half, self.error)) + 1e-9


def compared(folder: Path, chosen: dict[str, str], onsets: int, days: int, seed: int) -> Iterator[Compared]:
    """Replay faults in fresh streams.

    Parameters
    ----------
    folder
        A laboratory that was tuned (`tuned.toml`) and appraised without controls.
    chosen
        Streams, each with the label of the fault to try.
    onsets
        How many onsets.
    days, seed
        Of the fresh laboratory.
    """
    fresh = Laboratory(days, seed=seed)
    appraisal = read_appraisal(folder / "reports" / "appraisal.json")
    judged = {one.stream: one.judged for one in appraisal.streams}
    for stream, label in chosen.items():
        found = judged[stream]
        assert found is not None
        fault = next(one for one in found.faults if one.label == label)
        yield from _of_stream(folder, fresh, stream, fault, onsets, seed)


def _of_stream(
    folder: Path, fresh: Laboratory, stream: str, fault: FaultAppraisal, onsets: int, seed: int
) -> Iterator[Compared]:
    key, line = stream.split("@")
    given = Fault(key, line, 0, fault.kind, fault.sign * fault.size, fault.unit)
    replay = Replay(folder, fresh, fresh.sample(known(key, line), line), given)
    warm_up = max(_warm_up(one) for one in read_plan(folder / "tuned.toml").streams[stream].monitors)
    at = replay.onsets(onsets, warm_up, child(seed, stream, "truth"))
    alarm = replay.results_to_alarm(at, warm_up)
    until = np.where(alarm > 0, alarm, replay.horizon(at) - at)
    days = replay.sample.time[at] // DAY
    for what, said, each in (
        ("results until the alarm", fault.until.monitor.mean, until),
        ("unreliable results", fault.unreliable.with_monitor, replay.unreliable(at, alarm)),
    ):
        yield Compared(stream, fault.label, what, said, float(each.mean()), _error(each, days, said.value, seed))


def _warm_up(monitor: MonitorPlan) -> int:
    """Results after which the statistic has forgotten how it began."""
    return max(LEAST_WARM_UP, 3 * (monitor.window or 0), round(8 / monitor.weight) if monitor.weight else 0)


def _error(each: Integers | Floats, days: Integers, expected: float, seed: int) -> float:
    """Standard error of the replays' mean, at least that of so many counted events."""
    found = DayBootstrap.of(days, 400, child(seed, "error")).mean(each.astype(np.float64))
    return max(float(found.drawn.std()), float(np.sqrt(expected / len(each))))
