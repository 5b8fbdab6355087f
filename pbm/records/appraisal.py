"""What an appraisal found: for each stream and fault, the control schedule alone and with the monitor, every figure with its interval.

This is also the documented content of `reports/appraisal.json`; `version` rises when its shape changes.
"""

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

from pbm.records.plan import Verdict


class Found(BaseModel):
    """Base of everything an appraisal writes: frozen, and every number finite, since JSON has no other."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)


class Figure(Found):
    """A figure with its interval.

    Attributes
    ----------
    value
        The figure.
    low, high
        Its 90 % interval from the bootstrap over days.
    """

    value: float
    low: float
    high: float


class ResultsUntil(Found):
    """Affected results until detection.

    Attributes
    ----------
    mean
        What was not found counts as found at the horizon; a lower bound where `never` is not 0.
    median, p95
        Median and 95th percentile; none where more than the rest are never found.
    never
        Share not found within the horizon.
    """

    mean: float
    median: float | None
    p95: float | None
    never: float


class Ways(Found):
    """A figure in three ways.

    Attributes
    ----------
    schedule, monitor, both
        The control schedule alone, the monitor alone, both together.
    """

    schedule: Figure
    monitor: Figure
    both: Figure


class UntilWays(Found):
    """Results until detection in three ways.

    Attributes
    ----------
    schedule, monitor, both
        The control schedule alone, the monitor alone, both together.
    """

    schedule: ResultsUntil
    monitor: ResultsUntil
    both: ResultsUntil


class AloneAndWith(Found):
    """A figure without and with the monitor.

    Attributes
    ----------
    alone, with_monitor
        The control schedule alone, and with the monitor beside it.
    """

    alone: Figure
    with_monitor: Figure


class FaultAppraisal(Found):
    """One fault: what finds it, when, and what it costs until then.

    Attributes
    ----------
    label
        The fault in words.
    kind
        "shift", "drift", "noise" or "sporadic".
    size, unit
        Size in this unit ("" for the factor of noise).
    sign
        To which side.
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
    schedule_error
        Largest standard error of a chance of passing; 0 where those are exact.
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
    """The largest expected number of unreliable results over all faults.

    Attributes
    ----------
    alone, with_monitor
        The control schedule alone, and with the monitor beside it.
    alone_at, with_monitor_at
        At which fault each is largest.
    """

    alone: Figure
    alone_at: str
    with_monitor: Figure
    with_monitor_at: str


class FalseAlarms(Found):
    """Alarms on held-out days without a known error, against the budget.

    Attributes
    ----------
    days
        Calendar days.
    episodes
        Alarms in them.
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
    """The statistic on held-out days, thinned for a plot.

    Attributes
    ----------
    day
        Where each of many equal parts begins, in days.
    lowest, highest
        Of the statistic in each part, on its own scale.
    """

    day: tuple[float, ...]
    lowest: tuple[float, ...]
    highest: tuple[float, ...]


class MonitorAppraisal(Found):
    """One monitor judged on held-out days.

    Attributes
    ----------
    words, brief
        What the monitor is, in a sentence and in as few words as a table bears.
    admitted
        Share of held-out results that the statistic takes.
    centre, low, high
        Of the statistic, in the result's unit (transformed back).
    limits, scale_centre
        The same on the statistic's own scale.
    trace
        The statistic.
    false_alarms
        Alarms on held-out days.
    faults
        Every fault.
    worst_unreliable, worst_final
        The worst case of `unreliable` and of `unreliable_final` over the faults.
    """

    words: str
    brief: str
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
    """One stream: its monitors judged, or the reason why it has none.

    Attributes
    ----------
    stream
        Its name.
    unit
        Of its results.
    verdict, reason
        Of the plan.
    results_per_day
        Results a day in the history that made the plan.
    first_day, last_day
        The held-out days.
    held_out_results
        Results in them.
    onsets
        Onsets at which each fault was tried.
    horizon_days
        How long an undetected error was followed.
    allowable_error, schedule, response_lag
        TEa, control schedule and response lag in words.
    monitors
        The monitors.
    """

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
    """All of `appraisal.json`.

    Attributes
    ----------
    version
        Of this layout.
    made_by
        Version of the tool.
    laboratory
        Its name.
    seed
        Master seed.
    history_sha256, plan_sha256, lab_sha256
        What was judged: the history, `plan.toml` and `lab.toml`.
    streams
        The streams.
    """

    version: Annotated[int, Field(ge=1)] = 1
    made_by: str
    laboratory: str
    seed: int
    history_sha256: str
    plan_sha256: str
    lab_sha256: str
    streams: tuple[StreamAppraisal, ...]
