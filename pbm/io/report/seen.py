"""What each plot shows, in a sentence, for a reader who cannot see it."""

from collections.abc import Callable, Sequence

from pbm.io.report import words
from pbm.io.report.shown import ShownMonitor
from pbm.records.figures import Figure, Until
from pbm.records.judged import FaultAppraisal


def trace(monitor: ShownMonitor, unit: str) -> str:
    """The in-control trace."""
    low, high = monitor.limits
    outside = sum(
        bottom < low or top > high for bottom, top in zip(monitor.trace.lowest, monitor.trace.highest, strict=True)
    )
    on = unit if monitor.limits == (monitor.low, monitor.high) else "on its transformed scale"
    return (
        f"The statistic over {len(monitor.trace.day)} equal parts of the held-out history, between limits "
        f"{words.level(low, low, high)} and {words.level(high, low, high)} {on}; it leaves them in {outside} of these parts."
    )


def unreliable(faults: Sequence[FaultAppraisal], unit: str) -> str:
    """Expected unreliable results against error size."""
    return (
        f"Expected unreliable results against {_axis(faults, unit)}. "
        f"Controls alone: {_highest(faults, lambda one: one.unreliable.alone, words.expected)}. "
        f"With the monitor: {_highest(faults, lambda one: one.unreliable.with_monitor, words.expected)}."
    )


def first_event(faults: Sequence[FaultAppraisal], unit: str) -> str:
    """Probability of detection by the first control event."""
    return (
        f"Probability that the error is found by the first control event, against {_axis(faults, unit)}. "
        f"Controls alone: {_range(faults, lambda one: one.by_first_event.schedule)}. "
        f"Monitor alone: {_range(faults, lambda one: one.by_first_event.monitor)}. "
        f"Both: {_range(faults, lambda one: one.by_first_event.both)}."
    )


def until(faults: Sequence[FaultAppraisal], unit: str, horizon_days: float) -> str:
    """Affected results until detection."""
    return (
        f"Affected results until detection, median, against {_axis(faults, unit)}. "
        f"Controls alone: {_medians(faults, lambda one: one.until.schedule, horizon_days)}. "
        f"Monitor alone: {_medians(faults, lambda one: one.until.monitor, horizon_days)}. "
        f"Both: {_medians(faults, lambda one: one.until.both, horizon_days)}."
    )


def _axis(faults: Sequence[FaultAppraisal], unit: str) -> str:
    return f"the size of the {words.kind_in_words(faults[0].kind)} from {words.size_of(faults[0])} to {words.size_of(faults[-1])} {unit}"


def _highest(
    faults: Sequence[FaultAppraisal], which: Callable[[FaultAppraisal], Figure], written: Callable[[float], str]
) -> str:
    fault = max(faults, key=lambda one: which(one).value)
    return f"highest {written(which(fault).value)} at {words.size_of(fault)}"


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
