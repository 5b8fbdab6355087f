"""A monitor's limits and false alarms in words; a limit may be open on a side."""

import math

from pbm.io.report import words
from pbm.records.appraisal import MonitorAppraisal
from pbm.records.judged import FalseAlarms

Ends = tuple[float, float]


def ends(limits: tuple[float | None, float | None]) -> Ends:
    """Limits as numbers, infinite where a side raises no alarm."""
    low, high = limits
    return -math.inf if low is None else low, math.inf if high is None else high


def level(value: float, limits: tuple[float | None, float | None]) -> str:
    """A centre or limit with as many decimals as tell these limits apart."""
    return words.level(value, *ends(limits))


def in_result_units(monitor: MonitorAppraisal) -> tuple[float | None, float | None]:
    """The limits as they are told."""
    return monitor.low, monitor.high


def is_transformed(monitor: MonitorAppraisal) -> bool:
    """Whether the statistic runs on another scale than the one in which its limits are told."""
    return monitor.limits != (monitor.low, monitor.high)


def limits_in_words(limits: tuple[float | None, float | None]) -> str:
    """When it alarms: "below 136.5 or above 141.3"; one side alone is said to be so."""
    low, high = limits
    sides = ([f"below {level(low, limits)}"] if low is not None else []) + (
        [f"above {level(high, limits)}"] if high is not None else []
    )
    return " or ".join(sides) + (" only" if len(sides) == 1 else "")


def alarms_in_words(alarms: FalseAlarms) -> str:
    """Alarms on held-out days, against the budget."""
    return (
        f"{words.whole(alarms.episodes)} in {words.days(alarms.days)}; the budget allows {words.expected(alarms.allowed)}. "
        f"A month: {words.expected(alarms.a_month.value)} ({words.interval(alarms.a_month)}). The budget is {kept(alarms)}."
    )


def predicted_in_words(monitor: MonitorAppraisal) -> str:
    """What the training days expected of the held-out days."""
    if monitor.predicted is None:
        return ""
    low, high = monitor.predicted
    found = monitor.false_alarms.episodes
    place = "fewer than" if found < low else "more than" if found > high else "as"
    told = (
        f"The training days predicted {low} to {high} for as many days (90 %, the uncertainty of the limits included)"
    )
    return f"{told}: {place} predicted."


def kept(alarms: FalseAlarms) -> str:
    """Whether the budget was kept."""
    return "kept" if alarms.kept else "NOT kept"
