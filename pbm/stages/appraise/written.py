"""Estimates as the record holds them: seven significant digits, so that the last bit of a sum never decides what is written."""

from collections.abc import Iterable

from pbm.methods.day_bootstrap import Estimate, largest
from pbm.methods.significant import significant
from pbm.records.figures import AloneAndWith, Figure, Percentile, WorstCase

DIGITS = 7


def rounded(x: float) -> float:
    """Seven significant digits."""
    return significant(x, DIGITS)


def figure(found: Estimate) -> Figure:
    """A figure with its interval."""
    low, high = found.interval
    return Figure(value=rounded(found.value), low=rounded(low), high=rounded(high))


def percentile(found: tuple[float | None, ...]) -> Percentile:
    """A percentile with its interval; None for never."""
    value, low, high = (None if x is None else rounded(x) for x in found)
    return Percentile(value=value, low=low, high=high)


def alone_and_with(alone: Estimate, with_monitor: Estimate) -> AloneAndWith:
    """A figure without and with the monitors, and the difference."""
    fewer = alone - with_monitor
    return AloneAndWith(
        alone=figure(alone),
        with_monitor=figure(with_monitor),
        fewer=figure(fewer),
        share_fewer=figure(fewer.share_of(alone)),
    )


def worst_case(labels: list[str], alone: Iterable[Estimate], with_monitor: Iterable[Estimate]) -> WorstCase:
    """The largest over the faults, without and with the monitors."""
    (worst, at, sure), (beside, beside_at, beside_sure) = largest(list(alone)), largest(list(with_monitor))
    both = alone_and_with(worst, beside)
    return WorstCase(
        alone=both.alone,
        with_monitor=both.with_monitor,
        fewer=both.fewer,
        share_fewer=both.share_fewer,
        alone_at=labels[at],
        alone_sure=rounded(sure),
        with_monitor_at=labels[beside_at],
        with_monitor_sure=rounded(beside_sure),
    )
