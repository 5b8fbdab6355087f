"""What each plot shows, in a sentence, for a reader who cannot see it."""

from collections.abc import Callable, Sequence

from pbm.io.report import words
from pbm.io.report.fault_words import kind_of, size_of
from pbm.io.report.groups import FaultGroup
from pbm.io.report.monitor_words import ends, is_transformed, level
from pbm.records.appraisal import MonitorAppraisal
from pbm.records.figures import Figure, Until
from pbm.records.judged import FaultAppraisal


def trace(monitor: MonitorAppraisal, unit: str) -> str:
    """The in-control trace."""
    low, high = ends(monitor.limits)
    outside = sum(
        bottom < low or top > high for bottom, top in zip(monitor.trace.lowest, monitor.trace.highest, strict=True)
    )
    on = "on its transformed scale" if is_transformed(monitor) else unit
    told = [f"{name} {level(one, monitor.limits)}" for name, one in zip(("lower limit", "upper limit"), monitor.limits, strict=True)
            if one is not None]  # fmt: skip
    return (
        f"The statistic over {len(monitor.trace.day)} equal parts of the held-out history, {' and '.join(told)}, {on}; "
        f"it is beyond a limit in {outside} of these parts."
    )


def unreliable(group: FaultGroup, *, watched: bool) -> str:
    """Expected unreliable results against error size."""
    told = [f"Controls alone: {_highest(group.faults, lambda one: one.unreliable.alone)}."]
    told += [f"With the monitor: {_highest(group.faults, lambda one: one.unreliable.with_monitor)}."] * watched
    return " ".join([f"Expected unreliable results against {_axis(group)}.", *told])


def first_event(group: FaultGroup, *, watched: bool) -> str:
    """Probability of detection by the first control event."""
    told = [f"Controls alone: {_range(group.faults, lambda one: one.by_first_event.schedule)}."]
    if watched:
        told.append(f"Monitor alone: {_range(group.faults, lambda one: one.by_first_event.monitor)}.")
        told.append(f"Both: {_range(group.faults, lambda one: one.by_first_event.both)}.")
    return " ".join([f"Probability that the error is found by the first control event, against {_axis(group)}.", *told])


def until(group: FaultGroup, horizon_days: float, *, watched: bool) -> str:
    """Affected results until detection."""
    told = [f"Controls alone: {_medians(group.faults, lambda one: one.until.schedule, horizon_days)}."]
    if watched:
        told.append(f"Monitor alone: {_medians(group.faults, lambda one: one.until.monitor, horizon_days)}.")
        told.append(f"Both: {_medians(group.faults, lambda one: one.until.both, horizon_days)}.")
    last = group.faults[-1]
    found = last.until.both if watched else last.until.schedule
    told.append(
        f"At {size_of(last)} the band from 5 to 95 % reaches from {words.until(found.p5, horizon_days)} to "
        f"{words.until(found.p95, horizon_days)}."
    )
    return " ".join([f"Affected results until detection, median, against {_axis(group)}.", *told])


def _axis(group: FaultGroup) -> str:
    first, last = group.faults[0], group.faults[-1]
    return f"the size of the {kind_of(first)} from {size_of(first)} to {size_of(last)} {group.unit}"


def _highest(faults: Sequence[FaultAppraisal], which: Callable[[FaultAppraisal], Figure]) -> str:
    fault = max(faults, key=lambda one: which(one).value)
    return f"highest {words.expected(which(fault).value)} at {size_of(fault)}"


def _range(faults: Sequence[FaultAppraisal], which: Callable[[FaultAppraisal], Figure]) -> str:
    shares = [which(fault).value for fault in faults]
    return f"{words.percent(min(shares))} to {words.percent(max(shares))}"


def _medians(faults: Sequence[FaultAppraisal], which: Callable[[FaultAppraisal], Until], horizon_days: float) -> str:
    medians = [which(fault).median.value for fault in faults]
    found = [one for one in medians if one is not None]
    never = f"more than half never found within {words.days(horizon_days)}"
    if not found:
        return f"{never}, at any size"
    told = f"{words.number(min(found))} to {words.number(max(found))}"
    missed = len(medians) - len(found)
    return f"{told}, and {never} at {missed} of {len(medians)} sizes" if missed else told
