"""A monitor as the page shows it: what it is, together with what was judged of the stream that it watches."""

import math
from dataclasses import dataclass

from pbm.records.appraisal import MonitorAppraisal, StreamAppraisal, Trace
from pbm.records.figures import WorstCase
from pbm.records.judged import FalseAlarms, FaultAppraisal, Judged


@dataclass(frozen=True, slots=True)
class ShownMonitor:
    """One monitor of a stream and the figures of the stream."""

    monitor: MonitorAppraisal
    judged: Judged

    @property
    def words(self) -> str:
        """What it is, in a sentence."""
        return self.monitor.words

    @property
    def brief(self) -> str:
        """What it is, in few words."""
        return self.monitor.brief

    @property
    def admitted(self) -> float:
        """Share of results that it takes."""
        return self.monitor.admitted

    @property
    def centre(self) -> float:
        """In the result's unit."""
        return self.monitor.centre

    @property
    def low(self) -> float:
        """Lower limit in the result's unit; minus infinity where open."""
        return -math.inf if self.monitor.low is None else self.monitor.low

    @property
    def high(self) -> float:
        """Upper limit in the result's unit; infinity where open."""
        return math.inf if self.monitor.high is None else self.monitor.high

    @property
    def limits(self) -> tuple[float, float]:
        """On the statistic's own scale."""
        low, high = self.monitor.limits
        return -math.inf if low is None else low, math.inf if high is None else high

    @property
    def scale_centre(self) -> float:
        """Centre on the statistic's own scale."""
        return self.monitor.scale_centre

    @property
    def trace(self) -> Trace:
        """The statistic."""
        return self.monitor.trace

    @property
    def false_alarms(self) -> FalseAlarms:
        """Its own alarms."""
        return self.monitor.false_alarms

    @property
    def faults(self) -> tuple[FaultAppraisal, ...]:
        """Every fault."""
        return self.judged.faults

    @property
    def worst_unreliable(self) -> WorstCase:
        """Worst case of what is reported."""
        return self.judged.worst_unreliable

    @property
    def worst_final(self) -> WorstCase:
        """Worst case of what is final."""
        return self.judged.worst_final


def shown(stream: StreamAppraisal) -> list[ShownMonitor]:
    """The monitors of a stream."""
    return [ShownMonitor(one, stream.judged) for one in stream.monitors if stream.judged]
