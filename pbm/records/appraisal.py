"""What an appraisal found: for each stream and fault, the control schedule alone and with the monitors, every figure with its interval.

This is also the documented content of `reports/appraisal.json`; `version` rises when its shape changes.
"""

from typing import Annotated, Literal

from pydantic import Field

from pbm.records.figures import AloneAndWith, Figure, Found
from pbm.records.judged import FalseAlarms, Judged
from pbm.records.plan import Verdict

PeersTried = Literal["none", "quick", "all"]


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
    """One monitor: what it is, and its alarms on held-out days.

    Attributes
    ----------
    words, brief
        What the monitor is, in a sentence and in as few words as a table bears.
    watches
        What it is meant to find: "shift" or "imprecision".
    admitted
        Share of held-out results that the statistic takes.
    measured_in
        What centre, low and high are told in: the result's unit where the statistic is a level; else such as "SD of one value".
    centre
        Of the statistic, transformed back where it is a level.
    low, high
        Its control limits, likewise; none where that side raises no alarm.
    limits
        The same on the statistic's own scale, low and high.
    scale_centre
        The centre on the statistic's own scale.
    trace
        The statistic.
    false_alarms
        Its own alarms on held-out days.
    predicted
        Between which counts the training days expected these alarms, with 90 %; none where the plan does not say so for as many days.
    """

    words: str
    brief: str
    watches: str
    admitted: float
    measured_in: str
    centre: float
    low: float | None
    high: float | None
    limits: tuple[float | None, float | None]
    scale_centre: float
    trace: Trace
    false_alarms: FalseAlarms
    predicted: tuple[int, int] | None = None


class StreamAppraisal(Found):
    """One stream: its monitors judged on held-out days, or the reason why it has none.

    Attributes
    ----------
    stream
        Its name.
    unit
        Of its results.
    verdict, reason
        By what the monitors save on the held-out days.
    planned_verdict, planned_reason
        Of the plan, by the training days.
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
    judged
        What was found; none where the history is too short to hold days out.
    """

    stream: str
    unit: str
    verdict: Verdict
    reason: str
    planned_verdict: Verdict
    planned_reason: str
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
    judged: Judged | None = None


class Bench(Found):
    """The whole bench: what its staff will see and what a year may bring, streams taken together.

    Attributes
    ----------
    streams, monitors
        How many are watched, by how many monitors.
    a_month
        Alarms in 30 days without a known error. Its interval is the exact Poisson interval where all streams have as many held-out days,
        else that of a weighted sum of Poisson counts.
    allowed_a_month
        What the budgets allow together.
    kept
        The interval does not begin above what is allowed.
    unreliable, unreliable_final
        Expected unreliable results in a year by the assumed rate of error conditions, and those of them that are final; all streams judged,
        each with its own independent interval.
    """

    streams: int
    monitors: int
    a_month: Figure
    allowed_a_month: float
    kept: bool
    unreliable: AloneAndWith
    unreliable_final: AloneAndWith


class Appraisal(Found):
    """All of `appraisal.json`.

    Attributes
    ----------
    version
        Of this layout.
    made_by
        Version of the tool.
    versions
        Of Python and of the libraries that decide figures.
    laboratory
        Its name.
    time_zone
        In which its days and hours are told.
    seed
        Master seed.
    peers_tried
        Which other monitors were tried beside those of the plan: none, those that are quick, or all.
    history_sha256, plan_sha256, lab_sha256
        What was judged: the history, `plan.toml` and `lab.toml`.
    onset_times
        Which hours of the week "day", "night" and "weekend" are.
    bench
        The bench as a whole.
    streams
        The streams.
    """

    version: Annotated[int, Field(ge=1)] = 2
    made_by: str
    versions: dict[str, str]
    laboratory: str
    time_zone: str
    seed: int
    peers_tried: PeersTried
    history_sha256: str
    plan_sha256: str
    lab_sha256: str
    onset_times: dict[str, str]
    bench: Bench
    streams: tuple[StreamAppraisal, ...]
