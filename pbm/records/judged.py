"""What was found for one stream: each fault with the control schedule alone and with the monitors, false alarms, spacing, peers, a year."""

from typing import Literal

from pbm.records.figures import AloneAndWith, Figure, Found, Percentile, UntilWays, Ways, WorstCase

OnsetWhen = Literal["day", "night", "weekend"]


class OnsetTime(Found):
    """The same figures for the onsets of one part of the week: with few patients a monitor is slow, and controls may be far away.

    Attributes
    ----------
    when
        "day", "night" or "weekend"; `onset_times` of the appraisal says which hours these are.
    onsets
        How many of the onsets begin then.
    results_per_hour
        Results of the stream in an hour of that part of the week, on held-out days.
    by_first_event
        Probability of detection no later than the first control event after the onset.
    until, until_hours
        Mean of the affected results, and of the hours, until detection.
    unreliable
        Expected unreliable results reported.
    """

    when: OnsetWhen
    onsets: int
    results_per_hour: float
    by_first_event: Ways
    until: Ways
    until_hours: Ways
    unreliable: AloneAndWith


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
    over
        Of a drift: affected results until it has grown to its size; else none.
    share
        Of a sporadic fault: share of the results that it hits; else none.
    weight
        In averages over the faults.
    shift
        Its size in the analyte's unit at the median result (none for noise).
    by_first_event
        Probability of detection no later than the first control event after the onset.
    never
        Share not found within the horizon.
    until
        Affected results until detection, which comes with the last of them.
    until_hours
        Hours from the first affected result until detection.
    unreliable
        Expected unreliable results reported, E(Nu): every result is released at once.
    unreliable_final
        Of these final, E(Nuf): released before the last accepted control event, so that no look-back corrects them.
    unreliable_correctable
        The rest, E(Nuc): in the bracket that the detection leaves open.
    beyond_false_alarms
        Expected unreliable results fewer than with alarms that come where they would come without any fault.
    no_more_than_false_alarms
        Within its interval the monitors' chance of an alarm, by the first control event and within the horizon, is that without a fault.
    by_onset
        By time of day of the onset.
    schedule_error
        Largest standard error of a chance of passing; 0 where those are exact.
    """

    label: str
    kind: str
    size: float
    unit: str
    sign: Literal[-1, 1]
    over: int | None
    share: float | None
    weight: float
    shift: float | None
    by_first_event: Ways
    never: Ways
    until: UntilWays
    until_hours: UntilWays
    unreliable: AloneAndWith
    unreliable_final: AloneAndWith
    unreliable_correctable: AloneAndWith
    beyond_false_alarms: Figure
    no_more_than_false_alarms: bool
    by_onset: tuple[OnsetTime, ...]
    schedule_error: float


class FalseAlarms(Found):
    """Alarms on held-out days without a known error, against the budget.

    Attributes
    ----------
    days
        Calendar days.
    episodes
        Alarms in them.
    allowed
        Alarms that the budget allows in these days.
    interval
        Exact 90 % Poisson interval of the expected count.
    kept
        The budget lies inside the interval or the count is below it.
    a_month
        Alarms in 30 days, with the exact interval.
    in_alarm
        Share of the held-out time that is spent in an open alarm; none for a detector that begins afresh after each alarm.
    """

    days: int
    episodes: int
    allowed: float
    interval: tuple[float, float]
    kept: bool
    a_month: Figure
    in_alarm: Figure | None


class NoFault(Found):
    """The monitors at the same onsets where nothing is wrong: what of a detection is no more than a false alarm.

    Attributes
    ----------
    by_first_event
        Probability of an alarm no later than the first control event.
    within_horizon
        Probability of an alarm within the horizon.
    """

    by_first_event: Figure
    within_horizon: Figure


class Yearly(Found):
    """What a year may bring, if error conditions come at an assumed rate and are of the kinds and sizes of `lab.toml`, by their weights.

    Attributes
    ----------
    per_year
        Error conditions of the stream in a year: an assumption of `lab.toml`, not an estimate.
    unreliable, unreliable_final
        Expected unreliable results in a year, and those of them that are final.
    """

    per_year: float
    unreliable: AloneAndWith
    unreliable_final: AloneAndWith


class Spacing(Found):
    """The same figures if control events came at another spacing: averages over the faults, and the worst case.

    Attributes
    ----------
    controls
        When control events would come, in words.
    present
        This is the schedule as it is.
    events_per_day
        Control events in a day, averaged over the held-out days.
    unreliable, unreliable_final
        Average over the faults, by their weights.
    worst_unreliable, worst_final
        Worst case over the faults.
    """

    controls: str
    present: bool
    events_per_day: float
    unreliable: AloneAndWith
    unreliable_final: AloneAndWith
    worst_unreliable: WorstCase
    worst_final: WorstCase


class PeerAppraisal(Found):
    """Another way to watch the same results, beside the same control schedule.

    Attributes
    ----------
    name, title
        Short name, and what it is.
    settings
        Its settings and how they were found.
    false_alarms
        Its alarms on held-out days.
    by_first_event
        Probability that it finds the errors tried no later than the first control event.
    until_median
        Affected results until its alarm, median of the errors tried.
    unreliable
        Expected unreliable results with it beside the controls.
    share_fewer
        How many fewer than with the controls alone, as a share. Intervals here are those of the days alone, since all meet the same level.
    """

    name: str
    title: str
    settings: str
    false_alarms: FalseAlarms
    by_first_event: Figure
    until_median: Percentile
    unreliable: Figure
    share_fewer: Figure


class Peers(Found):
    """The stream's monitors beside others, on the same errors and onsets.

    Attributes
    ----------
    faults
        Labels of the errors tried.
    onsets
        Onsets at which each was tried.
    alone
        Expected unreliable results with the controls alone.
    compared
        The monitors of the plan, then the others.
    words
        How the others were given the same alarm budget.
    left_out
        Others that could not be given it, and why.
    """

    faults: tuple[str, ...]
    onsets: int
    alone: Figure
    compared: tuple[PeerAppraisal, ...]
    words: str
    left_out: tuple[str, ...]


class Judged(Found):
    """The control schedule alone and with all monitors of the stream; with several the alarm is the first of any.

    Without a monitor the figures with the monitors are those of the schedule alone.

    Attributes
    ----------
    false_alarms
        Alarms of all monitors together on held-out days; none without a monitor.
    no_fault
        Alarms at the onsets where nothing is wrong; none without a monitor.
    faults
        Every fault.
    unreliable, unreliable_final
        Averages over the faults, by their weights.
    worst_unreliable, worst_final
        The worst case of either over the faults.
    by_onset
        Averages over the faults by time of day of the onset.
    by_onset_words
        What that shows, in a sentence.
    yearly
        What a year may bring.
    spacing
        Other control spacings.
    spacing_caution
        What must stand beside them.
    peers
        Other monitors within the same alarm budget; none where they were not asked for or there is no monitor.
    objections
        Why `pbm appraise --check` leaves with 1: a limit not kept, or a monitor that does more harm than good.
    """

    false_alarms: FalseAlarms | None
    no_fault: NoFault | None
    faults: tuple[FaultAppraisal, ...]
    unreliable: AloneAndWith
    unreliable_final: AloneAndWith
    worst_unreliable: WorstCase
    worst_final: WorstCase
    by_onset: tuple[OnsetTime, ...]
    by_onset_words: str
    yearly: Yearly
    spacing: tuple[Spacing, ...]
    spacing_caution: str
    peers: Peers | None
    objections: tuple[str, ...]
