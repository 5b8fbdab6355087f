"""Figures of an appraisal: each with its 90 % interval from the bootstrap over days, and in the ways in which an error is found."""

from pydantic import BaseModel, ConfigDict


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
        Its 90 % interval; from the bootstrap over days and the wandering of the level from lot to lot, unless told otherwise.
    """

    value: float
    low: float
    high: float


class Percentile(Found):
    """A percentile of results or hours until detection.

    Attributes
    ----------
    value
        By then this share of the errors is found; none where more than the rest are never found.
    low, high
        Its 90 % interval; none where that end lies beyond the horizon.
    """

    value: float | None
    low: float | None
    high: float | None


class Until(Found):
    """Affected results, or hours, until detection.

    Attributes
    ----------
    mean
        What was not found counts as found at the horizon; a lower bound where some errors are never found.
    p5, median, p95
        5th, 50th and 95th percentile.
    """

    mean: Figure
    p5: Percentile
    median: Percentile
    p95: Percentile


class Ways(Found):
    """A figure in three ways.

    Attributes
    ----------
    schedule, monitor, both
        The control schedule alone, the stream's monitors alone, both together.
    """

    schedule: Figure
    monitor: Figure
    both: Figure


class UntilWays(Found):
    """Results, or hours, until detection in three ways.

    Attributes
    ----------
    schedule, monitor, both
        The control schedule alone, the stream's monitors alone, both together.
    """

    schedule: Until
    monitor: Until
    both: Until


class AloneAndWith(Found):
    """A figure without and with the stream's monitors.

    Attributes
    ----------
    alone, with_monitor
        The control schedule alone, and with the monitors beside it.
    fewer
        The difference, alone less with; its interval is that of the difference, at the same onsets.
    share_fewer
        The difference as a share of the schedule alone; 0 where that is 0.
    """

    alone: Figure
    with_monitor: Figure
    fewer: Figure
    share_fewer: Figure


class WorstCase(AloneAndWith):
    """The largest over all faults, without and with the stream's monitors; in each draw of the bootstrap over the faults of that draw.

    Attributes
    ----------
    alone, with_monitor
        The control schedule alone, and with the monitors beside it.
    fewer
        How much lower the worst case is with the monitors.
    share_fewer
        The same as a share of the worst case alone.
    alone_at, with_monitor_at
        Label of the fault, with its size, at which each is largest.
    alone_sure, with_monitor_sure
        Share of the bootstrap's draws in which it is that fault.
    """

    alone_at: str
    alone_sure: float
    with_monitor_at: str
    with_monitor_sure: float
