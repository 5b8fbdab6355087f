"""What an appraisal found: for each stream and fault, the control schedule alone and with the monitor, every figure with its interval.

This is also the documented content of `reports/appraisal.json`; `version` rises when its shape changes.
"""

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

from pbm.records.plan import Verdict


class Found(BaseModel):
    """Base of everything an appraisal writes."""

    model_config = ConfigDict(frozen=True, extra="forbid")


class Figure(Found):
    """A figure with its 90 % interval from the bootstrap over days."""

    value: float
    low: float
    high: float


class ResultsUntil(Found):
    """Affected results until detection: mean, median and 95th percentile (None where more are never found), and the share never found.

    The mean counts what was not found as found at the horizon, and is therefore a lower bound where `never` is not 0.
    """

    mean: float
    median: float | None
    p95: float | None
    never: float


class Ways(Found):
    """A figure for the control schedule alone, the monitor alone, and both together."""

    schedule: Figure
    monitor: Figure
    both: Figure


class UntilWays(Found):
    """Results until detection by the control schedule alone, the monitor alone, and both together."""

    schedule: ResultsUntil
    monitor: ResultsUntil
    both: ResultsUntil


class AloneAndWith(Found):
    """A figure for the control schedule alone and with the monitor beside it."""

    alone: Figure
    with_monitor: Figure


class FaultAppraisal(Found):
    """One fault: what finds it, when, and what it costs until then.

    Attributes
    ----------
    label, kind, size, unit, sign
        The fault; `size` in `unit`.
    shift
        Its size in the analyte's unit at the median result (None for noise).
    by_first_event
        Probability of detection no later than the first control event after the onset.
    before_first_event
        Probability that the monitor alarms before the first control event.
    until
        Affected results until detection.
    unreliable, unreliable_final
        Expected unreliable results reported, and those of them released before the last accepted control event.
    """

    label: str
    kind: str
    size: float
    unit: str
    sign: Literal[-1, 1]
    shift: float | None
    by_first_event: Ways
    before_first_event: Figure
    until: UntilWays
    unreliable: AloneAndWith
    unreliable_final: AloneAndWith
    schedule_error: float


class WorstCase(Found):
    """The largest expected number of unreliable results over all faults, alone and with the monitor, and at which fault."""

    alone: Figure
    alone_at: str
    with_monitor: Figure
    with_monitor_at: str


class FalseAlarms(Found):
    """Alarms on held-out days without a known error, against the budget.

    Attributes
    ----------
    days, episodes
        Exposure and count.
    allowed
        Episodes that the budget allows in these days.
    interval
        Exact 90 % Poisson interval of the expected count.
    kept
        The budget lies inside the interval or the count is below it.
    """

    days: int
    episodes: int
    allowed: float
    interval: tuple[float, float]
    kept: bool


class Trace(Found):
    """The statistic on held-out days, thinned to its lowest and highest value in each of many equal parts, for a plot."""

    day: tuple[float, ...]
    lowest: tuple[float, ...]
    highest: tuple[float, ...]


class MonitorAppraisal(Found):
    """One monitor judged on held-out days.

    Attributes
    ----------
    words
        What the monitor is, in a sentence.
    admitted
        Share of held-out results that the statistic takes.
    centre, low, high
        Of the statistic, in the result's unit (transformed back).
    trace
        The statistic on its own scale, with `limits` and `scale_centre` on the same scale.
    """

    words: str
    admitted: float
    centre: float
    low: float
    high: float
    limits: tuple[float, float]
    scale_centre: float
    trace: Trace
    false_alarms: FalseAlarms
    faults: tuple[FaultAppraisal, ...]
    worst_unreliable: WorstCase
    worst_final: WorstCase


class StreamAppraisal(Found):
    """One stream: its monitors judged, or the reason why it has none."""

    stream: str
    unit: str
    verdict: Verdict
    reason: str
    results_per_day: float
    first_day: str
    last_day: str
    held_out_results: int
    onsets: int
    horizon_days: float
    allowable_error: str
    schedule: str
    response_lag: str
    monitors: tuple[MonitorAppraisal, ...] = ()


class Appraisal(Found):
    """All of `appraisal.json`."""

    version: Annotated[int, Field(ge=1)] = 1
    made_by: str
    laboratory: str
    seed: int
    history_sha256: str
    plan_sha256: str
    lab_sha256: str
    streams: tuple[StreamAppraisal, ...]
